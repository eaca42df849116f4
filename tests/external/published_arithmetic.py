"""What follows from the printed digits of a published series, by arithmetic that shares nothing with the solver."""

from __future__ import annotations

import math
from collections.abc import Sequence
from fractions import Fraction

import numpy as np
from scipy.optimize import brentq
from scipy.special import ndtri, stdtrit

from tests.external.published_files import Case

COVERAGE = 0.95


def recomputed(case: Case) -> dict[str, float]:
    """The case by its own arithmetic: content and, from a straight line, uncertainty and limits."""
    if not case.flasks:
        return {}
    how = {"linear": _by_line, "log": _by_potentials, "curve": _by_parabola}[case.response]
    found = how(case)
    if case.over is not None:
        found |= {f"{of} in sample": value / float(case.over) for of, value in found.items()}
    return found


def _by_line(case: Case) -> dict[str, float]:
    """In fractions, so that nothing is rounded before the last step.

    Least squares on x = standard x addition / aliquot and y = signal x final / aliquot with weights (aliquot / final)²,
    for noise that is constant in the signal; the standard uncertainty of an extrapolated content (Miller and Miller,
    Statistics and Chemometrics for Analytical Chemistry, chapter 5) and its limits by Fieller's theorem. Two points
    have no uncertainty.
    """
    x = [case.standard * addition / aliquot for aliquot, addition, _, _ in case.flasks]
    y = [signal * final / aliquot for aliquot, _, final, signal in case.flasks]
    w = [Fraction(1) if case.equal else Fraction(aliquot / final) ** 2 for aliquot, _, final, _ in case.flasks]
    n, total = len(x), sum(w, Fraction())
    x_mean, y_mean = _mean(w, x), _mean(w, y)
    sxx = _sum(w, x, x, x_mean, x_mean)
    slope = _sum(w, x, y, x_mean, y_mean) / sxx
    content = y_mean / slope - x_mean
    found = {"content": float(content)}
    if n == 2 and case.noise is None:
        return found
    left = [b - y_mean - slope * (a - x_mean) for a, b in zip(x, y, strict=True)]
    rest = _sum(w, left, left) / max(n - 2, 1) if case.noise is None else case.noise**2
    found["standard_uncertainty"] = math.sqrt(rest / slope**2 * (1 / total + (content + x_mean) ** 2 / sxx))
    upper = 0.5 + COVERAGE / 2
    t = Fraction(float(stdtrit(float(n - 2), upper) if case.noise is None else ndtri(upper)))
    g = t**2 * rest / (slope**2 * sxx)
    half = float(t) * math.sqrt(rest / slope**2 * ((1 - g) / total + (content + x_mean) ** 2 / sxx))
    middle = float((content + x_mean) / (1 - g) - x_mean)
    return found | {"low": middle - half / float(1 - g), "high": middle + half / float(1 - g)}


def _mean(w: Sequence[Fraction], values: Sequence[Fraction]) -> Fraction:
    return sum((c * a for c, a in zip(w, values, strict=True)), Fraction()) / sum(w, Fraction())


def _sum(
    w: Sequence[Fraction],
    one: Sequence[Fraction],
    other: Sequence[Fraction],
    less: Fraction = Fraction(0),
    other_less: Fraction = Fraction(0),
) -> Fraction:
    return sum((c * (a - less) * (b - other_less) for c, a, b in zip(w, one, other, strict=True)), Fraction())


def _by_potentials(case: Case) -> dict[str, float]:
    """Least squares on E = E0 + S log10(content in the vessel): the zero of its derivative by the content.

    With a declared slope only E0 is left, which is a mean; without one S is that of the line.
    """
    v0, v, final, e = (np.array([float(value) for value in column]) for column in zip(*case.flasks, strict=True))
    x = float(case.standard) * v / v0

    def pull(log_content: float) -> float:
        content = math.exp(log_content)
        z = np.log10((content + x) * v0 / final)
        z, moved, height = z - z.mean(), 1.0 / (content + x), e - e.mean()
        slope = float(height @ z / (z @ z)) if case.slope is None else case.slope
        left = height - slope * z
        if case.slope is None:  # the part of the derivative that no slope can follow
            moved = moved - moved.mean()
            moved = moved - z * (moved @ z) / (z @ z)
        return float(left @ (moved - moved.mean()))

    guess = math.log(_known_addition(case))
    return {"content": math.exp(brentq(pull, guess - 1.0, guess + 1.0, xtol=1e-15, rtol=1e-15))}


def _known_addition(case: Case) -> float:
    """Cs v / (V0 ((V1/V_at_0) 10^(dE/S) - 1)) of the first and the last vessel (known addition, common practice)."""
    (v0, _, before, e0), *_, (_, v, after, e1) = ((float(value) for value in flask) for flask in case.flasks)
    slope = -57.0 if case.slope is None else case.slope
    return float(case.standard) * v / (v0 * (after / before * 10.0 ** ((e1 - e0) / slope) - 1.0))


def _by_parabola(case: Case) -> dict[str, float]:
    """Least squares of a parabola on signals of vessels of one volume; where it is zero, nearest to its points."""
    x = np.array([float(case.standard * addition / aliquot) for aliquot, addition, _, _ in case.flasks])
    y = np.array([float(signal) for *_, signal in case.flasks])
    zeros = np.roots(np.polyfit(x, y, 2))
    return {"content": -float(max(zeros.real[zeros.real < 0.0]))}
