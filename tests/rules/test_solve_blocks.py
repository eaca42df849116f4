"""One content from several runs: exact ones, straight lines, an independent program, and any company."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from scipy.optimize import brentq, least_squares
from scipy.stats import norm, t

from spikeward.rules.solve.blocks import BlockFit, BlockFits, fit_blocks
from spikeward.rules.solve.line import fit_lines
from spikeward.rules.uncertainty.fieller import half_widths

RESIDUALS = math.nan


def one(x, y, run, w=None, noise=RESIDUALS) -> BlockFit:
    """A single series, fitted alone."""
    weights = np.ones(len(x)) if w is None else w
    columns = [np.array(values, dtype=float).reshape(-1, 1) for values in (x, y, weights)]
    return fit_blocks(*columns, np.array(run, dtype=np.int64).reshape(-1, 1), np.array([noise]), 0.95).of(0)


def test_a_loss_of_sensitivity_between_two_runs():
    """Levels 0 and 1 in one run, 2 and 3 in another that answers 20 % less: 1.00, and 1.57 as one line."""
    x, y = [0.0, 1.0, 2.0, 3.0], [1.0, 2.0, 0.8 * 3.0, 0.8 * 4.0]
    fit = one(x, y, [0, 0, 1, 1])
    assert fit.content == pytest.approx(1.0, rel=1e-14)
    assert fit.slopes == pytest.approx((1.0, 0.8), rel=1e-14)
    assert (fit.vessels, fit.runs, fit.dof, fit.exact) == (4.0, 2.0, 1.0, True)
    assert fit.low == fit.content == fit.high
    assert one(x, y, [0, 0, 0, 0]).content == pytest.approx(11.0 / 7.0, rel=1e-14)
    assert one(x, y, [0, 0, 0, 0]).content == pytest.approx(1.57, abs=0.005)


numbers = st.floats(0.01, 100, allow_nan=False)


@given(st.lists(st.tuples(numbers, numbers, st.sampled_from([1.0, 0.5])), min_size=3, max_size=10), st.booleans())
def test_one_run_is_the_straight_line(points, declared):
    """Content, u, residuals, and Fieller's interval as the ends of the profile (E. C. Fieller, J. R. Statist. Soc. B 16
    (1954) 175)."""
    x = np.array([0.0, *(x for x, _, _ in points)])
    y = 1.0 + x + np.array([0.0, *(0.05 * y for _, y, _ in points)])
    w = np.array([1.0, *(w for _, _, w in points)])
    line = fit_lines(*(column.reshape(-1, 1) for column in (x, y, w, np.ones(len(x))))).of(0)
    assume(not line.exact and not line.one_x and line.slope > 0.01 and line.spread > 0.1 and line.residual_sd > 1e-6)
    assume(abs(line.content) < 1e3)
    noise = 1e-3 * y[-1]
    fit = one(x, y, [0] * len(x), w, noise if declared else RESIDUALS)
    assert fit.content == pytest.approx(line.content, rel=1e-9, abs=1e-9)
    assert fit.slopes == pytest.approx((line.slope,), rel=1e-9)
    assert fit.residual_sd == pytest.approx(line.residual_sd, rel=1e-9)
    s = noise if declared else line.residual_sd
    assert fit.fit_uncertainty == pytest.approx(line.fit_uncertainty * s / line.residual_sd, rel=1e-9)
    assert fit.fitted == pytest.approx(tuple(line.intercept + line.slope * x), rel=1e-9, abs=1e-9)
    assert fit.dof == (math.inf if declared else len(x) - 2)
    factor = norm.ppf(0.975) if declared else t.ppf(0.975, len(x) - 2)
    g = (factor * s / (line.slope * line.spread)) ** 2
    if g < 0.99:
        lower, upper = half_widths(line.content, line.x_mean, line.spread, line.weight, g)
        assert fit.low == pytest.approx(line.content - lower, rel=1e-7, abs=1e-9)
        assert fit.high == pytest.approx(line.content + upper, rel=1e-7, abs=1e-9)
    elif g > 1.01:
        assert fit.low == -math.inf or fit.high == math.inf


def test_a_slope_that_does_not_differ_from_zero_has_no_end():
    assert one([0.0, 1.0, 2.0, 3.0], [1.0, 1.3, 0.9, 1.2], [0, 0, 0, 0]).high == math.inf


def random_series(rng: np.random.Generator):
    runs = int(rng.integers(2, 4))
    run = np.sort(np.concatenate([np.repeat(np.arange(runs), 2), rng.integers(0, runs, int(rng.integers(0, 4)))]))
    content = 10.0 ** rng.uniform(-2, 2)
    x = content * np.concatenate(([0.0], rng.uniform(0.3, 4.0, len(run) - 1)))
    w = rng.choice([1.0, 0.5, 0.25], len(run))
    w[0] = 1.0
    slopes = rng.uniform(0.5, 1.5, runs)
    noise = 0.005 * content
    y = slopes[run] * (content + x) + rng.normal(0.0, noise, len(run)) / np.sqrt(w)
    return x, y, run, w, noise, (content, slopes)


def test_agrees_with_another_program():
    """Levenberg and Marquardt's method from the truth, and the ends by linear least squares with the content held."""
    rng = np.random.default_rng(11)
    for _ in range(100):
        x, y, run, w, noise, (content, slopes) = random_series(rng)
        dof = len(x) - 1 - len(slopes)
        declared = dof < 1 or bool(rng.integers(2))
        fit = one(x, y, run, w, noise if declared else RESIDUALS)

        def left(p, x=x, y=y, run=run, w=w):
            return np.sqrt(w) * (y - np.asarray(p[1:])[run] * (p[0] + x))

        solution = least_squares(
            left, (content, *slopes), method="lm", x_scale="jac", xtol=1e-15, ftol=1e-15, gtol=1e-15
        )
        per_noise = math.sqrt(np.linalg.inv(solution.jac.T @ solution.jac)[0, 0])
        assert fit.content == pytest.approx(solution.x[0], rel=1e-8, abs=1e-6 * fit.fit_uncertainty)
        assert fit.slopes == pytest.approx(tuple(solution.x[1:]), rel=1e-6)
        assert dof < 1 or fit.residual_sd == pytest.approx(math.sqrt(2.0 * solution.cost / dof), rel=1e-8)
        s = noise if declared else fit.residual_sd
        assert fit.fit_uncertainty == pytest.approx(s * per_noise, rel=1e-5)
        assert fit.dof == (math.inf if declared else dof)

        def squares(held, x=x, y=y, run=run, w=w):
            design = (run[:, None] == np.arange(run.max() + 1)) * ((held + x) * np.sqrt(w))[:, None]
            return np.square(y * np.sqrt(w) - design @ np.linalg.lstsq(design, y * np.sqrt(w), rcond=None)[0]).sum()

        factor = norm.ppf(0.975) if declared else t.ppf(0.975, dof)
        limit = squares(fit.content) + (factor * s) ** 2
        for end in (fit.low, fit.high):
            if math.isfinite(end):
                beyond = fit.content + 1.05 * (end - fit.content)
                found = brentq(lambda held: squares(held) - limit, fit.content, beyond, xtol=1e-15)  # noqa: B023
                assert end == pytest.approx(found, rel=1e-6, abs=1e-7 * fit.content)
            else:
                away = fit.content + np.sign(end) * content * 1.5 ** np.arange(40.0)
                assert max(map(squares, away)) < limit


