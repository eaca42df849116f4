"""Weights from declared and pooled noise: published weighted lines, the library's weighted fit, Cochran's table."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats
from statsmodels.regression.linear_model import WLS

from spikeward.rules.solve.line import Fit, fit_lines
from spikeward.rules.solve.weights import COCHRAN, ROUNDS, NoiseFits, fit_by_noise, pool


def column(values) -> np.ndarray:
    return np.array(values, dtype=float).reshape(-1, 1)


def weighted(x, y, w, sd: float | None = None) -> Fit:
    x, y, w = column(x), column(y), column(w)
    return fit_lines(x, y, w, np.ones_like(x), None if sd is None else np.array([sd])).of(0)


def by_noise(x, y, factor, floor: float, relative: float, background: float = 0.0) -> NoiseFits:
    single = (np.array([value]) for value in (floor, relative, background))
    return fit_by_noise(column(x), column(y), column(factor), *single)


# ---- weights that are given --------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("y", "u", "expected", "in_full"),
    [
        ([3.3, 5.6, 7.1, 9.3, 10.7, 12.1], [0.5] * 6, (1.867, 0.465, 1.757, 0.120, -0.050, 1.665),
         (1.8666667, 0.46547467, 1.7571429, 0.11952286, -0.05, 1.6647619, 1.0623306, 0.3313651)),
        ([3.2, 4.3, 7.6, 8.6, 11.7, 12.8], [0.5, 0.5, 0.5, 1, 1, 1], (0.885, 0.530, 2.057, 0.178, -0.082, 4.131),
         (0.88523207, 0.52970814, 2.05696203, 0.17789202, -0.08227848, 4.1308017, 0.4303590, 0.2905843)),
    ],
)  # fmt: skip
def test_known_uncertainties(y, u, expected, in_full):
    """ISO/TS 28037:2010, clause 6 examples: intercept, slope, their u, covariance and chi²; then a/b and its u."""
    fit = weighted(range(1, 7), y, [1 / one**2 for one in u], sd=1.0)
    found = (
        fit.intercept, fit.intercept_uncertainty, fit.slope, fit.slope_uncertainty, fit.covariance,
        fit.dof * fit.residual_sd**2,
    )  # fmt: skip
    assert found == pytest.approx(expected, abs=5.01e-4)
    assert (*found, fit.content, fit.fit_uncertainty) == pytest.approx(in_full, rel=1e-6)


def test_weighted_line():
    """Miller and Miller, chapter 5, weighted regression: weights of mean 1 from the standard deviations."""
    sd = [0.001, 0.004, 0.010, 0.013, 0.017, 0.022]
    mean = math.fsum(1 / one**2 for one in sd) / 6
    w = [1 / one**2 / mean for one in sd]
    assert w == pytest.approx([5.535, 0.346, 0.055, 0.033, 0.019, 0.011], abs=5e-4)
    fit = weighted(range(0, 12, 2), [0.009, 0.158, 0.301, 0.472, 0.577, 0.739], w)
    assert (fit.slope, fit.intercept) == pytest.approx((0.0738, 0.0091), abs=5e-5)
    assert (fit.slope, fit.intercept) == pytest.approx((0.07375997, 0.00908391), abs=5e-9)
    assert (fit.x_mean, fit.residual_sd) == pytest.approx((0.2295745, 0.00249548), abs=5e-8)
    assert fit.weight == pytest.approx(6.0, rel=1e-14)
    read = [(signal - fit.intercept) / fit.slope for signal in (0.100, 0.600)]
    assert read == pytest.approx([1.23, 8.01], abs=5e-3)


# ---- declared noise ----------------------------------------------------------------------------------------------


def night(seed: int, series: int, floor: float = 0.002, relative: float = 0.02, background: float = 0.05):
    """Series of 3 to 8 vessels with just that noise, content 2 and slope 0.1, volumes that differ."""
    rng = np.random.default_rng(seed)
    there = np.arange(8)[:, np.newaxis] < rng.integers(3, 9, series)
    x = np.where(there, rng.uniform(0.5, 8.0, there.shape), 0.0)
    x[0] = 0.0
    factor = np.where(there, rng.uniform(1.0, 4.0, there.shape), 0.0)
    whole = 0.1 * (2.0 + x) / np.where(there, factor, 1.0) + background
    read = whole + rng.normal(0.0, 1.0, x.shape) * np.hypot(floor, relative * whole)
    y = np.where(there, (read - background) * factor, 0.0)
    return x, y, factor, *(np.full(series, value) for value in (floor, relative, background))


def test_the_weights_belong_to_the_fitted_line():
    """The library, given the noise at our fitted signals as weights, gives our line back, and that noise again."""
    x, y, factor, floor, relative, background = night(1, 200)
    found = fit_by_noise(x, y, factor, floor, relative, background)
    assert found.settled.all()
    for one in range(200):
        n = int(found.fits.vessels[one])
        a, b = found.fits.intercept[one], found.fits.slope[one]
        signal = (a + b * x[:n, one]) / factor[:n, one] + 0.05
        noise = factor[:n, one] * np.hypot(0.002, 0.02 * signal)
        assert found.noise[:n, one] == pytest.approx(noise, rel=1e-12)
        assert (found.noise[n:, one] == 0.0).all()
        design = np.column_stack([np.ones(n), x[:n, one]])
        fit = WLS(y[:n, one], design, weights=1 / noise**2).fit(cov_type="fixed scale")
        assert fit.params == pytest.approx([a, b], rel=1e-10)
        assert fit.bse == pytest.approx(
            [found.fits.intercept_uncertainty[one], found.fits.slope_uncertainty[one]], rel=1e-10
        )
        assert found.chi_square[one] == pytest.approx(np.sum(((y[:n, one] - design @ [a, b]) / noise) ** 2), rel=1e-9)
        assert found.p[one] == pytest.approx(stats.chi2.sf(found.chi_square[one], n - 2), rel=1e-9)


def test_contents_scatter_as_the_declared_noise_says():
    """Where the noise is as declared, (content - 2) / u is standard normal and p is spread evenly (simulated)."""
    found = fit_by_noise(*night(2, 20_000))
    z = (found.fits.content - 2.0) / found.fits.fit_uncertainty
    assert abs(z.mean()) < 0.15  # a ratio leans by some of its own uncertainty
    assert z.std() == pytest.approx(1.0, abs=0.04)
    assert (np.abs(z) < 1.959964).mean() == pytest.approx(0.95, abs=0.012)
    for level in (0.01, 0.1, 0.5, 0.9):
        assert (found.p < level).mean() == pytest.approx(level, abs=0.012)


def test_weights_by_observed_signals_would_lie():
    """Weights 1/S² of the readings pull the line towards vessels that read low; those of the fitted line do not."""
    x, y, factor, *_ = night(3, 20_000, floor=0.0, relative=0.15, background=0.0)
    zero, noisy = np.zeros(20_000), np.full(20_000, 0.15)
    found = fit_by_noise(x, y, factor, zero, noisy, zero)
    sound = found.settled & (found.fits.vessels > 5)
    observed = fit_lines(x, y, np.where(factor > 0, 1 / np.where(y > 0, y, np.inf) ** 2, 0.0), factor)
    height = [np.median((fits.intercept + 4.0 * fits.slope)[sound]) / 0.6 for fits in (found.fits, observed)]
    assert height[0] == pytest.approx(1.0, abs=0.01)
    assert height[1] < 0.97


def test_constant_noise_needs_no_rounds():
    """Without a relative part the weights are (V0/V)²: the line of constant noise, and one look that nothing moved."""
    x, y, factor, floor, relative, background = night(4, 50)
    found = fit_by_noise(x, y, factor, floor, 0.0 * relative, background)
    assert found.settled.all()
    assert (found.rounds <= 2).all()
    w = np.where(factor > 0, 1 / np.where(factor > 0, factor, 1.0) ** 2, 0.0)
    plain = fit_lines(x, y, w, factor, floor)
    assert found.fits.content == pytest.approx(plain.content, rel=1e-12)
    assert found.fits.fit_uncertainty == pytest.approx(plain.fit_uncertainty, rel=1e-12)


def test_the_background_is_part_of_the_noise():
    """A large background that was subtracted makes the noise almost the same in all vessels."""
    x, y, factor = [0, 1, 2, 4], [0.1, 0.21, 0.29, 0.5], [1, 1, 1, 1]
    bare, gross = by_noise(x, y, factor, 0.0, 0.01), by_noise(x, y, factor, 0.0, 0.01, 100.0)
    assert bare.noise[3, 0] / bare.noise[0, 0] > 4
    assert gross.noise[:, 0] == pytest.approx(1.0, rel=0.005)
    assert gross.fits.fit_uncertainty[0] > 100 * bare.fits.fit_uncertainty[0]


def test_two_vessels_have_an_uncertainty_from_their_noise():
    """C0 = x1 y0 / (y1 - y0); its variance by the law of propagation, JCGM 100:2008, 5.1.2. No chi² without a dof."""
    found = by_noise([0, 2], [0.3, 0.7], [1, 1], 0.001, 0.01)
    u0, u1 = math.hypot(0.001, 0.003), math.hypot(0.001, 0.007)
    by_y0, by_y1 = 2 * 0.7 / 0.4**2, 2 * 0.3 / 0.4**2
    assert found.fits.content[0] == pytest.approx(1.5, rel=1e-14)
    assert found.fits.fit_uncertainty[0] == pytest.approx(math.hypot(by_y0 * u0, by_y1 * u1), rel=1e-12)
    assert math.isnan(found.chi_square[0])
    assert math.isnan(found.p[0])


def test_what_does_not_settle_says_so():
    """No noise at all, a fitted signal without noise, one level, and a number that is none: none of them is used."""
    for x, y, floor, relative in (
        ([0, 1, 2], [1, 2, 3.1], 0.0, 0.0), ([0, 1, 2], [0, 1, 2], 0.0, 0.02), ([1, 1, 1], [1, 2, 3], 0.1, 0.1),
        ([0, 1, 2], [1, math.nan, 3], 0.1, 0.1),
    ):  # fmt: skip
        found = by_noise(x, y, [1, 1, 1], floor, relative)
        assert not found.settled[0]
        assert found.rounds[0] <= 3
    assert not fit_by_noise(*(np.zeros((3, 1)) for _ in range(3)), *(np.ones(1) for _ in range(3))).settled.any()


def test_weights_that_never_come_to_rest():
    """A signal that crosses zero under a noise of its own size: the rounds end at their number, and it is told."""
    rng = np.random.default_rng(5)
    x, y = rng.uniform(0, 5, (4, 4000)), rng.normal(0, 1, (4, 4000))
    found = fit_by_noise(x, y, np.ones_like(x), np.full(4000, 1e-3), np.full(4000, 1.0), np.zeros(4000))
    assert 0 < (~found.settled).sum() < 4000
    assert (found.rounds[~found.settled] == ROUNDS).all()


# ---- pooling -----------------------------------------------------------------------------------------------------

# W. G. Cochran's criterion as commonly tabulated (Eisenhart, Hastay and Wallis, Techniques of Statistical Analysis,
# 1947; from memory): k, and limits for 1 to 5 degrees of freedom
FIVE_PERCENT = {
    2: (0.9985, 0.9750, 0.9392, 0.9057, 0.8772), 3: (0.9669, 0.8709, 0.7977, 0.7457, 0.7070),
    4: (0.9065, 0.7679, 0.6839, 0.6287, 0.5894), 5: (0.8413, 0.6838, 0.5981, 0.5440, 0.5063),
    6: (0.7807, 0.6161, 0.5321, 0.4803, 0.4447), 8: (0.6798, 0.5157, 0.4377, 0.3910, 0.3594),
    10: (0.6020, 0.4450, 0.3733, 0.3311, 0.3028),
}  # fmt: skip
ONE_PERCENT = {
    2: (0.9999, 0.9950, 0.9794, 0.9586, 0.9373), 5: (0.9279, 0.7885, 0.6957, 0.6329, 0.5875),
    10: (0.7175, 0.5358, 0.4469, 0.3934, 0.3572),
}  # fmt: skip


@pytest.mark.parametrize(("level", "table"), [(0.05, FIVE_PERCENT), (0.01, ONE_PERCENT)])
def test_cochran_as_tabulated(level, table):
    assert COCHRAN == 0.01
    for k, row in table.items():
        for nu, limit in enumerate(row, 1):
            # 1 unit of the last digit: copies of the table round either way
            assert pool([1.0] * k, [1.0] * k, [nu] * k, level).limits == pytest.approx([limit] * k, abs=1.0e-4)


@given(st.lists(st.integers(1, 12), min_size=2, max_size=30))
def test_the_limits_are_those_of_the_f_distribution(dof):
    """[1 + (sum dof/dof - 1)/F(1 - level/k; dof, sum dof - dof)]^-1: 't Lam, Anal. Chim. Acta 659 (2010) 68."""
    for limit, nu in zip(pool([1.0] * len(dof), [1.0] * len(dof), dof).limits, dof, strict=True):
        f = stats.f.isf(0.01 / len(dof), nu, sum(dof) - nu)
        assert limit == pytest.approx(1 / (1 + (sum(dof) / nu - 1) / f), rel=1e-9)


