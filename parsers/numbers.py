"""Numbers as instruments write them. A number that could be read in two ways refuses the file; nothing is guessed."""

from __future__ import annotations

import math
import re
from collections.abc import Iterable
from dataclasses import dataclass

from spikeward.rules.records import Unreadable

_MINUS = str.maketrans({"\u2212": "-", "\u2013": "-"})
_BLANKS = "[ \u00a0\u202f\u2009']"
_EXPONENT = r"(?:[eE][+-]?\d{1,4})?"
_PLAIN = re.compile(rf"[+-]?\d+{_EXPONENT}", re.ASCII)
_POINT = re.compile(
    rf"[+-]?(?:\d+|\d{{1,3}}(?:,\d{{3}})+|\d{{1,3}}(?:{_BLANKS}\d{{3}})+)?(?:\.\d*)?{_EXPONENT}", re.ASCII
)
_COMMA = re.compile(
    rf"[+-]?(?:\d+|\d{{1,3}}(?:\.\d{{3}})+|\d{{1,3}}(?:{_BLANKS}\d{{3}})+)?(?:,\d*)?{_EXPONENT}", re.ASCII
)
_GROUPED_COMMA = re.compile(r"[+-]?[1-9]\d{0,2}(?:,\d{3})+", re.ASCII)  # 1,234: thousands, or a decimal comma
_GROUPED_POINT = re.compile(r"[+-]?[1-9]\d{0,2}(?:\.\d{3})+", re.ASCII)
_STRICT = {"point": re.compile(rf"[+-]?(?:\d+(?:\.\d*)?|\.\d+){_EXPONENT}", re.ASCII),
           "comma": re.compile(rf"[+-]?(?:\d+(?:,\d*)?|,\d+){_EXPONENT}", re.ASCII)}  # fmt: skip


@dataclass(frozen=True, slots=True)
class Cell:
    """The text of a numeric cell and its place, for the sentence that refuses it."""

    text: str
    row: int
    column: str


def decimal_sign(declared: str, cells: Iterable[Cell]) -> str:
    """The decimal sign of a file, ``point`` or ``comma``.

    Declared, it is taken as said. Otherwise every numeric cell is asked: a file in which one cell can only be read one
    way is read that way throughout; a file in which that never happens, but marks occur, is refused.

    Raises
    ------
    Unreadable : the cells contradict each other, or all of them could be read both ways
    """
    if declared in ("point", "comma"):
        return declared
    only: dict[str, Cell] = {}
    either: Cell | None = None
    for cell in cells:
        text = _bare(cell.text)
        if _PLAIN.fullmatch(text):
            continue
        point = _is_number(text, _POINT) and not _GROUPED_POINT.fullmatch(text)
        comma = _is_number(text, _COMMA) and not _GROUPED_COMMA.fullmatch(text)
        if _GROUPED_COMMA.fullmatch(text) or _GROUPED_POINT.fullmatch(text):
            both = text.count(",") == 1 or text.count(".") == 1
            if both:
                either = either or cell
                continue
            point, comma = "," in text, "." in text
        if point and not comma:
            only.setdefault("point", cell)
        elif comma and not point:
            only.setdefault("comma", cell)
    if len(only) == 2:
        one, other = only["point"], only["comma"]
        raise Unreadable(
            f"'{one.text}' (row {one.row}) has a decimal point and '{other.text}' (row {other.row}) a decimal comma; "
            "declare 'decimal' of the reader and export the file again",
            other.row,
            other.column,
        )
    if not only and either is not None:
        raise Unreadable(
            f"'{either.text}' can be read in two ways, with thousands or with decimals; "
            "declare 'decimal: point' or 'decimal: comma' of the reader",
            either.row,
            either.column,
        )
    return next(iter(only), "point")


def number(cell: Cell, sign: str) -> float:
    """Read one number with a known decimal sign. Thousands marks are refused unless they are blanks or apostrophes.

    Raises
    ------
    Unreadable : it is not a finite number, or it uses the other sign
    """
    text = re.sub(rf"(?<=\d){_BLANKS}(?=\d{{3}})", "", _bare(cell.text))
    mark, other = (".", ",") if sign == "point" else (",", ".")
    grouped = _POINT if sign == "point" else _COMMA
    if other in text and mark in text and _is_number(text, grouped):
        text = text.replace(other, "")  # 1.234,5: both signs stand there, so the other one groups thousands
    if not _STRICT[sign].fullmatch(text):
        hint = f"; the decimal sign is a {sign}, correct 'decimal' of the reader" if other in text else ""
        raise Unreadable(f"'{cell.text}' is not a number{hint}", cell.row, cell.column)
    value = float(text.replace(",", "."))
    if not math.isfinite(value):
        raise Unreadable(f"'{cell.text}' is too large for a number", cell.row, cell.column)
    return value


def looks_numeric(text: str) -> bool:
    """Whether a text is a number under one of the two decimal signs."""
    bare = _bare(text)
    return _is_number(bare, _POINT) or _is_number(bare, _COMMA)


def _bare(text: str) -> str:
    return text.strip().translate(_MINUS)


def _is_number(text: str, pattern: re.Pattern[str]) -> bool:
    return pattern.fullmatch(text) is not None and any(character.isdigit() for character in text)
