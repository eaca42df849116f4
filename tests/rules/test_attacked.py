"""What a hostile rule file or export must not bring about: a pass without a number, a correction told and not done."""

from __future__ import annotations

from dataclasses import replace

import pytest

from spikeward.rules.evaluate import Earlier, evaluate
from spikeward.rules.outcomes import FAIL, PASS, WARN
from spikeward.rules.rulebook import (
    BlankRule,
    Electrode,
    InternalStandard,
    Known,
    Noise,
    Overlap,
    Precision,
)


def test_a_series_without_any_line_to_report_fails(bench):
    """Both lines are read, and the rules use them for others only."""
    night = bench.Night(bench.rulebook(overlap=(Overlap("h_point", ("Pb",), ("Cd 1", "Cd 2"), "x"),)))
    night.series(line="1").series(line="2")
    outcome = bench.outcome_of(evaluate([night.batch(closed=True)], night.rules))
    assert outcome.results == ()
    assert outcome.verdict == FAIL
    assert bench.named(outcome.checks, "reported").sentence == (
        "No analyte of this series is reported: the rules use Cd 1 and Cd 2 for others only."
    )


def test_an_analyte_that_is_its_own_internal_standard_does_not_pass(bench):
    rules = bench.rulebook()
    (flasks,) = rules.preparations
    own = replace(flasks, internal_standard=InternalStandard({"Cd": "Cd 1"}, "per_vessel"))
    night = bench.Night(replace(rules, preparations=(own,)))
    night.series(line="1").series(line="2")
    assert bench.outcome_of(evaluate([night.batch(closed=True)], night.rules)).verdict == FAIL


def test_a_series_of_which_only_what_others_need_came_so_far_waits(bench):
    night = bench.Night(bench.rulebook(overlap=(Overlap("h_point", ("Pb",), ("Cd 1", "Cd 2"), "x"),)))
    night.series(line="1", levels=(0, 1))
    assert bench.outcome_of(evaluate([night.batch()], night.rules)).verdict == "waiting"


@pytest.mark.parametrize("role", ["sample", "process_blank"])
def test_a_reagent_blank_that_failed_fails_what_it_was_subtracted_from(bench, role):
    night = bench.Night(bench.rulebook(blanks=BlankRule(reagent=True)))
    night.series("1", role)
    night.series("RB", "reagent_blank", content=0.02, levels=(0, 1))  # two levels do not carry a line
    found = evaluate([night.batch(closed=True)], night.rules)
    assert bench.outcome_of(found, "RB").verdict == FAIL
    outcome = bench.outcome_of(found, "1")
    check = bench.named(outcome.results[0].checks, "blank")
    assert (outcome.verdict, check.verdict) == (FAIL, FAIL)
    assert "failed its own checks (reagent blank RB)" in check.sentence


def test_overlapping_lines_are_not_told_to_be_free_of_a_reagent_blank_that_stays_in_them(bench):
    rules = bench.rulebook(
        overlap=(Overlap("generalised", ("Cd",), ("Cd 1", "Cd 2")),),
        blanks=BlankRule(reagent=True, reagent_amounts={"Cd": Known(bench.quantity("1", "ug"))}),
    )
    night = bench.Night(rules).series(line="1").series(line="2", slope=2.0)
    outcome = bench.outcome_of(evaluate([night.batch(closed=True)], rules))
    assert outcome.verdict == FAIL
    assert "not solved with a reagent blank" in outcome.results[0].no_number


def test_overlapping_lines_of_which_one_has_no_background_give_no_number(bench):
    rules = bench.rulebook(
        overlap=(Overlap("generalised", ("Cd",), ("Cd 1", "Cd 2")),), blanks=BlankRule(background=True)
    )
    night = bench.Night(rules)
    night.read("background", "1", "", 0.02, line="1")
    night.series(line="1", background=0.02).series(line="2", slope=2.0, background=0.02)
    outcome = bench.outcome_of(evaluate([night.batch(closed=True)], rules))
    assert outcome.verdict == FAIL
    assert "the background is off only some of Cd 1 and Cd 2" in outcome.results[0].no_number


