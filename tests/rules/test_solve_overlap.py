"""Generalised standard addition: constructed cases, independent regression, and what its uncertainty promises."""

from __future__ import annotations

import itertools
import math
import re

import numpy as np
import pytest
import statsmodels.api as sm
from hypothesis import given, settings
from hypothesis import strategies as st

from spikeward.rules.solve.factors import complement, condition, dot, factors
from spikeward.rules.solve.line import fit_lines
from spikeward.rules.solve.overlap import Overlap, solve_overlap
from spikeward.rules.uncertainty.fieller import t_quantile

NAMES = ("copper", "zinc", "nickel", "cobalt", "lead")
SENSORS = ("500 nm", "540 nm", "580 nm", "620 nm", "660 nm")
CONTENTS = np.array([5.0, 8.0])
RESPONSES = np.array([[0.020, 0.004, 0.010], [0.006, 0.015, 0.011]])
ADDED = np.array([[0, 0], [3, 0], [6, 0], [0, 5], [0, 10], [6, 10]], dtype=float)
NOISE = np.array([0.0006, 0.0005, 0.0008])


def solve(additions, signals, dilutions=None, coverage=0.95, noise=None) -> Overlap:
    additions, signals = np.asarray(additions, dtype=float), np.asarray(signals, dtype=float)
    dilutions = [1.0] * len(additions) if dilutions is None else [float(one) for one in dilutions]
    names, sensors = NAMES[: additions.shape[1]], SENSORS[: signals.shape[1]]
    return solve_overlap(additions.tolist(), signals.tolist(), dilutions, names, sensors, coverage, noise)


def noisy(seed: int, correlated: float = 0.5, draws: int | None = None):
    """Signals of the realistic case; scatter that is partly common to the sensors of a vessel."""
    generator = np.random.Generator(np.random.PCG64(seed))
    shape = (draws or 1, len(ADDED), len(NOISE))
    own, common = generator.standard_normal(shape), generator.standard_normal((*shape[:2], 1))
    scatter = NOISE * (math.sqrt(1 - correlated) * own + math.sqrt(correlated) * common)
    signals = (CONTENTS + ADDED) @ RESPONSES + scatter
    return signals if draws else signals[0]


# what it finds


def test_two_analytes_at_two_sensors():
    """Constructed, exact arithmetic; method of Saxberg and Kowalski, Anal. Chem. 51 (1979) 1031."""
    additions = [(0, 0), (2, 0), (4, 0), (4, 3), (4, 6)]
    signals = [(0.148, 0.140), (0.188, 0.148), (0.228, 0.156), (0.246, 0.201), (0.264, 0.246)]
    found = solve(additions, signals)
    assert found.no_number == ""
    assert found.contents == pytest.approx((5.0, 8.0), rel=1e-12)
    assert np.array(found.sensitivities) == pytest.approx(np.array([[0.020, 0.004], [0.006, 0.015]]), rel=1e-12)
    assert found.intercepts == pytest.approx((0.148, 0.140), rel=1e-12)
    assert found.condition_as_given == pytest.approx(1.93650, abs=5e-6)
    assert found.degrees_of_freedom == 2
    # the original form, from the vessel without addition alone, agrees where nothing scatters
    assert np.linalg.solve(np.array(found.sensitivities).T, signals[0]) == pytest.approx(found.contents, rel=1e-12)


def test_exact_data_give_no_uncertainty():
    found = solve(ADDED, (CONTENTS + ADDED) @ RESPONSES)
    assert found.contents == pytest.approx(CONTENTS, rel=1e-12)
    assert found.standard_uncertainties is None
    assert found.covariance is None
    assert "no scatter" in found.no_uncertainty


def test_what_was_not_added_is_not_taken_out():
    """One sensor and one analyte, with an interferent of 0.150 under it: the plain line gives 11 for a true 6."""
    content, x = 6.0, np.arange(5.0)
    zinc_added = np.array([0.0, 0, 0, 4, 8])
    first, second = 0.030 * (content + x) + 0.005 * (30 + zinc_added), 0.012 * (content + x) + 0.02 * (30 + zinc_added)
    alone = solve(x[:3, None], first[:3, None])
    assert alone.contents == pytest.approx((11.0,), rel=1e-12)
    both = solve(np.column_stack([x, zinc_added]), np.column_stack([first, second]))
    assert both.contents == pytest.approx((6.0, 30.0), rel=1e-12)


