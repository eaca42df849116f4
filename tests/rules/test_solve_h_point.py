"""H-point standard addition: the constructed case, independent regression, and what its uncertainty promises."""

from __future__ import annotations

import itertools
import math
import re

import numpy as np
import pytest
import statsmodels.api as sm
from hypothesis import given, settings
from hypothesis import strategies as st

from spikeward.rules.solve.h_point import HPoint, solve_h_point
from spikeward.rules.solve.line import fit_lines
from spikeward.rules.uncertainty.fieller import t_quantile

ADDED = np.array([0.0, 0, 2, 4, 6, 8])
DILUTIONS = np.array([1.0, 1.0, 1.05, 1.1, 1.15, 1.2])
CONTENT, INTERFERENT = 6.0, 0.150
SLOPES = (0.030, 0.012)


def solve(x, first, second, dilutions=None, coverage=0.95) -> HPoint:
    x, first, second = (np.asarray(one, dtype=float).tolist() for one in (x, first, second))
    dilutions = [1.0] * len(x) if dilutions is None else [float(one) for one in dilutions]
    return solve_h_point(x, (first, second), dilutions, ("410 nm", "470 nm"), coverage)


def exact(x=ADDED):
    return [INTERFERENT + slope * (CONTENT + np.asarray(x)) for slope in SLOPES]


def noisy(seed: int, correlated: float = 0.5, draws: int = 1, dilutions=1.0):
    """Both sensors, scatter partly common to them, growing with the dilution of the vessel."""
    generator = np.random.Generator(np.random.PCG64(seed))
    own, common = generator.standard_normal((2, draws, len(ADDED))), generator.standard_normal((draws, len(ADDED)))
    scatter = 0.002 * dilutions * (math.sqrt(1 - correlated) * own + math.sqrt(correlated) * common)
    return [line + part for line, part in zip(exact(), scatter, strict=True)]


# what it finds


def test_constructed_case():
    """Constructed, exact arithmetic; method of Bosch-Reig and Campins-Falco, Analyst 113 (1988) 1011."""
    x = np.array([0.0, 2, 4, 6])
    first, second = 0.330 + 0.030 * x, 0.222 + 0.012 * x
    found = solve(x, first, second)
    assert found.no_number == ""
    assert found.content == pytest.approx(6.0, rel=1e-12)
    assert found.interferent_signal == pytest.approx(0.150, rel=1e-12)
    # a plain standard addition at the first sensor takes the interferent for analyte
    columns = [one.reshape(-1, 1) for one in (x, first, np.ones(4), np.ones(4))]
    alone = fit_lines(*columns).of(0).content
    assert alone == pytest.approx(11.0, rel=1e-12)
    assert found.content != pytest.approx(alone, rel=0.1)


@pytest.mark.parametrize(("slope", "interferent"), [(0.012, 0.150), (0.0299, 0.150), (0.029, 55.7)])
def test_exact_data_give_no_uncertainty(slope, interferent):
    """Nearly equal slopes and a large interferent enlarge what is rounding only."""
    found = solve(ADDED, interferent + 0.030 * (CONTENT + ADDED), interferent + slope * (CONTENT + ADDED))
    assert found.content == pytest.approx(CONTENT, rel=1e-9)
    assert (found.standard_uncertainty, found.half_widths, found.interferent_uncertainty) == (None, None, None)
    assert "no scatter" in found.no_uncertainty
    assert "no scatter" in found.interferent_no_uncertainty


def test_common_scatter_alone_leaves_the_content_exact():
    """What both sensors have in common drops out of the difference and stays in the interferent's signal."""
    common = np.ldexp(np.array([3.0, -2, 1, -4, 2, 0]), -12)  # few digits, so that sums are exact
    first, second = 0.25 + 0.03125 * (CONTENT + ADDED) + common, 0.25 + 0.015625 * (CONTENT + ADDED) + common
    found = solve(ADDED, first, second)
    assert found.content == pytest.approx(CONTENT, rel=1e-12)
    assert "no scatter" in found.no_uncertainty
    assert found.interferent_uncertainty > 1e-5
    assert found.interferent_no_uncertainty == ""


def test_two_vessels_give_a_content_without_uncertainty():
    found = solve([0, 4], *exact([0, 4]))
    assert found.content == pytest.approx(CONTENT, rel=1e-12)
    assert found.degrees_of_freedom == 0
    assert (found.standard_uncertainty, found.g) == (None, None)
    assert "scatter is not known" in found.no_uncertainty


