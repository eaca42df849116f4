"""Theil and Sen's line beside the fitted one: medians, which a single bad vessel does not move.

It is a comparison and never the result: with the few vessels of a standard addition it wastes what least squares uses.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, fields

import numpy as np

from spikeward.rules.solve.line import Floats, in_portions


@dataclass(frozen=True, slots=True)
class Medians:
    """One entry per series: ``slope`` in y per x, ``intercept`` in y, ``content`` = intercept/slope in x.

    Not a number where all x are equal; the content is not finite where the slope is zero.
    """

    slope: Floats
    intercept: Floats
    content: Floats


def theil_sen(x: Floats, y: Floats, w: Floats) -> Medians:
    """The median of the slopes between any two vessels of different x, and the median of y - slope x.

    P. K. Sen, J. Am. Stat. Assoc. 63 (1968) 1379 (from memory).

    Parameters
    ----------
    x, y : contents added and volume-corrected signals, shape (vessels, series)
    w : above 0 for a vessel that counts, however much it weighs; 0 for padding
    """
    vessels, series = x.shape
    pairs = vessels * (vessels - 1) // 2
    with np.errstate(all="ignore"):  # what has no value is recognised by its result
        parts = [_portion(x[:, part], y[:, part], w[:, part]) for part in in_portions(pairs, series)]
    return Medians(*(np.concatenate([getattr(one, field.name) for one in parts]) for field in fields(Medians)))


def _portion(x: Floats, y: Floats, w: Floats) -> Medians:
    x = np.where(w > 0.0, x, math.nan)
    vessels, series = x.shape
    slopes = np.empty((vessels * (vessels - 1) // 2, series))
    filled = 0
    for row in range(1, vessels):
        apart = x[row] - x[:row]
        np.divide(y[row] - y[:row], np.where(apart == 0.0, math.nan, apart), out=slopes[filled : filled + row])
        filled += row
    slope = _median(slopes)
    intercept = _median(y - slope * x)
    return Medians(slope, intercept, intercept / slope)


def _median(rows: Floats) -> Floats:
    """The median of each column; what is not a number does not count."""
    if not len(rows):
        return np.full(rows.shape[1], math.nan)
    count = np.count_nonzero(~np.isnan(rows), axis=0)
    ordered = np.sort(rows + 0.0, axis=0)  # what is not a number comes last, and zero has one sign
    lower, upper = (
        np.take_along_axis(ordered, np.maximum(place, 0)[np.newaxis], 0)[0] for place in ((count - 1) // 2, count // 2)
    )
    middle: Floats = np.where(count > 0, 0.5 * lower + 0.5 * upper, math.nan)
    return middle