def test_overlapping_lines_of_which_one_has_no_bracket_give_no_number(bench):
    rules = bench.rulebook(
        overlap=(Overlap("generalised", ("Cd",), ("Cd 1", "Cd 2")),),
        brackets={"Cd": Known(bench.quantity("0.3", "mg/L"))}, drift="correct",
    )  # fmt: skip
    night = bench.Night(rules)
    night.read("bracket", "1", "", 0.30, line="1")
    night.series(line="1").series(line="2", slope=2.0)
    night.read("bracket", "2", "", 0.31, line="1")
    outcome = bench.outcome_of(evaluate([night.batch(closed=True)], rules))
    assert outcome.verdict == FAIL
    assert "the drift was corrected only on some of Cd 1 and Cd 2" in outcome.results[0].no_number


@pytest.mark.parametrize("at", [("Cd 1",), ("Cd 1", "Cd 2", "Cd 3")])
def test_h_point_takes_two_lines(bench, at):
    night = bench.Night(bench.rulebook(overlap=(Overlap("h_point", ("Cd",), at, "x"),)))
    for name in at:
        night.series(line=name.removeprefix("Cd "))
    outcome = bench.outcome_of(evaluate([night.batch(closed=True)], night.rules))
    assert outcome.verdict == FAIL
    assert outcome.results[0].no_number == f"h_point takes two lines, and {len(at)} are named: correct at under overlap"


def test_a_drift_that_could_not_be_corrected_warns(bench):
    """Brackets on both sides, but the second shows no internal standard, and the ratio has no sensitivity there."""
    rules = bench.rulebook(brackets={"Cd": Known(bench.quantity("0.3", "mg/L"))}, drift="correct")
    (flasks,) = rules.preparations
    with_rh = replace(flasks, internal_standard=InternalStandard({"Cd": "Rh"}, "at_constant_content"))
    rules = replace(rules, preparations=(with_rh,))

    def told(second: bool):
        night = bench.Night(rules)
        for level in range(-1, 5):
            time = {"measured_at": f"2030-05-01T00:0{level + 1}:00Z"}
            if level in (-1, 4):
                name = {"solution": f"BR{level}", **time}
                night.read("bracket", f"{level}", "", 0.3, **name)
                if level == -1 or second:
                    night.read("bracket", f"{level}", "", 0.5, analyte="Rh", **name)
                continue
            signal = 0.4 * (0.3 + 0.25 * level) + bench.NOISE[level]
            night.read("sample", "07", f"{level}", signal, **time)
            night.read("sample", "07", f"{level}", 0.5, analyte="Rh", **time)
        outcome = bench.outcome_of(evaluate([night.batch(closed=True)], rules))
        return outcome.verdict, bench.named(outcome.results[0].checks, "brackets")

    assert told(second=True)[0] == PASS
    verdict, check = told(second=False)
    assert (verdict, check.verdict) == (WARN, WARN)
    assert check.sentence.startswith("The drift was not corrected, though the rules ask for it: not every reading")


def test_nothing_that_came_changes_nothing_in_a_closed_batch_with_pooled_precision(bench):
    """What samples lend to blanks and references must not go where only those are solved again."""
    night = bench.Night(bench.rulebook(precision=Precision("pooled"), blanks=BlankRule(process=True)))
    night.series("1").series("2").series("P", "process_blank", content=0.02).series("R", "reference")
    batch = night.batch(closed=True)
    (first,) = evaluate([batch], night.rules)
    assert evaluate([batch], night.rules, {batch.key: Earlier(batch, first)}) == (first,)


@pytest.mark.parametrize("unit", ["V", "cps", ""])
def test_potentials_in_another_unit_give_no_number(bench, unit):
    """A slope of -58.5 mV beside steps of 0.02 V would make twenty times the content of it."""
    rules = bench.rulebook()
    (flasks,) = rules.preparations
    rules = replace(rules, preparations=(replace(flasks, response="log", electrode=Electrode(-1, slope=-58.5)),))
    night = bench.Night(rules)
    for level, signal in enumerate((0.100, 0.080, 0.065, 0.054)):
        night.read("sample", "07", str(level), signal, unit=unit)
    outcome = bench.outcome_of(evaluate([night.batch(closed=True)], rules))
    assert outcome.verdict == FAIL
    assert "potentials are reckoned in mV" in outcome.results[0].no_number


