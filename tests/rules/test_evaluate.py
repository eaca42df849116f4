"""From batches to outcomes: the life of a verdict, what waits for what, and what an outcome depends on."""

from __future__ import annotations

import random
from dataclasses import replace

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from scipy import stats

from spikeward.rules.evaluate import evaluate
from spikeward.rules.outcomes import FAIL, NOT_EVALUATED, PASS, WAITING, WARN
from spikeward.rules.records import OVER_RANGE, Batch, BenchEntry, Decision
from spikeward.rules.rulebook import BlankRule, Known, SampleRule, SeriesRule


def solve(bench, night, sample="07", **state):
    return bench.outcome_of(evaluate([night.batch(**state)], night.rules), sample)


def test_a_complete_series_passes_at_once(bench):
    outcome = solve(bench, bench.Night().series())
    assert (outcome.verdict, outcome.so_far, outcome.final, outcome.waiting_for) == (PASS, PASS, True, ())
    (result,) = outcome.results
    assert result.verdict == PASS
    assert result.content.content == pytest.approx(0.3, rel=0.01)
    # 0.3 mg/L in 50 mL of digest from 0.5 g
    assert result.in_sample.content == pytest.approx(30, rel=0.01)
    assert result.in_sample.unit == "mg/kg"
    assert len(outcome.vessels) == 4
    assert outcome.vessels[1].addition == 0.25
    assert outcome.design == "flasks"


def test_the_first_words(bench):
    outcome = solve(bench, bench.Night().series())
    assert outcome.sentence.startswith("PASS. MD12-07 Cd 30.0")
    why = "k 4.3, because 2 degrees of freedom remain; 4 vessels)"
    for told in ("±", "mg/kg", "95 %", why, "Not shown: linearity"):
        assert told in outcome.sentence, told
    assert "standard, volumes and mass are not in it" in outcome.sentence
    assert outcome.sentence.endswith(outcome.results[0].sentence)


def test_a_series_that_lacks_a_level_waits_and_says_for_what(bench):
    outcome = solve(bench, bench.Night().series(levels=(0, 1, 2)))
    assert (outcome.verdict, outcome.so_far, outcome.final) == (WAITING, WAITING, False)
    assert outcome.waiting_for == ("level 3",)
    assert outcome.sentence.startswith("WAITING. MD12-07: waits for level 3.")
    (result,) = outcome.results
    assert result.verdict == WAITING
    assert result.reported is None
    assert "level 3" in result.no_number


def test_an_analyte_absent_from_one_vessel_is_waited_for(bench):
    night = bench.Night().series().series(levels=(0, 1, 2), analyte="Pb")
    outcome = solve(bench, night)
    assert outcome.verdict == WAITING
    assert any("Pb" in told for told in outcome.waiting_for)


def test_a_fail_that_more_levels_cannot_undo_is_published_at_once(bench):
    night = bench.Night().series(levels=(0, 1))
    night.read("sample", "07", "2", None, qualifier=OVER_RANGE, text="OVER")
    outcome = solve(bench, night)
    assert (outcome.verdict, outcome.final) == (FAIL, False)
    assert outcome.sentence.startswith("DO NOT REPORT (so far). MD12-07 Cd: Level 2 is over range")


def test_a_doubtful_fit_of_some_levels_is_no_fail_yet(bench):
    night = bench.Night().series(levels=(0, 1, 2), shifts={1: 0.1})
    assert solve(bench, night).verdict == WAITING
    assert solve(bench, bench.Night().series(shifts={1: 0.1})).verdict == FAIL


def test_contradictions_fail_and_doubts_warn(bench):
    night = bench.Night().series(levels=(0, 1))
    told = {"07": {"conflicts": ("a.csv row 2 and b.csv row 2 disagree about level 0; decide in the decisions file",)}}
    outcome = solve(bench, night, telling=told)
    assert (outcome.verdict, outcome.final) == (FAIL, False)
    assert "a.csv row 2 and b.csv row 2 disagree" in outcome.sentence
    doubt = solve(bench, bench.Night().series(), telling={"07": {"warnings": ("a.csv and b.csv are equal",)}})
    assert (doubt.verdict, doubt.final) == (WARN, True)
    assert bench.named(doubt.checks, "identity").verdict == WARN
    assert doubt.results[0].verdict == WARN


