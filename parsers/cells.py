"""What a cell says besides plain text: a signal or the word in its place, and a quantity with its unit."""

from __future__ import annotations

import re
from collections.abc import Sequence

from spikeward.parsers.headings import folded, tidy
from spikeward.parsers.numbers import Cell, Numbers
from spikeward.rules.quantities import parse_quantity, unit_code
from spikeward.rules.records import FAULTY, MEASURED, MISSING, NOT_DETECTED, OVER_RANGE, Unreadable

_CONTENT = ("mass per volume", "amount per volume", "mass per mass", "amount per mass")
_EITHER = ("volume", "mass")
_DIMENSIONS = {
    "mass": ("mass",),
    "volume": ("volume",),
    "digest": _EITHER,
    "dry_matter": ("fraction",),
    "moisture": ("fraction",),
    "aliquot": _EITHER,
    "addition": (*_EITHER, "amount"),
    "final": _EITHER,
    "internal_standard": _EITHER,
    "spike": _EITHER,
    "content": _CONTENT,
}
_SUCH_AS = {"mass": "g", "dry_matter": "%", "moisture": "%", "content": "ug/L"}

QUANTITIES = (*_DIMENSIONS, "dilution", "standard")
"""The meanings of columns that describe how a solution was made."""

IDENTITIES = ("reading", "block")
"""The meanings of columns whose text tells rows of one solution apart."""

_TEXTS = ("standard", *IDENTITIES)

_PARTS = re.compile(
    "([+\\-\N{MINUS SIGN}]?[0-9.,'\N{RIGHT SINGLE QUOTATION MARK}\\s]*(?:[eE][+-]?[0-9]+)?)(.*)", re.DOTALL
)
_BY_SIGN = {"": MISSING, "<": NOT_DETECTED, "≤": NOT_DETECTED, ">": OVER_RANGE, "≥": OVER_RANGE, "#": FAULTY}


class Words:
    """The words that stand in place of a signal, as declared; ``<``, ``>``, ``#`` and an empty cell need none."""

    def __init__(self, not_detected: Sequence[str], over_range: Sequence[str]) -> None:
        self._declared = {folded(word): NOT_DETECTED for word in not_detected}
        self._declared |= {folded(word): OVER_RANGE for word in over_range}
        self._known: dict[str, str] = {}

    def qualifier(self, text: str) -> str:
        """What a signal cell is: measured (then it must be a number), or one of the qualifiers."""
        if text not in self._known:
            self._known[text] = self._qualifier(folded(text))
        return self._known[text]

    def _qualifier(self, shown: str) -> str:
        return self._declared.get(shown) or _BY_SIGN.get(shown[:1], MEASURED)


def number_part(meaning: str, cell: Cell) -> Cell | None:
    """The numeric part of a quantity's cell; None for an empty cell and for what is no number by its meaning."""
    if not cell.text or meaning in _TEXTS:
        return None
    number, unit = _parts(cell.text)
    if meaning == "dilution" and (unit or not number):
        return None
    return Cell(number or cell.text, cell.row, cell.column)


def quantity_text(meaning: str, cell: Cell, unit: str, numbers: Numbers) -> str:
    """A quantity in the one form that rules read, such as ``0.5012 g``; empty where nothing is given.

    Parameters
    ----------
    unit : of the heading or of the row of units, or empty

    Raises
    ------
    Unreadable : the cell holds no number, no unit, an unknown one, or one that measures something else
    """
    number = number_part(meaning, cell)
    if number is None:
        return tidy(cell.text)
    if meaning == "dilution":
        return numbers.plain(number)
    own = _parts(cell.text)[1]
    if own and unit and unit_code(own) != unit_code(unit):
        raise Unreadable(f"'{cell.text}' and its heading ({unit}) name different units", cell.row, cell.column)
    if not (own or unit):
        heading = f"{cell.column} [{_SUCH_AS.get(meaning, 'mL')}]"
        raise Unreadable(
            f"'{cell.text}' has no unit; write it in the heading, such as {heading}, or in the cell",
            cell.row,
            cell.column,
        )
    try:
        quantity = parse_quantity(f"{numbers.plain(number)} {own or unit}")
    except ValueError as error:
        raise Unreadable(str(error), cell.row, cell.column) from None
    if quantity.dimension not in _DIMENSIONS[meaning]:
        raise Unreadable(
            f"'{cell.text}' is a {quantity.dimension}, not a {meaning.replace('_', ' ')}; correct the column or unit",
            cell.row,
            cell.column,
        )
    return str(quantity)


def _parts(text: str) -> tuple[str, str]:
    found = _PARTS.fullmatch(text.strip())
    return (found[1].strip(), found[2].strip()) if found else ("", text.strip())
