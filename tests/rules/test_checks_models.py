"""Replicates, medians, declared and pooled noise, electrodes: what only some series are asked."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest
from scipy import stats

from spikeward.rules.checks.registry import check_line
from spikeward.rules.checks.straight import robust_beside
from spikeward.rules.outcomes import FAIL, NOT_EVALUATED, PASS, WARN, Parameter, Point
from spikeward.rules.records import SeriesKey
from spikeward.rules.rulebook import Electrode, Noise, Precision
from spikeward.rules.solve.pooling import Pooling
from spikeward.rules.solve.solved import Scatter
from spikeward.rules.solve.weights import pool

X6 = (0.0, 0.2, 0.4, 0.6, 0.8, 1.0)
SCATTER = (0.004, -0.007, 0.005, -0.002, 0.003, -0.003)

# Eurachem/CITAC Guide, Quantifying Uncertainty in Analytical Measurement, example A5: cadmium, in triplicate
QUAM_X = [c for c in (0.1, 0.3, 0.5, 0.7, 0.9) for _ in range(3)]
QUAM_Y = [0.028, 0.029, 0.029, 0.084, 0.083, 0.081, 0.135, 0.131, 0.133, 0.180, 0.181, 0.183, 0.215, 0.230, 0.216]


def line(bench, y=None, x=X6, **changes):
    y = [0.3 + v + e for v, e in zip(x, SCATTER, strict=False)] if y is None else y
    return bench.subject_of(bench.line_of(x, y, **changes))


# ---- lack of fit


def test_lack_of_fit_of_a_published_calibration(bench):
    """The data of A5, r 0.997, by analysis of variance: F 4.885 with 3 and 10 degrees of freedom; F(95 %) is 3.708."""
    subject = line(bench, QUAM_Y, QUAM_X)
    check = bench.check_of("lack_of_fit", subject)
    assert check.observed == pytest.approx(4.885, abs=0.0005)
    assert check.verdict == PASS  # p 0.024
    assert f"p {stats.f.sf(check.observed, 3, 10):.3f}, with 3 and 10 degrees of freedom" in check.sentence
    assert bench.check_of("lack_of_fit", subject, warn_p=0.05).verdict == WARN
    assert stats.f.isf(0.05, 3, 10) == pytest.approx(3.708, abs=0.0005)


def test_levels_off_the_line_warn(bench):
    y = [value + (0.02 if x == 0.5 else 0.0) for x, value in zip(QUAM_X, QUAM_Y, strict=True)]
    check = bench.check_of("lack_of_fit", line(bench, y, QUAM_X))
    assert check.verdict == WARN
    assert check.sentence.startswith("The levels lie further off the line than replicate preparations scatter: F is ")


def test_lack_of_fit_needs_replicates(bench):
    assert "no level was prepared twice" in bench.check_of("lack_of_fit", line(bench)).sentence
    ends = line(bench, [0.3, 0.31, 1.3, 1.31], (0.0, 0.0, 1.0, 1.0))
    assert "two levels always lie on a line" in bench.check_of("lack_of_fit", ends).sentence
    agree = line(bench, [0.3, 0.3, 0.9, 0.9, 1.2, 1.2], (0.0, 0.0, 0.5, 0.5, 1.0, 1.0))
    check = bench.check_of("lack_of_fit", agree)
    assert (check.verdict, check.observed) == (WARN, None)
    assert "F is beyond all bounds" in check.sentence


# ---- medians


def test_one_vessel_that_pulls_the_line_is_seen_by_medians(bench):
    good = line(bench)
    check = bench.check_of("robust", good)
    assert check.verdict == PASS
    y = [0.3 + v + e for v, e in zip(X6, SCATTER, strict=True)]
    y[5] += 0.2
    pulled = line(bench, y)
    check = bench.check_of("robust", pulled)
    assert check.verdict == WARN
    slope = stats.theilslopes(y, X6).slope
    above = sorted(b - slope * a for a, b in zip(X6, y, strict=True))
    found = robust_beside(pulled.solved).estimate
    assert found.content == pytest.approx((above[2] + above[3]) / 2 / slope, rel=1e-12)
    assert check.observed == pytest.approx(abs(found.content / pulled.solved.content.content - 1), rel=1e-12)
    assert "the fitted line stays the result" in check.remedy
    assert found.standard_uncertainty is None
    assert found.reason


def test_medians_of_few_vessels_tell_nothing(bench):
    few = line(bench, x=X6[:4])
    assert "medians of 4 vessels tell nothing" in bench.check_of("robust", few).sentence
    assert robust_beside(few.solved) is None
    zero = line(bench, [0.001 + v + e for v, e in zip(X6, SCATTER, strict=True)])
    assert "cannot be told from zero" in bench.check_of("robust", zero).sentence


# ---- declared and pooled noise


def declared(bench, chi_squared, left=4):
    subject = line(bench)
    scatter = Scatter("declared", noise=Noise(0.005, 0.0, "A"), words="the declared noise")
    solved = replace(subject.solved, scatter=scatter, chi_squared=chi_squared, degrees_of_freedom=left)
    rules = bench.rulebook(precision=Precision("declared", {"Cd": Noise(0.005, 0.0, "A")}))
    return replace(subject, solved=solved, context=replace(subject.context, rules=rules))


def test_residuals_against_a_declared_noise(bench):
    """Table of chi-squared, four degrees of freedom: 0.5 % lie above 14.860, 0.5 % below 0.207."""
    for chi_squared, verdict in ((14.80, PASS), (14.90, WARN), (4.0, PASS), (0.208, PASS), (0.206, WARN)):
        assert bench.check_of("noise", declared(bench, chi_squared)).verdict == verdict
    above, below = (bench.check_of("noise", declared(bench, value)) for value in (20.0, 0.1))
    assert "scatter more than the declared noise" in above.sentence
    assert "scatter less than the declared noise" in below.sentence
    assert above.remedy != below.remedy
    assert above.observed == 20.0


def test_noise_that_cannot_be_judged(bench):
    assert "no noise is declared" in bench.check_of("noise", line(bench)).sentence
    assert "no degree of freedom" in bench.check_of("noise", declared(bench, None)).sentence
    assert "noise" in {check.name for check in check_line(declared(bench, 4.0))}
    assert "noise" not in {check.name for check in check_line(line(bench))}


def pooled(bench, sds, closed=True):
    keys = tuple(SeriesKey("root", "inbox", "MD12", "sample", f"{n:02d}") for n in range(len(sds)))
    pooling = Pooling(pool(sds, [1.0] * len(sds), [2.0] * len(sds)), keys)
    rules = bench.rulebook(precision=Precision("pooled"))
    subject = bench.subject_of(bench.line_of(X6, [0.3 + v for v in X6]), rules, closed=closed)
    return replace(subject, context=replace(subject.context, pooling={("Cd", ""): pooling}))


def test_series_that_scatter_alike_share_a_precision(bench):
    """Cochran's table at 1 % for ten variances of two degrees of freedom: 0.5358."""
    good = pooled(bench, [0.01] * 9 + [0.0322])  # 0.5353 of all squares
    check = bench.check_of("pooled_precision", good)
    assert check.verdict == PASS
    assert "10 series share one scatter" in check.sentence
    assert "20 degrees of freedom" in check.sentence
    check = bench.check_of("pooled_precision", pooled(bench, [0.01] * 9 + [0.0323]))  # 0.5368
    assert check.verdict == WARN
    assert "because of sample 09 (54 % of all squares, chance allows 54 %)" in check.sentence
    assert check.sentence.endswith("each series keeps its own precision.")


