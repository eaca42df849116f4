"""The words that a person reads first: the cause before its consequences, and nothing that contradicts another."""

from __future__ import annotations

from dataclasses import replace

from spikeward.rules.evaluate import evaluate
from spikeward.rules.outcomes import FAIL, PASS, WAITING
from spikeward.rules.records import OVER_RANGE, Decision
from spikeward.rules.rulebook import Addition, Known, SeriesRule


def solve(bench, night, sample="07", **state):
    return bench.outcome_of(evaluate([night.batch(**state)], night.rules), sample)


def test_the_vessel_that_explains_a_failure_comes_before_the_slope(bench):
    outcome = solve(bench, bench.Night().series(shifts={2: 0.6}))
    failing = [check.name for check in outcome.results[0].checks if check.verdict == FAIL]
    assert failing.index("solved") < failing.index("residual")  # the order of the report is another
    assert outcome.sentence.startswith("DO NOT REPORT. MD12-07 Cd: The largest residual, of level 2, is ")
    assert "Look for a pipetting slip, first in level 2" in outcome.sentence


def test_over_range_asks_to_dilute_and_for_nothing_else(bench):
    night = bench.Night().series(levels=(0, 1, 2))
    night.read("sample", "07", "3", None, qualifier=OVER_RANGE, text="OVER")
    outcome = solve(bench, night)
    assert outcome.sentence.startswith("DO NOT REPORT. MD12-07 Cd: Level 3 is over range")
    (result,) = outcome.results
    said = " ".join(f"{check.sentence} {check.remedy}" for check in result.checks)
    assert "repeat it if nothing explains" not in said
    assert "wo points always lie" not in said
    assert result.degrees_of_freedom == 0


def test_a_coverage_factor_far_from_two_says_why(bench):
    three = bench.rulebook(series=SeriesRule(levels=("0", "1", "2")))
    outcome = solve(bench, bench.Night(three).series(levels=(0, 1, 2)))
    assert "k 13, because 1 degree of freedom remains; 3 vessels)" in outcome.results[0].sentence
    six = bench.rulebook()
    volumes = {str(n): bench.quantity(f"{0.25 * n:g}", "mL") for n in range(6)}
    flasks = replace(six.preparations[0], additions=(Addition("Mix", volumes, "total"),))
    night = bench.Night(replace(six, preparations=(flasks,))).series()
    night.read("sample", "07", "4", 0.4 * 1.3 + 0.0003)
    night.read("sample", "07", "5", 0.4 * 1.55 - 0.0003)
    assert "k 2.8; 6 vessels, 4 degrees of freedom" in solve(bench, night).results[0].sentence


def test_nothing_has_passed_where_there_is_no_number(bench):
    outcome = solve(bench, bench.Night().series(levels=(0, 1, 2)))
    assert (outcome.verdict, outcome.so_far) == (WAITING, WAITING)
    assert "so far" not in outcome.sentence
    held = bench.rulebook(series=SeriesRule(closes_with=("bracket",)))
    complete = solve(bench, bench.Night(held).series())
    assert (complete.verdict, complete.so_far) == (WAITING, PASS)


def test_an_excluded_vessel_stands_in_the_first_words(bench):
    night = bench.Night().series(shifts={3: 0.2})
    solution = night.readings[3].solution
    outcome = solve(bench, night, decisions=[Decision("exclude", solution, "N. Invented", "2030-05-02", "spilled", 1)])
    assert outcome.sentence.endswith("Excluded by decision: level 3.")
    assert "1 excluded by decision" in outcome.results[0].sentence


def test_a_reference_that_fails_its_own_checks_controls_nothing(bench):
    known = {"MUD": {"Cd": Known(bench.quantity("30", "mg/kg"), 0.3)}}
    night = bench.Night(bench.rulebook(references=known)).series()
    night.series("MUD", role="reference", shifts={0: 0.02, 1: -0.02, 2: -0.02, 3: 0.02})
    (found,) = evaluate([night.batch(closed=True)], night.rules)
    own = bench.outcome_of([found], "MUD").results[0]
    (check,) = [check for check in found.checks if check.name == "reference"]
    assert own.verdict == FAIL
    assert bench.named(own.checks, "reference").verdict == PASS  # it recovers what is known, by chance
    assert check.verdict == FAIL
    assert check.sentence.endswith("; Cd of reference MUD failed its own checks.")


def test_a_line_without_its_element_is_named_with_it(bench):
    night = bench.Night().series(analyte="Cd", line="214.439", levels=(0, 1, 2)).series(levels=(3,), line="226.502")
    outcome = solve(bench, night)
    told = " ".join((outcome.sentence, *outcome.waiting_for, *(result.sentence for result in outcome.results)))
    assert "Cd 214.439" in told
    assert " 214.439" not in told.replace("Cd 214.439", "")