def test_one_analyte_at_one_sensor_is_the_straight_line():
    generator = np.random.Generator(np.random.PCG64(5))
    x, dilutions = np.array([0.0, 1, 2, 2, 4]), np.array([1.0, 1.1, 1.2, 1.2, 1.5])
    y = 0.03 * (6 + x) + 0.002 * generator.standard_normal(5)
    found = solve(x[:, None], y[:, None], dilutions)
    roots = dilutions.min() / dilutions
    line = fit_lines(*(column.reshape(-1, 1) for column in (x, y, roots * roots, dilutions))).of(0)
    assert found.contents[0] == pytest.approx(line.content, rel=1e-12)
    assert found.standard_uncertainties[0] == pytest.approx(line.fit_uncertainty, rel=1e-11)
    assert found.residual_sds[0] == pytest.approx(line.residual_sd, rel=1e-11)  # the least dilution is 1
    assert found.background_effects[0][0] == pytest.approx(line.background_effect, rel=1e-11)
    t = t_quantile(3, 0.95)
    assert found.g[0] == pytest.approx((t * line.slope_uncertainty / line.slope) ** 2, rel=1e-11)


def test_against_another_regression():
    """statsmodels fits every sensor, numpy combines them: same sensitivities, contents, covariance."""
    signals, dilutions = noisy(11), np.array([1.0, 1.05, 1.1, 1.05, 1.1, 1.25])
    found = solve(ADDED, signals, dilutions)
    w = (dilutions.min() / dilutions) ** 2
    design = sm.add_constant(ADDED)
    fits = [sm.WLS(signals[:, s], design, weights=w).fit() for s in range(3)]
    k = np.array([fit.params[1:] for fit in fits]).T
    heights = np.array([fit.params[0] for fit in fits])
    assert np.array(found.sensitivities) == pytest.approx(k, rel=1e-10)
    assert found.intercepts == pytest.approx(heights, rel=1e-10)
    assert np.array(found.residuals) == pytest.approx(np.array([fit.resid for fit in fits]).T, abs=1e-14)
    assert np.array(found.fitted) == pytest.approx(np.array([fit.fittedvalues for fit in fits]).T, rel=1e-12)
    assert found.residual_sds == pytest.approx([math.sqrt(fit.mse_resid) for fit in fits], rel=1e-10)
    at_v0 = solve(ADDED, signals, 2 * dilutions)  # every signal is half as large, and its noise is
    assert at_v0.residual_sds == pytest.approx([sd / 2 for sd in found.residual_sds], rel=1e-12)
    assert at_v0.covariance == found.covariance

    tuned = 1.0 / np.abs(signals).max(axis=0)
    contents = np.linalg.lstsq((k * tuned).T, heights * tuned, rcond=None)[0]
    assert found.contents == pytest.approx(contents, rel=1e-10)
    shares = np.linalg.pinv((k * tuned).T) * tuned
    residuals = np.sqrt(w)[:, None] * np.array(found.residuals)
    d = np.array([1.0, *-contents])
    spread = d @ np.linalg.inv(design.T @ (w[:, None] * design)) @ d
    covariance = spread * shares @ (residuals.T @ residuals / 3) @ shares.T
    assert np.array(found.covariance) == pytest.approx(covariance, rel=1e-9)
    assert found.standard_uncertainties == pytest.approx(np.sqrt(np.diag(covariance)), rel=1e-9)
    assert found.condition_as_given == pytest.approx(np.linalg.cond(k), rel=1e-10)
    rows = k * tuned
    assert found.condition_scaled == pytest.approx(
        np.linalg.cond(rows / np.linalg.norm(rows, axis=1, keepdims=True)), rel=1e-10
    )
    around = np.sqrt(w)[:, None] * (ADDED - np.average(ADDED, axis=0, weights=w))
    assert found.condition_of_additions == pytest.approx(
        np.linalg.cond(around / np.linalg.norm(around, axis=0)), rel=1e-10
    )


def test_declared_noise_weighs_the_sensors():
    signals, noise = noisy(3), [0.001, 0.002, 0.0005]
    found = solve(ADDED, signals, noise=noise)
    k, heights = np.array(found.sensitivities), np.array(found.intercepts)
    contents = np.linalg.lstsq((k / noise).T, heights / noise, rcond=None)[0]
    assert found.contents == pytest.approx(contents, rel=1e-10)
    assert solve(ADDED, signals, noise=[7 * one for one in noise]).contents == pytest.approx(contents, rel=1e-10)
    assert solve(ADDED, signals).contents != pytest.approx(contents, rel=1e-6)


