"""Numbers by the declared decimal sign, or by the one that all numeric cells of a file agree on; never by a guess."""

from __future__ import annotations

import math
import re
from collections.abc import Iterable
from typing import NamedTuple

from spikeward.rules.records import Unreadable

POINT, COMMA = ".", ","
_OTHER = {POINT: COMMA, COMMA: POINT}
_DECLARED = {"point": POINT, "comma": COMMA}
_NAMES = {POINT: "point", COMMA: "comma"}

_LONGEST = 60  # characters of a number
_SPACES = " \N{NO-BREAK SPACE}\N{NARROW NO-BREAK SPACE}\N{THIN SPACE}'\N{RIGHT SINGLE QUOTATION MARK}"
_DROP_SPACES = dict.fromkeys(map(ord, _SPACES))


def _pattern(sign: str, marks: str) -> re.Pattern[str]:
    """Numbers with ``sign`` as decimal sign; marks of thousands are of one kind, and stand before groups of three."""
    decimal = re.escape(sign)
    grouped = rf"[1-9]\d{{0,2}}(?P<mark>[{re.escape(marks)}])\d{{3}}(?:(?P=mark)\d{{3}})*(?:{decimal}\d*)?"
    plain = rf"(?:\d+(?:{decimal}\d*)?|{decimal}\d+)(?:[eE][+-]?\d{{1,4}})?"
    return re.compile(rf"[+-]?(?:{plain}|{grouped})", re.ASCII)


_STRICT = {sign: _pattern(sign, _SPACES) for sign in _OTHER}
_OPEN = {sign: _pattern(sign, _SPACES + other) for sign, other in _OTHER.items()}


class Cell(NamedTuple):
    """A cell with its place: row of the file, and heading of the column."""

    text: str
    row: int
    column: str


class Numbers:
    """How the numbers of one file are read: the decimal sign, and whether the other sign may mark thousands."""

    def __init__(self, sign: str, marks: bool = False) -> None:
        self.sign = sign
        self._marks = marks
        self._pattern = (_OPEN if marks else _STRICT)[sign]

    def plain(self, cell: Cell) -> str:
        """The digits of a number with a point as decimal sign and without marks of thousands.

        Raises
        ------
        Unreadable : the cell holds no number, or one written with the other decimal sign
        """
        text = _tidy(cell.text)
        if len(text) > _LONGEST or self._pattern.fullmatch(text) is None:
            raise _not_a_number(cell, self.sign)
        text = text.translate(_DROP_SPACES)
        if self._marks:
            text = text.replace(_OTHER[self.sign], "")
        return text.replace(self.sign, POINT)

    def value(self, cell: Cell) -> float:
        """The number as a float; minus nought is nought.

        Raises
        ------
        Unreadable : the cell holds no number, or one that no signal can have
        """
        text = self.plain(cell)
        value = float(text)
        lost = value == 0.0 and re.search("[1-9]", re.split("[eE]", text)[0])
        if math.isinf(value) or lost:
            raise Unreadable(f"'{_shown(cell.text)}' is too large or too small to be a signal", cell.row, cell.column)
        return value + 0.0

    def count(self, cell: Cell) -> int:
        """A whole number from nought on.

        Raises
        ------
        Unreadable : the cell holds anything else
        """
        value = self.value(cell)
        if value != int(value) or value < 0:
            raise Unreadable(f"'{_shown(cell.text)}' is not a whole number", cell.row, cell.column)
        return int(value)


def numbers_of(cells: Iterable[Cell], declared: str) -> Numbers:
    """Decide how the numbers of a file are read.

    Parameters
    ----------
    cells : every numeric cell of the file
    declared : point, comma, or auto: the one sign that all cells allow

    Raises
    ------
    Unreadable : a cell holds no number, the cells contradict each other, or they can be read both ways
    """
    if declared in _DECLARED:
        return Numbers(_DECLARED[declared])
    doubtful: Cell | None = None
    deciding: dict[str, Cell] = {}
    for cell in cells:
        text = _tidy(cell.text)
        possible = [sign for sign, pattern in _OPEN.items() if len(text) <= _LONGEST and pattern.fullmatch(text)]
        if not possible:
            raise _not_a_number(cell)
        if len(possible) == 1:
            deciding.setdefault(possible[0], cell)
        elif doubtful is None and (POINT in text or COMMA in text):
            doubtful = cell
    if len(deciding) == 2:
        raise _contradiction(*deciding.items())
    if deciding:
        return Numbers(next(iter(deciding)), marks=True)
    if doubtful is not None:
        raise Unreadable(
            f"'{_shown(doubtful.text)}' can be read with a decimal point or with a decimal comma, and no number of the "
            "file tells which; declare decimal: point or decimal: comma",
            doubtful.row,
            doubtful.column,
        )
    return Numbers(POINT)


def _contradiction(first: tuple[str, Cell], second: tuple[str, Cell]) -> Unreadable:
    (sign, cell), (other, earlier) = second, first
    return Unreadable(
        f"'{_shown(cell.text)}' has a decimal {_NAMES[sign]}, but '{_shown(earlier.text)}' in row {earlier.row} has a "
        f"decimal {_NAMES[other]}; a file has one decimal sign, so correct it and declare decimal",
        cell.row,
        cell.column,
    )


def _tidy(text: str) -> str:
    return text.strip().replace("\N{MINUS SIGN}", "-")


def _shown(text: str) -> str:
    return text if len(text) <= _LONGEST else f"{text[:_LONGEST]}…"


def _not_a_number(cell: Cell, sign: str = "") -> Unreadable:
    text = _tidy(cell.text)
    if sign and len(text) <= _LONGEST and any(pattern.fullmatch(text) for pattern in _OPEN.values()):
        told = f"has a {_NAMES[_OTHER[sign]]}, but its decimal sign is the {_NAMES[sign]}"
        return Unreadable(f"'{_shown(cell.text)}' {told}; correct the cell, or decimal", cell.row, cell.column)
    return Unreadable(
        f"'{_shown(cell.text)}' is not a number; correct it, or declare the word under not_detected or over_range",
        cell.row,
        cell.column,
    )