def test_a_lapsed_series_warns_or_fails_as_the_rules_say(bench):
    night = bench.Night().series(levels=(0, 1, 2))
    outcome = solve(bench, night, lapsed=["07"])
    assert (outcome.verdict, outcome.final) == (WARN, True)
    assert outcome.results[0].reported is not None
    assert bench.named(outcome.checks, "completeness").verdict == WARN
    strict = replace(night, rules=replace(night.rules, series=SeriesRule(lapsed="fail")))
    assert solve(bench, strict, lapsed=["07"]).verdict == FAIL
    assert solve(bench, night, closed=True).verdict == WARN


@pytest.mark.parametrize("levels", [(0, 1), (0,), (3,)])
def test_a_lapsed_series_without_enough_levels_fails(bench, levels):
    outcome = solve(bench, bench.Night().series(levels=levels), closed=True)
    assert (outcome.verdict, outcome.final) == (FAIL, True)
    assert "the design needs at least 3" in bench.named(outcome.results[0].checks, "levels").sentence


def test_a_missing_mass_is_waited_for_and_then_fails(bench):
    rules = bench.rulebook()
    back = SampleRule(mass="bench", digest=bench.quantity("50", "mL"))
    rules = replace(rules, preparations=(replace(rules.preparations[0], sample=back),))
    night = bench.Night(rules).series()
    waiting = solve(bench, night)
    assert waiting.verdict == WAITING
    assert any("mass" in told for told in waiting.waiting_for)
    assert solve(bench, night, closed=True).verdict == FAIL
    entry = BenchEntry("", "MD12", "07", "", (("mass", "0.25 g"),), "bench.csv", 2, "d")
    batch = replace(night.batch(), bench=(entry,))
    outcome = bench.outcome_of(evaluate([batch], rules))
    assert outcome.verdict == PASS
    assert outcome.results[0].in_sample.content == pytest.approx(60, rel=0.01)


def night_with_blanks(bench, **changes):
    rules = bench.rulebook(blanks=BlankRule(background=True, process=True))
    night = bench.Night(replace(rules, **changes))
    night.read("background", "1", "", 0.0100)
    night.read("background", "2", "", 0.0102)
    for sample in ("1", "2"):
        night.series(sample, role="process_blank", content=0.006, background=0.0101)
    return night.series(background=0.0101)


def test_pass_waits_until_the_batch_closes_where_blanks_are_subtracted(bench):
    night = night_with_blanks(bench)
    open_ = solve(bench, night)
    assert (open_.verdict, open_.so_far, open_.final) == (WAITING, PASS, False)
    assert open_.waiting_for
    closed = solve(bench, night, closed=True)
    assert (closed.verdict, closed.final) == (PASS, True)
    (result,) = closed.results
    assert result.background == pytest.approx(0.0101)
    assert result.in_sample.content == pytest.approx(30 - 0.6, rel=0.01)
    assert result.blank == pytest.approx(0.6, rel=0.05)
    assert "process blank 0.6" in closed.sentence
    assert "the background and the process blank" in closed.sentence
    assert {reading.series.role for reading in closed.context} == {"background", "process_blank"}


def test_a_blank_that_never_came_fails_a_closed_batch(bench):
    for kept, told in (("process_blank", "background"), ("background", "process blank")):
        night = night_with_blanks(bench)
        night.readings = [r for r in night.readings if r.series.role in ("sample", kept)]
        assert solve(bench, night).verdict == WAITING
        outcome = solve(bench, night, closed=True)
        assert outcome.verdict == FAIL
        assert f"No {told}" in outcome.sentence
        assert outcome.results[0].reported is None
        assert outcome.results[0].no_number