def test_so_often_is_a_sound_night_refused():
    """Unequal degrees of freedom, one noise: Cochran's test at 1 % refuses just under one night in a hundred."""
    rng = np.random.default_rng(6)
    dof = np.array([2, 2, 2, 3, 3, 4, 5, 8, 10, 10])
    squares = rng.chisquare(dof, (100_000, 10))
    shares = squares / squares.sum(axis=1, keepdims=True)
    limits = np.array(pool([1.0] * 10, [1.0] * 10, dof.tolist()).limits)
    assert (shares > limits).any(axis=1).mean() == pytest.approx(0.01, abs=0.001)


def test_pooled():
    """20 mg/L of noise at 1000 and 1 at 100 with 2 and 6 degrees of freedom: sqrt((2 4 + 6 1)/8) per cent."""
    found = pool([20.0, 1.0], [1000.0, 100.0], [2, 6])
    assert found.relative_sd == pytest.approx(0.01 * math.sqrt(14 / 8), rel=1e-15)
    assert found.dof == 8
    assert found.shares == pytest.approx((8 / 14, 6 / 14), rel=1e-15)
    assert found.outlying == ()


def test_one_noisy_series_is_named():
    sd = [1.0] * 9
    sd[4] = 9.0
    assert pool(sd, [100.0] * 9, [2] * 9).outlying == (4,)
    sd[4] = 1.5
    assert pool(sd, [100.0] * 9, [2] * 9).outlying == ()


