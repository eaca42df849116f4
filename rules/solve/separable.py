"""Models that are linear once the content is fixed: the best content, and its interval from the profile.

For every content C0 the other parameters follow by linear least squares, so the sum of squares is a function of C0
alone, its profile (variable projection: Golub and Pereyra, SIAM J. Numer. Anal. 10 (1973) 413). Its lowest point is the
least-squares content, and the contents at which it has risen by t² s² are the ends of the interval (Bates and Watts,
Nonlinear Regression Analysis and Its Applications, chapter 6); for a straight line they are Fieller's.

Rows of vessels are shaped (vessels, 1, series), and contents and what follows from them (places, series), so that
several contents of every series are tried in one step. As in ``line``, they are only added, subtracted, multiplied,
divided or rooted, and each stands still from its own convergence on: the digits of a series do not depend on what is
solved beside it.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, fields, replace
from itertools import count
from typing import Any, Protocol, TypeVar

import numpy as np

from spikeward.rules.solve.line import DUST, Bools, Floats, Powers, exponents, total
from spikeward.rules.uncertainty.fieller import t_quantiles

FARTHEST = 2.0**40
"""In units of the additions; an end of an interval beyond it has no meaning."""
ABOVE_ZERO = np.array([2.0**power for power in range(-30, 31)])
"""Where contents are looked for, in units of the additions, by models that hold for contents above zero only."""
BOTH_SIDES = np.array([-(2.0**power) for power in range(20, -21, -1)] + [2.0**power for power in range(-20, 21)])
"""The same for models that a content below zero does not end."""

_TRIALS = 2**13  # contents times series that are tried in one step, so that they stay in the cache

_SMALL_STEPS = 12
_MOST_HALVINGS = 256  # twice what halving alone takes from the farthest content to all digits of the nearest


@dataclass(frozen=True, slots=True)
class Look:
    """The profile at some contents of each series.

    ``squares`` is the sum of squares; ``pull`` is half the rate at which it falls when the content rises;
    ``stiffness`` is the sum of squares of what the content alone moves, so that u(C0) = s / sqrt(stiffness).
    """

    squares: Floats
    pull: Floats
    stiffness: Floats


class Model(Protocol):
    """What a response must answer, at contents shaped (places, series)."""

    def look(self, content: Floats) -> Look:
        """The profile."""

    def sound(self, content: Floats) -> Bools:
        """Whether the other parameters make sense there, and the content can be told from them."""


@dataclass(frozen=True, slots=True)
class Best:
    """The content of each series and the profile there; not a number where it has no lowest point.

    ``rival`` and ``rival_squares`` are the next lowest valley that is sound, infinite squares where there is none.
    """

    content: Floats
    squares: Floats
    stiffness: Floats
    rival: Floats
    rival_squares: Floats

    def where(self, enough: Bools) -> Best:
        """The same with a content for some series only."""
        content, squares, stiffness = (
            np.where(enough, each, np.nan) for each in (self.content, self.squares, self.stiffness)
        )
        return replace(self, content=content, squares=squares, stiffness=stiffness)

    def ambiguous(self) -> Bools:
        """Whether two contents fit to all digits, so that the readings do not say which; then there is none."""
        found: Bools = self.rival_squares <= DUST * DUST
        return found


@dataclass(frozen=True, slots=True)
class Interval:
    """Standard uncertainty by the delta method, and the ends of the profile; an end that does not exist is infinite.

    So is the end towards a rival that fits within the same limit: an interval with a hole is not one that can be given.
    ``dof`` belongs to the uncertainty: infinite for noise that was declared, zero where nothing tells the noise, and
    then the uncertainty and the ends are not numbers.
    """

    dof: Floats
    uncertainty: Floats
    low: Floats
    high: Floats


Result = TypeVar("Result")


def joined(results: Sequence[Result]) -> Result:
    """One result of several portions."""
    names = [field.name for field in fields(results[0])]  # type: ignore[arg-type]
    if len(results) == 1:
        return results[0]
    return type(results[0])(*(np.concatenate([getattr(one, name) for one in results], -1) for name in names))


def picked(many: Any, one: type[Result], series: int) -> Result:
    """One series of a result: the same names as plain numbers, and tuples where there is a number for each vessel."""
    columns = [getattr(many, field.name)[..., series].tolist() for field in fields(many)]
    return one(*(tuple(column) if isinstance(column, list) else column for column in columns))


def powers_of(rows: Floats) -> Powers:
    """The power of two that brings the largest magnitude of each series below one; scaling by it is exact."""
    return exponents(rows[:, 0])[None]


def share_of(w: Floats, basis: Floats, rows: Floats) -> Floats:
    """How much of ``basis`` is in ``rows``, by weighted least squares."""
    weighted = w * basis
    return total(weighted * rows) / total(weighted * basis)


def lowest(model: Model, grid: Floats, series: int) -> Best:
    """The lowest sound point of each profile, and the next lowest.

    Parameters
    ----------
    grid : contents, rising; lowest points are sought where the profile falls at one and rises at the next
    series : number of series
    """
    content = root(lambda at: model.look(at).pull, *_valleys(model, grid, series))
    look = model.look(content)
    squares = np.where(model.sound(content) & (look.stiffness > 0.0), look.squares, np.inf)
    columns = np.arange(series)
    first = squares.argmin(axis=0)
    best = (content[first, columns], squares[first, columns], look.stiffness[first, columns])
    squares[first, columns] = np.inf
    second = squares.argmin(axis=0)
    found = Best(*(each[None] for each in (*best, content[second, columns], squares[second, columns])))
    return found.where((found.squares < np.inf) & ~found.ambiguous())


def _valleys(model: Model, grid: Floats, series: int) -> tuple[Floats, Floats]:
    """Between which contents the valleys of every profile lie; not a number for a series that has fewer."""
    at_once = max(_TRIALS // max(series, 1), 1)
    tried = [grid[start : start + at_once] for start in range(0, len(grid), at_once)]
    pull = np.concatenate([model.look(np.repeat(part[:, None], series, axis=1)).pull for part in tried])
    valley = (pull[:-1] > 0.0) & (pull[1:] <= 0.0)
    starts, ends = [np.full(series, np.nan)], [np.full(series, np.nan)]
    while valley.any():
        first = valley.argmax(axis=0)
        there = valley[first, np.arange(series)]
        starts.append(np.where(there, grid[first], np.nan))
        ends.append(np.where(there, grid[first + 1], np.nan))
        valley[first, np.arange(series)] = False
    return np.stack(starts[1:] or starts), np.stack(ends[1:] or ends)


def root(function: Callable[[Floats], Floats], start: Floats, end: Floats) -> Floats:
    """Where functions that change sign between start and end are zero (Chandrupatla, Adv. Eng. Softw. 28 (1997) 145).

    Inverse quadratic interpolation where it is safe and halving where it is not; not a number where a sign does not
    change.
    """
    a, b = start, end
    fa, fb = function(a), function(b)
    found = np.where(fa == 0.0, a, np.where(fb == 0.0, b, np.nan))
    running = ((fa > 0.0) & (fb < 0.0)) | ((fa < 0.0) & (fb > 0.0))
    step = np.full(start.shape, 0.5)
    for _ in range(_MOST_HALVINGS):
        if not running.any():
            break
        at = a + step * (b - a)
        value = function(at)
        stays = (value > 0.0) == (fa > 0.0)
        c, fc = np.where(stays, a, b), np.where(stays, fa, fb)
        b, fb = np.where(stays, b, a), np.where(stays, fb, fa)
        a, fa = at, value
        closest = np.where(np.abs(fa) < np.abs(fb), a, b)
        # relative to where the root is, and absolute for a root at zero
        least = (2.0**-51 * np.abs(closest) + 2.0**-70) / np.abs(b - a)
        done = running & ~((least < 0.5) & (fa != 0.0) & np.isfinite(fa))
        found = np.where(done, np.where(np.isfinite(fa), closest, np.nan), found)
        running = running & ~done
        step = np.minimum(np.maximum(_interpolated(a, b, c, fa, fb, fc), least), 1.0 - least)
    return found


def _interpolated(a: Floats, b: Floats, c: Floats, fa: Floats, fb: Floats, fc: Floats) -> Floats:
    along, across = (a - b) / (c - b), (fa - fb) / (fc - fb)
    safe = (across * across < along) & ((1.0 - across) * (1.0 - across) < 1.0 - along)
    step = fa / (fb - fa) * (fc / (fb - fc)) + (c - a) / (b - a) * (fa / (fc - fa)) * (fb / (fc - fb))
    return np.where(safe, step, 0.5)


def deviation_of(squares: Floats, dof: Floats) -> Floats:
    """The residual standard deviation of an observation of weight one, scaled below one; zero where it is rounding."""
    s = np.sqrt(squares / np.where(dof > 0.0, dof, np.nan))
    return np.where(s <= DUST, 0.0, s)


def interval(
    model: Model, best: Best, deviation: Floats, dof: Floats, coverage: float, floor: float = -math.inf
) -> Interval:
    """How well the contents are known.

    Parameters
    ----------
    best : as ``lowest`` found it
    deviation : standard deviation of an observation of weight one; not a number where it is not known
    dof : its degrees of freedom; infinite where it was declared
    coverage : such as 0.95
    floor : contents must be above it
    """
    known = np.isfinite(deviation) & (dof > 0.0)
    uncertainty = np.where(known, deviation, np.nan) / np.sqrt(best.stiffness)
    t = t_quantiles(dof[0], coverage)[None]
    rise = t * deviation
    limit = best.squares + rise * rise
    low, high = (end[None] for end in _ends(model, best, limit, t * uncertainty, floor))
    torn = best.rival_squares < limit
    low = np.where(torn & (best.rival < best.content), -np.inf, low)
    high = np.where(torn & (best.rival > best.content), np.inf, high)
    return Interval(np.where(known, dof, 0.0), uncertainty, low, high)


def _ends(model: Model, best: Best, limit: Floats, width: Floats, floor: float) -> Floats:
    """Walk outwards on both sides until the profile has risen to the limit, then go to that place.

    Parameters
    ----------
    width : half of the interval if the profile were a parabola

    Returns
    -------
    lower and upper ends, shape (2, series)
    """
    side = np.array([[-1.0], [1.0]])
    inner = outer = np.repeat(best.content, 2, axis=0)
    step = np.repeat(0.5 * width, 2, axis=0)
    found = np.where(step == 0.0, outer, np.nan)
    walking, risen = step > 0.0, np.zeros(step.shape, dtype=bool)
    for nth in count():
        if not walking.any():
            break
        # towards a floor by halves
        inner, outer = (
            np.where(walking, outer, inner),
            np.where(walking, np.maximum(outer + side * step, 0.5 * (outer + floor)), outer),
        )
        above = walking & (model.look(outer).squares >= limit)
        lost = walking & ~above & ~((np.abs(outer) <= FARTHEST) & (outer - floor >= 1.0 / FARTHEST))
        found = np.where(lost, side * math.inf, found)
        walking, risen = walking & ~above & ~lost, risen | above
        # at first in small steps, so that a rise is not stepped over; far out nothing is left to be missed
        step = (1.5 if nth < _SMALL_STEPS else 8.0) * step
    crossing = root(
        lambda at: model.look(at).squares - limit, np.where(risen, inner, np.nan), np.where(risen, outer, np.nan)
    )
    return np.where(risen, crossing, found)