def test_a_blank_that_failed_fails_what_it_was_subtracted_from(bench):
    night = night_with_blanks(bench)
    night.readings = [
        replace(r, signal=r.signal + 0.1) if r.series.role == "process_blank" and r.level == "1" else r
        for r in night.readings
    ]
    outcome = solve(bench, night, closed=True)
    assert solve(bench, night, sample="1", closed=True).verdict == FAIL
    assert bench.named(outcome.results[0].checks, "blank").verdict == FAIL


@pytest.mark.parametrize(("amount", "verdict"), [(0.006, PASS), (0.02, WARN), (0.05, FAIL)])
def test_share_of_the_process_blank(bench, amount, verdict):
    night = bench.Night(bench.rulebook(blanks=BlankRule(process=True)))
    for sample in ("1", "2"):
        night.series(sample, role="process_blank", content=amount)
    outcome = solve(bench, night.series(), closed=True)
    assert bench.named(outcome.results[0].checks, "blank").verdict == verdict


def test_a_fail_of_an_open_batch_says_so_far(bench):
    night = night_with_blanks(bench)
    night.series("09", background=0.0101, shifts={1: 0.1})
    outcome = solve(bench, night, sample="09")
    assert (outcome.verdict, outcome.final) == (FAIL, False)
    assert outcome.sentence.startswith("DO NOT REPORT (so far). ")
    assert solve(bench, night, sample="09", closed=True).sentence.startswith("DO NOT REPORT. ")


def bracketed(bench, drift=(1.0, 1.0, 1.0), timed=True):
    """Bracket, sample 07, bracket, sample 09, bracket; ``drift`` is the sensitivity at each bracket."""
    rules = bench.rulebook(
        brackets={"Cd": Known(bench.quantity("20", "ug/L"))}, series=SeriesRule(closes_with=("bracket",))
    )
    night = bench.Night(rules, timed=timed)
    for n, sensitivity in enumerate(drift):
        if n:
            night.series({1: "07", 2: "09"}[n])
        if sensitivity is not None:
            night.read("bracket", str(n), "", 0.2 * sensitivity)
            night.read("bracket", str(n), "", 0.2 * sensitivity)
    return night


@pytest.mark.parametrize(
    ("drift", "first", "second"),
    [
        ((1, 1.01, 0.98), PASS, PASS),
        ((1, 0.99, 0.93), PASS, WARN),
        ((1, 1.02, 0.85), PASS, FAIL),  # only what lies next to the bad bracket
        ((1, 0.85, 1.02), FAIL, FAIL),
        ((1, 1.0, None), PASS, WARN),  # one side
        ((None, None, None), FAIL, FAIL),
    ],
)
def test_brackets_on_both_sides(bench, drift, first, second):
    night = bracketed(bench, drift)
    for sample, verdict in (("07", first), ("09", second)):
        outcome = solve(bench, night, sample=sample, closed=True)
        assert bench.named(outcome.results[0].checks, "brackets").verdict == verdict
        assert outcome.verdict == verdict


def test_an_open_batch_waits_for_its_closing_bracket(bench):
    night = bracketed(bench, (1, 1, None))
    outcome = solve(bench, night, sample="09")
    assert outcome.verdict == WAITING
    assert any("bracket" in told for told in outcome.waiting_for)
    assert bench.named(outcome.results[0].checks, "brackets").verdict == NOT_EVALUATED


def test_without_times_or_order_the_brackets_that_the_rules_ask_for_warn(bench):
    outcome = solve(bench, bracketed(bench, (1, 1, 0.5), timed=False), closed=True)
    check = bench.named(outcome.results[0].checks, "brackets")
    assert check.verdict == outcome.verdict == WARN
    assert "without acquisition times" in check.sentence


