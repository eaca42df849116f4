"""Whether a straight line describes the points: against a parabola, and against the scatter of preparations.

Arrays are shaped (vessels, series). The vessels of a series are put in order first and the curve is built from
polynomials that are orthogonal over them, so neither the order of the vessels nor large x costs digits.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, fields

import numpy as np
from scipy import special

from spikeward.rules.solve.line import Bools, Floats, exponents, in_portions, total

_DUST = 2.0**-40  # residuals below this share of the signal are rounding, not curvature


@dataclass(frozen=True, slots=True)
class Straightness:
    """Tests of straight lines, one entry per series, not a number where there is no test.

    ``mandel`` is Mandel's F with 1 and ``mandel_dof`` degrees of freedom, from four points at three or more x, and
    ``mandel_p`` the probability to exceed it. ``by_line`` and ``by_parabola`` are the contents by either curve, in the
    unit of x, the latter not a number where the parabola never reaches zero; ``parabola``, shape (3, series), are its
    coefficients of 1, x and x², ``parabola_sd`` its residual standard deviation for a vessel of weight 1. ``exact``:
    the points lie on the line but for rounding; F is then 0. ``lack_of_fit`` is F of the level means about the line
    against the scatter of preparations at equal x, with ``lack_dof`` and ``pure_dof`` degrees of freedom and
    probability ``lack_p``; it is infinite where preparations agree to the last digit and the line misses them.
    """

    mandel: Floats
    mandel_dof: Floats
    mandel_p: Floats
    by_line: Floats
    by_parabola: Floats
    parabola: Floats
    parabola_sd: Floats
    lack_of_fit: Floats
    lack_dof: Floats
    pure_dof: Floats
    lack_p: Floats
    exact: Bools


@dataclass(frozen=True, slots=True)
class _Line:
    """Points about their centre (x_mean, y_mean), the line through it, and what the line leaves of y."""

    w: Floats
    d: Floats
    e: Floats
    left: Floats
    n: Floats
    sw: Floats
    x_mean: Floats
    y_mean: Floats
    sxx: Floats
    slope: Floats


def straightness(x: Floats, y: Floats, w: Floats) -> Straightness:
    """Test one straight line per column.

    Parameters
    ----------
    x, y : contents added and volume-corrected signals, shape (vessels, series)
    w : weights as of the line, same shape, 0 for padding

    Notes
    -----
    Mandel: F = (SSE_line - SSE_parabola) / (SSE_parabola / (n - 3)), ISO 8466-1. Lack of fit: F = (SS of level means
    about the line / (levels - 2)) / (SS within levels / (n - levels)), Danzer and Currie, Pure Appl. Chem. 70 (1998)
    993. Both from memory.
    """
    with np.errstate(all="ignore"):  # what overflows or has no value is recognised by its result
        parts = [_portion(x[:, part], y[:, part], w[:, part]) for part in in_portions(*x.shape)]
    if len(parts) == 1:
        return parts[0]
    names = [field.name for field in fields(Straightness)]
    return Straightness(*(np.concatenate([getattr(one, name) for one in parts], -1) for name in names))


def _portion(x: Floats, y: Floats, w: Floats) -> Straightness:
    place = np.lexsort((w, y, np.where(w > 0.0, x, math.inf)), axis=0)
    x, y, w = (np.take_along_axis(rows, place, 0) for rows in (x, y, w))
    x_power, y_power = exponents(x), exponents(y)
    x, y = np.ldexp(x, -x_power), np.ldexp(y, -y_power)
    first = _firsts(x, w)
    levels = total(first.astype(np.float64))
    line = _line(x, y, w)
    dust = line.sw * (_DUST * _DUST)
    lost = total(line.w * line.left * line.left)
    exact = lost <= dust
    f, by_parabola, curve, rest = _mandel(line, exact, dust, levels)
    lack, lack_dof, pure_dof = _lack_of_fit(line, first, levels, dust)
    by_line = line.y_mean / line.slope - line.x_mean
    unit = np.stack([y_power, y_power - x_power, y_power - 2 * x_power])
    return Straightness(
        mandel=f,
        mandel_dof=line.n - 3.0,
        mandel_p=special.fdtrc(1.0, line.n - 3.0, f),
        by_line=np.ldexp(by_line, x_power),
        by_parabola=np.ldexp(np.where(exact & (levels > 2.0), by_line, by_parabola), x_power),
        parabola=np.ldexp(curve, unit),
        parabola_sd=np.ldexp(np.sqrt(rest / np.where(line.n > 3.0, line.n - 3.0, math.nan)), y_power),
        lack_of_fit=lack,
        lack_dof=lack_dof,
        pure_dof=pure_dof,
        lack_p=special.fdtrc(lack_dof, pure_dof, lack),
        exact=exact,
    )


def _firsts(x: Floats, w: Floats) -> Bools:
    """The first vessel of each level; x is in order and padding stands at the end."""
    first = w > 0.0
    first[1:] &= x[1:] != x[:-1]
    return first


def _line(x: Floats, y: Floats, w: Floats) -> _Line:
    n, sw = total((w > 0.0).astype(np.float64)), total(w)
    d, x_mean = _centred(x, w, sw)
    e, y_mean = _centred(y, w, sw)
    sxx = total(w * d * d)
    slope = total(w * d * e) / sxx
    return _Line(w, d, e, e - slope * d, n, sw, x_mean, y_mean, sxx, slope)


def _centred(rows: Floats, w: Floats, sw: Floats) -> tuple[Floats, Floats]:
    """Rows less their mean, and the mean; in two steps, as the first mean is rounded to the size of the rows."""
    mean = total(w * rows) / sw
    less = rows - mean
    off = total(w * less) / sw
    return less - off, mean + off


def _mandel(line: _Line, exact: Bools, dust: Floats, levels: Floats) -> tuple[Floats, Floats, Floats, Floats]:
    """F, the content by the parabola, its three coefficients, and the sum of squares that it leaves."""
    w, d = line.w, line.d
    skew, square = total(w * d * d * d) / line.sxx, line.sxx / line.sw
    q = d * d - skew * d - square
    sqq = total(w * q * q)
    bend = total(w * q * line.left) / sqq
    over = line.left - bend * q
    rest = total(w * over * over)
    f = np.where(rest > dust, bend * bend * sqq / (rest / (line.n - 3.0)), math.inf)
    tested = (line.n > 3.0) & (levels > 2.0) & (line.sxx > 0.0) & np.isfinite(rest)
    f = np.where(tested, np.where(exact, 0.0, f), math.nan)
    # about the centre a + b z + c z²
    a, b = line.y_mean - bend * square, line.slope - bend * skew
    by_parabola = -(line.x_mean + _zero_near(bend, b, a, -line.y_mean / line.slope))
    curve = np.stack([a - line.x_mean * (b - bend * line.x_mean), b - 2.0 * bend * line.x_mean, bend])
    determined = np.where(levels > 2.0, 1.0, math.nan)
    return f, by_parabola * determined, curve * determined, rest


def _zero_near(a: Floats, b: Floats, c: Floats, guess: Floats) -> Floats:
    """The zero of a z² + b z + c that is nearest to a guess, the smaller of two at one distance; or not a number."""
    half = -(b + np.copysign(np.sqrt(b * b - 4.0 * a * c), b)) / 2.0
    near = np.where(half == 0.0, 0.0, c / half)
    far = half / a
    apart = np.abs(near - guess) - np.abs(far - guess)
    other = np.isfinite(far) & ((apart > 0.0) | ((apart == 0.0) & (far < near)))
    found: Floats = np.where(other, far, near)
    return found


def _lack_of_fit(line: _Line, first: Bools, levels: Floats, dust: Floats) -> tuple[Floats, Floats, Floats]:
    """F and its degrees of freedom; the mean of a level and the scatter about it grow vessel by vessel."""
    weight, mean, within, between = (np.zeros(line.n.shape) for _ in range(4))
    last = line.w > 0.0
    last[:-1] &= first[1:] | ~last[1:]
    for row, (w, e) in enumerate(zip(line.w, line.e, strict=True)):
        weight = np.where(first[row], 0.0, weight) + w
        before = np.where(first[row], e, mean)
        step = e - before
        towards = step * (w / weight)
        mean = before + towards
        within = within + w * step * (step - towards)
        miss = mean - line.slope * line.d[row]
        between = between + np.where(last[row], weight * miss * miss, 0.0)
    lack_dof, pure_dof = levels - 2.0, line.n - levels
    f = np.where(within > dust, (between / lack_dof) / (within / pure_dof), np.where(between > dust, math.inf, 0.0))
    tested = (lack_dof > 0.0) & (pure_dof > 0.0) & np.isfinite(between)
    return np.where(tested, f, math.nan), lack_dof, pure_dof