def test_background_effect_is_what_a_higher_background_does():
    signals, dilutions, rise = (CONTENTS + ADDED) @ RESPONSES, np.array([1.0, 1.05, 1.1, 1.05, 1.1, 1.25]), 1e-7
    found = solve(ADDED, signals, dilutions)
    for sensor in range(3):
        lowered = signals.copy()
        lowered[:, sensor] -= rise * dilutions
        change = (np.array(solve(ADDED, lowered, dilutions).contents) - found.contents) / rise
        assert change == pytest.approx(np.array(found.background_effects)[:, sensor], rel=1e-4)


# what its uncertainty promises


def covered(solved: list[Overlap], truth) -> np.ndarray:
    t = t_quantile(solved[0].degrees_of_freedom, 0.95)
    inside = [np.abs(np.array(one.contents) - truth) <= t * np.array(one.standard_uncertainties) for one in solved]
    return np.mean(inside, axis=0)


@pytest.mark.parametrize("correlated", [0.0, 0.8])
def test_interval_covers(correlated):
    """Two analytes, three sensors, six vessels; scatter of the sensors in one vessel independent and common."""
    draws = 2500
    solved = [solve(ADDED, signals) for signals in noisy(2024, correlated, draws)]
    contents = np.array([one.contents for one in solved])
    band = 3.5 * math.sqrt(0.95 * 0.05 / draws)
    assert covered(solved, CONTENTS) == pytest.approx(0.95, abs=band)
    # u² is without bias, and the scatter of the draws is known to 1/sqrt(2 draws), of u² with 3 degrees of freedom less
    mean_square = np.mean([np.square(one.standard_uncertainties) for one in solved], axis=0)
    assert np.sqrt(mean_square) == pytest.approx(contents.std(axis=0), rel=3.5 * math.sqrt((1 + 2 / 3) / (2 * draws)))
    correlation = np.mean([one.covariance[0][1] for one in solved]) / math.sqrt(math.prod(mean_square))
    assert correlation == pytest.approx(np.corrcoef(contents.T)[0, 1], abs=0.06)


def test_own_residuals_as_weights_would_promise_too_much():
    """Why sensors are not weighed by the residuals of the series itself: the same interval then covers too little."""
    responses, added, draws = np.hstack([RESPONSES, [[0.015, 0.002], [0.009, 0.012]]]), ADDED[:5], 1000
    scatter = np.random.Generator(np.random.PCG64(7)).standard_normal((draws, 5, 5)) * 0.001
    plain = [solve(added, (CONTENTS + added) @ responses + one) for one in scatter]
    weighed = [
        solve(added, (CONTENTS + added) @ responses + one, noise=list(found.residual_sds))
        for one, found in zip(scatter, plain, strict=True)
    ]
    band = 3.5 * math.sqrt(0.95 * 0.05 / draws)
    assert covered(plain, CONTENTS) == pytest.approx(0.95, abs=band)
    assert (covered(weighed, CONTENTS) < 0.95 - band).all()


def test_sensors_that_see_something_else_contradict_each_other():
    """The probability is uniform where nothing else is there, and small with an interferent that was not added."""
    draws, added = 1000, np.vstack([ADDED, ADDED[0]])
    responses = np.hstack([RESPONSES, [[0.015, 0.002], [0.009, 0.012]]])
    scatter = np.random.Generator(np.random.PCG64(99)).standard_normal((draws, len(added), 5)) * 0.0003
    for sensors in (3, 5):  # one and three of them spare
        true = ((CONTENTS + added) @ responses)[:, :sensors]
        clean = np.array([solve(added, true + one[:, :sensors]).sensors_agree_p for one in scatter])
        for level in (0.05, 0.5):
            band = 3.5 * math.sqrt(level * (1 - level) / draws)
            assert np.mean(clean < level) == pytest.approx(level, abs=band)
    interferent = np.array([0.0, 0.03, 0.0])
    disturbed = [solve(ADDED, signals + interferent).sensors_agree_p for signals in noisy(100, 0.5, 50)]
    assert max(disturbed) < 0.05
    assert solve(ADDED, noisy(1)[:, :2]).sensors_agree_p is None


# what leaves the result alone