def test_precision_that_cannot_be_pooled(bench):
    subject = pooled(bench, [0.01, 0.01], closed=False)
    none = replace(subject, context=replace(subject.context, pooling={}))
    assert "when the batch closes" in bench.check_of("pooled_precision", none).sentence
    closed = pooled(bench, [0.01, 0.01])
    none = replace(closed, context=replace(closed.context, pooling={}))
    assert "no two series" in bench.check_of("pooled_precision", none).sentence
    assert "ask for no pooled precision" in bench.check_of("pooled_precision", line(bench)).sentence


# ---- electrodes


def electrode(bench, efficiency=0.98, u=0.002, steps=(20.0, 15.0, 11.0), slope=None, uncertainty=None, charge=-1):
    potentials = [180.0]
    for step in steps:
        potentials.append(potentials[-1] - step)
    points = tuple(
        Point(str(n), "", 2.0 * n, value, value, value, 1, None, 0.5) for n, value in enumerate(potentials)
    )
    subject = line(bench, x=X6[: len(points)])
    prepared = replace(
        subject.solved.prepared, response="log", electrode=Electrode(charge, 25.0, slope, uncertainty), signal_unit="mV"
    )
    told = (
        Parameter("electrode slope", -59.16 * efficiency, "mV per decade", 59.16 * u if u else None),
        Parameter("slope efficiency", efficiency, "1", u),
    )
    solved = replace(
        subject.solved, prepared=prepared, points=points, parameters=told, slope=None, correlation=None,
        degrees_of_freedom=1, scatter_degrees_of_freedom=4,
    )  # fmt: skip
    return replace(subject, solved=solved)


