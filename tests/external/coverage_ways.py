"""Wrong ways of calculating, each beside the right one on the same draws."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cache

import numpy as np

from spikeward.rules.solve.line import Fits
from spikeward.rules.uncertainty.fieller import t_quantiles
from spikeward.rules.uncertainty.interval import Component, FitPart, printed
from tests.external.coverage_draws import (
    COVERAGE,
    DRAWS,
    Cell,
    Floats,
    Found,
    Intervals,
    counted,
    declared,
    drawn,
    lined,
    normals,
    of_line,
    own,
    own_line,
    solved,
)


@dataclass(frozen=True)
class Way:
    """One wrong way beside the right one, on the same draws of the same cell."""

    name: str
    setup: str
    cell: Cell
    both: Callable[[Cell], tuple[Intervals, Intervals]]


@dataclass(frozen=True)
class Compared:
    """The right way, the wrong one, and the median errors of their contents over the content."""

    way: Way
    right: Found
    wrong: Found
    error: tuple[float, float]


def about(content: Floats, half: Floats) -> Intervals:
    """A symmetric interval."""
    return Intervals(content, content - half, content + half)


def weights_of_readings(readings: int) -> Callable[[Cell], tuple[Intervals, Intervals]]:
    """Vessel means weighted by 1/s² of their own few readings."""

    def both(cell: Cell) -> tuple[Intervals, Intervals]:
        one = drawn(replace(cell, noise=0.0))
        read = [one.signals + cell.noise * one.top * normals((cell, nth), cell.vessels) for nth in range(readings)]
        mean = sum(read[1:], read[0]) / readings
        square = sum((each - mean) ** 2 for each in read) / (readings - 1)
        return own(one.x, mean, one.factor), own(one.x, mean, one.factor, 1.0 / square)

    return both


def weights_of_signals(cell: Cell) -> tuple[Intervals, Intervals]:
    """Weights 1/S² of the signals as they were observed."""
    one = drawn(cell)
    return lined(cell, one, one.factor), own(one.x, one.signals, one.factor, 1.0 / one.signals**2)


def readings_as_preparations(cell: Cell) -> tuple[Intervals, Intervals]:
    """Three readings of each vessel, with a third of its noise, counted as three vessels."""
    one = drawn(cell)
    read = [one.signals + cell.noise / 3.0 * one.top * normals((cell, nth), cell.vessels) for nth in range(3)]
    wrong = own(np.tile(one.x, (3, 1)), np.concatenate(read), np.tile(one.factor, (3, 1)))
    return own(one.x, (read[0] + read[1] + read[2]) / 3.0, one.factor), wrong


def volumes_as(factor_of: Callable[[Floats], Floats]) -> Callable[[Cell], tuple[Intervals, Intervals]]:
    """Volumes that were not what the calculation thinks."""

    def both(cell: Cell) -> tuple[Intervals, Intervals]:
        one = drawn(cell)
        return lined(cell, one, one.factor), lined(cell, one, factor_of(one.factor))

    return both


def half_by(half_of: Callable[[Fits, Floats], Floats]) -> Callable[[Cell], tuple[Intervals, Intervals]]:
    """The right content between symmetric ends."""

    def both(cell: Cell) -> tuple[Intervals, Intervals]:
        one = drawn(cell)
        fits = own_line(one.x, one.signals, one.factor)
        half = half_of(fits, t_quantiles(fits.dof, COVERAGE))
        return of_line(fits, fits.dof), Intervals(fits.content, fits.content - half, fits.content + half)

    return both


def without_covariance(fits: Fits, t: Floats) -> Floats:
    """As if slope and intercept had nothing to do with each other."""
    relative = np.hypot(fits.intercept_uncertainty / fits.intercept, fits.slope_uncertainty / fits.slope)
    return np.asarray(t * np.abs(fits.content) * relative)


def with_a_reading(fits: Fits, t: Floats) -> Floats:
    """As if an unknown had been read off the line: one more 1/m, m = 1, under the root."""
    return np.asarray(t * np.hypot(fits.fit_uncertainty, fits.residual_sd / np.abs(fits.slope)))


def pooled(cell: Cell) -> tuple[Intervals, Intervals]:
    """Both runs as one line."""
    one = drawn(cell)
    return solved(cell), own(one.x, one.signals, one.factor)


def background_forgotten(cell: Cell) -> tuple[Intervals, Intervals]:
    """A background known to 1.5 times the noise from ten readings, common to all vessels, left out of the interval."""
    one = drawn(cell)
    read = 1.5 * one.floor * math.sqrt(10.0) * normals((cell, "background"), 10)
    fits = own_line(one.x, one.signals - read.mean(axis=0), one.factor)
    alone = of_line(fits, fits.dof)
    rest = np.abs(fits.background_effect) * read.std(axis=0, ddof=1) / math.sqrt(10.0)
    ends = np.full((2, DRAWS), np.nan)
    for nth in np.flatnonzero(np.isfinite(alone.low)).tolist():
        content = float(fits.content[nth])
        halves = (content - float(alone.low[nth]), float(alone.high[nth]) - content)
        part = FitPart(content, float(fits.fit_uncertainty[nth]), halves, cell.vessels - 2)
        estimate, _ = printed(part, [Component(float(rest[nth]), 9)], "mg/L", COVERAGE, "")
        assert estimate.interval is not None
        ends[:, nth] = estimate.interval
    return Intervals(fits.content, ends[0], ends[1]), alone


def too_little_noise(cell: Cell) -> tuple[Intervals, Intervals]:
    """Half of the noise that there is."""
    one = drawn(cell)
    return lined(cell, one, one.factor), declared(one, one.factor, 0.5)


SIX, FOUR = Cell("flasks", 6, 0.02, 1.0), Cell("flasks", 4, 0.02, 1.0)
WAYS = (
    Way("weights 1/s² of two readings", "each vessel is read twice", SIX, weights_of_readings(2)),
    Way("weights 1/s² of three readings", "each vessel is read three times", SIX, weights_of_readings(3)),
    Way(
        "weights 1/S² of observed signals", "the noise is in proportion to the signal",
        Cell("flasks", 6, 0.1, 0.1, "proportional", "declared"), weights_of_signals,
    ),
    Way(
        "weights 1/S² of observed signals", "the noise is constant", replace(SIX, content=0.1), weights_of_signals,
    ),
    Way(
        "readings counted as preparations", "each vessel is read three times, with a third of the noise of vessels",
        FOUR, readings_as_preparations,
    ),
    Way(
        "dilution by the additions neglected", "one vessel grows from 10 to 10.25 mL", Cell("small", 4, 0.005, 1.0),
        volumes_as(np.ones_like),
    ),
    Way(
        "level 0 taken as made up", "it was read as it is, the other one 10 in 20 mL",
        Cell("undiluted", 2, 0.005, 0.3, "constant", "declared"),
        volumes_as(lambda factor: np.full_like(factor, 2.0)),
    ),
    Way("slope and intercept without their covariance", "", SIX, half_by(without_covariance)),
    Way("one more 1/m, as for an unknown read off a line", "", SIX, half_by(with_a_reading)),
    Way("k = 2 in place of Student's t", "", FOUR, half_by(lambda fits, _: np.asarray(2.0 * fits.fit_uncertainty))),
    Way(
        "content ± t u in place of Fieller's interval", "much noise", replace(SIX, noise=0.05),
        half_by(lambda fits, t: np.asarray(t * fits.fit_uncertainty)),
    ),
    Way("two runs pooled as one line", "the second has 80 % of the sensitivity", Cell("blocks", 6, 0.005, 1.0), pooled),
    Way(
        "background taken as exactly known", "it is known to 1.5 times the noise, from ten readings",
        replace(SIX, content=0.5), background_forgotten,
    ),
    Way("half of the true noise declared", "", replace(FOUR, precision="declared"), too_little_noise),
)  # fmt: skip


@cache
def compared(way: Way) -> Compared:
    """A wrong way and the right one."""
    both = way.both(way.cell)
    right, wrong = (counted(way.cell, one) for one in both)
    errors = [float(np.nanmedian(one.content)) / way.cell.content - 1.0 for one in both]
    return Compared(way, right, wrong, (errors[0], errors[1]))
