"""Curved responses S = k c + q c² through zero, c the content in the vessel.

Curvature belongs to the content that the detector sees, so where volumes grow the signals are not transformed first.
With the content of the sample fixed, k and q are linear, so ``separable`` solves it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from spikeward.rules.solve.line import DUST, Bools, Floats, in_portions, total
from spikeward.rules.solve.separable import (
    BOTH_SIDES,
    Look,
    deviation_of,
    interval,
    joined,
    lowest,
    picked,
    powers_of,
    share_of,
)

_EIGHTHS = [(1.0 + eighth / 8.0) * 2.0**power for power in range(-6, 6) for eighth in range(1, 8)]
_GRID = np.sort(np.concatenate([BOTH_SIDES, _EIGHTHS]))
"""Finer near the additions: a strongly bent profile has its valley and its turn close to each other."""


@dataclass(frozen=True, slots=True)
class CurveFit:
    """One series of ``CurveFits``: the same names as plain numbers."""

    vessels: float
    dof: float
    content: float
    fit_uncertainty: float
    low: float
    high: float
    slope: float
    curvature: float
    residual_sd: float
    exact: bool
    fitted: tuple[float, ...]


@dataclass(frozen=True, slots=True)
class CurveFits:
    """Curved responses, one entry per series; where something has no value it is not finite.

    ``content`` and its ends in the unit of x, ``slope`` (at no content) in signal per content, ``curvature`` in signal
    per content squared. ``dof`` belongs to the uncertainty: infinite for declared noise, and zero where nothing tells
    the noise. ``low`` or ``high`` is infinite where the interval has no end on that side. ``residual_sd`` is of a
    signal of weight 1. ``exact``: residuals are rounding only. ``fitted``: signals on the curve, (vessels, series).
    """

    vessels: Floats
    dof: Floats
    content: Floats
    fit_uncertainty: Floats
    low: Floats
    high: Floats
    slope: Floats
    curvature: Floats
    residual_sd: Floats
    exact: Bools
    fitted: Floats

    def of(self, series: int) -> CurveFit:
        """The fit of one series, by its column."""
        return picked(self, CurveFit, series)


@dataclass(frozen=True, slots=True)
class _Shape:
    """The curve at one content: contents in the vessels, and the part of their squares that no slope can follow."""

    c: Floats
    bend: Floats
    slope: Floats
    curvature: Floats
    residuals: Floats


@dataclass(frozen=True, slots=True)
class _Curve:
    """The vessels of all series, scaled."""

    x: Floats
    share: Floats
    signal: Floats
    w: Floats

    def shape(self, content: Floats) -> _Shape:
        """The least-squares curve."""
        c = (content + self.x) * self.share
        square = c * c
        followed = share_of(self.w, c, square)
        bend = square - followed * c
        straight, curvature = share_of(self.w, c, self.signal), share_of(self.w, bend, self.signal)
        residuals = self.signal - straight * c - curvature * bend
        return _Shape(c, bend, straight - curvature * followed, curvature, residuals)

    def _alone(self, shape: _Shape) -> Floats:
        """What of the change of signals with the content neither slope nor curvature can follow."""
        moved = self.share * (shape.slope + 2.0 * shape.curvature * shape.c)
        alone = moved - share_of(self.w, shape.c, moved) * shape.c
        return alone - share_of(self.w, shape.bend, alone) * shape.bend

    def look(self, content: Floats) -> Look:
        """The profile. A curve that falls at no content is drawn as one whose content is too high.

        A parabola has two roots and the content is that of the rising branch; the profile turns over close to it,
        where the slope at no content changes sign.
        """
        shape = self.shape(content)
        alone = self._alone(shape)
        pull = total(self.w * shape.residuals * alone)
        return Look(
            squares=total(self.w * shape.residuals * shape.residuals),
            pull=np.where(shape.slope > 0.0, pull, -np.abs(pull)),
            stiffness=total(self.w * alone * alone),
        )

    def sound(self, content: Floats) -> Bools:
        """Whether the response rises from no content to every vessel, and the content can be told from it."""
        shape = self.shape(content)
        alone = self._alone(shape)
        rises = np.where(self.w > 0.0, shape.slope + 2.0 * shape.curvature * shape.c, np.inf) > 0.0
        stiffness, pull = total(self.w * alone * alone), total(self.w * shape.residuals * alone)
        # what rounding leaves is in proportion to the terms, which may cancel, and to the squares that a slope follows
        terms = self.share * (np.abs(shape.slope) + 2.0 * np.abs(shape.curvature * shape.c))
        square = shape.c * shape.c
        blur = total(self.w * terms * terms) * total(self.w * square * square)
        apart = stiffness * total(self.w * shape.bend * shape.bend) > DUST * DUST * blur
        # at the edge of what rises the profile may still fall
        still = np.abs(pull) <= 2.0**-20 * np.abs(content) * stiffness + DUST * np.sqrt(stiffness)
        return (shape.slope > 0.0) & rises.all(axis=0) & apart & still


def fit_curves(x: Floats, share: Floats, signal: Floats, w: Floats, noise: Floats, coverage: float) -> CurveFits:
    """Fit one curved response per column.

    Parameters
    ----------
    x : contents added, Cs v / V0, shape (vessels, series)
    share : of test solution in the vessel, V0 / V, same shape
    signal : mean signal of each vessel with the background off, same shape
    w : weight of a vessel that is fitted, in inverse proportion to the variance of its signal, the largest 1; 0 for
        padding
    noise : standard deviation of the signal of a vessel of weight 1 where it was declared, shape (series,); not a
        number: the residuals tell, with vessels - 3 degrees of freedom
    coverage : of the interval, such as 0.95
    """
    fits = []
    with np.errstate(all="ignore"):  # what overflows or has no value is recognised by its result
        for part in in_portions(*x.shape):
            added, shares, signals, weights = (rows[:, None, part] for rows in (x, share, signal, w))
            fits.append(_portion(added, shares, signals, weights, noise[None, part], coverage))
    return joined(fits)


def _portion(x: Floats, share: Floats, signal: Floats, w: Floats, noise: Floats, coverage: float) -> CurveFits:
    used = w > 0.0
    x_power, y_power = powers_of(np.where(used, x, 0.0)), powers_of(np.where(used, signal, 0.0))
    n, declared = total(np.where(used, 1.0, 0.0)), ~np.isnan(noise)
    curve = _Curve(np.ldexp(x, -x_power), share, np.ldexp(signal, -y_power), w)
    best = lowest(curve, _GRID, n.size).where(n >= 3.0)
    residual_sd = deviation_of(best.squares, n - 3.0)
    deviation = np.where(declared, np.ldexp(noise, -y_power), residual_sd)
    ends = interval(curve, best, deviation, np.where(declared, np.inf, n - 3.0), coverage)
    shape = curve.shape(best.content)
    return CurveFits(
        vessels=n[0],
        dof=ends.dof[0],
        content=np.ldexp(best.content, x_power)[0],
        fit_uncertainty=np.ldexp(ends.uncertainty, x_power)[0],
        low=np.ldexp(ends.low, x_power)[0],
        high=np.ldexp(ends.high, x_power)[0],
        slope=np.ldexp(shape.slope, y_power - x_power)[0],
        curvature=np.ldexp(shape.curvature, y_power - 2 * x_power)[0],
        residual_sd=np.ldexp(residual_sd, y_power)[0],
        exact=(residual_sd == 0.0)[0],
        fitted=np.where(used, signal - np.ldexp(shape.residuals, y_power), np.nan)[:, 0],
    )
