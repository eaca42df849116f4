"""The rows of a table: where it ends, what is skipped between its parts, and rows that do not fit."""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

from spikeward.parsers.grid import Grid, Row
from spikeward.parsers.headings import folded
from spikeward.rules.records import Unreadable


class Body(NamedTuple):
    """The rows that hold readings, each as wide as the headings; the row of units, if any; what was left out."""

    rows: tuple[Row, ...]
    units: tuple[str, ...]
    notes: tuple[str, ...]


def body_of(grid: Grid, ends_at: Sequence[str] = (), unit_row: bool = False) -> Body:
    """Take the table's rows: blank rows and repeated headings are skipped, what follows its end is noted.

    Raises
    ------
    Unreadable : a row is shorter or longer than the headings, the headings come again in another order, or no row
        follows them
    """
    return _Walk(grid, ends_at, unit_row).walk()


class _Walk:
    def __init__(self, grid: Grid, ends_at: Sequence[str], unit_row: bool) -> None:
        self._all = grid.rows
        self._head = grid.rows[0]
        self._columns = frozenset(self._head.cells)
        self._least = max(position for position, cell in enumerate(self._head.cells, start=1) if cell)
        self._ends = {folded(word) for word in ends_at}
        self._unit_row = unit_row
        self._units: tuple[str, ...] = ()
        self._rows: list[Row] = []
        self._notes: list[str] = []

    def walk(self) -> Body:
        position = self._after_headings(0)
        while position < len(self._all):
            row = self._all[position]
            if row.cells == self._head.cells:
                position = self._after_headings(position)
            elif self._ends and row.cells and folded(row.cells[0]) in self._ends:
                position = self._leave_out(position + 1)
            elif row.blank:
                position = self._after_blank(position + 1)
            else:
                self._rows.append(self._fitting(row))
                position += 1
        if not self._rows:
            raise Unreadable(
                "the headings are followed by no rows; the file may still be incomplete", self._head.number
            )
        return Body(tuple(self._rows), self._units, tuple(self._notes))

    def _after_headings(self, position: int) -> int:
        if not self._unit_row:
            return position + 1
        if position + 1 >= len(self._all):
            return position + 1
        units = self._fitting(self._all[position + 1]).cells
        if self._units and units != self._units:
            raise Unreadable(
                "the units under the repeated headings differ from the first; export one table in one unit",
                self._all[position + 1].number,
            )
        self._units = units
        return position + 2

    def _after_blank(self, position: int) -> int:
        """A blank row ends a part of the table unless a row of the table follows before the next headings."""
        while position < len(self._all) and self._all[position].blank:
            position += 1
        if position == len(self._all) or self._fits(self._all[position]):
            return position
        rest = self._all[position : self._next_headings(position)]
        return position if any(self._fits(row) for row in rest if not row.blank) else self._leave_out(position)

    def _leave_out(self, position: int) -> int:
        end = self._next_headings(position)
        left = [row for row in self._all[position:end] if not row.blank]
        if not left:
            return end
        first, last = left[0].number, left[-1].number
        told = f"row {first} is" if first == last else f"rows {first} to {last} are"
        self._notes.append(f"{told} not part of the table: {_shown(left[0])}")
        return end

    def _next_headings(self, position: int) -> int:
        for later in range(position, len(self._all)):
            if self._all[later].cells == self._head.cells:
                return later
        return len(self._all)

    def _fits(self, row: Row) -> bool:
        return len(row.cells) >= self._least and not any(row.cells[len(self._head.cells) :])

    def _fitting(self, row: Row) -> Row:
        width = len(self._head.cells)
        if not self._fits(row):
            cells = f"{len(row.cells)} cell{'' if len(row.cells) == 1 else 's'}"
            # No column is named: a line after the table belongs to none, and where a torn row lost cells is not known.
            raise Unreadable(
                f"the row has {cells} where the headings have {width}, and its first cell is {_first(row)}; the file "
                "may be torn, or a delimiter stands inside a cell. If the table ends here, add the whole first cell "
                "under ends_at",
                row.number,
            )
        if row.cells[0] in self._columns and frozenset(row.cells) == self._columns:
            raise Unreadable(
                "the headings come again in another order; export the parts as files of their own", row.number
            )
        return Row(row.number, (*row.cells, *[""] * (width - len(row.cells)))[:width])


def _shown(row: Row) -> str:
    return _short(" ".join(cell for cell in row.cells if cell))


def _first(row: Row) -> str:
    return f"'{_short(row.cells[0])}'" if row.cells and row.cells[0] else "empty"


def _short(text: str) -> str:
    return text if len(text) <= 60 else f"{text[:60]}…"