def test_order_of_vessels_reaches_no_digit():
    signals, dilutions = noisy(8), np.array([1.0, 1.05, 1.1, 1.05, 1.1, 1.25])
    found = solve(ADDED, signals, dilutions)
    for order in itertools.islice(itertools.permutations(range(6)), 0, 720, 23):
        again = solve(ADDED[list(order)], signals[list(order)], dilutions[list(order)])
        assert again.contents == found.contents
        assert again.covariance == found.covariance
        assert again.sensitivities == found.sensitivities
        assert again.background_effects == found.background_effects
        assert (again.g, again.sensors_agree_p) == (found.g, found.sensors_agree_p)
        assert (again.condition_as_given, again.condition_of_additions) == (
            found.condition_as_given, found.condition_of_additions,
        )  # fmt: skip
        assert again.residuals == tuple(found.residuals[place] for place in order)


@given(
    st.tuples(*[st.sampled_from([1e-9, 1e-3, 1.0, 7.0, 1e9])] * 2),
    st.tuples(*[st.sampled_from([1e-9, 1e-3, 1.0, 0.3, 1e9])] * 3),
)
def test_units_are_only_units(of_contents, of_signals):
    """Every analyte and every sensor in a unit of its own: contents follow, verdicts stay."""
    signals = noisy(21)
    plain, scaled = solve(ADDED, signals), solve(ADDED * of_contents, signals * of_signals)
    assert scaled.contents == pytest.approx(np.array(plain.contents) * of_contents, rel=1e-11)
    assert scaled.standard_uncertainties == pytest.approx(
        np.array(plain.standard_uncertainties) * of_contents, rel=1e-10
    )
    assert scaled.g == pytest.approx(plain.g, rel=1e-10)
    assert scaled.condition_scaled == pytest.approx(plain.condition_scaled, rel=1e-10)
    assert scaled.condition_of_additions == pytest.approx(plain.condition_of_additions, rel=1e-10)
    assert scaled.sensors_agree_p == pytest.approx(plain.sensors_agree_p, rel=1e-8)


@given(st.integers(-300, 300), st.integers(-300, 300))
def test_a_power_of_two_changes_no_digit(x_power, y_power):
    signals = noisy(22)
    plain, scaled = solve(ADDED, signals), solve(np.ldexp(ADDED, x_power), np.ldexp(signals, y_power))
    assert scaled.contents == tuple(np.ldexp(plain.contents, x_power))
    assert scaled.standard_uncertainties == tuple(np.ldexp(plain.standard_uncertainties, x_power))
    assert scaled.g == plain.g


def test_a_common_loss_of_sensitivity_cancels():
    """A factor on all signals of a sensor, suppression included, leaves the contents."""
    signals = noisy(23)
    lowered = solve(ADDED, signals * [0.7, 0.5, 0.9])
    assert lowered.contents == pytest.approx(solve(ADDED, signals).contents, rel=1e-12)


# what it refuses


def refused(additions, signals, *words) -> Overlap:
    found = solve(additions, signals)
    assert found.contents == ()
    assert found.standard_uncertainties is None
    for word in words:
        assert word in found.no_number
    assert not re.search(r"nan|inf\b|None|\[|\(\)", found.no_number)
    return found


def test_an_analyte_that_was_never_added():
    signals = (CONTENTS + ADDED) @ RESPONSES
    refused(ADDED * [1, 0], signals, "zinc was added to no vessel", "by itself")
    refused(ADDED * [1, 0] + [0, 3], signals, "zinc", "all of them alike")


def test_analytes_that_were_always_added_together():
    x = np.array([0.0, 0.1, 0.2, 0.3, 0.4, 0.7])
    signals = np.column_stack([x, x, x])
    refused(np.column_stack([x, 3 * x + 0.7]), signals, "copper and zinc were always added together")
    free = np.array([0.0, 1, 0, 2, 5, 1])
    found = refused(np.column_stack([x, free, x / 7]), signals, "copper and nickel were always added together")
    assert "zinc" not in found.no_number
    refused(np.column_stack([x, free, x + free]), signals, "copper, zinc and nickel were always added together")


def test_fewer_sensors_than_analytes():
    refused(ADDED, noisy(1)[:, :1], "copper and zinc answer together", "1 sensor (500 nm)", "at least 2")


def test_too_few_vessels():
    refused(ADDED[[0, 1]], noisy(1)[[0, 1]], "2 vessels cannot carry 2 analytes", "at least 3")


