"""The arithmetic of lines against statsmodels' least squares, series by series."""

from __future__ import annotations

import math
import warnings

import numpy as np
import pytest
from scipy import stats
from statsmodels.regression.linear_model import OLS, WLS

from spikeward.rules.solve.line import fit_lines
from spikeward.rules.solve.robust import theil_sen
from spikeward.rules.uncertainty.fieller import g_values, half_widths_each, t_quantiles

SERIES = 10_000
DEEPEST = 12
EPSILON = 2.0**-52
TOLERANCE = 1e-10


def many(seed: int, series: int = SERIES) -> tuple[np.ndarray, ...]:
    """x, y, w, factor and depth of random series of 3 to 12 vessels, contents and slopes over three decades."""
    rng = np.random.default_rng(seed)
    depth = rng.integers(3, DEEPEST + 1, series)
    there = np.arange(DEEPEST)[:, np.newaxis] < depth
    x = rng.uniform(0.5, 8.0, there.shape) * 10.0 ** rng.uniform(-2, 1, series)
    x[0] = 0.0
    content = x.max(axis=0) * rng.uniform(0.1, 2.0, series)
    slope = 10.0 ** rng.uniform(-2, 1, series)
    y = slope * (content + x) * (1.0 + rng.normal(0.0, 0.01, x.shape))
    w = rng.uniform(0.05, 1.0, x.shape)
    factor = rng.uniform(1.0, 5.0, x.shape)
    return *(np.where(there, rows, 0.0) for rows in (x, y, w, factor)), depth


def by_library(x, y, w, factor, weighted: bool) -> np.ndarray:
    """Slope, intercept, u of both, covariance, s, r², content, u(content), background effect, s per size of y.

    The last two are not the library's own: the limit of conditioning, see ``limits``.
    """
    design = np.column_stack([np.ones_like(x), x])
    model = WLS(y, design, weights=w) if weighted else OLS(y, design)
    fit = model.fit()
    (a, b), cov = fit.params, fit.cov_params()
    by_a, by_b = 1.0 / b, -a / b**2
    u = math.sqrt(by_a**2 * cov[0, 0] + 2 * by_a * by_b * cov[0, 1] + by_b**2 * cov[1, 1])
    of_shift = (WLS(factor, design, weights=w) if weighted else OLS(factor, design)).fit().params
    effect = -by_a * of_shift[0] - by_b * of_shift[1]
    s = math.sqrt(fit.scale)
    condition = np.linalg.cond(design * np.sqrt(w)[:, np.newaxis] if weighted else design)
    roughness = np.abs(y).max() / s
    return np.array([b, a, *fit.bse[::-1], cov[0, 1], s, fit.rsquared, a / b, u, effect, condition, roughness])


@pytest.mark.parametrize("weighted", [False, True], ids=["OLS", "WLS"])
def test_ten_thousand_series(weighted):
    """Every figure to 1e-10, or to what the arithmetic of either side can carry where that is less.

    Least squares in 53 digits loses the condition number K of the design in the coefficients, and what is left of y
    after the fit is known to the rounding of y: eps K (1 + max|y|/s), for u of the content once more from a difference.
    """
    x, y, w, factor, depth = many(2030 + weighted)
    ones = np.where(w > 0.0, 1.0, 0.0)
    fits = fit_lines(x, y, w if weighted else ones, factor)
    own = np.array([
        fits.slope, fits.intercept, fits.slope_uncertainty, fits.intercept_uncertainty, fits.covariance,
        fits.residual_sd, fits.correlation**2, fits.content, fits.fit_uncertainty, fits.background_effect,
    ])  # fmt: skip
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        others = np.array([
            by_library(x[:n, column], y[:n, column], w[:n, column], factor[:n, column], weighted)
            for column, n in enumerate(depth)
        ]).T  # fmt: skip
    other, condition, roughness = others[:10], others[10], others[11]
    # a background effect may be near zero for one series; it is then compared with its larger part
    size = np.abs(other)
    size[9] = np.maximum(size[9], np.abs(factor).max(axis=0) / np.abs(fits.slope))
    apart = np.abs(own - other) / size
    limit = np.maximum(TOLERANCE, 8.0 * EPSILON * condition * (1.0 + roughness))
    assert (apart <= limit).all(), (apart / limit).max(axis=1)
    assert (limit > TOLERANCE).mean() < 0.05  # so that the limit is the exception
    residual = y - np.where(ones > 0.0, other[1] + other[0] * x, 0.0)
    assert (np.abs(np.where(ones > 0.0, fits.residuals, 0.0) - residual) <= 1e-13 * np.abs(y).max(axis=0)).all()


