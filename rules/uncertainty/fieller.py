"""Fieller's interval of intercept over slope.

The content is a ratio of two estimates that belong together, so its interval is not symmetric, and where the slope does
not differ from zero it has no end (E. C. Fieller, J. R. Statist. Soc. B 16 (1954) 175). Every function stands twice,
for one series and for arrays of them; either is the same arithmetic, to the last digit.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from functools import lru_cache
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri, stdtrit

Floats = NDArray[np.float64]
Number = TypeVar("Number", float, Floats)

_LEAST = 2.0**-1022  # the smallest number that carries all digits


@lru_cache(maxsize=4096)
def t_quantile(degrees_of_freedom: float, coverage: float) -> float:
    """The factor t that spans ``coverage`` in the middle of Student's distribution.

    Parameters
    ----------
    degrees_of_freedom : at least 1; infinite where the standard deviation is known, then of the normal distribution
    coverage : such as 0.95
    """
    upper = 0.5 + coverage / 2.0
    return float(ndtri(upper) if math.isinf(degrees_of_freedom) else stdtrit(degrees_of_freedom, upper))


def t_quantiles(degrees_of_freedom: Floats, coverage: float) -> Floats:
    """``t_quantile`` of each series, not a number where it has no degree of freedom."""
    found = np.full(degrees_of_freedom.shape, math.nan)
    left = degrees_of_freedom > 0.0
    while left.any():  # once for each number that occurs, and those are few
        dof = degrees_of_freedom[left.argmax()].item()
        same = degrees_of_freedom == dof
        found[same] = t_quantile(dof, coverage)
        left &= ~same
    return found


def g_value(t: float, slope: float, slope_uncertainty: float) -> float:
    """g = t² u(b)² / b²: the slope differs from zero where it is below one.

    Parameters
    ----------
    slope, slope_uncertainty : in the same unit
    """
    if slope == 0.0:
        return math.inf
    ratio = t * (slope_uncertainty / slope)
    return ratio * ratio


def g_values(t: Floats, slope: Floats, slope_uncertainty: Floats) -> Floats:
    """``g_value`` of each series, not a number where t or the uncertainty is not known."""
    with np.errstate(all="ignore"):
        ratio = t * (slope_uncertainty / slope)
        g: Floats = ratio * ratio
    g[slope == 0.0] = math.inf
    return g


def half_widths(content: float, x_mean: float, spread: float, weight: float, g: float) -> tuple[float, float]:
    """The lower and the upper half of Fieller's interval around intercept over slope.

    The ends are the roots C of (a - b C)² = t² (u_a² - 2 C u_ab + C² u_b²), written so that nothing cancels.

    Parameters
    ----------
    content : a/b
    x_mean : weighted mean of the added contents
    spread : sqrt(Sxx), weighted, in the unit of content
    weight : sum of the weights, with equal weights of one the number of vessels
    g : below 1, see ``g_value``

    Returns
    -------
    both not negative, in the unit of content

    Raises
    ------
    ValueError : g is 1 or more, the interval has no end
    """
    if not g < 1.0:
        raise ValueError("the interval has no end: the slope does not differ from zero")
    return _halves(content + x_mean, spread, weight, g, math.sqrt, max, min)


def half_widths_each(
    content: Floats, x_mean: Floats, spread: Floats, weight: Floats, g: Floats
) -> tuple[Floats, Floats]:
    """``half_widths`` of each series, not finite where its interval has no end or g is not known."""
    with np.errstate(all="ignore"):
        return _halves(content + x_mean, spread, weight, g, np.sqrt, np.maximum, np.minimum)


def _halves(
    middle: Number,
    spread: Number,
    weight: Number,
    g: Number,
    root: Callable[[Number], Number],
    larger: Callable[..., Number],
    smaller: Callable[..., Number],
) -> tuple[Number, Number]:
    """With R = sqrt(g)/(1-g) the halves are R hypot(sqrt((1-g)/w) spread, middle) -+ R sqrt(g) middle."""
    bounded, rise = 1.0 - g, root(g)
    reach = rise / bounded
    level = root(bounded / weight) * spread
    height = abs(middle)
    longer = larger(larger(level, height), _LEAST)
    ratio = smaller(level, height) / longer
    half = reach * (longer * root(1.0 + ratio * ratio))
    offset = reach * rise * middle
    return half - offset, half + offset
