"""Numbers and texts as pages show them, and axes with round ticks."""

from __future__ import annotations

import math
import sys
from decimal import Decimal

import pytest
from hypothesis import given
from hypothesis import strategies as st

from spikeward.daemon.pages.axis import axis_over
from spikeward.daemon.pages.numbers import (
    coverage_shown,
    interval_shown,
    machine,
    shown,
    twelve_digits,
    value_shown,
)
from spikeward.daemon.pages.text import encodable, one_line, visible
from spikeward.rules.outcomes import Estimate
from spikeward.rules.words import unit_words

finite = st.floats(allow_nan=False, allow_infinity=False)
any_text = st.text(st.characters(codec=None, categories=None))


@pytest.mark.parametrize(
    ("estimate", "value", "interval"),
    [
        # uncertainty to two significant figures and the result to the same place: JCGM 100:2008, 7.2.6
        (Estimate(2.3123, "mg/kg", 0.075, 0.1779, 2.4, (2.149, 2.508)), "2.31 ± 0.18 mg/kg", "2.15 to 2.51 mg/kg"),
        (Estimate(-0.05, "ug/L", 0.1, 0.2, 2.0, (-0.25, 0.15)), "−0.05 ± 0.20 µg/L", "−0.25 to 0.15 µg/L"),
        (
            Estimate(2.31e-7, "mol/L", 1e-8, 1.8e-8, 2.0, (2.1e-7, 2.5e-7)),
            "(2.31 ± 0.18) × 10⁻⁷ mol/L", "2.10 × 10⁻⁷ to 2.50 × 10⁻⁷ mol/L",
        ),
        (Estimate(20.0, "ug/L", reason="one addition"), "20 µg/L", ""),
        (Estimate(0.25, "1", 0.0, 0.0, 2.0, (0.25, 0.25), reason="exact fit"), "0.25", "0.25 to 0.25"),
        (Estimate(math.nan, "ug/L", 1.0, 1.0, 1.0, (math.nan, math.inf)), "–", ""),
    ],
)  # fmt: skip
def test_a_result_as_people_read_it(estimate: Estimate, value: str, interval: str):
    assert value_shown(estimate) == value
    assert interval_shown(estimate) == interval


def test_coverage_or_the_reason_stands_beside_a_result():
    assert coverage_shown(Estimate(1.0, "g/L", 0.1, 0.24, 2.4)) == "95 %, k 2.4"
    assert coverage_shown(Estimate(1.0, "g/L", reason="one addition")) == "no uncertainty: one addition"
    assert coverage_shown(Estimate(1.0, "g/L", 0.0, 0.0, 2.4, reason="exact fit")) == "95 %, k 2.4; exact fit"


def test_units_as_people_write_them():
    assert [unit_words(code) for code in ("ug/L", "1", "umol/L", "mg/kg", "units")] == [
        "µg/L", "", "µmol/L", "mg/kg", "units",
    ]  # fmt: skip


def test_single_numbers():
    assert [shown(value) for value in (None, math.nan, -1.5, 0.0, 1e-9)] == ["–", "–", "−1.5", "0", "1 × 10⁻⁹"]
    values = (None, math.inf, -0.0, 2 / 3, 1e300)
    assert [machine(value) for value in values] == ["", "", "0", "0.666666666667", "1e+300"]


@given(finite)
def test_machine_text_and_rounded_number_agree(value: float):
    assert float(machine(value)) == twelve_digits(value)


@given(finite, finite)
def test_an_axis_covers_its_numbers_and_zero_has_a_place(one: float, other: float):
    low, high = min(one, other, 0.0), max(one, other, 0.0)
    axis = axis_over(low, high, 6)
    assert -1e-9 <= axis.share(low) <= axis.share(0.0) <= axis.share(high) <= 1 + 1e-9
    assert 2 <= len(axis.ticks) <= 9
    labels = [label for _, label in axis.ticks]
    assert "0" in {label.rstrip("0").rstrip(".") or "0" for label in labels}
    assert len(set(labels)) == len(labels)
    assert max(map(len, labels)) <= 8


@pytest.mark.parametrize("largest", [5e-324, 1e-310, 3e-12, 0.004, 1.0, 9999.0, 1e9, sys.float_info.max])
def test_ticks_are_one_two_or_five_times_a_power_of_ten(largest: float):
    labels = [Decimal(label.replace("−", "-")) for _, label in axis_over(-largest / 3, largest, 6).ticks]
    steps = {after - before for before, after in zip(labels, labels[1:], strict=False)}
    assert len(steps) == 1
    assert steps.pop().normalize().as_tuple().digits in {(1,), (2,), (5,)}


@given(any_text)
def test_texts_are_encodable_and_stay_on_their_line(text: str):
    encodable(text).encode("utf-8")
    for line in (one_line(text), visible(text)):
        line.encode("utf-8")
        assert len(line.splitlines()) <= 1
        assert not any(ord(character) < 32 or 0x202A <= ord(character) <= 0x202E for character in line)


def test_bytes_that_are_no_text_are_named():
    assert encodable("a\udcff\ud800b") == "a\\xff\\ud800b"
    assert one_line("a\nb\t\x07\u202e") == "a\\nb\\t\\x07\\u202e"
    assert visible("a\nb\x07\u202e") == "a b⟨U+0007⟩⟨U+202E⟩"
