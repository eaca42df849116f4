"""Numbers as people read them: a result to the place that its uncertainty carries. The decimal sign is a point."""

from __future__ import annotations

from collections.abc import Iterable
from decimal import ROUND_HALF_EVEN, Context, Decimal

_EXACT = Context(prec=1100, rounding=ROUND_HALF_EVEN)  # wide enough for every digit of every float
_PLAIN_FROM, _PLAIN_TO = -5, 7  # powers of ten of the leading digit that are still written in plain digits

_TOLD_APART_BY = 15  # significant digits; what agrees in so many is equal


def rounded(value: float, uncertainty: float) -> tuple[str, str]:
    """A result and its uncertainty for a report: the uncertainty to two significant figures, the result to its place.

    Parameters
    ----------
    value, uncertainty : finite, in one unit; the uncertainty is standard or expanded

    Returns
    -------
    value and uncertainty as text with the same number of decimals; very large or small ones as ``(2.31±0.18)x10^n``
    with both sharing the power. Without an uncertainty above zero the value has three significant figures.

    Notes
    -----
    Two significant figures and the same place for the result: JCGM 100:2008, 7.2.6.
    """
    if not uncertainty > 0:
        return figure(value), "0"
    exact, spread = Decimal(value), Decimal(uncertainty)
    place = _rounded_at(spread, spread.adjusted() - 1).adjusted() - 1
    exact, spread = _rounded_at(exact, place), _rounded_at(spread, place)
    top = max(spread.adjusted(), exact.adjusted() if exact else spread.adjusted())
    if _PLAIN_FROM < top < _PLAIN_TO:
        return _plain(exact, place), _plain(spread, place)
    power = f"x10^{top}"
    return (
        _plain(exact.scaleb(-top, _EXACT), place - top) + power,
        _plain(spread.scaleb(-top, _EXACT), place - top) + power,
    )


def figure(value: float, digits: int = 3, full: bool = False) -> str:
    """A single number to some significant figures, in plain digits where that stays readable.

    Parameters
    ----------
    full : keep zeros at the end, which tell of a measured number how far it was read: 0.300, not 0.3
    """
    exact = Decimal(value)
    if not exact.is_finite():
        return "no number"
    if not exact:
        return "0"
    kept = str if full else _trimmed
    place = exact.adjusted() - digits + 1
    exact = _rounded_at(exact, place)
    top = exact.adjusted()
    place = top - digits + 1
    if _PLAIN_FROM < top < _PLAIN_TO:
        return kept(_plain(exact, place))
    return kept(_plain(exact.scaleb(-top, _EXACT), place - top)) + f"x10^{top}"


def percent(fraction: float, digits: int = 2) -> str:
    """A fraction in per cent, such as ``4.1 %``."""
    return f"{figure(fraction * 100, digits)} %"


def percent_apart(fraction: float, limits: Iterable[float], digits: int = 2) -> str:
    """A fraction in per cent with more digits where it would otherwise look equal to a limit that it is not.

    Parameters
    ----------
    limits : as they stand beside it, in per cent to three significant figures
    """
    others = {percent(limit, 3) for limit in limits if limit != fraction}
    while percent(fraction, digits) in others and digits < _TOLD_APART_BY:
        digits += 1
    return percent(fraction, digits)


def _rounded_at(number: Decimal, place: int) -> Decimal:
    return number.quantize(Decimal(1).scaleb(place), context=_EXACT)


def _plain(number: Decimal, place: int) -> str:
    text = f"{number:.{max(0, -place)}f}"
    return text.lstrip("-") if not float(text) else text


def _trimmed(text: str) -> str:
    return text.rstrip("0").rstrip(".") if "." in text else text
