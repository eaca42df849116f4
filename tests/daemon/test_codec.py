"""What the journal gives back is what was read, to the last digit and byte."""

from __future__ import annotations

import math
from dataclasses import fields

import pytest
from hypothesis import given
from hypothesis import strategies as st

from spikeward.daemon.codec import decode_bench, decode_table, encode_bench, encode_table
from spikeward.rules.records import BenchEntry, Entry, Table

TEXT = st.text(st.characters(codec=None), max_size=8)
NUMBER = st.none() | st.floats(allow_nan=False)
PAIRS = st.lists(st.tuples(TEXT, TEXT), max_size=3).map(tuple)
ENTRY = st.builds(
    Entry, row=st.integers(0, 10**9), solution=TEXT, analyte=TEXT, line=TEXT, unit=TEXT, signal=NUMBER, text=TEXT,
    qualifier=TEXT, readings=st.integers(1, 99), sd=NUMBER, measured_at=TEXT, processed_at=TEXT,
    order=st.none() | st.integers(), values=PAIRS, digest=TEXT,
)  # fmt: skip
TABLE = st.builds(
    Table, st.lists(ENTRY, max_size=4).map(tuple), st.none() | st.booleans(), st.lists(TEXT, max_size=2).map(tuple)
)
BENCH = st.lists(
    st.builds(
        BenchEntry, folder=TEXT, batch=TEXT, sample=TEXT, level=TEXT, values=PAIRS, path=TEXT, row=st.integers(),
        digest=TEXT,
    ),
    max_size=4,
).map(tuple)  # fmt: skip


@given(TABLE)
def test_a_table_comes_back_as_it_was(table: Table) -> None:
    assert decode_table(encode_table(table)) == table


@given(BENCH)
def test_bench_entries_come_back_as_they_were(entries: tuple[BenchEntry, ...]) -> None:
    assert decode_bench(encode_bench(entries)) == entries


@pytest.mark.parametrize("signal", [-0.0, 5e-324, 1.7976931348623157e308, 0.1 + 0.2, math.inf, -math.inf])
def test_signals_keep_every_bit(signal: float) -> None:
    table = Table((Entry(1, "a", "Cd", "", "A", signal, "as written"),))
    back = decode_table(encode_table(table)).entries[0].signal
    assert back is not None
    assert back.hex() == signal.hex()


def test_the_text_is_plain_ascii_whatever_the_file_was_called() -> None:
    text = encode_table(Table((Entry(1, "\udcff\n é", "Cd", "", "A", None, ""),)))
    assert text.isascii()
    assert "\n" not in text


def test_these_tests_fill_every_field() -> None:
    """A field that is added to the records must be added to the strategies above."""
    assert len(fields(Entry)) == 15
    assert len(fields(BenchEntry)) == 8
    assert len(fields(Table)) == 3