def test_against_another_regression():
    """statsmodels fits both sensors; the full covariance of the four coefficients goes through the delta method."""
    first, second = (one[0] for one in noisy(6, dilutions=DILUTIONS))
    found = solve(ADDED, first, second, DILUTIONS)
    w, design = 1.0 / DILUTIONS**2, sm.add_constant(ADDED)
    fits = [sm.WLS(y, design, weights=w).fit() for y in (first, second)]
    (a1, b1), (a2, b2) = (fit.params for fit in fits)
    content = (a1 - a2) / (b1 - b2)
    assert found.content == pytest.approx(content, rel=1e-10)
    assert found.interferent_signal == pytest.approx((b1 * a2 - b2 * a1) / (b1 - b2), rel=1e-10)
    residuals = np.sqrt(w)[:, None] * np.column_stack([fit.resid for fit in fits])
    between = residuals.T @ residuals / 4  # sensors of one vessel
    covariance = np.kron(between, np.linalg.inv(design.T @ (w[:, None] * design)))  # of a1, b1, a2, b2
    of_content = np.array([1.0, -content, -1.0, content]) / (b1 - b2)
    assert found.standard_uncertainty == pytest.approx(math.sqrt(of_content @ covariance @ of_content), rel=1e-9)
    of_signal = np.array([-b2, b2 * content, b1, -b1 * content]) / (b1 - b2)
    assert found.interferent_uncertainty == pytest.approx(math.sqrt(of_signal @ covariance @ of_signal), rel=1e-9)
    assert found.lines[0].slope == pytest.approx(b1, rel=1e-11)
    assert found.lines[1].intercept == pytest.approx(a2, rel=1e-11)


def test_half_widths_are_fiellers():
    """Both ends are roots of (D - C B)² = t² var(D - C B): Fieller, J. R. Statist. Soc. B 16 (1954) 175."""
    first, second = (one[0] for one in noisy(9))
    found = solve(ADDED, first, second)
    fit = sm.OLS(first - second, sm.add_constant(ADDED)).fit()
    t = t_quantile(4, 0.95)
    for end in (found.content - found.half_widths[0], found.content + found.half_widths[1]):
        direction = np.array([1.0, -end])
        spread = t * math.sqrt(direction @ fit.cov_params() @ direction)
        assert abs(direction @ fit.params) == pytest.approx(spread, rel=1e-8)
    assert found.g == pytest.approx((t / fit.tvalues[1]) ** 2, rel=1e-9)
    assert 0 < found.half_widths[0] < found.half_widths[1]


def test_background_effects():
    rise, signals = 1e-7, [one[0] for one in noisy(5, dilutions=DILUTIONS)]
    found = solve(ADDED, *signals, DILUTIONS)
    for sensor in range(2):
        lowered = [one - rise * DILUTIONS if place == sensor else one for place, one in enumerate(signals)]
        change = (solve(ADDED, *lowered, DILUTIONS).content - found.content) / rise
        assert change == pytest.approx(found.background_effects[sensor], rel=1e-4)


# what its uncertainty promises


@pytest.mark.parametrize("correlated", [0.0, 0.8])
def test_interval_covers(correlated):
    """Six vessels, 2 mAU of noise; sensors that scatter independently, and mostly together."""
    draws = 2500
    solved = [
        solve(ADDED, *signals, DILUTIONS)
        for signals in zip(*noisy(77, correlated, draws, dilutions=DILUTIONS), strict=True)
    ]
    assert all(one.no_number == "" for one in solved)
    inside = [-one.half_widths[0] <= CONTENT - one.content <= one.half_widths[1] for one in solved]
    band = 3.5 * math.sqrt(0.95 * 0.05 / draws)
    assert np.mean(inside) == pytest.approx(0.95, abs=band)
    t = t_quantile(4, 0.95)
    errors = [one.interferent_signal - INTERFERENT for one in solved]
    reach = [t * one.interferent_uncertainty for one in solved]
    assert np.mean(np.abs(errors) <= reach) == pytest.approx(0.95, abs=band)
    # u² has four degrees of freedom, and a ratio scatters a little more than its linear part
    tolerance = 3.5 * math.sqrt((1 + 2 / 4) / (2 * draws)) + 0.02
    contents = [one.content for one in solved]
    assert math.sqrt(np.mean([one.standard_uncertainty**2 for one in solved])) == pytest.approx(
        np.std(contents), rel=tolerance
    )
    assert math.sqrt(np.mean([one.interferent_uncertainty**2 for one in solved])) == pytest.approx(
        np.std(errors), rel=tolerance
    )


# what leaves the result alone


def test_order_of_vessels_and_of_sensors_reaches_no_digit():
    first, second = (one[0] for one in noisy(8, dilutions=DILUTIONS))
    found = solve(ADDED, first, second, DILUTIONS)
    for order in itertools.islice(itertools.permutations(range(6)), 0, 720, 17):
        places = list(order)
        assert solve(ADDED[places], first[places], second[places], DILUTIONS[places]) == found
    turned = solve(ADDED, second, first, DILUTIONS)
    assert (turned.content, turned.standard_uncertainty, turned.half_widths) == (
        found.content, found.standard_uncertainty, found.half_widths,
    )  # fmt: skip
    assert turned.interferent_signal == pytest.approx(found.interferent_signal, rel=1e-12)


