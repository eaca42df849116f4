"""Straight lines through vessel means, for many series at once.

Arrays are shaped (vessels, series) and are walked vessel by vessel: rows are only added, subtracted, multiplied,
divided or rooted, so the digits of a series do not depend on what is solved beside it. A shorter series is padded with
w = x = y = 0, which adds exact zeros.
"""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]

DUST = 16 * 2.0**-52
"""Relative size below which a difference is rounding of the arithmetic, not something that was measured."""


@dataclass(frozen=True, slots=True)
class Fit:
    """One series of ``Fits``: the same names as plain numbers."""

    vessels: float
    weight: float
    dof: float
    slope: float
    slope_uncertainty: float
    intercept: float
    intercept_uncertainty: float
    covariance: float
    residual_sd: float
    correlation: float
    x_mean: float
    sxx: float
    spread: float
    content: float
    fit_uncertainty: float
    background_effect: float
    exact: bool
    flat: bool
    one_x: bool


@dataclass(frozen=True, slots=True)
class Fits:
    """Straight lines y = intercept + slope x, one entry per series; where a line has no value, it is not finite.

    Contents in the unit of x, ``slope`` in y per x, ``covariance`` in y squared per x. ``dof`` is vessels - 2, and the
    uncertainties are not a number where it is not positive. ``background_effect`` is the change of ``content`` per unit
    by which the background of all vessels rises. ``weight`` is the sum of weights, means and sums of squares are
    weighted, and ``residual_sd`` is of y in a vessel of weight 1. ``spread`` is the root of ``sxx``. ``exact``:
    residuals are rounding only. ``flat``: y does not change with x beyond rounding. ``one_x``: all x are equal.
    """

    vessels: Floats
    weight: Floats
    dof: Floats
    slope: Floats
    slope_uncertainty: Floats
    intercept: Floats
    intercept_uncertainty: Floats
    covariance: Floats
    residual_sd: Floats
    correlation: Floats
    x_mean: Floats
    sxx: Floats
    spread: Floats
    content: Floats
    fit_uncertainty: Floats
    background_effect: Floats
    exact: Bools
    flat: Bools
    one_x: Bools

    def of(self, series: int) -> Fit:
        """The fit of one series, by its column."""
        return Fit(**{field.name: getattr(self, field.name)[series].item() for field in fields(Fit)})


def fit_lines(x: Floats, y: Floats, w: Floats, shift: Floats) -> Fits:
    """Fit one line per column and extrapolate it to y = 0.

    Parameters
    ----------
    x : contents added, shape (vessels, series)
    y : volume-corrected signals, same shape
    w : weight of a vessel that is fitted, in inverse proportion to the variance of its y; 0 for padding
    shift : dy/dB with its sign turned, by which y falls when the background rises; final volume over aliquot

    Notes
    -----
    u(C0) = (s/|b|) sqrt(1/Sw + ybar²/(b² Sxx)) with C0 = a/b: the covariance of intercept and slope is in it, and no
    term for a separate reading of the unknown (Miller and Miller, Statistics and Chemometrics for Analytical
    Chemistry, chapter 5, with the weighted line there; Bruce and Gill, J. Chem. Educ. 76 (1999) 805).
    """
    with np.errstate(all="ignore"):  # what overflows or has no value is recognised by its result
        x_power, y_power = _power_of_two(x), _power_of_two(y)
        return _scaled(np.ldexp(x, -x_power), np.ldexp(y, -y_power), w, shift, x_power, y_power)


def _power_of_two(rows: Floats) -> NDArray[np.int32]:
    """The exponent that brings the largest magnitude of each column below one; scaling by it is exact."""
    largest = np.zeros(rows.shape[1])
    for row in rows:
        largest = np.maximum(largest, np.abs(row))
    exponent: NDArray[np.int32] = np.frexp(largest)[1].astype(np.int32)
    return exponent


def _scaled(
    x: Floats, y: Floats, w: Floats, shift: Floats, x_power: NDArray[np.int32], y_power: NDArray[np.int32]
) -> Fits:
    n, sw = _total(np.where(w > 0.0, 1.0, 0.0)), _total(w)
    x_mean, y_mean, shift_mean = _total(w * x) / sw, _total(w * y) / sw, _total(w * shift) / sw
    dx, dy = x - x_mean, y - y_mean
    sxx, sxy, syy = _total(w * dx * dx), _total(w * dx * dy), _total(w * dy * dy)
    slope = sxy / sxx
    residuals = dy - slope * dx
    dof = n - 2.0
    s = np.sqrt(_total(w * residuals * residuals) / np.where(dof > 0, dof, np.nan))
    exact = s <= DUST
    s = np.where(exact, 0.0, s)
    intercept = y_mean - slope * x_mean
    content = intercept / slope
    y_over_slope = y_mean / slope
    shift_slope = _total(w * dx * shift) / sxx
    effect = -((shift_mean - shift_slope * x_mean) - content * shift_slope) / slope
    spread = np.sqrt(sxx)
    u_slope = s / spread
    step = spread / np.sqrt(sw)
    return Fits(
        vessels=n,
        weight=sw,
        dof=dof,
        slope=np.ldexp(slope, y_power - x_power),
        slope_uncertainty=np.ldexp(u_slope, y_power - x_power),
        intercept=np.ldexp(intercept, y_power),
        intercept_uncertainty=np.ldexp(s * np.sqrt(1.0 / sw + x_mean * x_mean / sxx), y_power),
        covariance=np.ldexp(-x_mean * u_slope * u_slope, 2 * y_power - x_power),
        residual_sd=np.ldexp(s, y_power),
        correlation=np.maximum(-1.0, np.minimum(1.0, sxy / (spread * np.sqrt(syy)))),
        x_mean=np.ldexp(x_mean, x_power),
        sxx=np.ldexp(sxx, 2 * x_power),
        spread=np.ldexp(spread, x_power),
        content=np.ldexp(content, x_power),
        fit_uncertainty=np.ldexp(s / np.abs(slope) * np.sqrt(1.0 / sw + y_over_slope * y_over_slope / sxx), x_power),
        background_effect=np.ldexp(effect, x_power - y_power),
        exact=exact,
        flat=np.abs(slope) * step <= DUST,
        one_x=step <= DUST,
    )


def _total(rows: Floats) -> Floats:
    """Add up the vessels of each series, in their order."""
    total = np.zeros(rows.shape[1])
    for row in rows:
        total = total + row
    return total