def test_ends_of_the_interval_satisfy_the_definition():
    """At either end C the line's value there, a - b C, is t times its standard uncertainty (E. C. Fieller, 1954)."""
    x, y, w, factor, _ = many(7)
    fits = fit_lines(x, y, w, factor)
    t = t_quantiles(fits.dof, 0.95)
    g = g_values(t, fits.slope, fits.slope_uncertainty)
    lower, upper = half_widths_each(fits.content, fits.x_mean, fits.spread, fits.weight, g)
    bounded = g < 0.9
    assert bounded.sum() > 0.9 * SERIES
    assert (~np.isfinite(lower[g >= 1.0])).all()
    for end in (fits.content - lower, fits.content + upper):
        value = fits.intercept - fits.slope * end
        variance = fits.intercept_uncertainty**2 - 2.0 * end * fits.covariance + (end * fits.slope_uncertainty) ** 2
        assert np.abs(value)[bounded] == pytest.approx((t * np.sqrt(variance))[bounded], rel=1e-7)


def test_a_known_scatter_replaces_that_of_the_residuals():
    """Uncertainties are in proportion to s; two vessels have one only if it is known, as the library has with scale."""
    x, y, w, factor, depth = many(8, 200)
    own = fit_lines(x, y, w, factor)
    fits = fit_lines(x, y, w, factor, np.where(np.arange(200) % 2, 0.25, np.nan))
    for column in range(200):
        ratio = 0.25 / own.residual_sd[column] if column % 2 else 1.0
        for name in ("slope_uncertainty", "intercept_uncertainty", "fit_uncertainty"):
            assert getattr(fits, name)[column] == pytest.approx(getattr(own, name)[column] * ratio, rel=1e-14)
        assert fits.covariance[column] == pytest.approx(own.covariance[column] * ratio**2, rel=1e-14)
        if column % 2:
            n = depth[column]
            design = np.column_stack([np.ones(n), x[:n, column]])
            known = WLS(y[:n, column], design, weights=w[:n, column]).fit(
                cov_type="fixed scale", cov_kwds={"scale": 0.0625}
            )
            assert fits.slope_uncertainty[column] == pytest.approx(known.bse[1], rel=1e-11)
    assert (fits.residual_sd == own.residual_sd).all()
    two = fit_lines(x[:2], y[:2], w[:2], factor[:2], np.full(200, 0.25))
    assert np.isfinite(two.fit_uncertainty).all()
    assert np.isnan(fit_lines(x[:2], y[:2], w[:2], factor[:2]).fit_uncertainty).all()


def test_theil_sen_as_scipy_has_it():
    x, y, w, _, depth = many(9, 2000)
    x[2, ::3] = x[1, ::3]  # preparations of one level give no slope
    found = theil_sen(x, y, w)
    for column, n in enumerate(depth):
        slope, intercept, *_ = stats.theilslopes(y[:n, column], x[:n, column], method="joint")
        assert found.slope[column] == pytest.approx(slope, rel=1e-13)
        assert found.intercept[column] == pytest.approx(intercept, rel=1e-12)
        assert found.content[column] == pytest.approx(intercept / slope, rel=1e-12)


def test_theil_sen_is_not_moved_by_one_vessel():
    """Seven vessels of which one was spiked twice: the fitted line leaves the content, the medians stay near it."""
    x = np.arange(7.0).reshape(-1, 1)
    y = 2.0 * (3.0 + x) + np.array([0.01, -0.02, 0.0, 0.02, -0.01, 0.01, -0.01]).reshape(-1, 1)
    y[5] += 10.0
    ones = np.ones_like(x)
    assert theil_sen(x, y, ones).content[0] == pytest.approx(3.0, rel=0.02)
    assert abs(fit_lines(x, y, ones, ones).content[0] - 3.0) > 0.5


def test_theil_sen_says_nothing_of_one_level():
    x, y = np.full((3, 2), 4.0), np.array([[1.0, 2.0], [2.0, 2.0], [3.0, 2.0]])
    found = theil_sen(x, y, np.ones_like(x))
    assert np.isnan(found.slope).all()
    assert np.isnan(found.content).all()
    assert np.isnan(theil_sen(x[:0], y[:0], x[:0]).slope).all()
    assert np.isnan(theil_sen(x[:1], y[:1], x[:1]).slope).all()