def test_a_reading_without_a_time_concerns_its_own_series_only(bench):
    night = bracketed(bench, (1, 0.5, 1))
    night.read("sample", "99", "0", 0.1, measured_at="")
    verdicts = {
        sample: bench.named(solve(bench, night, sample=sample, closed=True).results[0].checks, "brackets").verdict
        for sample in ("07", "09")
    }
    assert verdicts == {"07": FAIL, "09": FAIL}
    night.readings = [replace(r, measured_at="") if r.series.sample == "07" else r for r in night.readings]
    assert bench.named(solve(bench, night, closed=True).results[0].checks, "brackets").verdict == WARN
    assert bench.named(solve(bench, night, sample="09", closed=True).results[0].checks, "brackets").verdict == FAIL


@pytest.mark.parametrize(("files", "verdict"), [(("a.csv", "a.csv"), FAIL), (("a.csv", "b.csv"), WARN)])
def test_an_order_counts_within_one_file(bench, files, verdict):
    """Each file counts from one again: bracket 3 of one file does not follow vessel 2 of another."""
    night = bracketed(bench, (1, 0.5, 1), timed=False)
    night.readings = [
        replace(r, order=n, path=files[r.series.sample == "2"]) for n, r in enumerate(night.readings, start=1)
    ]
    outcome = solve(bench, night, closed=True)
    assert bench.named(outcome.results[0].checks, "brackets").verdict == verdict
    open_ = evaluate([night.batch()], night.rules)[0]
    assert not any("closing bracket" in told for told in open_.waiting_for)


def test_the_readings_of_one_bracket_must_agree(bench):
    """0.20 and 0.26 are 0.23 on the average, which is known to s/sqrt(2) = 0.03, 13 %."""
    night = bracketed(bench, (1, 1, 1))
    marks = [n for n, r in enumerate(night.readings) if r.series.role == "bracket"]
    for n in marks:
        night.readings[n] = replace(night.readings[n], signal=0.23)
    for n, signal in zip(marks[:2], (0.20, 0.26), strict=True):
        night.readings[n] = replace(night.readings[n], signal=signal)
    check = bench.named(solve(bench, night, closed=True).results[0].checks, "brackets")
    assert check.verdict == WARN
    assert check.observed == pytest.approx(0.03 / 0.23)
    assert "scatter" in check.sentence
    far = bench.named(solve(bench, night, sample="09", closed=True).results[0].checks, "brackets")
    assert far.verdict == WARN  # the first bracket is what every other is held against


def test_brackets_in_different_units_are_not_compared(bench):
    night = bracketed(bench, (1, 1, 1))
    night.readings = [
        replace(r, signal=200.0, unit="mA") if (r.series.role, r.series.sample) == ("bracket", "1") else r
        for r in night.readings
    ]
    check = bench.named(solve(bench, night, closed=True).results[0].checks, "brackets")
    assert (check.verdict, check.sentence) == (FAIL, "The units of the brackets differ: they come in A and mA.")


def test_the_degrees_of_freedom_of_the_coverage_factor_are_told(bench):
    """With five background vessels more degrees of freedom belong to k than the 2 of the line."""
    night = bench.Night(bench.rulebook(blanks=BlankRule(background=True)))
    for n, shift in enumerate((-0.002, -0.001, 0.0, 0.001, 0.002)):
        night.read("background", str(n), "", 0.01 + shift)
    (result,) = solve(bench, night.series(background=0.01), closed=True).results
    left = result.in_sample.effective_degrees_of_freedom
    assert left > result.degrees_of_freedom == 2
    assert result.content.effective_degrees_of_freedom == left
    k = f"k {result.in_sample.coverage_factor:.1f} with {left} degrees of freedom, because the line alone has 2;"
    assert k in result.sentence
    assert "4 vessels, 2 degrees of freedom" in result.sentence


def test_a_background_read_once_is_missing_from_the_interval(bench):
    night = bench.Night(bench.rulebook(blanks=BlankRule(background=True)))
    night.read("background", "1", "", 0.01)
    (result,) = solve(bench, night.series(background=0.01), closed=True).results
    assert "are not in it, nor is the background, whose scatter is not known." in result.sentence


