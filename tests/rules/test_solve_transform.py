"""From readings to points: background and volumes, what an export did already, censored vessels, runs and order."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from spikeward.rules.prepared import PreparedLine, PreparedVessel
from spikeward.rules.records import MISSING, NOT_DETECTED, Reading, SeriesKey
from spikeward.rules.rulebook import Censored, Top
from spikeward.rules.solve.corrections import NO_BACKGROUND, Corrections
from spikeward.rules.solve.job import Job
from spikeward.rules.solve.lines import solve_lines
from spikeward.rules.solve.solved import Background, Reagent
from spikeward.rules.solve.transform import Transformed, transform

KEY = SeriesKey("", "", "B1", "sample", "S1")


def read(signal, level="0", row=2, **changes) -> Reading:
    return replace(
        Reading(
            KEY, level, "", "", "", f"S1-{level}", "Cd", "228.8", "A", signal, str(signal), "", 1, None, "", "", None,
            (), (), "night/run.csv", row, "",
        ),
        **changes,
    )  # fmt: skip


def vessel(level, x, signal, aliquot=10.0, final=25.0, **changes) -> PreparedVessel:
    """``x`` is the content added per volume of test solution; ``signal`` a number or readings."""
    readings = signal if isinstance(signal, tuple) else (read(signal, str(level), row=2 + level),)
    return PreparedVessel(str(level), "", aliquot, 0.0, final, x * aliquot, readings, **changes)


def line(*vessels, **changes) -> PreparedLine:
    return replace(PreparedLine(KEY, "Cd", "228.8", "flasks", "mg/L", "A", vessels, None, "mix", ""), **changes)


def content(made: Transformed) -> float:
    """Intercept over slope of the weighted line through the rows, by numpy's own least squares."""
    slope, intercept = np.polyfit(
        [row.x for row in made.rows], [row.y for row in made.rows], 1, w=[math.sqrt(row.weight) for row in made.rows]
    )
    return intercept / slope


def off(mean: float, **changes) -> Corrections:
    return Corrections(background=Background(mean, 0.001, 4, 5, (), "A"), **changes)


GOOD = tuple(vessel(i, 0.25 * i, 0.4 * (0.3 + 0.25 * i)) for i in range(4))


@pytest.mark.parametrize("finals", [(25.0,) * 4, (10.0, 10.5, 11.0, 11.5), (10.0, 25.0, 50.0, 25.0)])
@pytest.mark.parametrize("aliquots", [(10.0,) * 4, (10.0, 9.5, 9.0, 8.5)])
def test_the_background_comes_off_before_the_volumes(finals, aliquots):
    """S = k (C0 V0 + Cs v)/V + B with k = 0.64, C0 = 0.500, B = 0.02."""
    volumes = enumerate(zip(aliquots, finals, strict=True))
    vessels = [vessel(i, 0.25 * i, 0.64 * (0.5 + 0.25 * i) * v0 / v + 0.02, v0, v) for i, (v0, v) in volumes]
    made = transform(line(*vessels), off(0.02))
    assert content(made) == pytest.approx(0.5, rel=1e-12)
    assert [row.factor for row in made.rows] == pytest.approx([v / v0 for v0, v in zip(aliquots, finals, strict=True)])
    assert all(row.y == row.signal * row.factor and row.shift == row.factor for row in made.rows)
    assert [row.share for row in made.rows] == [v0 / v for v0, v in zip(aliquots, finals, strict=True)]


def test_taken_off_after_the_volumes_it_would_be_547_for_500():
    """10 mL made up to 25 mL, a background of 1/32 of the signal of one unit: y - B instead of (S - B) V/V0."""
    vessels = [vessel(i, 0.25 * i, (0.5 + 0.25 * i) * 10.0 / 25.0 + 1.0 / 32.0) for i in range(4)]
    wrong = [point.y - 1.0 / 32.0 for point in transform(line(*vessels), Corrections()).points]
    slope, intercept = np.polyfit([point.x for point in transform(line(*vessels), Corrections()).points], wrong, 1)
    assert round(intercept / slope, 3) == 0.547
    assert content(transform(line(*vessels), off(1.0 / 32.0))) == pytest.approx(0.5, rel=1e-12)


def exported(*what):
    return [replace(each, readings=tuple(replace(one, already=what) for one in each.readings)) for each in GOOD]


