"""Fieller's interval of intercept over slope.

The content is a ratio of two estimates that belong together, so its interval is not symmetric, and where the slope does
not differ from zero it has no end (E. C. Fieller, J. R. Statist. Soc. B 16 (1954) 175).
"""

from __future__ import annotations

import math
from functools import lru_cache

from scipy.special import stdtrit


@lru_cache(maxsize=4096)
def t_quantile(degrees_of_freedom: int, coverage: float) -> float:
    """The factor t that spans ``coverage`` in the middle of Student's distribution.

    Parameters
    ----------
    degrees_of_freedom : at least 1
    coverage : such as 0.95
    """
    return float(stdtrit(degrees_of_freedom, 0.5 + coverage / 2.0))


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
    reach = math.sqrt(g) / (1.0 - g)
    middle = content + x_mean
    half = reach * math.hypot(math.sqrt((1.0 - g) / weight) * spread, middle)
    offset = reach * math.sqrt(g) * middle
    return half - offset, half + offset