def test_an_exact_line_has_no_uncertainty_of_zero(bench):
    night = bench.Night()
    for level in range(4):
        night.read("sample", "07", str(level), 0.4 * (0.25 + 0.25 * level))
    (result,) = solve(bench, night).results
    assert "uncertainty not known" in result.sentence
    assert "± 0" not in result.sentence
    assert "The interval holds" not in result.sentence


def test_one_process_blank_says_what_it_does_not_show_and_warns_where_two_are_asked_for(bench):
    night = bench.Night(bench.rulebook(blanks=BlankRule(process=True)))
    night.series("1", role="process_blank", content=0.006).series()
    outcome = solve(bench, night, closed=True)
    assert "how blanks vary between preparations" in outcome.results[0].sentence
    assert bench.named(outcome.results[0].checks, "blank").verdict == PASS  # many methods ask for one a batch
    limits = night.rules.checks["blank"]
    two = replace(limits, values={**limits.values, "warn_blanks_below": 2})
    night.rules = replace(night.rules, checks={**night.rules.checks, "blank": two})
    check = bench.named(solve(bench, night, closed=True).results[0].checks, "blank")
    assert check.verdict == WARN
    assert "says nothing about how preparations vary" in check.sentence


def test_a_blank_taken_off_by_the_export_is_no_process_blank(bench):
    """What an instrument subtracts is a signal: the process blank is still asked for, and subtracted as an amount."""
    rules = bench.rulebook(blanks=BlankRule(background=True, process=True))
    night = bench.Night(rules).series(already=("blank",))
    lacking = solve(bench, night, closed=True)
    assert "No process blank was measured" in lacking.sentence
    assert lacking.results[0].reported is None
    for sample in ("1", "2"):
        night.series(sample, role="process_blank", content=0.06, already=("blank",))
    (result,) = solve(bench, night, closed=True).results
    gross = result.content.content
    assert result.blank == pytest.approx(100 * 0.06, rel=0.02)
    assert result.in_sample.content == pytest.approx(100 * gross - result.blank)
    raw = bench.Night(rules).series(already=("blank",)).series("1", role="process_blank", content=0.06)
    assert "export both in the same way" in solve(bench, raw, closed=True).sentence


def test_a_background_that_is_no_background_any_more(bench):
    night = bench.Night(bench.rulebook(blanks=BlankRule(background=True)))
    night.read("background", "1", "", 0.0003, already=("blank",))
    outcome = solve(bench, night.series(background=0.01), closed=True)
    assert outcome.verdict == FAIL
    assert "export all solutions in the same way" in outcome.results[0].no_number


@pytest.mark.parametrize(
    ("content", "verdict"), [(0.0599, WARN), (0.065, WARN), (0.3, FAIL), (1.2, WARN), (0.02, FAIL)]
)
def test_a_net_content_that_cannot_be_told_from_zero_has_no_share(bench, content, verdict):
    """0.02 less a blank of 0.06 is below zero by more than its uncertainty; of 0.3 the blank is a quarter."""
    night = bench.Night(bench.rulebook(blanks=BlankRule(process=True)))
    for sample, amount in (("1", 0.058), ("2", 0.062), ("3", 0.06)):
        night.series(sample, role="process_blank", content=amount)
    outcome = solve(bench, night.series(content=content), closed=True)
    checks = outcome.results[0].checks
    assert outcome.verdict == verdict
    if content < 0.1:
        assert "cannot be told apart" in bench.named(checks, "blank").sentence
        told = bench.named(checks, "expanded_uncertainty").sentence
        assert ("below zero by more than its uncertainty: background or blank" in told) == (content == 0.02)


def test_brackets_are_corrected_for_the_background_first(bench):
    night = bracketed(bench, (1, 1, 1))
    night.rules = replace(night.rules, blanks=BlankRule(background=True))
    night.readings = [replace(r, signal=r.signal + 1.0) for r in night.readings]
    night.read("background", "1", "", 1.0)
    # 15 % of the sensitivity is only 2.5 % of the signal with its background
    night.readings = [
        replace(r, signal=1.0 + 0.17) if r.series.role == "bracket" and r.series.sample == "1" else r
        for r in night.readings
    ]
    outcome = solve(bench, night, closed=True)
    check = bench.named(outcome.results[0].checks, "brackets")
    assert check.observed == pytest.approx(-0.15, rel=1e-6)
    assert check.verdict == FAIL