def test_a_blank_that_the_export_took_off_is_not_taken_off_again():
    made = transform(line(*exported("blank")), off(0.02))
    assert [point.y for point in made.points] == [point.y for point in transform(line(*GOOD), Corrections()).points]
    assert made.background is None
    assert "the export had the blank taken off already" in made.blank_note
    assert made.corrected[0].startswith("The export had its blank taken off already")


@pytest.mark.parametrize("what", ["blank", "drift", "internal_standard"])
def test_exports_that_differ_in_what_they_corrected_give_no_number(what):
    made = transform(line(*exported(what)[:2], *GOOD[2:]), Corrections())
    assert "already and others do not: export all vessels in the same way" in made.problem
    assert len(made.points) == 4


def test_what_was_not_subtracted_is_said():
    assert transform(line(*GOOD), Corrections()).corrected == (NO_BACKGROUND,)
    done = transform(line(*GOOD), off(0.02, reagent=Reagent(0.5, None, 0, note="Reagents bring 0.5 µg"))).corrected
    assert done == (
        "A background of 0.02 A was subtracted from every reading, before volumes.", "Reagents bring 0.5 µg.",
    )  # fmt: skip


def test_a_potential_stays_as_it_was_read():
    made = transform(line(*GOOD, response="log", signal_unit="mV"), off(0.02))
    assert [row.signal for row in made.rows] == [vessel.readings[0].signal for vessel in GOOD]
    assert [row.share for row in made.rows] == [0.4] * 4
    assert made.background is None
    assert "potentials were taken as they were read" in made.corrected[0]


@pytest.mark.parametrize("unit", ["", "counts"])
def test_a_background_in_another_unit(unit):
    made = transform(line(*GOOD), Corrections(background=Background(0.02, None, 0, 1, (), unit)))
    assert "it cannot be subtracted; export both in the same unit" in made.problem


# Vessels below detection


LOW = (vessel(0, 0.0, (read(None, "0", qualifier=NOT_DETECTED, text="< DL"),), 10.0, 10.0), *(
    vessel(i, 0.05 * i, 0.5 * (0.020 + 0.05 * i), 10.0, 10.0) for i in (1, 2, 3)
))  # fmt: skip


def test_a_level_below_detection_is_refused_and_never_zero():
    made = transform(line(*LOW), Corrections())
    assert "was not detected: that is a bound, not zero" in made.problem
    assert len(made.rows) == 3


def test_zero_would_give_0054_for_a_true_0020():
    as_zero = [vessel(0, 0.0, 0.0, 10.0, 10.0), *LOW[1:]]
    assert round(content(transform(line(*as_zero), Corrections())), 4) == 0.0054
    left_out = transform(line(*LOW), Corrections(censored=Censored("leave out")))
    assert content(left_out) == pytest.approx(0.020, rel=1e-9)
    assert left_out.problem == ""
    assert "level 0 was not detected (night/run.csv, row 2) and was left out of the line" in left_out.notes[0]


def test_a_declared_signal_stands_for_what_was_not_detected():
    signals = {"228.8": Top(0.010, "A"), "Cd": Top(9.0, "A")}  # the line goes before the analyte
    made = transform(line(*LOW), Corrections(censored=Censored("substitute", signals)))
    assert content(made) == pytest.approx(0.020, rel=1e-9)
    assert made.problem == ""
    assert made.notes == (
        "level 0 was not detected (night/run.csv, row 2): 0.01 A stands for it, as the rules say",
    )
    # it is a signal as the instrument gives it: the background comes off it too
    less = transform(line(*LOW), off(0.004, censored=Censored("substitute", signals)))
    assert less.points[0].signal == pytest.approx(0.006)


@pytest.mark.parametrize(
    ("signals", "words"),
    [({}, "no signal is declared for Cd 228.8"), ({"Cd": Top(0.01, "mA")}, "is in mA and the signals are in A")],
)
def test_a_substitute_that_does_not_fit(signals, words):
    assert words in transform(line(*LOW), Corrections(censored=Censored("substitute", signals))).problem


@pytest.mark.parametrize("use", ["leave out", "substitute"])
def test_other_vessels_without_a_number_are_still_refused(use):
    censored = Censored(use, {"Cd": Top(0.01, "A")})
    missing = vessel(1, 0.25, (read(None, "1", row=3, qualifier=MISSING),))
    assert "has no signal" in transform(line(GOOD[0], missing, *GOOD[2:]), Corrections(censored=censored)).problem


