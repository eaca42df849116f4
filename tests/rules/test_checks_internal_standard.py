"""The recovery of the internal standard in the vessels against the brackets."""

from __future__ import annotations

from dataclasses import replace

import pytest

from spikeward.rules.checks.internal_standard import internal_standard
from spikeward.rules.checks.subject import Context, Subject
from spikeward.rules.outcomes import FAIL, NOT_EVALUATED, PASS, WARN
from spikeward.rules.records import NOT_DETECTED, Batch
from spikeward.rules.rulebook import Limits
from spikeward.rules.solve.drift import visits
from spikeward.rules.solve.solved import Solved

LIMITS = Limits(
    {"warn_outside": (0.70, 1.25), "fail_below": 0.60},
    {"warn_outside": "common practice", "fail_below": "common practice"},
)


def check(bench, signals, marks=(100.0, 102.0), entered="at_constant_content", **changes):
    """Vessels with these signals of rhodium, brackets with those of ``marks``."""
    prepared = bench.line_of([0.25 * i for i in range(len(signals))], [0.1 * (i + 1) for i in range(len(signals))])
    vessels = tuple(
        replace(one, internal=(replace(one.readings[0], analyte="Rh", signal=signal, unit="cps"),), **changes)
        for one, signal in zip(prepared.vessels, signals, strict=True)
    )
    night = bench.Night()
    for signal in marks:
        night.read("bracket", "", "", signal, analyte="Rh", unit="cps")
        night.read("sample", "99", "0", 1.0, analyte="Rh")
    brackets, untimed = visits(night.readings, {})
    context = Context(Batch(night.key, {}), bench.rulebook(), brackets=brackets, untimed=untimed)
    prepared = replace(prepared, vessels=vessels, internal="Rh", entered=entered)
    return internal_standard(Subject(Solved(prepared, ()), context), LIMITS)


@pytest.mark.parametrize(
    ("signals", "verdict", "observed", "says"),
    [
        ((101.0, 99.0, 104.0, 100.0), PASS, 104 / 101, "Level 2 shows 103 % of the signal of Rh in the brackets"),
        ((101.0, 70.8, 101.0, 101.0), PASS, 70.8 / 101, "Level 1 shows 70.1 %"),
        ((101.0, 70.6, 101.0, 101.0), WARN, 70.6 / 101, "warns outside 70 % to 125 %"),
        ((101.0, 126.3, 101.0, 101.0), WARN, 126.3 / 101, "Level 1"),
        ((101.0, 60.7, 101.0, 101.0), WARN, 60.7 / 101, "fails below 60 %"),
        ((101.0, 60.5, 101.0, 101.0), FAIL, 60.5 / 101, "fails below 60 %"),
        # what fails goes before what only warns, however far that is off
        ((101.0, 60.5, 101.0, 303.0), FAIL, 60.5 / 101, "Level 1"),
    ],
)
def test_the_worst_vessel_counts(bench, signals, verdict, observed, says):
    found = check(bench, signals)
    assert found.verdict == verdict
    assert found.observed == pytest.approx(observed)
    assert says in found.sentence
    assert (found.remedy == "") == (verdict == PASS)


def test_volumes_and_amounts_of_vessels_are_taken_out(bench):
    """The same amount in 10 mL and in 20 mL reads half, and is all there."""
    prepared = bench.line_of([0.0, 1.0], [0.1, 0.2])
    night = bench.Night()
    night.read("bracket", "", "", 100.0, analyte="Rh", unit="cps")
    vessels = tuple(
        replace(
            one, final=final, internal_amount=amount,
            internal=(replace(one.readings[0], analyte="Rh", signal=signal, unit="cps"),),
        )
        for one, final, amount, signal in zip(
            prepared.vessels, (10.0, 20.0), (1.0, 1.1), (100.0, 55.0), strict=True
        )
    )  # fmt: skip
    context = Context(Batch(night.key, {}), bench.rulebook(), brackets=visits(night.readings, {})[0])
    prepared = replace(prepared, vessels=vessels, internal="Rh", entered="per_vessel")
    assert internal_standard(Subject(Solved(prepared, ()), context), LIMITS).observed == pytest.approx(1.0)
    other = replace(prepared, entered="at_constant_content")
    assert internal_standard(Subject(Solved(other, ()), context), LIMITS).observed == pytest.approx(0.55)


@pytest.mark.parametrize(
    ("changes", "why"),
    [
        ({"entered": ""}, "the rules declare no internal standard"),
        ({"entered": "in_sample"}, "it stood in the test solution"),
        ({"marks": ()}, "no bracket shows the signal of Rh"),
        ({"marks": (0.0,)}, "is not above zero"),
    ],
)
def test_where_it_cannot_speak_it_says_why(bench, changes, why):
    found = check(bench, (101.0, 101.0), **changes)
    assert found.verdict == NOT_EVALUATED
    assert why in found.sentence


def test_an_export_that_divided_does_not_show_it(bench):
    prepared = bench.line_of([0.0, 1.0], [0.1, 0.2], internal="Rh", entered="per_vessel")
    vessels = tuple(
        replace(one, readings=(replace(one.readings[0], already=("internal_standard",)),)) for one in prepared.vessels
    )
    subject = bench.subject_of(replace(prepared, vessels=vessels))
    assert "applied the internal standard already" in internal_standard(subject, LIMITS).sentence


def test_a_vessel_without_its_signal_is_not_passed_over(bench):
    prepared = bench.line_of([0.0, 1.0], [0.1, 0.2], internal="Rh", entered="per_vessel")
    first, second = prepared.vessels
    lost = replace(first.readings[0], analyte="Rh", signal=None, qualifier=NOT_DETECTED)
    vessels = (replace(first, internal=(lost,)), replace(second, internal=(second.readings[0],)))
    found = internal_standard(bench.subject_of(replace(prepared, vessels=vessels)), LIMITS)
    assert (found.verdict, found.sentence) == (NOT_EVALUATED, "Not evaluated: not every vessel has a signal of Rh.")
