"""The printed standard uncertainty against derivatives by every single reading of the night (JCGM 100:2008, 5.1.2).

With a declared noise for each vessel the square of the uncertainty must be the sum of (dC/dS)² s² over all readings
that enter: of the sample, of the reagent blank, of the brackets and of the background. Whatever is shared counts once.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from spikeward.rules.evaluate import evaluate
from spikeward.rules.rulebook import BlankRule, Electrode, Known, Noise, Precision

SIGMA = 0.0005


def night_of(bench, rules, signal):
    """Background of 0.05, a sensitivity that falls, reagents that bring 1 µg, and a sample of 0.3 mg/L."""
    night = bench.Night(rules)
    pair = (0.05 - SIGMA / math.sqrt(2.0), 0.05 + SIGMA / math.sqrt(2.0))  # s is SIGMA, as declared for vessels
    for number, value in enumerate(pair):
        night.read("background", str(number), "", value)
    night.read("bracket", "1", "", 0.45)
    for level in range(4):
        night.read("reagent_blank", "R", str(level), signal(0.1 + 0.25 * level) + 0.05)
    night.read("bracket", "2", "", 0.44)
    for level in range(5):
        night.read("sample", "07", str(level), signal(0.3 + 0.1 + 0.2 * level) + 0.05)
    night.read("bracket", "3", "", 0.43)
    return night


def content(night, field="in_sample"):
    (found,) = evaluate([night.batch(closed=True)], night.rules)
    outcome = next(one for one in found.outcomes if one.key.role == "sample")
    return getattr(outcome.results[0], field), outcome


@pytest.mark.parametrize("drift", ["check", "correct"])
@pytest.mark.parametrize("reagent", [False, True])
@pytest.mark.parametrize("design", ["flasks", "growing", "curve"])
def test_the_uncertainty_is_that_of_every_reading(bench, drift, reagent, design):
    flasks = bench.rulebook().preparations[0]
    volumes = {str(n): bench.quantity(f"{0.2 * n:g}", "mL") for n in range(5)}
    sample = replace(flasks, applies={"role": "sample"}, additions=(replace(flasks.additions[0], levels=volumes),))
    if design == "growing":
        sample = replace(sample, design="successive", final={})
    if design == "curve":
        sample = replace(sample, response="curve")
    rules = bench.rulebook(
        checks={},
        preparations=(sample, flasks),
        blanks=BlankRule(background=True, reagent=reagent),
        brackets={"Cd": Known(bench.quantity("1", "mg/L"))},
        drift=drift,
        precision=Precision("declared", {"Cd": Noise(SIGMA, 0.0, "A")}),
    )
    bend = 0.05 if design == "curve" else 0.0
    night = night_of(bench, rules, lambda c: 0.4 * c - bend * (0.4 * c) ** 2)
    estimate, outcome = content(night)
    assert estimate is not None, outcome.results[0].no_number
    squares = []
    for place, reading in enumerate(night.readings):
        step = 2.0**-16
        ends = []
        for side in (1.0, -1.0):
            moved = bench.Night(rules)
            moved.readings = list(night.readings)
            moved.readings[place] = replace(reading, signal=reading.signal + side * step)
            ends.append(content(moved)[0].content)
        squares.append(((ends[0] - ends[1]) / (2.0 * step) * SIGMA) ** 2)
    # a bracket that corrects both sample and reagent blank counts as two
    close = 0.025 if reagent and drift == "correct" else 2e-3
    assert estimate.standard_uncertainty == pytest.approx(math.sqrt(math.fsum(squares)), rel=close)


def test_a_drift_that_was_corrected_covers(bench):
    """1,000 nights of two noisy brackets: 95 % of the intervals hold the truth, within what so many draws allow."""
    rules = bench.rulebook(
        checks={},
        brackets={"Cd": Known(bench.quantity("1", "mg/L"))},
        drift="correct",
        precision=Precision("declared", {"Cd": Noise(0.004, 0.0, "A")}),
    )
    draws = np.random.Generator(np.random.PCG64(5)).standard_normal((1000, 6)) * 0.004
    held = 0
    for draw in draws.tolist():
        night = bench.Night(rules)
        night.read("bracket", "1", "", 0.4 + draw[4])
        for level in range(4):
            night.read("sample", "07", str(level), 0.4 * (0.6 + 0.25 * level) + draw[level])
        night.read("bracket", "2", "", 0.4 + draw[5])
        low, high = content(night, "content")[0].interval
        held += low < 0.6 < high
    assert abs(held / 1000 - 0.95) < 3.5 * math.sqrt(0.95 * 0.05 / 1000)


def test_an_electrode_holds_the_uncertainty_of_its_reagents(bench):
    """dC0/dn is -1/V0 where aliquots are equal: 2 µg in 10 mL are 0.2 mg/L."""
    flasks = bench.rulebook().preparations[0]
    electrode = replace(flasks, response="log", electrode=Electrode(-1, 25.0, -57.0, None))

    def uncertainty(spread):
        amount = Known(bench.quantity("5", "ug"), spread)
        rules = bench.rulebook(
            preparations=(electrode,), blanks=BlankRule(reagent=True, reagent_amounts={"Cd": amount})
        )
        night = bench.Night(rules)
        for level, scatter in enumerate((0.02, -0.03, 0.02, -0.01)):
            inside = (10 * (2.0 + 0.25 * level) + 5.0) / 25
            night.read("sample", "07", str(level), 200.0 - 57.0 * math.log10(inside) + scatter, unit="mV")
        return content(night, "content")[0].standard_uncertainty

    fit = uncertainty(0.0)
    assert uncertainty(2.0) == pytest.approx(math.hypot(fit, 0.2), rel=1e-6)


@pytest.mark.parametrize("response", ["log", "curve"])
def test_only_lines_are_solved_over_several_runs(bench, response):
    flasks = bench.rulebook().preparations[0]
    electrode = Electrode(-1, 25.0, None, None) if response == "log" else None
    rules = bench.rulebook(preparations=(replace(flasks, response=response, electrode=electrode),))
    night = bench.Night(rules)
    for run in ("1", "2"):
        for level in range(4):
            inside = 0.4 * (0.3 + 0.25 * level)
            signal = 200.0 - 57.0 * math.log10(inside) + 3.0 * (run == "2") if response == "log" else inside
            night.read("sample", "07", str(level), signal, unit="mV" if response == "log" else "A", block=run)
    estimate, outcome = content(night, "content")
    assert estimate is None
    assert "several runs" in outcome.results[0].no_number


def test_one_estimate_of_scatter_is_one_however_often_it_enters(bench):
    """The brackets' noise is that of the vessels, which two degrees of freedom tell: no more are left for both."""
    rules = bench.rulebook(checks={}, brackets={"Cd": Known(bench.quantity("1", "mg/L"))}, drift="correct")
    night = bench.Night(rules)
    night.read("bracket", "1", "", 0.400)
    night.series("07")
    night.read("bracket", "2", "", 0.396)
    plain, corrected = (
        content(replace(night, rules=replace(rules, drift=drift)), "content")[0] for drift in ("check", "correct")
    )
    assert corrected.standard_uncertainty > plain.standard_uncertainty
    assert (plain.effective_degrees_of_freedom, corrected.effective_degrees_of_freedom) == (2, 2)
