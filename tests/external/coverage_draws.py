"""Invented series of known content, many at once, and their intervals by the functions that the daemon runs.

Draws are raw bits of PCG64 through the inverse of the normal distribution, seeded by the words that describe a cell, so
that no cell depends on another.
"""

from __future__ import annotations

import hashlib
import math
from dataclasses import dataclass, replace
from functools import cache

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from spikeward.rules.solve.blocks import fit_blocks
from spikeward.rules.solve.curve import fit_curves
from spikeward.rules.solve.line import Fits, fit_lines
from spikeward.rules.solve.log_response import fit_log_response
from spikeward.rules.solve.weights import fit_by_noise
from spikeward.rules.uncertainty.fieller import g_values, half_widths_each, t_quantiles

Floats = NDArray[np.float64]
DRAWS = 10_000
COVERAGE = 0.95

VESSELS = (3, 4, 5, 6, 8, 12)
NOISE = (0.005, 0.01, 0.02, 0.05, 0.1)
CONTENT = (0.0, 0.1, 0.3, 1.0, 3.0)
DESIGNS = {
    "flasks": "flasks made up to one volume, 10 mL in 25 mL",
    "successive": "successive additions into one vessel, which grows from 10 to 15 mL",
    "weighed": "aliquots, additions and final amounts as weighed, all a little different",
    "unequal": "aliquots from 10 down to 6 mL, made up to 25 mL",
    "undiluted": "level 0 read as it is, all others made up from 10 to 20 mL",
}
MODELS = {
    "blocks": "two runs, the second with 80 % of the sensitivity; 8 vessels or more in three runs, the last with 60 %",
    "curve": "a parabola that has lost 15 % at the top, in a vessel that grows from 10 to 11 mL",
    "log": "an electrode of 57.3 mV per decade with its slope fitted; noise in mV",
}
GROWS = {"successive": 5.0, "curve": 1.0, "small": 0.25}
"""By how many mL the volume of a vessel of 10 mL has grown at the highest addition."""
KINDS = {
    "constant": "the same in every vessel",
    "proportional": "in proportion to the signal, above a twentieth of it at the top",
    "mixed": "half constant, half in proportion to the signal, in squares",
}


@dataclass(frozen=True)
class Cell:
    """One set-up: ``noise`` over the top signal (mV for an electrode), ``content`` over the top addition."""

    design: str
    vessels: int
    noise: float
    content: float
    kind: str = "constant"
    precision: str = "own"


@dataclass(frozen=True)
class Bench:
    """Volumes of the vessels in mL and contents added; the highest addition is 1."""

    aliquot: Floats
    final: Floats
    x: Floats

    @property
    def factor(self) -> Floats:
        """What turns a signal into y."""
        return self.final / self.aliquot


@dataclass(frozen=True)
class Drawn:
    """Contents added, what turns a signal into y, signals, each of shape (vessels, draws), and the noise in them."""

    x: Floats
    factor: Floats
    signals: Floats
    top: float
    floor: float
    relative: float


@dataclass(frozen=True)
class Intervals:
    """Contents and the ends of their intervals; not a number for a series that gets no interval with two ends."""

    content: Floats
    low: Floats
    high: Floats


@dataclass(frozen=True)
class Found:
    """Of one cell: draws without an interval, with the truth in it, and above it; median half-width."""

    cell: Cell
    refused: int
    covered: int
    above: int
    half: float

    @property
    def coverage(self) -> float:
        """A series without an interval counts as covered: nothing false is said of it."""
        return (self.covered + self.refused) / DRAWS

    @property
    def of_printed(self) -> float:
        """Of the intervals that are printed alone."""
        return self.covered / max(DRAWS - self.refused, 1)



def normals(words: object, rows: int) -> Floats:
    """Standard normal draws, shape (rows, draws)."""
    seed = int.from_bytes(hashlib.sha256(repr(words).encode()).digest()[:16], "big")
    raw = np.random.PCG64(seed).random_raw(rows * DRAWS)
    drawn: Floats = ndtri((np.asarray(raw >> np.uint64(11), dtype=np.float64) + 0.5) * 2.0**-53)
    return drawn.reshape(rows, DRAWS)


def bench(design: str, vessels: int) -> Bench:
    """The volumes of a design; the additions are in equal steps, but for those that were weighed."""
    steps = np.arange(vessels)
    rise = steps / (vessels - 1)
    ten = np.full(vessels, 10.0)
    if design in GROWS:
        return Bench(ten, 10.0 + GROWS[design] * rise, rise)
    if design == "unequal":
        return Bench(10.0 - 4.0 * rise, 2.5 * ten, rise)
    if design == "undiluted":
        return Bench(ten, np.where(steps == 0, 10.0, 20.0), rise)
    if design == "weighed":
        aliquot = 10.0 + 0.2 * (7 * steps % 5 - 2)
        x = rise * (1.0 + 0.03 * (5 * steps % 3 - 1)) / aliquot
        return Bench(aliquot, 25.0 + 0.3 * (3 * steps % 4 - 1.5), x / x.max())
    return Bench(ten, 2.5 * ten, rise)


def noise_of(cell: Cell, signals: Floats) -> tuple[float, float]:
    """Constant part and relative part of the noise, as a laboratory would declare them."""
    top = float(signals.max())
    if cell.kind == "proportional":
        return cell.noise * top / 20.0, cell.noise
    share = math.sqrt(0.5) if cell.kind == "mixed" else 1.0
    return cell.noise * top * share, cell.noise * share if cell.kind == "mixed" else 0.0


