"""Curvature: whether a parabola describes the points better than the straight line, and what it would change."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from scipy import special

from spikeward.rules.checks.line import fitted_points, no_line
from spikeward.rules.checks.subject import Subject, not_evaluated, number, source_of
from spikeward.rules.outcomes import FAIL, PASS, WARN, Check
from spikeward.rules.rounding import figure, percent, percent_apart
from spikeward.rules.rulebook import Limits
from spikeward.rules.words import counted, freedom

_ROUGH = 1.02  # shares of test solution that differ more bend a curve in other ways than a parabola
_DUST = 2.0**-40  # residuals below this share of the signal are rounding, not curvature


@dataclass(frozen=True, slots=True)
class Mandel:
    """Mandel's test: ``f`` with 1 and ``points - 3`` degrees of freedom, and the content by either curve.

    ``by_parabola`` is None where the parabola never reaches zero signal. ``exact``: the points lie on the line.
    """

    f: float
    p: float
    by_line: float
    by_parabola: float | None
    exact: bool = False


def mandel(x: Sequence[float], y: Sequence[float], w: Sequence[float] | None = None) -> Mandel | None:
    """Compare a straight line with a parabola through the same points.

    F = (SSE_line - SSE_parabola) / (SSE_parabola / (n - 3)), ISO 8466-1. The parabola is built from polynomials that
    are orthogonal over the points, in exactly rounded sums, so neither large x nor the order of points costs digits.

    Parameters
    ----------
    x, y : contents added and corrected signals, at least four points
    w : weights as of the line, all 1 where they are not given

    Returns
    -------
    None where fewer than three different x leave a parabola undetermined
    """
    n = len(x)
    if n < 4 or len(set(x)) < 3:
        return None
    scale, tall = max(abs(v) for v in x), max(abs(v) for v in y)
    if scale == 0 or tall == 0 or not (math.isfinite(scale) and math.isfinite(tall)):
        return None
    xs, ys = [v / scale for v in x], [v / tall for v in y]
    w = [1.0] * n if w is None else w
    total = math.fsum(w)
    middle = _weighted(w, xs) / total
    d = [v - middle for v in xs]
    sxx = _weighted(w, d, d)
    mean = _weighted(w, ys) / total
    slope = _weighted(w, d, ys) / sxx
    left = [v - mean - slope * u for u, v in zip(d, ys, strict=True)]
    skew, square = _weighted(w, d, d, d) / sxx, sxx / total
    q = [v * v - skew * v - square for v in d]
    bend = _weighted(w, q, left) / _weighted(w, q, q)
    over = [v - bend * u for u, v in zip(q, left, strict=True)]
    rest = _weighted(w, over, over)
    gain = bend * bend * _weighted(w, q, q)
    by_line = (mean / slope - middle) * scale if slope else math.nan
    if _weighted(w, left, left) <= n * _DUST * _DUST:
        return Mandel(0.0, 1.0, by_line, by_line, exact=True)
    f = gain / (rest / (n - 3)) if rest > n * _DUST * _DUST else math.inf
    root = _zero_near(bend, slope - bend * skew, mean - bend * square, -mean / slope) if slope else None
    by_parabola = None if root is None else -(middle + root) * scale
    return Mandel(f, float(special.fdtrc(1, n - 3, f)), by_line, by_parabola)


def _weighted(w: Sequence[float], *factors: Sequence[float]) -> float:
    """The sum over the points of weight times factors."""
    terms = list(w)
    for factor in factors:
        terms = [term * one for term, one in zip(terms, factor, strict=True)]
    return math.fsum(terms)


def _zero_near(a: float, b: float, c: float, guess: float) -> float | None:
    """The zero of a z² + b z + c that is nearest to a guess, or None."""
    inside = b * b - 4 * a * c
    if inside < 0:
        return None
    half = -(b + math.copysign(math.sqrt(inside), b)) / 2
    zeros = [c / half] if half else [0.0]
    zeros += [half / a] if a else []
    return min(zeros, key=lambda zero: (abs(zero - guess), zero))


def curvature(subject: Subject, limits: Limits) -> Check:
    """Mandel's F test for curvature, and how far a parabola would move the content.

    Curvature belongs to the content in the vessel, S = k c + q c². Where the share of test solution differs between
    vessels the test on the corrected points still holds, as they lie on a straight line if there is no curvature, but
    what the parabola would change is then a rough figure only.
    """
    if no_line(subject):
        return not_evaluated("curvature", "there is no line")
    points = fitted_points(subject)
    needed = int(number(limits, "needs_vessels") or 4)
    left = subject.solved.degrees_of_freedom
    if len(points) < needed:
        return not_evaluated(
            "curvature", f"{counted(len(points), 'vessel')} leave {freedom(left)}, too few to show curvature",
            f"{needed} or more vessels give it power",
        )  # fmt: skip
    shares = [point.matrix_share for point in points]
    weights = [(share / max(shares)) ** 2 for share in shares]
    found = mandel([point.x for point in points], [point.y for point in points], weights)
    if found is None:
        return not_evaluated("curvature", "fewer than three different additions cannot show a curve", "More levels")
    if found.exact:
        return Check("curvature", PASS, "The points lie on the straight line to the last digit.", 0.0, "1")
    return _judged(found, limits, left - 1, rough=max(shares) > _ROUGH * min(shares))


def _judged(found: Mandel, limits: Limits, left: int, rough: bool) -> Check:
    warn_p, far = number(limits, "warn_p"), number(limits, "fail_change")
    change = None
    if found.by_parabola is not None and found.by_line:
        change = abs(found.by_parabola / found.by_line - 1)
    significant = warn_p is not None and found.p < warn_p
    verdict = PASS
    if significant:
        verdict = FAIL if far is not None and (change is None or change > far) else WARN
    moved = "a parabola never reaches zero signal"
    if change is not None:
        moved = f"a parabola moves the content {percent_apart(change, [] if far is None else [far])}"
        moved += ", a rough figure as the volumes differ" if rough else ""
    told = f"warns below p {figure(warn_p)}" if warn_p is not None else ""
    if far is not None:
        told += f"; fails if the content then moves more than {percent(far)}"
    name = "Curvature is significant" if significant else "Curvature is not significant"
    sentence = f"{name}: Mandel's F is {figure(found.f) if math.isfinite(found.f) else 'beyond all bounds'}"
    sentence += f", p {figure(found.p, 2)}, with {freedom(left)} left; {moved} ({told})."
    return Check(
        "curvature", verdict, sentence, found.f if math.isfinite(found.f) else None, "1", told,
        source_of(limits, "fail_change" if verdict == FAIL else "warn_p", "curvature"),
        "" if verdict == PASS else "Dilute the test solution, or use smaller additions, and measure the series again",
    )  # fmt: skip
