"""One content measured in several runs, each with a slope of its own: y = k_run (C0 + x).

With the content fixed every slope is one weighted ratio, so ``separable`` solves it. With a single run it is the
straight line, and the interval is Fieller's.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from spikeward.rules.solve.line import DUST, Bools, Floats, Powers, in_portions, total
from spikeward.rules.solve.separable import (
    BOTH_SIDES,
    Look,
    deviation_of,
    interval,
    joined,
    lowest,
    picked,
    powers_of,
)

Runs = NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class BlockFit:
    """One series of ``BlockFits``: the same names as plain numbers."""

    vessels: float
    runs: float
    dof: float
    content: float
    fit_uncertainty: float
    low: float
    high: float
    slopes: tuple[float, ...]
    residual_sd: float
    exact: bool
    fitted: tuple[float, ...]


@dataclass(frozen=True, slots=True)
class BlockFits:
    """Contents from several runs, one entry per series; where something has no value it is not finite.

    ``content`` and its ends in the unit of x, ``slopes`` in y per x, one row for each run. ``dof`` belongs to the
    uncertainty: infinite for declared noise, and zero where nothing tells the noise. ``low`` or ``high`` is infinite
    where the interval has no end on that side. ``residual_sd`` is of y in a vessel of weight 1. ``exact``: residuals
    are rounding only. ``fitted``: y on the lines, (vessels, series).
    """

    vessels: Floats
    runs: Floats
    dof: Floats
    content: Floats
    fit_uncertainty: Floats
    low: Floats
    high: Floats
    slopes: Floats
    residual_sd: Floats
    exact: Bools
    fitted: Floats

    def of(self, series: int) -> BlockFit:
        """The fit of one series, by its column."""
        return picked(self, BlockFit, series)


@dataclass(frozen=True, slots=True)
class _Run:
    """The vessels of one run of every series, scaled; the weights of all others are zero.

    ``level``: all its vessels hold the same addition. Such a run tells a mean but nothing of the content.
    """

    x: Floats
    y: Floats
    w: Floats
    vessels: Floats
    level: Bools

    def line(self, content: Floats) -> tuple[Floats, Floats, Floats]:
        """What y is in proportion to, the sum of its squares, and the factor between them."""
        z = np.where(self.level, 1.0, content + self.x)
        squares = total(self.w * z * z)
        return z, squares, np.where(self.vessels > 0.0, total(self.w * z * self.y) / squares, 0.0)

    def slope(self, content: Floats) -> Floats:
        """Signal per content; that of a run with one addition follows from the content that the others tell."""
        _, _, factor = self.line(content)
        level = factor / (content + total(self.w * self.x) / total(self.w))
        return np.where(self.vessels > 0.0, np.where(self.level, level, factor), np.nan)

    def look(self, content: Floats) -> Look:
        """What this run adds to the profile."""
        z, squares, slope = self.line(content)
        residuals = self.y - slope * z
        # in a run of one addition z is one, so that nothing is left
        alone = slope - slope * np.where(self.vessels > 0.0, total(self.w * z) / squares, 0.0) * z
        return Look(
            squares=total(self.w * residuals * residuals),
            pull=total(self.w * residuals * alone),
            stiffness=total(self.w * alone * alone),
        )


@dataclass(frozen=True, slots=True)
class _Blocks:
    runs: tuple[_Run, ...]

    def look(self, content: Floats) -> Look:
        """The profile: the runs share the content only, so theirs add up."""
        squares = pull = stiffness = np.zeros(content.shape)
        for run in self.runs:
            added = run.look(content)
            squares, pull, stiffness = squares + added.squares, pull + added.pull, stiffness + added.stiffness
        return Look(squares, pull, stiffness)

    def sound(self, content: Floats) -> Bools:
        """Any content is: slopes follow it, and runs that do not tell it have no stiffness."""
        return np.isfinite(content)


def fit_blocks(x: Floats, y: Floats, w: Floats, run: Runs, noise: Floats, coverage: float) -> BlockFits:
    """Fit one content and a slope for each run, for every column.

    Parameters
    ----------
    x : contents added, shape (vessels, series)
    y : volume-corrected signals with the background off, same shape
    w : weight of a vessel that is fitted, in inverse proportion to the variance of its y, the largest 1; 0 for padding
    run : in which run the vessel was measured, from 0, same shape; -1 for padding
    noise : standard deviation of y in a vessel of weight 1 where it was declared, shape (series,); not a number: the
        residuals tell, with vessels - 1 - runs degrees of freedom
    coverage : of the interval, such as 0.95
    """
    fits = []
    count = int(run.max(initial=-1)) + 1
    with np.errstate(all="ignore"):  # what overflows or has no value is recognised by its result
        for part in in_portions(*x.shape):
            added, signals, weights = (rows[:, None, part] for rows in (x, y, w))
            fits.append(_portion(added, signals, weights, run[:, None, part], count, noise[None, part], coverage))
    return joined(fits)


def _portion(x: Floats, y: Floats, w: Floats, run: Runs, count: int, noise: Floats, coverage: float) -> BlockFits:
    used = (w > 0.0) & (run >= 0)
    x_power, y_power = powers_of(np.where(used, x, 0.0)), powers_of(np.where(used, y, 0.0))
    scaled_x, scaled_y = np.ldexp(x, -x_power), np.ldexp(y, -y_power)
    runs = tuple(_run_of(scaled_x, scaled_y, np.where(used & (run == nth), w, 0.0)) for nth in range(count))
    blocks = _Blocks(runs)
    n, filled = total(np.where(used, 1.0, 0.0)), np.zeros((1, x.shape[-1]))
    for one in runs:
        filled = filled + np.where(one.vessels > 0.0, 1.0, 0.0)
    best = lowest(blocks, BOTH_SIDES, n.size)
    residual_sd, declared = deviation_of(best.squares, n - 1.0 - filled), ~np.isnan(noise)
    deviation = np.where(declared, np.ldexp(noise, -y_power), residual_sd)
    ends = interval(blocks, best, deviation, np.where(declared, np.inf, n - 1.0 - filled), coverage)
    slopes = [np.ldexp(one.slope(best.content), y_power - x_power) for one in runs]
    return BlockFits(
        vessels=n[0],
        runs=filled[0],
        dof=ends.dof[0],
        content=np.ldexp(best.content, x_power)[0],
        fit_uncertainty=np.ldexp(ends.uncertainty, x_power)[0],
        low=np.ldexp(ends.low, x_power)[0],
        high=np.ldexp(ends.high, x_power)[0],
        slopes=np.concatenate(slopes) if slopes else np.full((0, x.shape[-1]), np.nan),
        residual_sd=np.ldexp(residual_sd, y_power)[0],
        exact=(residual_sd == 0.0)[0],
        fitted=_fitted(runs, best.content, used, y_power),
    )


def _run_of(x: Floats, y: Floats, w: Floats) -> _Run:
    here = w > 0.0
    off = np.where(here, x - total(w * x) / total(w), 0.0)
    level = here.any(axis=0) & (np.abs(off).max(axis=0, initial=0.0) <= DUST)
    return _Run(x, y, w, total(np.where(here, 1.0, 0.0)), level)


def _fitted(runs: tuple[_Run, ...], content: Floats, used: Bools, y_power: Powers) -> Floats:
    fitted = np.full(used.shape, np.nan)
    for run in runs:
        z, _, slope = run.line(content)
        fitted = np.where(run.w > 0.0, np.ldexp(slope * z, y_power), fitted)
    return fitted[:, 0]