def test_a_run_with_one_addition_only_counts_its_own_slope():
    """It tells nothing of the content, takes one degree of freedom for its mean, and its scatter counts."""
    x, y, run = [0.0, 1.0, 2.0], [1.0, 2.1, 2.9], [0, 0, 0]
    alone = one(x, y, run)
    single = one([*x, 1.5], [*y, 2.0], [*run, 1])
    assert single.content == alone.content
    assert (single.dof, alone.dof, single.runs) == (1.0, 1.0, 2.0)
    assert single.slopes == pytest.approx((alone.slopes[0], 2.0 / (alone.content + 1.5)), rel=1e-12)
    assert single.fit_uncertainty == pytest.approx(alone.fit_uncertainty, rel=1e-12)
    assert single.fitted[-1] == pytest.approx(2.0, rel=1e-15)
    repeated = one([*x, 1.5, 1.5], [*y, 2.0, 2.4], [*run, 1, 1])
    assert repeated.content == alone.content
    assert repeated.dof == 2.0
    assert repeated.residual_sd == pytest.approx(math.sqrt((alone.residual_sd**2 + 0.08) / 2.0), rel=1e-12)
    assert math.isnan(one([0.0, 1.0, 2.0], [1.0, 2.0, 3.0], [0, 1, 2]).content)


