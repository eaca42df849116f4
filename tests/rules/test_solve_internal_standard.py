"""The internal standard: three ways in, pairs of readings, exports that divided already, and what is missing."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from spikeward.rules.prepared import PreparedLine, PreparedVessel
from spikeward.rules.records import NOT_DETECTED, Reading, SeriesKey
from spikeward.rules.solve.corrections import Corrections
from spikeward.rules.solve.internal_standard import NOT_PAIRED
from spikeward.rules.solve.solved import Background
from spikeward.rules.solve.transform import Transformed, transform

KEY = SeriesKey("", "", "B1", "sample", "S1")


def read(signal, level="0", analyte="Cd", row=2, **changes) -> Reading:
    return replace(
        Reading(
            KEY, level, "", "", "", f"S1-{level}", analyte, "", "cps", signal, str(signal), "", 1, None, "", "", None,
            (), (), "night/run.csv", row, "",
        ),
        **changes,
    )  # fmt: skip


def line(vessels, entered, **changes) -> PreparedLine:
    made = PreparedLine(
        KEY, "Cd", "", "flasks", "ug/L", "cps", tuple(vessels), None, "mix", "", internal="Rh", entered=entered
    )
    return replace(made, **changes)


def content(made: Transformed) -> float:
    slope, intercept = np.polyfit(
        [row.x for row in made.rows], [row.y for row in made.rows], 1, w=[math.sqrt(row.weight) for row in made.rows]
    )
    return intercept / slope


ALIQUOTS, FINALS = (10.0, 9.0, 8.0, 10.0), (10.0, 25.0, 20.0, 11.5)
AMOUNTS = (2.0, 2.2, 1.9, 2.05)
TRUTH = 1.7


def internal_content(entered, i):
    """Of the internal standard in the vessel, by where it came in."""
    return {
        "in_sample": 5.0 * ALIQUOTS[i] / FINALS[i],
        "per_vessel": AMOUNTS[i] / FINALS[i],
        "at_constant_content": 3.0,
    }[entered]


def vessels(entered, background=0.0, swing=(1.0, 0.8, 1.3, 0.95)):
    """Signals of 1000 cps for each unit of content, all of a vessel rising and falling together by ``swing``."""
    for i, (v0, v) in enumerate(zip(ALIQUOTS, FINALS, strict=True)):
        signal = 1000.0 * swing[i] * (TRUTH + 2.0 * i) * v0 / v + background
        yield PreparedVessel(
            str(i), "", v0, 0.0, v, 2.0 * i * v0, (read(signal, str(i), row=2 + i),),
            internal_amount=AMOUNTS[i] if entered == "per_vessel" else 1.0,
            internal=(read(400.0 * swing[i] * internal_content(entered, i), str(i), "Rh", row=2 + i),),
        )  # fmt: skip


@pytest.mark.parametrize("background", [0.0, 37.0])
@pytest.mark.parametrize("entered", ["in_sample", "per_vessel", "at_constant_content"])
def test_whatever_the_instrument_does_to_both_cancels(entered, background):
    """Aliquots, final volumes and amounts all differ; with the factor of another way in the content is wrong."""
    corrections = Corrections(background=Background(background, None, 0, 1, (), "cps") if background else None)
    prepared = line(vessels(entered, background), entered)
    made = transform(prepared, corrections)
    assert content(made) == pytest.approx(TRUTH, rel=1e-12)
    for other in {"in_sample", "per_vessel", "at_constant_content"} - {entered}:
        assert abs(content(transform(replace(prepared, entered=other), corrections)) / TRUTH - 1) > 0.02
    assert abs(content(transform(replace(prepared, entered=""), corrections)) / TRUTH - 1) > 0.02
    for row in made.rows:
        assert row.y == row.signal * row.factor


@pytest.mark.parametrize("entered", ["in_sample", "per_vessel", "at_constant_content"])
def test_the_shift_is_what_a_background_changes(entered):
    prepared = line(vessels(entered), entered)

    def y(background):
        corrections = Corrections(background=Background(background, None, 0, 1, (), "cps"))
        return np.array([row.y for row in transform(prepared, corrections).rows])

    shifts = [row.shift for row in transform(prepared, Corrections()).rows]
    assert (y(2.0) - y(3.0)) == pytest.approx(shifts, rel=1e-9)


def test_a_published_ratio_of_unequal_mixtures():
    """D. C. Harris, Quantitative Chemical Analysis, the internal-standard example (from memory).

    Areas 423 for 0.0837 M of X and 347 for 0.0666 M of S; then 10.0 mL of 0.146 M S and 10.0 mL of unknown made up to
    25.0 mL read 553 and 582. The book finds X = 0.143 M. As an addition: the known mixture is the vessel with an
    addition, its standard at its own content.
    """
    unknown = PreparedVessel(
        "0", "", 10.0, 0.0, 25.0, 0.0, (read(553.0),), internal_amount=10.0 * 0.146, internal=(read(582.0, "0", "S"),)
    )
    known = PreparedVessel(
        "1", "", 10.0, 0.0, 10.0, 0.0837 * 10.0, (read(423.0, "1"),), internal_amount=0.0666 * 10.0,
        internal=(read(347.0, "1", "S"),),
    )  # fmt: skip
    made = transform(line([unknown, known], "per_vessel"), Corrections())
    # the response to X against S, F = 0.970, and the content of the unknown, both from R n / V0; y is over that of the
    # unknown, so that it is a ratio
    y = {point.level: point.y * (10.0 * 0.146) / 10.0 for point in made.points}
    assert made.points[0].y == pytest.approx(made.points[0].signal, rel=1e-15)
    assert y["1"] / 0.0837 == pytest.approx(0.970, abs=5e-4)
    assert y["0"] / (y["1"] / 0.0837) == pytest.approx(0.143, abs=5e-4)


def test_a_published_ratio_at_constant_content():
    """D. Harvey, Modern Analytical Chemistry, the internal-standard example with Pb and Cu (from memory).

    1.75 ppb Pb with 2.25 ppb Cu reads a ratio of 2.37; a sample with the same Cu reads 1.80 and holds 1.33 ppb. Told as
    an addition of 1.00 ppb to that sample.
    """
    ratio = 2.37 / 1.75
    vessels = [
        PreparedVessel(
            level, "", 1.0, 0.0, 1.0, added, (read(value * 500.0, level),), internal=(read(500.0, level, "Cu"),)
        )
        for level, added, value in (("0", 0.0, 1.80), ("1", 1.0, 1.80 + ratio))
    ]
    assert content(transform(line(vessels, "at_constant_content"), Corrections())) == pytest.approx(1.33, abs=5e-3)


def pairs(number=True, rows=True, times=True):
    """Three readings of each, the plasma swinging between them."""
    swings = (1.0, 0.7, 1.6)
    own = [
        read(300.0 * s, reading=str(n) if number else "", row=2 + n if rows else 2 + 2 * n,
             measured_at=f"2030-01-01T00:00:0{n}Z" if times else "")
        for n, s in enumerate(swings)
    ]  # fmt: skip
    other = [
        read(100.0 * s, analyte="Rh", reading=str(n) if number else "", row=2 + n if rows else 3 + 2 * n,
             measured_at=f"2030-01-01T00:00:0{n}Z" if times else "")
        for n, s in enumerate(swings)
    ]  # fmt: skip
    return tuple(own), tuple(reversed(other))


def only(own, other) -> PreparedVessel:
    return PreparedVessel("0", "", 1.0, 0.0, 1.0, 0.0, own, internal=other)


@pytest.mark.parametrize("how", [{"rows": False, "times": False}, {"number": False, "times": False},
                                 {"number": False, "rows": False}])  # fmt: skip
def test_readings_are_divided_pair_by_pair(how):
    own, other = pairs(**how)
    made = transform(line([only(own, other)], "in_sample"), Corrections())
    assert made.points[0].signal == pytest.approx(3.0, rel=1e-15)
    assert made.points[0].sd == pytest.approx(0.0, abs=1e-12)  # each ratio is 3
    assert made.notes == ()


def test_readings_that_cannot_be_paired_are_divided_by_the_mean():
    own, other = pairs(number=False, rows=False, times=False)
    made = transform(line([only(own, other)], "in_sample"), Corrections())
    assert made.points[0].signal == pytest.approx(3.0, rel=1e-12)
    assert made.notes == (NOT_PAIRED,)
    fewer = transform(line([only(own, other[:2])], "in_sample"), Corrections())
    assert fewer.notes == (NOT_PAIRED,)


def test_the_scatter_of_a_ratio_of_exported_means_is_not_known():
    own = (read(300.0, readings=3, sd=4.0),)
    made = transform(line([only(own, (read(100.0, analyte="Rh"),))], "in_sample"), Corrections())
    assert made.points[0].sd is None
    assert made.points[0].readings == 3


@pytest.mark.parametrize(
    ("internal", "amount", "words"),
    [
        ((), 1.0, "level 0 has no reading of the internal standard Rh"),
        ((read(None, analyte="Rh", qualifier=NOT_DETECTED),), 1.0, "no usable signal of the internal standard Rh"),
        ((read(0.0, analyte="Rh"),), 1.0, "is not above zero (night/run.csv, row 2)"),
        ((read(5.0, analyte="Rh"),), 0.0, "level 0 has no amount of the internal standard Rh"),
    ],
)
def test_a_vessel_without_its_internal_standard(internal, amount, words):
    first, *others = vessels("per_vessel")
    broken = replace(first, internal=internal, internal_amount=amount)
    assert words in transform(line([broken, *others], "per_vessel"), Corrections()).problem
    gone = replace(broken, excluded="A. Muster, 2026-01-05: bubble")
    assert transform(line([gone, *others], "per_vessel"), Corrections()).problem == ""


def divided_by_export(entered, **changes):
    """The same vessels as an instrument exports them that divides by itself."""
    for one in vessels(entered):
        ratio = one.readings[0].signal / one.internal[0].signal
        divided = replace(one.readings[0], signal=ratio, already=("internal_standard",))
        yield replace(one, readings=(divided,), internal=())


@pytest.mark.parametrize("entered", ["in_sample", "per_vessel", "at_constant_content"])
def test_an_export_that_divided_is_not_divided_again(entered):
    made = transform(line(divided_by_export(entered), entered), Corrections())
    assert content(made) == pytest.approx(TRUTH, rel=1e-12)
    assert "The export had the internal standard applied already" in made.corrected[1]
    assert made.problem == ""


def test_an_export_that_divided_needs_the_way_in_where_volumes_differ():
    assert "say under preparations: internal_standard where it entered" in (
        transform(line(divided_by_export("in_sample"), ""), Corrections()).problem
    )
    equal = [replace(one, aliquot=10.0, final=25.0) for one in divided_by_export("in_sample")]
    assert transform(line(equal, ""), Corrections()).problem == ""


def test_a_background_that_was_not_divided_is_not_taken_off_ratios():
    raw = Background(5.0, None, 0, 1, (read(5.0),), "cps")
    made = transform(line(divided_by_export("in_sample"), "in_sample"), Corrections(background=raw))
    assert "only to one of series and background" in made.problem


def test_it_says_what_was_done():
    told = transform(line(vessels("per_vessel"), "per_vessel"), Corrections()).corrected[1]
    assert told == (
        "Every signal was divided by that of the internal standard Rh, which went as an amount into each vessel; the "
        "background of the internal standard itself was not subtracted."
    )


@given(st.permutations(range(3)), st.permutations(range(3)))
def test_the_order_of_readings_does_not_matter(first, second):
    own, other = pairs()
    mixed = only(tuple(own[i] for i in first), tuple(other[i] for i in second))
    straight = transform(line([only(own, other)], "in_sample"), Corrections())
    assert transform(line([mixed], "in_sample"), Corrections()) == straight