def with_reference(bench, found, role="reference", known="30", uncertainty=0.3, content=None):
    name = "MUD"
    rules = bench.rulebook(references={name: {"Cd": Known(bench.quantity(known, "mg/kg"), uncertainty)}})
    return bench.Night(rules).series(name, role=role, content=found).series()


@pytest.mark.parametrize(
    ("found", "verdict"), [(0.3, PASS), (0.2, FAIL), (0.4, FAIL), (0.312, WARN)]
)
def test_a_reference_judges_itself_and_the_samples_of_its_batch(bench, found, verdict):
    night = with_reference(bench, found)
    own = solve(bench, night, sample="MUD", closed=True)
    assert bench.named(own.results[0].checks, "reference").verdict == verdict
    sample = solve(bench, night, closed=True)
    assert bench.named(sample.results[0].checks, "reference").verdict == verdict
    (batch,) = evaluate([night.batch(closed=True)], night.rules)
    assert bench.named(batch.checks, "reference").verdict == verdict


def test_samples_can_be_kept_apart_from_their_reference(bench):
    night = with_reference(bench, 0.2)
    limits = night.rules.checks["reference"]
    apart = replace(limits, values={**limits.values, "samples_follow": 0})
    night.rules = replace(night.rules, checks={**night.rules.checks, "reference": apart})
    assert solve(bench, night, closed=True).verdict == PASS
    assert solve(bench, night, sample="MUD", closed=True).verdict == FAIL


def test_a_reference_is_compared_in_its_own_unit(bench):
    night = with_reference(bench, 0.3)
    in_ug = {"MUD": {"Cd": Known(bench.quantity("30000", "ug/kg"), 300.0)}}
    night.rules = replace(night.rules, references=in_ug)
    assert bench.named(solve(bench, night, closed=True).results[0].checks, "reference").verdict == PASS
    night.rules = replace(night.rules, references={"MUD": {"Cd": Known(bench.quantity("30", "mg/L"))}})
    assert bench.named(solve(bench, night, closed=True).results[0].checks, "reference").verdict == FAIL


def test_a_check_sample_by_its_recovery(bench):
    for found, verdict in ((0.3, PASS), (0.26, WARN), (0.2, FAIL)):
        outcome = solve(bench, with_reference(bench, found, role="check"), closed=True)
        assert bench.named(outcome.results[0].checks, "check_sample").verdict == verdict


def test_a_reference_that_the_rules_wait_for_and_that_never_came_warns(bench):
    rules = bench.rulebook(series=SeriesRule(closes_with=("reference",)))
    night = bench.Night(rules).series()
    assert solve(bench, night).waiting_for == ("a reference",)
    outcome = solve(bench, night, closed=True)
    assert outcome.verdict == WARN
    (batch,) = evaluate([night.batch(closed=True)], rules)
    assert bench.named(batch.checks, "closing").verdict == WARN


def test_one_bad_analyte_does_not_hide_the_good_one(bench):
    night = bench.Night().series().series(analyte="Pb", shifts={1: 0.1})
    outcome = solve(bench, night)
    assert outcome.verdict == FAIL
    assert {result.analyte: result.verdict for result in outcome.results} == {"Cd": PASS, "Pb": FAIL}
    assert "Pb: " in outcome.sentence
    assert "Not touched by this: Cd." in outcome.sentence


def test_a_vessel_excluded_by_decision_is_named(bench):
    night = bench.Night().series(shifts={2: 0.2})
    decision = Decision("exclude", "MD12_sample_07_2", "A. Person", "2030-05-02", "spilt", 3)
    outcome = solve(bench, night, decisions=[decision])
    assert outcome.verdict == WARN  # three vessels are left
    assert "1 excluded by decision" in outcome.sentence
    assert outcome.vessels[2].excluded == "A. Person, 2030-05-02: spilt"
    assert any("spilt" in note for note in outcome.notes)


