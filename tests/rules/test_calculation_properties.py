"""What must not matter: how an addition was delivered, when a night took place, what is solved beside it, units."""

from __future__ import annotations

import math
from dataclasses import replace
from datetime import datetime, timedelta

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from spikeward.rules.evaluate import evaluate
from spikeward.rules.outcomes import FAIL
from spikeward.rules.records import Batch, Members
from spikeward.rules.rulebook import (
    Addition,
    Electrode,
    InternalStandard,
    Known,
    Noise,
    Overlap,
    Precision,
    Preparation,
    Standard,
)

SCATTER = (0.0004, -0.0007, 0.0005, -0.0002, 0.0003, -0.0004)


def mixed_rules(bench, **changes):
    """One laboratory that does everything: each sample name begins with the letter of its design."""
    flasks = bench.rulebook().preparations[0]
    volumes = {str(n): bench.quantity(f"{0.25 * n:g}", "mL") for n in range(6)}
    bent = replace(flasks, additions=(Addition("Mix", volumes, "total"),))
    again = replace(bent, design="successive", final={}, additions=(Addition("Mix", volumes, "each"),))
    preparations = (
        replace(bent, applies={"sample": "C.*"}, response="curve"),
        replace(again, applies={"sample": "E.*"}, response="log", electrode=Electrode(-1, 22.0, None, None)),
        replace(
            bent, applies={"sample": "I.*"},
            internal_standard=InternalStandard({"Cd": "Rh", "Pb": "Rh"}, "at_constant_content"),
        ),
        replace(bent, applies={"sample": "B.*"}),
        replace(again, applies={"sample": "S.*"}),
        flasks,
    )  # fmt: skip
    return bench.rulebook(preparations=preparations, **changes)


def content_of(n):
    return 0.2 + 0.037 * n


def mixed_night(bench, rules, count=3):
    """Some series of every design, all of known contents, measured one after another."""
    night = bench.Night(rules)
    for n in range(count):
        truth = content_of(n)
        night.series(f"0{n}", content=truth)
        for level in range(6):
            x, e = 0.25 * level, SCATTER[(level + n) % 6]
            c = 0.4 * (truth + x)
            night.read("sample", f"C{n}", str(level), c - 0.08 * c * c + 0.1 * e)
            volume = 10 + 0.25 * level * (level + 1) / 2
            inside = (truth * 10 + 2.5 * level * (level + 1) / 2) / volume
            night.read("sample", f"E{n}", str(level), 200.0 - 57.0 * math.log10(inside) + 20 * e, unit="mV")
            night.read("sample", f"S{n}", str(level), inside + e)
            drifting = 1.0 - 0.03 * level
            solution = f"I{n}-{level}"
            night.read("sample", f"I{n}", str(level), (c + e) * drifting, solution=solution)
            night.read("sample", f"I{n}", str(level), drifting, solution=solution, analyte="Rh")
            for run, slope in (("1", 1.0), ("2", 0.8)):
                night.read("sample", f"B{n}", str(level), slope * (c + e), block=run)
    return night


def results_of(outcomes):
    return {outcome.key.sample: outcome.results for batch in outcomes for outcome in batch.outcomes}


@pytest.mark.parametrize(
    "precision",
    [Precision(), Precision("declared", {"Cd": Noise(0.0005, 0.01, "A")}), Precision(weights="equal")],
    ids=["own", "declared", "equal weights"],
)
def test_every_design_gives_its_truth_alone_and_in_company(bench, precision):
    """The same series alone, in company and backwards: every field of every result, to the last bit."""
    rules = mixed_rules(bench, precision=precision)
    batch = mixed_night(bench, rules).batch(closed=True)
    together = results_of(evaluate([batch], rules))
    assert len(together) == 18
    for sample, results in together.items():
        (result,) = results
        truth = content_of(int(sample[-1]))
        if sample.startswith("E") and precision.comes_from == "declared":
            assert "declared in A and its signals are in mV" in result.no_number
            continue
        assert result.content is not None, (sample, result.no_number)
        assert result.content.interval[0] < truth < result.content.interval[1], sample
    for key, members in batch.members.items():
        alone = evaluate([replace(batch, members={key: members})], rules)
        assert results_of(alone)[key.sample] == together[key.sample]
    backwards = {key: batch.members[key] for key in reversed(list(batch.members))}
    assert results_of(evaluate([replace(batch, members=backwards)], rules)) == together
    other = replace(batch, key=replace(batch.key, batch="MD13"), members=_renamed(batch))
    assert results_of(evaluate([other, batch], rules)[:1]) == together


