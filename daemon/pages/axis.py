"""An axis with round ticks, for numbers of any size: the power of ten that they share goes into the axis' name."""

from __future__ import annotations

from dataclasses import dataclass
from decimal import Decimal

from spikeward.daemon.pages.numbers import typeset

_PLAIN = range(-3, 5)  # powers of ten of the largest number for which labels carry no power


@dataclass(frozen=True, slots=True)
class Axis:
    """``low`` to ``high`` in units of ten to the ``power``; ``ticks`` are (share of the way, label)."""

    power: int
    low: float
    high: float
    ticks: tuple[tuple[float, str], ...]

    def share(self, value: float) -> float:
        """Where a value lies between the ends, 0 to 1; exact powers of ten keep the smallest numbers apart."""
        return (float(Decimal(value).scaleb(-self.power)) - self.low) / (self.high - self.low)

    def titled(self, name: str, unit: str) -> str:
        """The axis' name with its power of ten and unit: ``Cd added, 10⁻⁹ mol/L``."""
        power = typeset(f"x10^{self.power}").removeprefix(" × ") if self.power else ""
        measure = " ".join(part for part in (power, unit) if part)
        return f"{name}, {measure}" if measure else name


def axis_over(low: float, high: float, wanted: int) -> Axis:
    """An axis that covers ``low`` to ``high`` with about ``wanted`` ticks at 1, 2 or 5 times a power of ten.

    Parameters
    ----------
    low, high : finite, low <= high; equal ends get room on both sides
    """
    largest = max(abs(low), abs(high))
    top = Decimal(largest).adjusted() if largest else 0
    power = 0 if top in _PLAIN else top
    ends = [Decimal(end).scaleb(-power) for end in (low, high)]
    if ends[0] == ends[1]:
        ends = [ends[0] - 1, ends[1] + 1]
    step = _round_step((ends[1] - ends[0]) / wanted)
    first = (ends[0] / step).to_integral_value(rounding="ROUND_FLOOR")
    last = (ends[1] / step).to_integral_value(rounding="ROUND_CEILING")
    places = max(0, -int(step.normalize().as_tuple().exponent))
    ticks = tuple(
        (count / int(last - first), typeset(f"{step * (int(first) + count) + 0:.{places}f}"))
        for count in range(int(last - first) + 1)
    )
    return Axis(power, float(first * step), float(last * step), ticks)


def _round_step(least: Decimal) -> Decimal:
    """The smallest of 1, 2, 5 times a power of ten that is not below ``least``."""
    unit = Decimal(1).scaleb(least.adjusted())
    return next(unit * factor for factor in (1, 2, 5, 10) if unit * factor >= least)