def packed(series, deepest=0) -> BlockFits:
    deepest = max(deepest, *(len(one_of[0]) for one_of in series))
    arrays, run = np.zeros((3, deepest, len(series))), np.full((deepest, len(series)), -1)
    for column, (x, y, in_run, w, _) in enumerate(series):
        for nth, values in enumerate((x, y, w)):
            arrays[nth, : len(x), column] = values
        run[: len(x), column] = in_run
    return fit_blocks(*arrays, run, np.array([one_of[4] for one_of in series]), 0.95)


def same(one_of: BlockFit, other: BlockFit) -> bool:
    """Bit for bit; the padding of a deeper company is not a number."""
    for name in BlockFit.__slots__:
        a, b = (np.atleast_1d(np.array(getattr(fit, name), dtype=float)) for fit in (one_of, other))
        depth = min(len(a), len(b))
        if not (np.array_equal(a[:depth], b[:depth], equal_nan=True) and np.isnan([*a[depth:], *b[depth:]]).all()):
            return False
    return True


def test_company_leaves_every_bit():
    rng = np.random.default_rng(4)
    series = []
    for _ in range(300):
        x, y, run, w, noise, _ = random_series(rng)
        series.append((x, y, run, w, noise if rng.integers(2) else RESIDUALS))
    together, backwards, deeper = packed(series), packed(series[::-1]), packed(series, deepest=17)
    more = packed([*series, ([0.0] * 9, [1.0] * 9, range(9), [1.0] * 9, RESIDUALS)])  # a company of many runs
    for column in range(300):
        fit = together.of(column)
        assert same(fit, backwards.of(299 - column))
        assert same(fit, deeper.of(column))
        assert same(fit, more.of(column))
        if column % 6 == 0:
            assert same(fit, packed(series[column : column + 1]).of(0))
            assert same(fit, packed(series[column : column + 7]).of(0))
    assert np.isfinite(together.content).all()


@given(st.integers(-200, 200), st.integers(-200, 200))
def test_a_power_of_two_changes_no_digit(x_power, y_power):
    x, y, run = np.array([0.0, 1, 2, 3, 4]), np.array([1.0, 2.1, 2.4, 3.3, 4.0]), [0, 0, 1, 1, 1]
    plain, scaled = one(x, y, run), one(np.ldexp(x, x_power), np.ldexp(y, y_power), run)
    for name in ("content", "fit_uncertainty", "low", "high"):
        assert getattr(scaled, name) == np.ldexp(getattr(plain, name), x_power)
    assert scaled.slopes == tuple(np.ldexp(plain.slopes, y_power - x_power))
    assert scaled.residual_sd == np.ldexp(plain.residual_sd, y_power)


ILL = [
    ([0, 1, 2, 3], [5, 5, 5, 5], [0, 0, 1, 1]),
    ([0, 1, 2, 3], [0, 0, 0, 0], [0, 0, 1, 1]),
    ([1, 1, 2, 2], [5, 6, 7, 8], [0, 0, 1, 1]),
    ([0, 1, np.nan, 3], [1, 2, 3, 4], [0, 0, 1, 1]),
    ([0, 1, 2, 3], [1, 2, np.inf, 4], [0, 0, 1, 1]),
    ([0, 1e308, 1.7e308, 1.75e308], [-1e308, 0, 1e308, 1.7e308], [0, 0, 1, 1]),
    ([0, 5e-324, 1e-323, 1.5e-323], [5e-324, 5e-324, 5e-324, 1e-323], [0, 0, 1, 1]),
    ([0, 1, 2, 3], [1, 2, 3, 4], [-1, -1, -1, -1]),
    ([1], [1], [0]),
    ([0, 1], [1, 2], [0, 1]),
    ([], [], []),
]


@pytest.mark.parametrize(("x", "y", "run"), ILL)
def test_nothing_warns_and_neighbours_stay(x, y, run):
    good = ([0.0, 1, 2, 3], [1.0, 2.1, 2.4, 3.3], [0, 0, 1, 1], np.ones(4), 0.1)
    both = packed([good, (x, y, run, np.ones(len(x)), RESIDUALS)])
    assert same(both.of(0), packed([good]).of(0))
    fit = both.of(1)
    assert not math.isfinite(fit.content) or not math.isfinite(fit.low) or not math.isfinite(fit.high)