def columns(row: Floats) -> Floats:
    """One value for each vessel, as columns for all draws."""
    return np.repeat(row[:, np.newaxis], DRAWS, axis=1)


def runs_of(vessels: int) -> NDArray[np.int64]:
    """In which run a vessel of the design with blocks is measured."""
    count = 3 if vessels >= 8 else 2
    return np.arange(vessels, dtype=np.int64) * count // vessels


def signals_of(cell: Cell, made: Bench) -> Floats:
    """What an instrument without noise would show, one value for each vessel."""
    inside = (cell.content + made.x) / made.factor
    if cell.design == "blocks":
        return np.asarray(inside * (1.0 - 0.2 * runs_of(cell.vessels)))
    if cell.design == "curve":
        return np.asarray(inside * (1.0 - 0.15 * inside / inside.max()))
    if cell.design == "log":
        return np.asarray(200.0 - 57.3 * np.log10(inside))
    return np.asarray(inside)


def drawn(cell: Cell) -> Drawn:
    """The series of a cell."""
    made = bench(cell.design, cell.vessels)
    exact = signals_of(cell, made)
    floor, relative = (cell.noise, 0.0) if cell.design == "log" else noise_of(cell, exact)
    sd = np.hypot(floor, relative * exact)
    signals = columns(exact) + sd[:, np.newaxis] * normals(cell, cell.vessels)
    return Drawn(columns(made.x), columns(made.factor), signals, float(exact.max()), floor, relative)


# ---- intervals, by the functions that the daemon runs --------------------------------------------------------------


def of_line(fits: Fits, dof: Floats) -> Intervals:
    """Fieller's interval of straight lines; none where the slope does not differ from zero or is negative."""
    g = g_values(t_quantiles(dof, COVERAGE), fits.slope, fits.slope_uncertainty)
    lower, upper = half_widths_each(fits.content, fits.x_mean, fits.spread, fits.weight, g)
    nothing = np.where(fits.slope > 0.0, 0.0, np.nan)
    return Intervals(fits.content, fits.content - lower + nothing, fits.content + upper)


def own_line(x: Floats, signals: Floats, factor: Floats, w: Floats | None = None) -> Fits:
    """The fit with the precision that the series shows itself; weights for noise that is constant in the signal."""
    ratio = factor.min(axis=0) / factor
    return fit_lines(x, signals * factor, ratio * ratio if w is None else w, factor)


def own(x: Floats, signals: Floats, factor: Floats, w: Floats | None = None) -> Intervals:
    """The interval of such a fit."""
    fits = own_line(x, signals, factor, w)
    return of_line(fits, fits.dof)


def declared(one: Drawn, factor: Floats, share: float = 1.0) -> Intervals:
    """The interval with a share of the true noise declared."""
    every = np.full(DRAWS, share)
    noise = fit_by_noise(one.x, one.signals * factor, factor, one.floor * every, one.relative * every, 0.0 * every)
    found = of_line(noise.fits, np.full(DRAWS, math.inf))
    return replace(found, low=np.where(noise.settled, found.low, np.nan))


def lined(cell: Cell, one: Drawn, factor: Floats) -> Intervals:
    """A straight line, as the cell wants its precision."""
    return declared(one, factor) if cell.precision == "declared" else own(one.x, one.signals, factor)


def solved(cell: Cell) -> Intervals:
    """All draws of a cell, in the right way."""
    one = drawn(cell)
    if cell.design not in MODELS:
        return lined(cell, one, one.factor)
    unknown, even, share = np.full(DRAWS, np.nan), np.ones_like(one.x), 1.0 / one.factor
    if cell.design == "blocks":
        run = np.repeat(runs_of(cell.vessels)[:, np.newaxis], DRAWS, axis=1)
        blocks = fit_blocks(one.x, one.signals * one.factor, even, run, unknown, COVERAGE)
        return ended(blocks.content, blocks.low, blocks.high)
    if cell.design == "curve":
        curves = fit_curves(one.x, share, one.signals, even, unknown, COVERAGE)
        return ended(curves.content, curves.low, curves.high)
    logs = fit_log_response(one.x, share, one.signals, even, unknown, 0.0 * unknown, unknown, COVERAGE)
    return ended(logs.content, logs.low, logs.high)


def ended(content: Floats, low: Floats, high: Floats) -> Intervals:
    """An interval that has no end on one side is none."""
    return Intervals(content, np.where(np.isfinite(low) & np.isfinite(high), low, np.nan), high)


def counted(cell: Cell, intervals: Intervals) -> Found:
    """How many of the intervals hold the truth."""
    given = np.isfinite(intervals.low) & np.isfinite(intervals.high)
    holds = given & (intervals.low <= cell.content) & (cell.content <= intervals.high)
    width = (intervals.high - intervals.low)[given]
    half = float(np.median(width)) / 2.0 if width.size else math.nan
    above = int((given & (intervals.high < cell.content)).sum())
    return Found(cell, DRAWS - int(given.sum()), int(holds.sum()), above, half)


@cache
def measured(cell: Cell) -> Found:
    """One cell."""
    return counted(cell, solved(cell))