@pytest.mark.parametrize(
    ("efficiency", "verdict"), [(0.98, PASS), (1.0, PASS), (0.94, WARN), (1.03, WARN), (0.88, FAIL), (1.06, FAIL)]
)
def test_the_slope_of_an_electrode(bench, efficiency, verdict):
    check = bench.check_of("electrode_slope", electrode(bench, efficiency))
    assert check.verdict == verdict
    assert check.observed == efficiency
    assert "mV per decade" in check.sentence
    told = electrode(bench, efficiency)
    in_percent = tuple(
        replace(one, value=one.value * 100, standard_uncertainty=0.2, unit="%") if one.unit == "1" else one
        for one in told.solved.parameters
    )
    same = bench.check_of("electrode_slope", replace(told, solved=replace(told.solved, parameters=in_percent)))
    assert same.verdict == verdict


def test_a_slope_that_is_poorly_known_only_warns(bench):
    """2 % of standard uncertainty with four degrees of freedom reach 5.6 % far: 0.88 may be 0.93."""
    check = bench.check_of("electrode_slope", electrode(bench, 0.88, u=0.02))
    assert check.verdict == WARN
    assert check.sentence.endswith("these vessels know it too poorly to fail it.")
    assert bench.check_of("electrode_slope", electrode(bench, 0.80, u=0.02)).verdict == FAIL


def test_a_slope_that_was_declared_is_held_against_theory(bench):
    check = bench.check_of("electrode_slope", electrode(bench, slope=-58.0))
    assert check.verdict == PASS
    assert check.sentence.startswith("The declared slope is ")
    assert bench.check_of("electrode_slope", electrode(bench, slope=-58.0, uncertainty=0.3)).verdict == PASS
    nothing = electrode(bench)
    without = replace(nothing, solved=replace(nothing.solved, parameters=()))
    assert bench.check_of("electrode_slope", without).sentence == "Not evaluated: no slope was found."


@pytest.mark.parametrize(
    ("steps", "charge", "verdict", "worst"),
    [
        ((20.0, 15.0, 11.0), -1, PASS, 11.0),
        ((20.0, 15.0, 8.0), -1, WARN, 8.0),
        ((70.0, 15.0, 11.0), 1, WARN, 70.0),
        ((20.0, 15.0, 8.0), 2, PASS, 8.0),
        ((20.0, 15.0, 4.0), 2, WARN, 4.0),
        ((32.0, 15.0, 11.0), -2, WARN, 32.0),
    ],
)
def test_every_addition_moves_the_potential(bench, steps, charge, verdict, worst):
    check = bench.check_of("potential_steps", electrode(bench, steps=steps, charge=charge))
    assert check.verdict == verdict
    assert check.unit == "mV"
    assert f"all of them move it by {min(steps):g} to {max(steps):g} mV" in check.sentence
    if verdict == WARN:
        assert check.observed == pytest.approx(worst, abs=1e-9)
        assert ("larger" in check.remedy) == (worst < 30)
    bounds = "10 to 60" if abs(charge) == 1 else "5 to 30"
    assert f"warns outside {bounds}" in check.limit


def test_a_published_step_far_outside_the_window(bench):
    """A web exercise lets a fluoride electrode move by 168.5 mV: no content can be read off that."""
    check = bench.check_of("potential_steps", electrode(bench, steps=(168.5,)))
    assert check.verdict == WARN
    assert check.observed == pytest.approx(168.5, abs=1e-9)


def test_replicates_of_an_addition_are_one_step(bench):
    subject = electrode(bench, steps=(20.0, 15.0))
    first, second, third = subject.solved.points
    doubled = (first, replace(second, vessel="a", signal=150.0), replace(second, vessel="b", signal=170.0), third)
    check = bench.check_of("potential_steps", replace(subject, solved=replace(subject.solved, points=doubled)))
    assert "move it by 15 to 20 mV" in check.sentence


def test_what_asks_for_a_straight_line_or_a_share_of_a_signal_is_not_asked_of_an_electrode(bench):
    subject = electrode(bench)
    asked = (
        "response", "correlation", "curvature", "lack_of_fit", "robust", "residual", "studentised", "precision",
        "linear_top", "matrix_spread",
    )  # fmt: skip
    for name in asked:
        check = bench.check_of(name, subject)
        assert check.verdict == NOT_EVALUATED, name
        assert "an electrode answers" in check.sentence or "potentials have no zero" in check.sentence, name
    assert {"electrode_slope", "potential_steps"} <= {check.name for check in check_line(subject)}