def _renamed(batch: Batch) -> dict:
    found = {}
    for key, members in batch.members.items():
        new = replace(key, batch="MD13")
        readings = tuple(replace(reading, series=new) for reading in members.readings)
        found[new] = Members(new, readings)
    return found


@given(st.permutations(range(12)))
@settings(max_examples=15, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
def test_the_order_in_which_readings_are_held_changes_no_bit(bench, order):
    """Members hold readings in canonical order; the solver must not need it."""
    rules = mixed_rules(bench)
    batch = mixed_night(bench, rules, 1).batch(closed=True)
    usual = results_of(evaluate([batch], rules))
    for key, members in batch.members.items():
        readings = members.readings
        shuffled = tuple(readings[place] for place in order if place < len(readings))
        shuffled += readings[len(order) :]
        moved = results_of(evaluate([replace(batch, members={key: Members(key, shuffled)})], rules))
        for field in ("content", "in_sample", "slope", "points", "parameters"):
            assert getattr(moved[key.sample][0], field) == getattr(usual[key.sample][0], field), (key.sample, field)


def test_an_addition_in_two_deliveries_is_one_addition(bench):
    """0.5 mL of a standard is 0.2 mL and 0.3 mL of it, or of two bottles of the same content."""
    usual = bench.rulebook()
    flasks: Preparation = usual.preparations[0]
    volumes = flasks.additions[0].levels
    parts = [
        {level: replace(volume, value=volume.value * share) for level, volume in volumes.items()}
        for share in (bench.quantity("0.4", "1").value, bench.quantity("0.6", "1").value)
    ]
    once = bench.Night(usual).series().batch()
    expected = results_of(evaluate([once], usual))["07"][0]
    second = Standard("Other bottle", usual.standards["Mix"].contents, expires="2031-03-31")
    for names in (("Mix", "Mix"), ("Mix", "Other bottle")):
        split = tuple(Addition(name, part, "total") for name, part in zip(names, parts, strict=True))
        rules = replace(
            usual,
            standards={**usual.standards, "Other bottle": second},
            preparations=(replace(flasks, additions=split),),
        )
        found = results_of(evaluate([once], rules))["07"][0]
        assert (found.content, found.in_sample, found.points) == (expected.content, expected.in_sample, expected.points)


def shifted(batch, hours):
    def later(text):
        moved = datetime.fromisoformat(text) + timedelta(hours=hours)
        return moved.strftime("%Y-%m-%dT%H:%M:%SZ")

    members = {
        key: replace(found, readings=tuple(replace(r, measured_at=later(r.measured_at)) for r in found.readings))
        for key, found in batch.members.items()
    }
    return replace(batch, members=members)


@pytest.mark.parametrize("hours", [-7, 1, 24 * 200])
@pytest.mark.parametrize("drift", ["check", "correct"])
def test_a_night_at_another_time_is_the_same_night(bench, hours, drift):
    rules = bench.rulebook(brackets={"Cd": Known(bench.quantity("0.4", "mg/L"))}, drift=drift)
    night = bench.Night(rules)
    night.read("bracket", "1", "", 0.400)
    night.series("07")
    night.read("bracket", "2", "", 0.392)
    night.series("08", content=0.5)
    night.read("bracket", "3", "", 0.380)
    batch = night.batch(closed=True)
    usual, moved = (results_of(evaluate([one], rules)) for one in (batch, shifted(batch, hours)))
    assert moved == usual
    if drift == "correct":
        plain = results_of(evaluate([batch], replace(rules, drift="check")))
        assert plain["08"][0].content.content != usual["08"][0].content.content


@given(power=st.integers(-9, 9), factor=st.floats(0.1, 10))
@settings(max_examples=25, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
def test_units_and_factors(bench, power, factor):
    """Signals in another unit leave every content; contents in another unit are the same contents."""
    rules = bench.rulebook()
    usual = results_of(evaluate([bench.Night(rules).series().batch()], rules))["07"][0]
    scale = factor * 10.0**power
    night = bench.Night(rules).series()
    night.readings = [replace(reading, signal=reading.signal * scale) for reading in night.readings]
    found = results_of(evaluate([night.batch()], rules))["07"][0]
    for name in ("content", "standard_uncertainty", "expanded_uncertainty"):
        assert getattr(found.in_sample, name) == pytest.approx(getattr(usual.in_sample, name), rel=1e-9)
    micro = Standard("Mix", {"Cd": bench.quantity("10000", "ug/L")}, expires="2031-03-31")
    other = replace(rules, standards={"Mix": micro})
    again = results_of(evaluate([bench.Night(other).series().batch()], other))["07"][0]
    assert again.content.content == pytest.approx(1000 * usual.content.content, rel=1e-12)
    assert again.in_sample.content == pytest.approx(usual.in_sample.content, rel=1e-12)


def test_overlapping_lines_alone_and_in_company(bench):
    """Two analytes at two lines, each added on its own; the truths are 0.5 and 0.8 mg/L (constructed)."""
    flasks = bench.rulebook().preparations[0]
    standards = {
        "A": Standard("A", {"Cd": bench.quantity("10", "mg/L")}),
        "B": Standard("B", {"As": bench.quantity("10", "mg/L")}),
    }
    first = {"0": "0", "1": "0.25", "2": "0.5", "3": "0.5", "4": "0.5"}
    second = {"0": "0", "1": "0", "2": "0", "3": "0.3", "4": "0.6"}
    additions = tuple(
        Addition(name, {level: bench.quantity(volume, "mL") for level, volume in levels.items()}, "total")
        for name, levels in (("A", first), ("B", second))
    )
    rules = bench.rulebook(
        standards=standards, preparations=(replace(flasks, additions=additions),),
        overlap=(Overlap("generalised", ("Cd", "As"), ("Cd 228.8", "As 228.9")),),
    )  # fmt: skip
    night = bench.Night(rules)
    for sample in ("07", "08"):
        for level in first:
            cd, arsenic = 0.5 + float(first[level]), 0.8 + float(second[level])
            for analyte, line, a, b in (("Cd", "Cd 228.8", 0.2, 0.06), ("As", "As 228.9", 0.04, 0.15)):
                e = 0.0004 * SCATTER[int(level)]
                night.read("sample", sample, level, 0.4 * (a * cd + b * arsenic) + e, analyte=analyte, line=line)
    batch = night.batch(closed=True)
    together = results_of(evaluate([batch], rules))
    cadmium, arsenic = sorted(together["07"], key=lambda result: -result.points[0].x or result.analyte == "As")
    by_name = {result.analyte: result for result in (cadmium, arsenic)}
    assert by_name["Cd"].response == "overlap"
    assert by_name["Cd"].content.content == pytest.approx(0.5, rel=1e-3)
    assert by_name["As"].content.content == pytest.approx(0.8, rel=1e-3)
    assert all(result.verdict != FAIL for result in together["07"])
    for key, members in batch.members.items():
        assert results_of(evaluate([replace(batch, members={key: members})], rules))[key.sample] == together[key.sample]
