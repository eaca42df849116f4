"""Straight lines through vessel means, for many series at once.

Arrays are shaped (vessels, series) and are walked vessel by vessel: rows are only added, subtracted, multiplied,
divided or rooted, so the digits of a series do not depend on what is solved beside it. A shorter series is padded with
w = x = y = 0, which adds exact zeros. Columns are taken in portions that stay in the processor's cache, and sums that
belong to one pass over the vessels lie beside each other, so that each vessel is added in one step.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, fields, replace

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]
Powers = NDArray[np.int32]

DUST = 16 * 2.0**-52
"""Relative size below which a difference is rounding of the arithmetic, not something that was measured."""

CELLS = 2**15
"""Vessels times series that are fitted in one go, so that they stay in the cache; no digit depends on it."""

_WITHIN = 128  # powers of two up to which squares and their ratios are far from the ends of the range


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
    ``residuals``, shape (vessels, series), are y less the line; they mean nothing where the weight is 0.
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
    residuals: Floats

    def of(self, series: int) -> Fit:
        """The fit of one series, by its column."""
        return Fit(**{field.name: getattr(self, field.name)[series].item() for field in fields(Fit)})


def fit_lines(x: Floats, y: Floats, w: Floats, shift: Floats, sd: Floats | None = None) -> Fits:
    """Fit one line per column and extrapolate it to y = 0.

    Parameters
    ----------
    x : contents added, shape (vessels, series)
    y : volume-corrected signals, same shape
    w : weight of a vessel that is fitted, in inverse proportion to the variance of its y; 0 for padding
    shift : dy/dB with its sign turned, by which y falls when the background rises; final volume over aliquot
    sd : standard deviation of y in a vessel of weight 1 where it is known otherwise, shape (series,): the
        uncertainties then follow from it, and from the residuals only where it is not a number

    Notes
    -----
    u(C0) = (s/|b|) sqrt(1/Sw + ybar²/(b² Sxx)) with C0 = a/b: the covariance of intercept and slope is in it, and no
    term for a separate reading of the unknown (Miller and Miller, Statistics and Chemometrics for Analytical
    Chemistry, chapter 5, with the weighted line there; Bruce and Gill, J. Chem. Educ. 76 (1999) 805).
    """
    portions = []
    with np.errstate(all="ignore"):  # what overflows or has no value is recognised by its result
        for part in in_portions(*x.shape):
            known = None if sd is None else sd[part]
            portions.append(_portion(x[:, part], y[:, part], w[:, part], shift[:, part], known))
    if len(portions) == 1:
        return portions[0]
    return Fits(*(np.concatenate([getattr(one, field.name) for one in portions], -1) for field in fields(Fits)))


def in_portions(rows: int, series: int) -> Iterator[slice]:
    """Slices of the series, each small enough for the cache with so many rows; at least one."""
    size = max(CELLS // max(rows, 1), 1)
    for start in range(0, max(series, 1), size):
        yield slice(start, start + size)


def total(rows: Floats) -> Floats:
    """Add up the vessels, which are the first axis, in their order."""
    added = np.zeros(rows.shape[1:])
    for row in rows:
        added += row
    return added


def exponents(rows: Floats) -> Powers:
    """The power of two that brings the largest magnitude of a series below one; scaling by it is exact.

    Vessels and series are the last two axes of ``rows``.
    """
    largest = np.abs(rows).max(axis=-2, initial=0.0)
    found: Powers = np.frexp(largest)[1].astype(np.int32, copy=False)
    return found


def _portion(x: Floats, y: Floats, w: Floats, shift: Floats, sd: Floats | None) -> Fits:
    """Fit as the numbers are; only columns near the ends of the range are scaled, by powers of two, and back."""
    points = np.empty((3, *x.shape))
    points[0], points[1], points[2] = x, y, shift
    powers = exponents(points[:2])
    outside = np.abs(powers) > _WITHIN
    if not outside.any():
        return _fitted(points, w, sd, np.ldexp(DUST, powers))
    far = np.where(outside, powers, np.int32(0))
    points[:2] = np.ldexp(points[:2], -far[:, np.newaxis])
    known = None if sd is None else np.ldexp(sd, -far[1])
    return _scaled_back(_fitted(points, w, known, np.ldexp(DUST, powers - far)), far[0], far[1])


def _fitted(points: Floats, w: Floats, sd: Floats | None, dust: Floats) -> Fits:
    """Lines through ``points``, shape (3, vessels, series) of x, y and shift, which is written over.

    ``dust``, shape (2, series), is what is rounding only in x and in y.
    """
    x_dust, y_dust = dust
    sums = np.empty((5, *w.shape))
    np.greater(w, 0.0, out=sums[0])
    sums[1] = w
    np.multiply(w, points, out=sums[2:])
    added = total(sums.swapaxes(0, 1))
    n, sw = added[0], added[1]
    x_mean, y_mean, shift_mean = means = added[2:] / sw
    points[:2] -= means[:2, np.newaxis]
    dx, dy, _ = points
    products = sums[:4]
    np.multiply(w * dx, points, out=products[:3])
    np.multiply(w * dy, dy, out=products[3])
    sxx, sxy, sx_shift, syy = squares = total(products.swapaxes(0, 1))
    slope, shift_slope = squares[1:3] / sxx
    residuals = dy - slope * dx
    dof = n - 2.0
    s = np.sqrt(total(w * residuals * residuals) / dof)
    s[dof <= 0.0] = np.nan
    exact = s <= y_dust
    s[exact] = 0.0
    known = s if sd is None else np.where(np.isnan(sd), s, sd)
    intercept = y_mean - slope * x_mean
    content = intercept / slope
    y_over_slope = y_mean / slope
    spread = np.sqrt(sxx)
    u_slope = known / spread
    per_weight = 1.0 / sw
    step = spread / np.sqrt(sw)
    height = np.abs(slope)
    return Fits(
        vessels=n,
        weight=sw,
        dof=dof,
        slope=slope,
        slope_uncertainty=u_slope,
        intercept=intercept,
        intercept_uncertainty=known * np.sqrt(per_weight + x_mean * x_mean / sxx),
        covariance=-x_mean * u_slope * u_slope,
        residual_sd=s,
        correlation=np.maximum(-1.0, np.minimum(1.0, sxy / (spread * np.sqrt(syy)))),
        x_mean=x_mean,
        sxx=sxx,
        spread=spread,
        content=content,
        fit_uncertainty=known / height * np.sqrt(per_weight + y_over_slope * y_over_slope / sxx),
        background_effect=-((shift_mean - shift_slope * x_mean) - content * shift_slope) / slope,
        exact=exact,
        flat=height * step <= y_dust,
        one_x=step <= x_dust,
        residuals=residuals,
    )


def _scaled_back(fits: Fits, x_power: Powers, y_power: Powers) -> Fits:
    """The same fits in the unit of x times 2^x_power and of y times 2^y_power."""
    powers = {
        "slope": y_power - x_power,
        "slope_uncertainty": y_power - x_power,
        "intercept": y_power,
        "intercept_uncertainty": y_power,
        "covariance": 2 * y_power - x_power,
        "residual_sd": y_power,
        "x_mean": x_power,
        "sxx": 2 * x_power,
        "spread": x_power,
        "content": x_power,
        "fit_uncertainty": x_power,
        "background_effect": x_power - y_power,
        "residuals": y_power,
    }
    return replace(fits, **{name: np.ldexp(getattr(fits, name), power) for name, power in powers.items()})
