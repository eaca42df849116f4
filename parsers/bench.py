"""Bench files: what the balance and the bench know about samples and the instrument does not."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator, Mapping
from typing import Protocol

from spikeward.parsers.body import body_of
from spikeward.parsers.cells import number_part, quantity_text
from spikeward.parsers.grid import Row, Style, grid_of
from spikeward.parsers.headings import Column, column
from spikeward.parsers.numbers import Cell, Numbers, numbers_of
from spikeward.parsers.text import decode
from spikeward.rules.records import BenchEntry, Unreadable


class BenchColumns(Protocol):
    """How a bench file is written. ``key`` and ``columns`` map meanings to headings."""

    @property
    def key(self) -> Mapping[str, str]:
        """Headings of batch, sample and level."""
        ...

    @property
    def columns(self) -> Mapping[str, str]:
        """Headings of quantities."""
        ...

    @property
    def encoding(self) -> str:
        """The character set, or auto."""
        ...

    @property
    def delimiter(self) -> str:
        """What stands between the cells, or auto."""
        ...

    @property
    def decimal(self) -> str:
        """Point, comma or auto."""
        ...


def read_bench(content: bytes, rule: BenchColumns, folder: str, path: str) -> tuple[BenchEntry, ...]:
    """Read a bench file; a row that gives no quantity is left out.

    Parameters
    ----------
    folder, path : the output folder for which the entries hold, and the file's path, as the entries quote them

    Raises
    ------
    Unreadable : with row and column where there is one
    """
    text = decode(content, rule.encoding).text
    grid = grid_of(text, Style(rule.delimiter), (*rule.key.values(), *rule.columns.values()))
    head = grid.rows[0].number
    keys = {meaning: column(grid.headings, name, head) for meaning, name in rule.key.items()}
    columns = {meaning: column(grid.headings, name, head) for meaning, name in rule.columns.items()}
    rows = body_of(grid).rows
    numbers = numbers_of(_numeric_cells(rows, columns), rule.decimal)
    entries = []
    for row in rows:
        values = _values(row, columns, numbers)
        if values:
            batch, sample, level = (_key(row, keys, meaning) for meaning in ("batch", "sample", "level"))
            digest = hashlib.sha256("\0".join(row.cells).encode("utf-8", "surrogatepass")).hexdigest()
            entries.append(BenchEntry(folder, batch, sample, level, values, path, row.number, digest))
    return tuple(entries)


def _cell(row: Row, place: Column) -> Cell:
    return Cell(row.cells[place.position], row.number, place.heading)


def _numeric_cells(rows: tuple[Row, ...], columns: Mapping[str, Column]) -> Iterator[Cell]:
    for row in rows:
        for meaning, place in columns.items():
            number = number_part(meaning, _cell(row, place))
            if number is not None:
                yield number


def _values(row: Row, columns: Mapping[str, Column], numbers: Numbers) -> tuple[tuple[str, str], ...]:
    texts = (
        (meaning, quantity_text(meaning, _cell(row, place), place.unit, numbers)) for meaning, place in columns.items()
    )
    return tuple((meaning, text) for meaning, text in texts if text)


def _key(row: Row, keys: Mapping[str, Column], meaning: str) -> str:
    if meaning not in keys:
        return ""
    text = row.cells[keys[meaning].position]
    if meaning == "sample" and not text:
        raise Unreadable(
            "the sample is missing, so nobody knows whose quantities these are", row.number, keys[meaning].heading
        )
    # Levels are compared as numbers everywhere: 02 and 2 are one.
    return str(int(text)) if meaning == "level" and text.isascii() and text.isdigit() else text