def test_an_excluded_background_reading_is_not_subtracted(bench):
    night = night_with_blanks(bench)
    wild = night.read("background", "3", "", 0.5)
    decision = Decision("exclude", wild.solution, "A. Person", "2030-05-02", "carry-over", 3)
    outcome = solve(bench, night, closed=True, decisions=[decision])
    assert outcome.results[0].background == pytest.approx(0.0101)


def full_night(bench, n=0):
    night = night_with_blanks(
        bench,
        series=SeriesRule(closes_with=("bracket", "process_blank", "reference")),
        brackets={"Cd": Known(bench.quantity("20", "ug/L"))},
        references={"MUD": {"Cd": Known(bench.quantity("30", "mg/kg"), 0.3)}},
    )
    night.key = replace(night.key, batch=f"MD{12 + n}")
    first = night.read("bracket", "1", "", 0.21)
    night.readings = [first, *night.readings[:-1]]
    night.series("MUD", role="reference", content=0.306, background=0.0101)
    night.series("08", analyte="Pb", background=0.0101).series("09", content=0.41, background=0.0101)
    night.read("bracket", "2", "", 0.207)
    night.readings = [replace(r, series=replace(r.series, batch=night.key.batch)) for r in night.readings]
    return night


def test_a_whole_night(bench):
    night = full_night(bench)
    night.readings[0] = replace(night.readings[0], measured_at="2030-04-30T23:59:00Z")
    (batch,) = evaluate([night.batch(closed=True)], night.rules)
    assert [outcome.key.sample for outcome in batch.outcomes] == ["1", "2", "MUD", "07", "08", "09"]
    assert {outcome.key.sample: outcome.verdict for outcome in batch.outcomes} == {
        "1": PASS, "2": PASS, "MUD": PASS, "07": PASS, "08": FAIL, "09": PASS,
    }  # fmt: skip
    assert "No background of Pb" in bench.outcome_of([batch], "08").sentence
    assert {check.name: check.verdict for check in batch.checks} == {
        "closing": PASS, "reference": PASS, "brackets": PASS,
    }  # fmt: skip