def test_potentials_that_go_to_and_fro_fail(bench):
    """Each step lies within 10 to 60 mV, and a slope that is known lets a content through any points at all."""
    rules = bench.rulebook()
    (flasks,) = rules.preparations
    electrode = Electrode(-1, slope=-58.5, uncertainty=0.3)
    rules = replace(rules, preparations=(replace(flasks, response="log", electrode=electrode),))
    night = bench.Night(rules)
    for level, signal in enumerate((100.0, 60.0, 95.0, 40.0)):
        night.read("sample", "07", str(level), signal, unit="mV")
    outcome = bench.outcome_of(evaluate([night.batch(closed=True)], rules))
    assert outcome.verdict == FAIL
    check = bench.named(outcome.results[0].checks, "potential_steps")
    assert check.sentence == "The addition of level 2 moves the potential back by 35 mV, against the others."


@pytest.mark.parametrize("low", [1e-320, 4.9e-324, 1e-310, 1e308])
@pytest.mark.parametrize("kind", ["own", "pooled", "declared"])
def test_a_bracket_at_the_end_of_the_range_stops_nothing(bench, low, kind):
    """A reading of 1e-320 is above zero and has no room for a step of its own; it lifts signals beyond all numbers."""
    noise = {"Cd": Noise(0.0005, 0.01, "A")} if kind == "declared" else {}
    for last in (low, 0.3):
        night = bench.Night(
            bench.rulebook(
                brackets={"Cd": Known(bench.quantity("0.3", "mg/L"))},
                drift="correct",
                precision=Precision(kind, noise),
            )  # fmt: skip
        )
        night.read("bracket", "1", "", low)
        night.series("1").series("2")
        night.read("bracket", "2", "", last)
        outcome = bench.outcome_of(evaluate([night.batch(closed=True)], night.rules), "1")
        number = outcome.results[0].content
        if last == low and number is not None:
            assert number.content == pytest.approx(0.3, rel=0.02)
        else:
            assert outcome.verdict == FAIL


@pytest.mark.filterwarnings("error")
@pytest.mark.parametrize("backgrounds", [(1e308, 1e307), (1.7e308, 0.0)])
def test_readings_beyond_all_numbers_warn_nobody(bench, backgrounds):
    """Backgrounds that differ by as much as a number can hold, under a series in two runs."""
    night = bench.Night(bench.rulebook(blanks=BlankRule(background=True)))
    for number, signal in enumerate(backgrounds):
        night.read("background", str(number), "", signal)
    for level in range(4):
        night.read("sample", "07", str(level), 0.12 + 0.1 * level, block="2" if level > 1 else "1")
    outcome = bench.outcome_of(evaluate([night.batch(closed=True)], night.rules))
    assert outcome.verdict == FAIL


def test_an_internal_standard_at_the_end_of_the_range_gives_no_number(bench):
    """4.9e-324 is above zero; times a sensitivity of a third it is not."""
    rules = bench.rulebook(brackets={"Cd": Known(bench.quantity("0.3", "mg/L"))}, drift="correct")
    (flasks,) = rules.preparations
    with_rh = replace(flasks, internal_standard=InternalStandard({"Cd": "Rh"}, "at_constant_content"))
    night = bench.Night(replace(rules, preparations=(with_rh,)))
    for level in range(-1, 5):
        role, name = ("sample", f"{level}") if -1 < level < 4 else ("bracket", "")
        same = {"solution": f"{role}{level}", "measured_at": f"2030-05-01T00:0{level + 1}:00Z"}
        night.read(role, "07", name, 0.3 if level < 0 else 0.1, **same)
        night.read(role, "07", name, 4.9e-324 if role == "sample" else 0.5, analyte="Rh", **same)
    outcome = bench.outcome_of(evaluate([night.batch(closed=True)], night.rules))
    assert outcome.verdict == FAIL
    assert outcome.results[0].content is None