@given(st.sampled_from([1e-9, 1e-3, 7.0, 1e9]), st.sampled_from([1e-9, 1e-3, 0.3, 1e9]))
def test_units_are_only_units(of_content, of_signal):
    first, second = (one[0] for one in noisy(21))
    plain, scaled = solve(ADDED, first, second), solve(ADDED * of_content, first * of_signal, second * of_signal)
    assert scaled.content == pytest.approx(plain.content * of_content, rel=1e-11)
    assert scaled.standard_uncertainty == pytest.approx(plain.standard_uncertainty * of_content, rel=1e-10)
    assert scaled.half_widths == pytest.approx([half * of_content for half in plain.half_widths], rel=1e-10)
    assert scaled.interferent_signal == pytest.approx(plain.interferent_signal * of_signal, rel=1e-11)
    assert scaled.interferent_uncertainty == pytest.approx(plain.interferent_uncertainty * of_signal, rel=1e-10)
    assert scaled.g == pytest.approx(plain.g, rel=1e-10)


@given(st.floats(-10, 10))
def test_more_interferent_changes_its_signal_alone(more):
    first, second = (one[0] for one in noisy(22))
    plain, raised = solve(ADDED, first, second), solve(ADDED, first + more, second + more)
    assert raised.content == pytest.approx(plain.content, rel=1e-10)
    assert raised.interferent_signal == pytest.approx(plain.interferent_signal + more, abs=1e-10)
    assert raised.interferent_uncertainty == pytest.approx(plain.interferent_uncertainty, rel=1e-8)


# what it refuses


def refused(found: HPoint, *words: str) -> HPoint:
    assert (found.content, found.standard_uncertainty, found.interferent_signal) == (None, None, None)
    for word in words:
        assert word in found.no_number
    assert not re.search(r"nan|inf\b|None|\[|\{", found.no_number)
    return found


@pytest.mark.parametrize("x", [[0, 0.1, 0.2, 0.3, 0.7], [0, 0.3]])
@pytest.mark.parametrize("apart", [0.0, 0.1, 0.37])
def test_lines_that_rise_alike(x, apart):
    """Parallel lines do not cross; what is left of their difference is rounding, with two vessels as with five."""
    rise = 0.7 * np.array(x)
    refused(solve(x, 63.9 + rise, 63.9 + apart + rise), "410 nm and 470 nm rise alike", "do not cross")


def test_slopes_that_do_not_differ_beyond_the_scatter():
    scatter = noisy(30)[0][0] - exact()[0]
    found = refused(
        solve(ADDED, 0.3 + 0.03 * ADDED + scatter, 0.2 + 0.0301 * ADDED - scatter), "410 nm and 470 nm", "no end"
    )
    assert found.g >= 1.0
    assert found.lines[0].slope == pytest.approx(0.03, rel=0.1)


def test_without_levels():
    first, second = exact()
    refused(solve([], [], []), "no vessel can be used")
    refused(solve(ADDED[:1], first[:1], second[:1]), "only one vessel")
    refused(solve(ADDED * 0, first, second), "no vessel received an addition")
    refused(solve(ADDED * 0 + 0.3, first, second), "same addition")


@pytest.mark.parametrize("bad", [math.nan, math.inf, -math.inf])
@pytest.mark.parametrize("place", range(4))
def test_numbers_that_are_none(bad, place):
    columns = [ADDED.copy(), *exact(), np.ones(6)]
    columns[place][2] = bad
    refused(solve(*columns), "not a number" if math.isnan(bad) else "too large")


@pytest.mark.parametrize("dilution", [0.0, -1.0, 1e-300])
def test_dilutions_that_are_none(dilution):
    refused(solve(ADDED, *exact(), [1.0, 1, 1, 1, 1, dilution]), "wrong unit")


extremes = st.one_of(
    st.floats(allow_nan=False, allow_infinity=False), st.sampled_from([0.0, 1.0, 2.0, 5e-324, 1e308, -1e308, 1e-160])
)


@settings(max_examples=400)
@given(
    st.lists(
        st.tuples(extremes, extremes, extremes, st.sampled_from([1.0, 2.0, 1e-150, 1e150])), min_size=2, max_size=4
    )
)
def test_whatever_is_read_there_is_a_number_or_a_sentence(rows):
    found = solve(*zip(*rows, strict=True))
    assert bool(found.no_number) == (found.content is None)
    if found.content is not None:
        assert math.isfinite(found.content)
        assert math.isfinite(found.interferent_signal)
        assert bool(found.no_uncertainty) == (found.standard_uncertainty is None)
        assert bool(found.interferent_no_uncertainty) == (found.interferent_uncertainty is None)
