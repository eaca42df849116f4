"""What a reader found in a file, as text for the journal: compact JSON, the same fields in the same order."""

from __future__ import annotations

import json
from dataclasses import fields
from operator import attrgetter
from typing import Any

from spikeward.rules.records import BenchEntry, Entry, Table

_entry_fields = attrgetter(*(each.name for each in fields(Entry)))
_bench_fields = attrgetter(*(each.name for each in fields(BenchEntry)))


def encode_table(table: Table) -> str:
    """A table as text. Numbers keep every digit; names that are not valid UTF-8 keep their bytes."""
    return _dumps([table.whole, table.notes, [_entry_fields(entry) for entry in table.entries]])


def decode_table(text: str) -> Table:
    """The table that ``encode_table`` wrote."""
    whole, notes, rows = json.loads(text)
    return Table(tuple(_entry(row) for row in rows), whole, tuple(notes))


def encode_bench(entries: tuple[BenchEntry, ...]) -> str:
    """Bench entries as text."""
    return _dumps([_bench_fields(entry) for entry in entries])


def decode_bench(text: str) -> tuple[BenchEntry, ...]:
    """The bench entries that ``encode_bench`` wrote."""
    rows = json.loads(text)
    return tuple(
        BenchEntry(folder, batch, sample, level, tuple((name, value) for name, value in values), path, line, digest)
        for folder, batch, sample, level, values, path, line, digest in rows
    )


_VALUES = [each.name for each in fields(Entry)].index("values")


def _entry(row: list[Any]) -> Entry:
    if row[_VALUES]:
        row[_VALUES] = tuple((name, value) for name, value in row[_VALUES])
    else:
        row[_VALUES] = ()
    return Entry(*row)


def _dumps(value: Any) -> str:
    return json.dumps(value, separators=(",", ":"))