def test_one_reading_below_detection_leaves_its_whole_vessel_out():
    """Left out alone it would raise the mean of the others."""
    both = (read(0.02, "0"), read(None, "0", row=3, qualifier=NOT_DETECTED))
    made = transform(line(replace(LOW[0], readings=both), *LOW[1:]), Corrections(censored=Censored("leave out")))
    assert [point.level for point in made.points] == ["1", "2", "3"]


# Weights, reagents, runs


def test_weights_follow_the_scaling_of_signals_or_are_equal():
    vessels = [vessel(i, 0.25 * i, 0.4 + i, 10.0, final) for i, final in enumerate((10.0, 20.0, 25.0))]
    by_signal = {row.x: row.weight for row in transform(line(*vessels), Corrections()).rows}
    assert by_signal == {0.0: 1.0, 0.25: 0.25, 0.5: pytest.approx(0.16)}
    assert {row.weight for row in transform(line(*vessels), Corrections(weights="equal")).rows} == {1.0}


def with_reagent(aliquots, amount, noise=(0.0,) * 4):
    return line(*(
        vessel(i, 0.3 * i, 0.2 * (0.5 + 0.3 * i + amount / v0) * v0 / 25.0 + e, v0)
        for i, (v0, e) in enumerate(zip(aliquots, noise, strict=True))
    ))  # fmt: skip


@pytest.mark.parametrize("aliquots", [(10.0,) * 4, (10.0, 9.0, 8.0, 5.0)])
def test_a_reagent_amount_counts_with_the_additions(aliquots):
    made = transform(with_reagent(aliquots, 1.5), Corrections(reagent=Reagent(1.5, 0.1, 9)))
    assert content(made) == pytest.approx(0.5, rel=1e-12)
    assert made.reagent is not None


@pytest.mark.parametrize("aliquots", [(10.0,) * 4, (10.0, 9.0, 8.0, 5.0)])
def test_the_effect_of_the_reagent_amount_is_that_of_refitting(aliquots):
    prepared = with_reagent(aliquots, 1.5, (0.002, -0.003, 0.001, 0.0005))

    def corrections(amount):
        return Corrections(reagent=Reagent(amount, 0.1, 9))

    (solved,) = solve_lines([Job(prepared, corrections(1.5))], 0.95)
    more, less = (content(transform(prepared, corrections(1.5 + step))) for step in (1e-5, -1e-5))
    assert solved.reagent_effect == pytest.approx((more - less) / 2e-5, rel=1e-7)
    if len(set(aliquots)) == 1:
        assert solved.reagent_effect == pytest.approx(-1.0 / 10.0, rel=1e-7)


def test_a_reagent_that_is_not_known_stops_the_line_and_an_absent_one_does_not():
    refused = transform(line(*GOOD), Corrections(reagent=Reagent(0.0, None, 0, problem="the unit does not fit")))
    assert refused.problem == "the unit does not fit"
    absent = transform(line(*GOOD), Corrections(reagent=Reagent(0.0, None, 0, note="No reagent blank was subtracted")))
    assert (absent.problem, absent.reagent) == ("", None)
    assert absent.corrected[-1] == "No reagent blank was subtracted."


def test_runs_are_counted_by_their_names():
    runs = ("10", "9", "9", "10")
    made = transform(line(*(replace(one, block=run) for one, run in zip(GOOD, runs, strict=True))), Corrections())
    assert [row.block for row in made.rows] == [1, 0, 0, 1]
    assert {row.block for row in transform(line(*GOOD), Corrections()).rows} == {0}


def test_a_sentence_about_a_vessel_names_its_run():
    broken = replace(GOOD[1], block="2", readings=(read(None, "1", qualifier=MISSING),))
    assert transform(line(GOOD[0], broken), Corrections()).problem.startswith("level 1, run 2 (night/run.csv, row 2)")


@given(st.permutations(range(4)), st.sampled_from(["signal", "equal"]))
def test_the_order_of_vessels_does_not_reach_the_rows(order, weights):
    corrections = off(0.0123, weights=weights, reagent=Reagent(0.7, 0.1, 3))
    vessels = [replace(one, aliquot=10.0 - 0.7 * i) for i, one in enumerate(GOOD)]
    mixed = transform(line(*(vessels[i] for i in order)), corrections)
    straight = transform(line(*vessels), corrections)
    assert mixed.rows == straight.rows
    assert [mixed.points[order.index(i)] for i in range(4)] == list(straight.points)
