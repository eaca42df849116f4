"""Headings and units as people write them: compared without regard to width, capitals and blanks around them."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Iterable, Sequence
from functools import lru_cache
from typing import NamedTuple

from spikeward.rules.records import Unreadable

_WITH_UNIT = (
    re.compile(r"(?P<name>.*\S)\s*\[(?P<unit>[^\[\]]*)\]"),
    re.compile(r"(?P<name>.*\S)\s*\((?P<unit>[^()]*)\)"),
    re.compile(r"(?P<name>.*?\S)(?:\s+/\s*|\s*/\s+)(?P<unit>\S.*)"),
)
_LONGEST = 200  # characters of a heading with a unit
_BRACKETED = re.compile(r"\[([^\[\]]*)\]|\(([^()]*)\)")


def tidy(text: str) -> str:
    """A text with compatible characters folded and blanks collapsed; capitals are kept."""
    return " ".join((text if text.isascii() else unicodedata.normalize("NFKC", text)).split())


def folded(text: str) -> str:
    """A text as it is compared."""
    return tidy(text).casefold()


def unit_text(text: str) -> str:
    """A unit as it stands in a cell or heading, without brackets around it; its micro sign is that of keyboards."""
    shown = tidy(text)
    found = _BRACKETED.fullmatch(shown)
    bare = (found[1] or found[2] or "").strip() if found else shown
    return bare.replace("\N{GREEK SMALL LETTER MU}", "\N{MICRO SIGN}")


class Heading(NamedTuple):
    """A heading cell: as it stands, and every way to part it into a name (folded) and a unit."""

    text: str
    ways: tuple[tuple[str, str], ...]


@lru_cache(maxsize=4096)
def heading(text: str) -> Heading:
    """Understand a heading cell; the way that takes all of it as the name stands first."""
    shown = tidy(text)
    ways = [(shown.casefold(), "")]
    for pattern in _WITH_UNIT if len(shown) <= _LONGEST else ():
        found = pattern.fullmatch(shown)
        if found:
            ways.append((found["name"].casefold(), found["unit"].strip()))
    return Heading(shown, tuple(ways))


class Column(NamedTuple):
    """Where a declared column stands: position from 0, the heading as it stands in the file, and its unit if any."""

    position: int
    heading: str
    unit: str
    verbatim: bool  # declared as it stands, unit included


def holds(headings: Sequence[Heading], wanted: str) -> bool:
    """Whether a row of headings holds one that was declared."""
    name = folded(wanted)
    return any(name == way for each in headings for way, _ in each.ways)


def column(headings: Sequence[Heading], wanted: str, row: int) -> Column:
    """The column of a declared heading.

    Raises
    ------
    Unreadable : no column has this heading, or several have
    """
    name = folded(wanted)
    whole = [position for position, each in enumerate(headings) if each.ways[0][0] == name]
    found = whole or [position for position, each in enumerate(headings) if any(name == way for way, _ in each.ways)]
    if not found:
        raise Unreadable(f"no column has the heading '{wanted}'; export it, or correct columns in the rule file", row)
    if len(found) > 1:
        told = " and ".join(str(position + 1) for position in found)
        raise Unreadable(
            f"the heading '{wanted}' stands over columns {told}; rename one of them, or declare the full heading",
            row,
            wanted,
        )
    position = found[0]
    ways = headings[position].ways
    unit = next((unit for way, unit in ways if unit and (whole or way == name)), "")
    return Column(position, headings[position].text or f"{position + 1}", unit, bool(whole))


def lacking(headings: Sequence[Heading], wanted: Iterable[str]) -> list[str]:
    """The declared headings that a row does not hold."""
    return [each for each in wanted if not holds(headings, each)]
