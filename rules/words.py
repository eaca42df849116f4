"""Small words that many sentences share: lines, units, counts and lists as an analyst writes them."""

from __future__ import annotations

from collections.abc import Sequence

from spikeward.rules.quantities import UNITS

_LISTED_AT_MOST = 3


def line_words(analyte: str, line: str) -> str:
    """An analyte and its spectral line as people say them: the line alone where it names the analyte."""
    return (line if analyte in line else f"{analyte} {line}") if line else analyte


def unit_words(code: str) -> str:
    """A unit of the table as people write it: micro by its own letter, nothing for a plain number."""
    if code == "1":
        return ""
    return f"µ{code[1:]}" if code.startswith("u") and code in UNITS else code


def counted(count: int, noun: str, rest: str = "") -> str:
    """A count with its noun, ``1 degree of freedom`` or ``2 degrees of freedom``; ``rest`` follows the noun."""
    return f"{count} {noun}{'' if count == 1 else 's'}{rest and f' {rest}'}"


def freedom(count: int) -> str:
    """Degrees of freedom with their number."""
    return counted(count, "degree", "of freedom")


def listed(names: Sequence[str], last: str = "and") -> str:
    """Names in a sentence: all of a few, of many the first three and how many more there are."""
    if len(names) > _LISTED_AT_MOST + 1:  # one more is named rather than counted
        return f"{', '.join(names[:_LISTED_AT_MOST])} {last} {len(names) - _LISTED_AT_MOST} more"
    return f" {last} ".join(part for part in (", ".join(names[:-1]), *names[-1:]) if part)
