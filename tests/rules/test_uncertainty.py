"""Fieller's interval, effective degrees of freedom, and the one interval that is printed."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import brentq

from spikeward.rules.uncertainty.fieller import g_value, half_widths, t_quantile
from spikeward.rules.uncertainty.interval import Component, FitPart, effective_degrees_of_freedom, printed


def test_student_as_tabulated():
    """Two-sided 95 %, common tables: 12.7062, 4.3027, 3.1824, 2.7764, 2.5706 and 2.2281 for 1 to 5 and 10."""
    tabulated = {1: 12.7062, 2: 4.3027, 3: 3.1824, 4: 2.7764, 5: 2.5706, 10: 2.2281, 20: 2.0860}
    for nu, t in tabulated.items():
        assert t_quantile(nu, 0.95) == pytest.approx(t, abs=5e-5)


@given(st.floats(0.05, 20), st.floats(0.1, 10), st.floats(0.5, 10), st.integers(3, 20), st.floats(1e-4, 0.98))
def test_the_ends_are_the_roots(content, x_mean, spread, vessels, g):
    """(a - b C)² = t² (u_a² - 2 C u_ab + C² u_b²), found here by bisection with b = 1."""
    t_s = math.sqrt(g) * spread

    def beyond(c: float) -> float:
        return (content - c) ** 2 - t_s**2 * (1 / vessels + (c + x_mean) ** 2 / spread**2)

    lower, upper = half_widths(content, x_mean, spread, vessels, g)
    reach = 1e3 * (content + x_mean + spread)
    assert content - lower == pytest.approx(brentq(beyond, content - reach, content, xtol=1e-13), rel=1e-6, abs=1e-6)
    assert content + upper == pytest.approx(brentq(beyond, content, content + reach, xtol=1e-13), rel=1e-6, abs=1e-6)


def test_without_scatter_the_interval_is_a_point():
    assert half_widths(2.0, 1.0, 3.0, 4, 0.0) == (0.0, 0.0)


def test_no_end_no_interval():
    with pytest.raises(ValueError, match="does not differ from zero"):
        half_widths(2.0, 1.0, 3.0, 4, 1.0)
    assert g_value(4.3, 0.0, 0.1) == math.inf
    assert g_value(2.0, -4.0, 1.0) == pytest.approx(0.25)


def test_effective_degrees_of_freedom():
    """JCGM 100:2008, H.1, end gauge (from memory): 25, 9.7, 2.9, 16.6 nm with 18, 25.6, 50, 2: 16.7, cut to 16.

    Components here have whole degrees of freedom; 25 in place of 25.6 gives the same.
    """
    budget = [Component(25.0, 18), Component(9.7, 25), Component(2.9, 50), Component(16.6, 2)]
    assert effective_degrees_of_freedom(budget) == 16


@pytest.mark.parametrize("nu", [1, 2, 3, 7, 40])
def test_a_single_component_keeps_its_own(nu):
    assert effective_degrees_of_freedom([Component(0.3, nu), Component(0.0, 1)]) == nu
    assert effective_degrees_of_freedom([Component(0.0, nu)]) == nu


def test_an_uncertainty_beyond_all_numbers_does_not_break():
    for value in (math.inf, math.nan):
        assert effective_degrees_of_freedom([Component(value, 5), Component(0.1, 7)]) == 1


def test_equal_components_add_up():
    """Two equal standard uncertainties with ν each have 2 ν together: (2 u²)² / (2 u⁴/ν)."""
    assert effective_degrees_of_freedom([Component(0.1, 3), Component(0.1, 3)]) == 6


FIT = FitPart(10.0, 0.5, (1.8, 2.6), 2)


def test_the_fit_alone():
    estimate, nu = printed(FIT, [], "mg/L", 0.95, "")
    assert nu == 2
    assert estimate.standard_uncertainty == 0.5
    assert estimate.interval == pytest.approx((8.2, 12.6))
    assert estimate.expanded_uncertainty == pytest.approx(2.2)
    assert estimate.coverage_factor == pytest.approx(4.4)


def test_the_rest_widens_both_halves_in_quadrature():
    estimate, nu = printed(FIT, [Component(0.3, 9), Component(0.4, 9)], "mg/L", 0.95, "")
    assert estimate.standard_uncertainty == pytest.approx(math.sqrt(0.5))
    # Welch-Satterthwaite by hand: 0.5^2 / (0.0625/2 + 0.0081/9 + 0.0256/9) = 0.25/0.034994 = 7.14
    assert nu == 7
    t = 2.364624  # 7 degrees of freedom
    assert 10.0 - estimate.interval[0] == pytest.approx(math.hypot(1.8, t * 0.5), rel=1e-6)
    assert estimate.interval[1] - 10.0 == pytest.approx(math.hypot(2.6, t * 0.5), rel=1e-6)
    length = estimate.interval[1] - estimate.interval[0]
    assert estimate.expanded_uncertainty == pytest.approx(length / 2)
    assert estimate.coverage_factor == pytest.approx(estimate.expanded_uncertainty / estimate.standard_uncertainty)


def test_no_scatter_says_so():
    estimate, _ = printed(FitPart(10.0, 0.0, (0.0, 0.0), 2), [], "mg/L", 0.95, "exact")
    assert (estimate.standard_uncertainty, estimate.expanded_uncertainty) == (0.0, 0.0)
    assert estimate.interval == (10.0, 10.0)
    assert estimate.coverage_factor == pytest.approx(4.3027, abs=5e-5)
    assert estimate.reason == "exact"


def test_a_factor_scales_everything():
    scaled = FIT.times(4.0)
    assert scaled == FitPart(40.0, 2.0, (7.2, 10.4), 2)
