"""Text becomes rows of cells: the table is found by its headings, wherever it begins and whatever parts its cells."""

from __future__ import annotations

import csv
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import NamedTuple

from spikeward.parsers.headings import Heading, folded, heading, lacking
from spikeward.parsers.text import lines_of
from spikeward.rules.records import Unreadable

DELIMITERS = (";", "\t", "|", ",")  # the comma last, since it may be a decimal sign too
_PREAMBLE = 2000  # lines in which the headings are looked for
_MOST_LINES = 200_000
_NEAR = 200  # lines among which the nearest to a row of headings is looked for
_TALLEST = 20  # lines of one row of headings
_RUN = 200  # rows under the headings that tell delimiters apart


class Row(NamedTuple):
    """One row: the line of the file where it begins, counted from 1, and its cells without blanks around them."""

    number: int
    cells: tuple[str, ...]

    @property
    def blank(self) -> bool:
        """Whether nothing stands in any cell."""
        return not any(self.cells)


@dataclass(frozen=True, slots=True)
class Style:
    """How cells are written: the delimiter (or ``auto``), the quote, and what begins a comment line."""

    delimiter: str = "auto"
    quote: str = '"'
    comment_prefix: str = ""


class Grid(NamedTuple):
    """The rows from the headings on, and the headings as they were understood."""

    headings: tuple[Heading, ...]
    rows: tuple[Row, ...]  # the row of headings is the first


Lines = Sequence[tuple[int, str]]  # line of the file, text


def grid_of(text: str, style: Style, wanted: Sequence[str]) -> Grid:
    """Find the table whose headings hold all that is wanted.

    Raises
    ------
    Unreadable : no row holds the headings, a quote is not closed, or the file is longer than a table may be
    """
    if max(text.count("\n"), text.count("\r")) > _MOST_LINES:
        raise Unreadable(f"the file has more than {_MOST_LINES} lines; export less at once")
    lines = [
        (number, line)
        for number, line in enumerate(lines_of(text), start=1)
        if not (style.comment_prefix and line.lstrip().startswith(style.comment_prefix))
    ]
    if not any(line.strip() for _, line in lines):
        raise Unreadable("the file holds no text; export it again")
    found = _starts(lines, _likely(lines, wanted), 1, style, wanted)
    if not found:
        broken = [position for position, (_, line) in enumerate(lines[:_PREAMBLE]) if line.count(style.quote) % 2]
        found = _starts(lines, broken, _TALLEST, style, wanted)
    if not found:
        raise _no_headings(lines, style, wanted)
    start, delimiter = max(found, key=lambda each: _run(lines[each[0] :], each[1], style.quote))
    rows = tuple(_rows(lines[start:], delimiter, style.quote))
    return Grid(tuple(heading(cell) for cell in rows[0].cells), rows)


def _starts(
    lines: Lines, likely: Sequence[int], height: int, style: Style, wanted: Sequence[str]
) -> list[tuple[int, str]]:
    """By delimiter, the first of the likely positions where a row of headings begins, at most ``height`` lines tall."""
    found = []
    for delimiter in _delimiters(style):
        for position in likely:
            if not lacking(_headings(lines[position : position + height], delimiter, style.quote), wanted):
                found.append((position, delimiter))
                break
    return found


def _likely(lines: Lines, wanted: Sequence[str]) -> list[int]:
    """The positions of lines in which every wanted heading occurs, whatever separates the cells."""
    names = [folded(each) for each in wanted]
    found = []
    for position, (_, line) in enumerate(lines[:_PREAMBLE]):
        text = folded(line)
        if all(name in text for name in names):
            found.append(position)
    return found


def _headings(lines: Lines, delimiter: str, quote: str) -> list[Heading]:
    return [heading(cell) for cell in _cells(lines, delimiter, quote)]


def _run(lines: Lines, delimiter: str, quote: str) -> tuple[int, int]:
    """How many rows from the headings on have as many cells as these, and how many cells."""
    width, run = -1, 0
    for _, line in lines[:_RUN]:
        if not line.strip():
            continue
        count = len(_cells([(0, line)], delimiter, quote))
        width = count if width < 0 else width
        if count != width:
            break
        run += 1
    return run, width


def _delimiters(style: Style) -> Sequence[str]:
    return DELIMITERS if style.delimiter == "auto" else (style.delimiter,)


def _cells(lines: Lines, delimiter: str, quote: str) -> list[str]:
    """The cells of the first row, quotes taken as they come: what stands above a table is anybody's text."""
    texts = (text + "\n" for _, text in lines)
    try:
        return next(csv.reader(texts, delimiter=delimiter, quotechar=quote, skipinitialspace=True), [])
    except csv.Error:
        return []


def _rows(lines: Lines, delimiter: str, quote: str) -> Iterator[Row]:
    texts = (text + "\n" for _, text in lines)
    reader = csv.reader(texts, delimiter=delimiter, quotechar=quote, skipinitialspace=True, strict=True)
    begun = 0
    try:
        for cells in reader:
            yield Row(lines[begun][0], tuple(cell.strip() for cell in cells))
            begun = reader.line_num
    except csv.Error as error:
        raise _csv_error(error, lines[min(begun, len(lines) - 1)][0], quote) from None


def _csv_error(error: csv.Error, row: int, quote: str) -> Unreadable:
    told = str(error)
    if "unexpected end" in told:
        return Unreadable(f"a quote ({quote}) is opened in this row and never closed; the file may be torn", row)
    if "field larger" in told:
        return Unreadable(f"a cell is longer than 131072 characters; a quote ({quote}) may be missing", row)
    return Unreadable(f"a quote ({quote}) stands in the middle of a cell; it must be doubled inside quotes", row)


def _no_headings(lines: Lines, style: Style, wanted: Sequence[str]) -> Unreadable:
    best: tuple[int, int, list[str]] | None = None
    for delimiter in _delimiters(style):
        for number, line in lines[:_NEAR]:
            missing = lacking(_headings([(number, line)], delimiter, style.quote), wanted)
            if len(missing) < len(wanted) and (best is None or len(missing) < best[1]):
                best = (number, len(missing), missing)
    told = ", ".join(f"'{each}'" for each in wanted)
    if best is None:
        return Unreadable(f"no row holds the headings {told}; correct columns, header_contains or the delimiter")
    lost = ", ".join(f"'{each}'" for each in best[2])
    return Unreadable(
        f"no row holds all the headings {told}; this one comes nearest and lacks {lost}: export this column, or "
        "correct columns in the rule file",
        best[0],
    )
