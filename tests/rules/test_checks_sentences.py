"""Numbers and words as people read them."""

from __future__ import annotations

import math
from decimal import Decimal

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from spikeward.rules.outcomes import Estimate
from spikeward.rules.records import SeriesKey
from spikeward.rules.rounding import figure, percent, percent_apart, rounded
from spikeward.rules.sentences import estimate_words, series_name
from spikeward.rules.words import freedom, line_words, listed, unit_words


@pytest.mark.parametrize(
    ("value", "uncertainty", "told"),
    [
        (2.3123, 0.1811, ("2.31", "0.18")),
        (10.05762, 0.027, ("10.058", "0.027")),  # JCGM 100:2008, 7.2.6: R = 10.057 62 ohm with 27 mohm
        (2.3, 0.0996, ("2.30", "0.10")),
        (0.0, 0.1, ("0.00", "0.10")),
        (-0.0004, 0.1, ("0.00", "0.10")),
        (12.0, 15.2, ("12", "15")),
        (1520.2, 252.0, ("1520", "250")),
        (1234567.0, 3400.0, ("1234600", "3400")),
        (1.2e-9, 3e-11, ("1.200x10^-9", "0.030x10^-9")),
        (4.56e12, 1.2e11, ("4.56x10^12", "0.12x10^12")),
        (3.456, 0.0, ("3.46", "0")),
        (3.456, math.nan, ("3.46", "0")),
    ],
)
def test_a_result_is_rounded_to_the_place_of_its_uncertainty(value, uncertainty, told):
    assert rounded(value, uncertainty) == told


finite = st.floats(allow_nan=False, allow_infinity=False)


@given(finite, st.floats(min_value=5e-324, max_value=1e300))
def test_rounding_moves_a_result_by_half_a_place_at_most(value, uncertainty):
    value_text, spread_text = (text.replace("x10^", "E") for text in rounded(value, uncertainty))
    spread = Decimal(spread_text)
    place = Decimal(1).scaleb(spread.adjusted() - 1)
    assert abs(Decimal(value_text) - Decimal(value)) <= place / 2
    assert abs(spread - Decimal(uncertainty)) <= place / 2
    assert len(spread_text.split("E")[0].replace(".", "").strip("0")) <= 2


@given(finite)
def test_a_figure_keeps_its_digits(value):
    told = Decimal(figure(value).replace("x10^", "E"))
    assert abs(told - Decimal(value)) <= abs(Decimal(value)) / 200


def test_figures_in_words():
    assert figure(0.5) == "0.5"
    assert figure(73.333) == "73.3"
    assert percent(0.0413) == "4.1 %"
    assert estimate_words(Estimate(2.3123, "mg/kg", 0.09, 0.1811), "dry matter") == "2.31 ± 0.18 mg/kg dry matter"
    assert estimate_words(Estimate(43.04, "ug/kg", 2.0, 6.02)) == "43.0 ± 6.0 µg/kg"
    assert estimate_words(Estimate(2.3123, "mg/L")) == "2.31 mg/L, uncertainty not known"
    assert estimate_words(Estimate(0.3, "mg/L")) == "0.300 mg/L, uncertainty not known"
    assert estimate_words(Estimate(0.3, "mg/L", 0.0, 0.0)) == "0.300 mg/L, uncertainty not known"


@pytest.mark.parametrize(
    ("fraction", "limits", "told"),
    [
        (0.0504, (0.05, 0.1), "5.04 %"),
        (0.05, (0.05, 0.1), "5 %"),
        (0.052, (0.05, 0.1), "5.2 %"),
        (0.09996, (0.05, 0.1), "9.996 %"),
        (0.0500004, (0.05,), "5.00004 %"),
        (0.3, (), "30 %"),
    ],
)
def test_a_share_near_a_limit_is_told_apart_from_it(fraction, limits, told):
    assert percent_apart(fraction, limits) == told


@given(st.floats(min_value=1e-6, max_value=10), st.floats(min_value=1e-6, max_value=10))
def test_two_different_shares_are_never_told_alike(fraction, limit):
    assume(abs(fraction / limit - 1) > 1e-9 and figure(limit * 100) == f"{limit * 100:g}")
    assert percent_apart(fraction, (limit,)) != percent(limit, 3)


def test_counts_units_and_lists_in_words():
    assert [freedom(1), freedom(2), freedom(0)] == [
        "1 degree of freedom", "2 degrees of freedom", "0 degrees of freedom",
    ]  # fmt: skip
    assert [unit_words(code) for code in ("ug/kg", "mg/kg", "1", "units")] == ["µg/kg", "mg/kg", "", "units"]
    assert listed(["a"]) == "a"
    assert listed(["a", "b", "c"]) == "a, b and c"
    assert listed([str(n) for n in range(20)]) == "0, 1, 2 and 17 more"
    assert listed([]) == ""


def test_names_as_people_say_them():
    assert series_name(SeriesKey("", "", "MD12", "sample", "07")) == "MD12-07"
    assert series_name(SeriesKey("", "", "MD12", "process_blank", "1")) == "process blank MD12-1"
    assert series_name(SeriesKey("", "", "", "sample", "07")) == "07"
    assert line_words("Cd", "") == "Cd"
    assert line_words("Cd", "Cd 214.4") == "Cd 214.4"
    assert line_words("Cd", "214.4") == "Cd 214.4"