@pytest.mark.parametrize(
    ("response", "why"), [("curve", "was fitted as a curve"), ("overlap", "were solved together")]
)
def test_other_responses_have_no_one_line(bench, response, why):
    subject = line(bench)
    prepared = replace(subject.solved.prepared, response=response)
    other = replace(subject, solved=replace(subject.solved, prepared=prepared))
    for name in ("response", "correlation", "curvature", "lack_of_fit", "robust", "studentised"):
        check = bench.check_of(name, other)
        assert (check.verdict, why in check.sentence) == (NOT_EVALUATED, True), name
    assert bench.check_of("residual", other).verdict == PASS  # what the model misses is still a share of the signal


def test_several_runs_have_several_lines(bench):
    prepared = bench.line_of(X6, [0.3 + v + e for v, e in zip(X6, SCATTER, strict=True)])
    runs = tuple(replace(vessel, block=str(n // 3)) for n, vessel in enumerate(prepared.vessels))
    subject = bench.subject_of(replace(prepared, vessels=runs))
    for name in ("correlation", "curvature", "lack_of_fit", "robust", "studentised"):
        assert "was measured in 2 runs, each with a line of its own" in bench.check_of(name, subject).sentence, name
    check = bench.check_of("residual", subject)
    assert check.verdict == PASS
    assert "The largest residual, of level 1, run 0, is" in check.sentence


def test_an_electrode_that_was_solved_carries_what_its_checks_ask_for(bench):
    """E = 200 - 57.3 log10(2 + x) at equal volumes: 96.9 % of 59.16 mV per decade, with a scatter of 0.05 mV."""
    x = (0.0, 2.0, 5.0, 10.0, 20.0)
    noise = (0.05, -0.06, 0.02, 0.04, -0.05)
    e = [200.0 - 57.3 * math.log10(2.0 + v) + n for v, n in zip(x, noise, strict=True)]
    prepared = bench.line_of(x, e, response="log", electrode=Electrode(-1), signal_unit="mV")
    subject = bench.subject_of(prepared)
    assert subject.solved.content.content == pytest.approx(2.0, rel=0.02)
    slope = bench.check_of("electrode_slope", subject)
    assert slope.verdict == PASS
    assert slope.observed == pytest.approx(57.3 / 59.16, abs=0.003)
    steps = bench.check_of("potential_steps", subject)
    assert steps.verdict == PASS
    assert steps.observed == pytest.approx(57.3 * math.log10(12 / 7), abs=0.2)  # the smallest
    assert [check.name for check in check_line(subject) if check.verdict in (WARN, FAIL)] == []


def electrode_series(bench, declared, slope=-57.3, noise=0.02, vessels=6):
    """Double known addition into 100 mL (invented), read with so much scatter; ``declared`` is what the rules say."""
    scatter = (0.4, -0.9, 0.7, -0.3, 0.8, -0.6)
    x = [0.0, 5.0, 10.0, 15.0, 20.0, 30.0][:vessels]
    e = [200.0 + slope * math.log10(2.0 + added) + noise * scatter[n] for n, added in enumerate(x)]
    line = bench.line_of(x, e, response="log", signal_unit="mV", electrode=Electrode(-1, 25.0, declared, None))
    return bench.subject_of(line)


def test_a_wrong_declared_slope_is_noticed(bench):
    """Student's t at 1 %, three degrees of freedom: 5.841 (common tables). One vessel less than four shows nothing."""
    right = bench.check_of("declared_slope", electrode_series(bench, -57.3))
    wrong = bench.check_of("declared_slope", electrode_series(bench, -59.16))
    assert (right.verdict, wrong.verdict) == (PASS, WARN)
    assert wrong.observed > 5.841 > right.observed
    assert "5.84" in wrong.limit
    few = bench.check_of("declared_slope", electrode_series(bench, -59.16, vessels=3))
    assert few.verdict == NOT_EVALUATED
    unasked = bench.check_of("declared_slope", electrode_series(bench, -59.16), warn_p=None)
    assert unasked.verdict == NOT_EVALUATED
    fitted = bench.check_of("declared_slope", electrode_series(bench, None))
    assert fitted.verdict == NOT_EVALUATED


def test_an_impossible_declared_slope_fails(bench):
    """A hundred times theory is a slip."""
    slip = bench.check_of("electrode_slope", electrode_series(bench, -5850.0))
    assert slip.verdict == FAIL
