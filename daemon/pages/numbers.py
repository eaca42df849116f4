"""Numbers for people and for programs: twelve significant digits for these, the place of the uncertainty for those."""

from __future__ import annotations

import math
import re

from spikeward.rules.outcomes import Estimate
from spikeward.rules.rounding import figure, percent, rounded
from spikeward.rules.words import unit_words

MINUS = "\N{MINUS SIGN}"
NOTHING = "\N{EN DASH}"
_RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
_POWER = re.compile(r"x10\^(-?\d+)")


def twelve_digits(value: float | None) -> float | None:
    """The number rounded to 12 significant digits, as machine output carries it; None where it is not finite.

    The shortest text of the returned float never has more than 12 significant digits.
    """
    if value is None or not math.isfinite(value):
        return None
    return float(format(value, ".12g")) + 0.0  # adding zero takes the sign off a negative zero


def machine(value: float | None) -> str:
    """Text of ``twelve_digits``, empty where there is no number; the decimal sign is a point in every locale."""
    if value is None or not math.isfinite(value):
        return ""
    return format(value + 0.0, ".12g")


def typeset(text: str) -> str:
    """A number as it is printed: a true minus sign, and ``x10^-7`` as a power of ten with raised digits."""
    powers = _POWER.sub(lambda match: f" × 10{match[1].translate(_RAISED)}", text)
    return powers.replace("-", MINUS)


def shown(value: float | None, digits: int = 5) -> str:
    """A single number for a page, to some significant figures; a dash where there is none."""
    if value is None or not math.isfinite(value):
        return NOTHING
    return typeset(figure(value, digits))


def shown_percent(fraction: float) -> str:
    """A fraction in per cent for a page."""
    return typeset(percent(fraction))


def with_unit(number: str, unit: str) -> str:
    """A number's text and its unit."""
    return f"{number} {unit_words(unit)}".rstrip()


def value_shown(estimate: Estimate) -> str:
    """Content, expanded uncertainty where there is one, and unit: ``2.31 ± 0.18 mg/kg``."""
    spread = estimate.expanded_uncertainty
    if not math.isfinite(estimate.content):
        return NOTHING
    if spread is None or not math.isfinite(spread) or spread <= 0:
        return with_unit(shown(estimate.content, 3), estimate.unit)
    value, half = rounded(estimate.content, spread)
    power = _POWER.search(value)
    if power is None:
        return with_unit(typeset(f"{value} ± {half}"), estimate.unit)
    bare = f"({_POWER.sub('', value)} ± {_POWER.sub('', half)}){power[0]}"
    return with_unit(typeset(bare), estimate.unit)


def interval_shown(estimate: Estimate) -> str:
    """The interval to the place of the uncertainty, ``2.15 to 2.51 mg/kg``; empty where there is none."""
    if estimate.interval is None or not all(map(math.isfinite, estimate.interval)):
        return ""
    spread = estimate.expanded_uncertainty or 0.0
    low, high = (rounded(end, spread)[0] for end in estimate.interval)
    return with_unit(typeset(f"{low} to {high}"), estimate.unit)


def coverage_shown(estimate: Estimate) -> str:
    """How the expanded uncertainty is meant, ``95 %, k 2.4``, or why there is none."""
    if estimate.expanded_uncertainty is None:
        return f"no uncertainty: {estimate.reason or 'it was not calculated'}"
    words = shown_percent(estimate.coverage)
    if estimate.coverage_factor is not None:
        words += f", k {shown(estimate.coverage_factor, 2)}"
    return f"{words}; {estimate.reason}" if estimate.reason else words
