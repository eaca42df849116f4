"""Rows of cells become a table of readings, by what the layout says that each column means."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace
from typing import NamedTuple

from spikeward.parsers.body import body_of
from spikeward.parsers.cells import IDENTITIES, QUANTITIES, Words, number_part, quantity_text
from spikeward.parsers.dates import Moments
from spikeward.parsers.grid import Grid, Row
from spikeward.parsers.headings import Column, column, unit_text
from spikeward.parsers.numbers import Cell, Numbers, numbers_of
from spikeward.rules.records import MEASURED, Entry, Layout, Table, Unreadable, WideColumn


class _Signal(NamedTuple):
    """A column of signals, what its heading stands for (nothing in a long table), and the columns of its scatter."""

    column: Column
    holds: WideColumn
    scatter: Mapping[str, Column]  # by signal_sd, signal_rsd, readings


def wanted_headings(layout: Layout) -> tuple[str, ...]:
    """The headings by which a table is found.

    Raises
    ------
    Unreadable : the layout names no column of signals
    """
    if not layout.wide and "signal" not in layout.columns:
        raise Unreadable("the rule file does not say which column holds the signal; declare columns: signal, or wide")
    own = [heading for meant in layout.wide.values() for heading in _scatter(meant).values()]
    return layout.header_contains or (*layout.columns.values(), *layout.wide, *own)


_SCATTER = ("signal_sd", "signal_rsd", "readings")
_LONG = WideColumn("")


def _scatter(meant: WideColumn) -> dict[str, str]:
    """The headings that a wide column declares for its own scatter."""
    return {meaning: heading for meaning in _SCATTER if (heading := getattr(meant, meaning))}


def table_of(grid: Grid, layout: Layout, whole: bool | None, notes: Sequence[str]) -> Table:
    """Read the table that begins with the first row of a grid.

    Raises
    ------
    Unreadable : a needed column or cell is missing, or cannot be read as what it should be
    """
    reading = _Reading(grid, layout)
    return Table(_with_units(reading.entries()), whole, (*notes, *reading.notes))


class _Reading:
    """The columns of one file, found, and how its cells are read."""

    def __init__(self, grid: Grid, layout: Layout) -> None:
        def found(name: str) -> Column:
            return column(grid.headings, name, grid.rows[0].number)

        self._layout = layout
        self._columns = {
            meaning: found(name) for meaning, name in layout.columns.items() if meaning != "signal" or not layout.wide
        }
        common = {meaning: place for meaning, place in self._columns.items() if meaning in _SCATTER}
        self._signals = [
            _Signal(found(name), meant, {**common, **{each: found(own) for each, own in _scatter(meant).items()}})
            for name, meant in layout.wide.items()
        ] or [_Signal(self._columns["signal"], _LONG, common)]
        self._given = [meaning for meaning in (*QUANTITIES, *IDENTITIES) if meaning in self._columns]
        self._words = Words(layout.not_detected, layout.over_range)
        self._moments = Moments(layout.time_zone, layout.date_patterns)
        body = body_of(grid, layout.ends_at, layout.unit_row)
        self.notes = body.notes
        self._rows = body.rows
        self._units = {position: unit_text(cell) for position, cell in enumerate(body.units)}
        self._numbers: Numbers = numbers_of(self._numeric_cells(), layout.decimal)

    def entries(self) -> Iterator[Entry]:
        """One entry for every signal cell, in the order of the file."""
        for row in self._rows:
            shared = self._shared(row)
            for signal in self._signals:
                yield self._entry(row, signal, shared)

    def _numeric_cells(self) -> Iterator[Cell]:
        """Every cell that must be a number, by which the decimal sign of the file is decided."""
        spread = {
            place.position: place
            for signal in self._signals
            for meaning, place in signal.scatter.items()
            if meaning != "readings"
        }
        for row in self._rows:
            for signal in self._signals:
                text = row.cells[signal.column.position]
                if self._words.qualifier(text) == MEASURED:
                    yield Cell(text, row.number, signal.column.heading)
            for each in spread.values():
                text = _without_percent(row.cells[each.position])
                if text and self._words.qualifier(text) == MEASURED:
                    yield Cell(text, row.number, each.heading)
            for meaning in self._given:
                number = number_part(meaning, self._cell(row, meaning))
                if number is not None:
                    yield number

    def _cell(self, row: Row, meaning: str) -> Cell:
        place = self._columns[meaning]
        return Cell(row.cells[place.position], row.number, place.heading)

    def _text(self, row: Row, meaning: str, needed: bool = False) -> str:
        place = self._columns.get(meaning)
        text = row.cells[place.position] if place else ""
        if needed and place and not text:
            raise Unreadable(
                f"the {meaning} is missing; complete the export, or declare a line after the table under ends_at",
                row.number,
                place.heading,
            )
        return text

    def _shared(self, row: Row) -> Entry:
        """What all signals of a row have in common."""
        order = self._text(row, "order")
        return Entry(
            row=row.number,
            solution=self._text(row, "solution", needed=True),
            analyte=self._text(row, "analyte", needed=True),
            line=self._text(row, "line"),
            unit="",
            signal=None,
            text="",
            measured_at=self._moment(row, "measured_at"),
            processed_at=self._moment(row, "processed_at"),
            order=self._numbers.count(self._cell(row, "order")) if order else None,
            values=self._values(row),
        )

    def _moment(self, row: Row, meaning: str) -> str:
        text = self._text(row, meaning)
        try:
            return self._moments.utc(text) if text else ""
        except Unreadable as error:
            raise Unreadable(error.sentence, row.number, self._columns[meaning].heading) from None

    def _values(self, row: Row) -> tuple[tuple[str, str], ...]:
        found = []
        for meaning in self._given:
            place = self._columns[meaning]
            unit = self._units.get(place.position, "") or place.unit
            text = quantity_text(meaning, self._cell(row, meaning), unit, self._numbers)
            if text:
                found.append((meaning, text))
        return tuple(found)

    def _entry(self, row: Row, signal: _Signal, shared: Entry) -> Entry:
        text = row.cells[signal.column.position]
        qualifier = self._words.qualifier(text)
        value = self._numbers.value(Cell(text, row.number, signal.column.heading)) if qualifier == MEASURED else None
        return Entry(
            row=row.number,
            solution=shared.solution,
            analyte=signal.holds.analyte or shared.analyte,
            line=signal.holds.line or shared.line,
            unit=self._unit(row, signal, measured=value is not None),
            signal=value,
            text=text,
            qualifier=qualifier,
            readings=self._count(row, signal) if value is not None else 1,
            sd=self._sd(row, signal, value) if value is not None else None,
            measured_at=shared.measured_at,
            processed_at=shared.processed_at,
            order=shared.order,
            values=shared.values,
            digest=_digest(row, signal.column.heading),
        )

    def _count(self, row: Row, signal: _Signal) -> int:
        place = signal.scatter.get("readings")
        if place is None or not row.cells[place.position]:
            return 1
        cell = Cell(row.cells[place.position], row.number, place.heading)
        count = self._numbers.count(cell)
        if count < 1:
            raise Unreadable("a signal is the mean of at least one reading", cell.row, cell.column)
        return count

    def _sd(self, row: Row, signal: _Signal, value: float) -> float | None:
        """The standard deviation of the single readings, from its own column or from the relative one in percent."""
        for meaning, factor in (("signal_sd", 1.0), ("signal_rsd", abs(value) / 100.0)):
            place = signal.scatter.get(meaning)
            text = _without_percent(row.cells[place.position]) if place else ""
            if place and text and self._words.qualifier(text) == MEASURED:
                cell = Cell(text, row.number, place.heading)
                sd = self._numbers.value(cell)
                if sd < 0:
                    raise Unreadable(f"'{text}' is below nought, which no standard deviation is", cell.row, cell.column)
                return sd * factor
        return None

    def _unit(self, row: Row, signal: _Signal, measured: bool) -> str:
        place, declared = signal.column, self._layout.unit
        said = self._text(row, "unit") or self._units.get(place.position, "")
        unit = unit_text(said or ("" if place.verbatim and declared else place.unit))
        if unit and declared and unit != unit_text(declared):
            raise Unreadable(
                f"the signal is in {unit}, but its unit is declared as {declared}; correct one of them",
                row.number,
                place.heading,
            )
        if not unit and not declared and measured:
            raise Unreadable(
                "the signal has no unit; export it, or declare unit for this reader (1 for a bare number)",
                row.number,
                place.heading,
            )
        return unit or unit_text(declared)


def _without_percent(text: str) -> str:
    return text.removesuffix("%").rstrip()


def _digest(row: Row, heading: str) -> str:
    return hashlib.sha256("\0".join((*row.cells, "", heading)).encode("utf-8", "surrogatepass")).hexdigest()


def _with_units(entries: Iterator[Entry]) -> tuple[Entry, ...]:
    """Refuse a unit that changes inside the file; a cell without number and unit takes the unit of its line."""
    found: list[Entry] = []
    units: dict[tuple[str, str], Entry] = {}
    for entry in entries:
        first = units.setdefault((entry.analyte, entry.line), entry) if entry.unit else entry
        if entry.unit != first.unit:
            told = " ".join(part for part in (entry.line or entry.analyte,) if part) or "this table"
            raise Unreadable(
                f"the unit of {told} changes from {first.unit} (row {first.row}) to {entry.unit}; export one file in "
                "one unit",
                entry.row,
            )
        found.append(entry)
    return tuple(entry if entry.unit else _filled(entry, units) for entry in found)


def _filled(entry: Entry, units: dict[tuple[str, str], Entry]) -> Entry:
    like = units.get((entry.analyte, entry.line))
    if like is None:
        raise Unreadable(
            "the signal has no unit; export it, or declare unit for this reader (1 for a bare number)", entry.row
        )
    return replace(entry, unit=like.unit)