def test_what_cannot_be_compared():
    alone = pool([2.0], [100.0], [3])
    assert (alone.relative_sd, alone.dof, alone.shares, alone.outlying) == (0.02, 3, (), ())
    silent = pool([0.0, 0.0], [1.0, 2.0], [2, 3])
    assert (silent.relative_sd, silent.shares, silent.outlying) == (0.0, (0.0, 0.0), ())
    for sd, scale, dof in (([], [], []), ([1.0], [1.0], [0]), ([1.0], [0.0], [2]), ([1.0], [math.nan], [2])):
        with pytest.raises(ValueError, match="degrees of freedom"):
            pool(sd, scale, dof)


@given(st.permutations(range(12)))
def test_the_order_of_series_changes_no_digit(order):
    rng = np.random.default_rng(7)
    sd, scale = rng.uniform(0.1, 3.0, 12).tolist(), rng.uniform(1.0, 1e3, 12).tolist()
    dof = rng.integers(1, 9, 12).tolist()
    plain = pool(sd, scale, dof)
    other = pool(*([values[place] for place in order] for values in (sd, scale, dof)))
    assert (other.relative_sd, other.dof) == (plain.relative_sd, plain.dof)
    assert other.shares == tuple(plain.shares[place] for place in order)
    assert other.limits == tuple(plain.limits[place] for place in order)
    assert {order[place] for place in other.outlying} == set(plain.outlying)