def test_as_many_vessels_as_needed_give_contents_without_uncertainty():
    found = solve(ADDED[[0, 1, 3]], ((CONTENTS + ADDED) @ RESPONSES)[[0, 1, 3]])
    assert found.contents == pytest.approx(CONTENTS, rel=1e-12)
    assert found.degrees_of_freedom == 0
    assert (found.standard_uncertainties, found.g, found.residual_sds) == (None, None, None)
    assert "scatter is not known" in found.no_uncertainty


def test_sensors_that_cannot_tell_analytes_apart():
    alike = np.array([[0.020, 0.004, 0.010], [0.060, 0.012, 0.030]])
    found = refused(ADDED, (CONTENTS + ADDED) @ alike, "copper and zinc in one proportion")
    assert len(found.sensitivities) == 2
    blind = RESPONSES * [[1], [0]]
    refused(ADDED, (CONTENTS + ADDED) @ blind, "no sensor responds to the additions of zinc")


def test_a_response_lost_in_the_scatter():
    """Two analytes that look nearly alike, and scatter that hides the difference."""
    nearly = np.array([[0.020, 0.0040, 0.010], [0.020, 0.0041, 0.010]])
    found = refused(ADDED, (CONTENTS + ADDED) @ nearly + (noisy(3) - noisy(4)), "copper", "zinc", "has no end")
    assert max(found.g) >= 1.0


@pytest.mark.parametrize("bad", [math.nan, math.inf, -math.inf])
@pytest.mark.parametrize("place", ["addition", "signal", "dilution"])
def test_numbers_that_are_none(bad, place):
    additions, signals, dilutions = ADDED.copy(), noisy(1), np.ones(6)
    {"addition": additions[:, 0], "signal": signals[:, 1], "dilution": dilutions}[place][2] = bad
    found = solve(additions, signals, dilutions)
    assert found.contents == ()
    assert ("not a number" in found.no_number) == math.isnan(bad)
    assert ("too large" in found.no_number) == math.isinf(bad)


@pytest.mark.parametrize("dilution", [0.0, -1.0, 1e-300])
def test_dilutions_that_are_none(dilution):
    found = solve(ADDED, noisy(1), [1.0, 1, 1, 1, 1, dilution])
    assert found.contents == ()
    assert "wrong unit" in found.no_number


extremes = st.one_of(
    st.floats(allow_nan=False, allow_infinity=False), st.sampled_from([0.0, 1.0, 2.0, 5e-324, 1e308, -1e308, 1e-160])
)


@settings(max_examples=300)
@given(
    st.lists(st.lists(extremes, min_size=2, max_size=2), min_size=4, max_size=4),
    st.lists(st.lists(extremes, min_size=3, max_size=3), min_size=4, max_size=4),
    st.lists(st.sampled_from([1.0, 2.0, 1e-150, 1e150]), min_size=4, max_size=4),
)
def test_whatever_is_read_there_is_a_number_or_a_sentence(additions, signals, dilutions):
    found = solve(additions, signals, dilutions)
    assert bool(found.no_number) != bool(found.contents)
    if found.contents:
        assert all(map(math.isfinite, found.contents))
        assert bool(found.no_uncertainty) != bool(found.standard_uncertainties)
        assert all(map(math.isfinite, found.standard_uncertainties or ()))


# the arithmetic beneath


@given(st.integers(0, 2**32), st.integers(1, 5), st.integers(0, 4), st.floats(-8, 0))
def test_factors_against_lapack(seed, count, more, tilt):
    generator = np.random.Generator(np.random.PCG64(seed))
    columns = generator.standard_normal((count, count + more)) * 10.0 ** (tilt * np.arange(count))[:, None]
    found = factors(columns.tolist())
    assert list(found.values) == sorted(found.values, reverse=True)
    assert np.array(found.values) == pytest.approx(np.linalg.svd(columns)[1], rel=1e-6, abs=1e-14)
    rebuilt = np.array(found.left).T @ np.diag(found.values) @ np.array(found.right)
    assert rebuilt == pytest.approx(columns.T, abs=1e-13)
    across = np.array([*found.left, *complement(found.left)])
    assert across @ across.T == pytest.approx(np.eye(count + more), abs=1e-10)


def test_condition_of_what_follows_from_the_rest():
    assert condition([[1.0, 0.0], [0.0, 0.0]]) == math.inf
    assert condition([[3.0, 0.0], [0.0, 1.0]]) == 3.0


def test_sums_do_not_depend_on_their_order():
    values = [1e16, 1.0, -1e16, 1e-3]
    assert len({dot(order, [1.0] * 4) for order in itertools.permutations(values)}) == 1