@settings(max_examples=20, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(seed=st.integers(0, 10_000))
def test_the_order_of_batches_and_members_changes_nothing(bench, seed):
    nights = [full_night(bench, n) for n in range(3)]
    batches = [night.batch(closed=n != 1) for n, night in enumerate(nights)]
    expected = evaluate(batches, nights[0].rules)
    shuffled = random.Random(seed)
    mixed = []
    for batch in batches:
        keys = list(batch.members)
        shuffled.shuffle(keys)
        mixed.append(replace(batch, members={key: batch.members[key] for key in keys}))
    shuffled.shuffle(mixed)
    assert evaluate(mixed, nights[0].rules) == expected
    assert evaluate(batches[:1], nights[0].rules) == expected[:1]


def digest(bench, night, sample="07", **state):
    return solve(bench, night, sample, **state).inputs_digest


def test_equal_inputs_have_equal_digests_and_every_change_another(bench):
    def built(**state):
        return full_night(bench).batch(closed=True, **state)

    def found(batch: Batch, rules=None):
        return bench.outcome_of(evaluate([batch], rules or full_night(bench).rules)).inputs_digest

    plain = found(built())
    assert plain == found(built())
    assert len(plain) == 64
    night = full_night(bench)
    seen = {plain, found(replace(built(), closed=False)), found(built(), replace(night.rules, digest="other"))}
    for role in ("sample", "background", "process_blank", "bracket", "reference"):
        changed = full_night(bench)
        at = next(n for n, r in enumerate(changed.readings) if r.series.role == role)
        signal = changed.readings[at].signal * 1.5
        changed.readings[at] = replace(changed.readings[at], signal=signal, text=f"{signal:.4f}")
        seen.add(found(changed.batch(closed=True)))
    seen.add(found(built(telling={"07": {"warnings": ("a.csv and b.csv have equal content",)}})))
    seen.add(found(built(decisions=[Decision("exclude", "MD12_sample_07_3", "A. Person", "2030-05-02", "spilt", 3)])))
    assert len(seen) == 10


def test_what_concerns_another_sample_does_not_change_the_digest(bench):
    rules = full_night(bench).rules
    plain = bench.outcome_of(evaluate([full_night(bench).batch(closed=True)], rules))
    changed = full_night(bench)
    changed.readings = [
        replace(r, signal=r.signal * 1.001) if r.series.sample == "09" else r for r in changed.readings
    ]
    decision = Decision("exclude", "MD12_sample_09_3", "A. Person", "2030-05-02", "spilt", 3)
    assert bench.outcome_of(evaluate([changed.batch(closed=True, decisions=[decision])], rules)) == plain


@pytest.mark.parametrize("found", [0.306, 0.31, 0.312, 0.318])
def test_the_distance_of_a_reference_is_held_against_students_t(bench, found):
    night = with_reference(bench, found)
    limits = night.rules.checks["reference"]
    strict = replace(limits, values={**limits.values, "fail_p": 0.001})
    night.rules = replace(night.rules, checks={**night.rules.checks, "reference": strict})
    (result,) = solve(bench, night, sample="MUD", closed=True).results
    own, known = result.in_sample.standard_uncertainty, 0.3
    u = (own**2 + known**2) ** 0.5
    p = 2 * stats.t.sf(abs(result.in_sample.content - 30) / u, 2 * (u / own) ** 4)
    expected = FAIL if p < 0.001 else WARN if p < 0.01 else PASS
    assert bench.named(result.checks, "reference").verdict == expected


def test_a_batch_says_what_it_waits_for(bench):
    night = bracketed(bench, (1, 1, None))
    (batch,) = evaluate([night.batch()], night.rules)
    assert batch.waiting_for == ("a closing bracket later than every vessel",)
    assert bench.named(batch.checks, "closing").verdict == NOT_EVALUATED
    assert not batch.closed
    (closed,) = evaluate([night.batch(closed=True)], night.rules)
    assert closed.waiting_for == ()


def test_two_lines_of_one_analyte_stand_apart(bench):
    night = bench.Night().series(line="Cd 214.4").series(line="226.5", content=0.31)
    outcome = solve(bench, night)
    assert [result.line for result in outcome.results] == ["226.5", "Cd 214.4"]
    assert "Cd 226.5: 31.0" in outcome.sentence
    assert "Cd 214.4: 30.0" in outcome.sentence


def test_a_series_without_readings_fails_when_its_batch_closes(bench):
    batch = bench.Night().series().batch(closed=True)
    empty = {key: replace(members, readings=()) for key, members in batch.members.items()}
    outcome = bench.outcome_of(evaluate([replace(batch, members=empty)], bench.rulebook()))
    assert (outcome.verdict, outcome.results) == (FAIL, ())


def test_no_batches_no_outcomes(bench):
    assert evaluate([], bench.rulebook()) == ()


def test_a_closing_that_nothing_waited_for_makes_no_revision(bench):
    """Without closing members a complete series passes at once; closing its batch changes nothing that it says."""
    night = bench.Night().series()
    (before,), (after,) = evaluate([night.batch()], night.rules), evaluate([night.batch(closed=True)], night.rules)
    assert before.outcomes[0].verdict == PASS
    assert after.outcomes == before.outcomes


def test_a_copy_that_does_not_count_makes_no_revision(bench):
    night = bench.Night().series()
    plain = evaluate([night.batch()], night.rules)
    copied = evaluate([night.batch(telling={"07": {"notes": ("b.csv row 2 repeats a.csv row 2",)}})], night.rules)
    assert copied[0].outcomes == plain[0].outcomes
