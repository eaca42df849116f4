"""Curved responses: exact ones, closed forms, an independent program, and every series the same in any company."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import brentq, least_squares
from scipy.stats import norm, t

from spikeward.rules.solve.curve import CurveFit, CurveFits, fit_curves

RESIDUALS = math.nan


def one(x, share, signal, w=None, noise=RESIDUALS) -> CurveFit:
    """A single series, fitted alone."""
    weights = np.ones(len(x)) if w is None else w
    columns = [np.array(values, dtype=float).reshape(-1, 1) for values in (x, share, signal, weights)]
    return fit_curves(*columns, np.array([noise], dtype=float), 0.95).of(0)


def in_growing_volume(curvature, vessels=5):
    """10 mL of a content of 1, to which 1 mL of a standard of 10 is added again and again."""
    v = np.arange(vessels, dtype=float)
    x, share = v, 10.0 / (10.0 + v)
    c = (1.0 + x) * share
    return x, share, c + curvature * c * c


def test_curvature_belongs_to_the_content_in_the_vessel():
    """Exact curved signals in a growing volume: 1.000, where a parabola through the corrected points gives 1.047."""
    x, share, signal = in_growing_volume(-0.05)
    fit = one(x, share, signal)
    assert fit.content == pytest.approx(1.0, rel=1e-12)
    assert (fit.slope, fit.curvature) == pytest.approx((1.0, -0.05), rel=1e-11)
    assert fit.exact
    assert fit.low == fit.content == fit.high
    corrected = np.roots(np.polyfit(x, signal / share, 2))
    assert -corrected[np.argmin(np.abs(corrected))] == pytest.approx(1.047, abs=5e-4)


@given(st.floats(-0.09, 0.3), st.integers(3, 8), st.floats(0.2, 4.0), st.floats(0.0, 0.1))
def test_exact_curves(bend, vessels, content, growth):
    """Any curve that rises to its last vessel is found back, signals exact; three vessels do."""
    x = np.arange(vessels) * content
    share = 1.0 / (1.0 + growth * np.arange(vessels))
    c = (content + x) * share
    if 1.0 + 2.0 * bend * c.max() / content < 0.05:
        return
    fit = one(x, share, 3.0 * c + 3.0 * bend / content * c * c)
    assert fit.content == pytest.approx(content, rel=1e-7)
    assert fit.slope == pytest.approx(3.0, rel=1e-6)
    assert fit.curvature == pytest.approx(3.0 * bend / content, rel=1e-5, abs=1e-6)
    assert fit.dof == max(vessels - 3.0, 0.0)
    assert math.isnan(fit.fit_uncertainty) == (vessels == 3)


def test_strongly_bent_curves_are_all_found():
    """Contents of a sixty-fourth to three times the top addition, exact signals that level off or run away."""
    rng = np.random.default_rng(3)
    for vessels in (3, 4, 6):
        content = 2.0 ** rng.uniform(-6.0, 1.5, 2000)
        x = np.sort(rng.uniform(0.0, 1.0, (vessels, 2000)), axis=0)
        x[0], x[-1] = 0.0, 1.0
        share = 1.0 / (1.0 + x * rng.uniform(0.0, 0.3, 2000))
        c = (content + x) * share
        signal = c + rng.uniform(-0.45, 3.0, 2000) / c.max(axis=0) * c * c
        fits = fit_curves(x, share, signal, np.ones(x.shape), np.full(2000, RESIDUALS), 0.95)
        assert np.isfinite(fits.content).all()
        # where two vessels lie close to each other the digits of the signals limit those of the content
        assert np.mean(np.abs(fits.content / content - 1.0) < 1e-6) > 0.995
        assert (np.abs(fits.content / content - 1.0) < 1e-2).all()


def random_series(rng: np.random.Generator, vessels: int, growth: float):
    content = 10.0 ** rng.uniform(-2, 2)
    x = content * np.arange(vessels) * rng.uniform(0.5, 1.2)
    share = rng.uniform(0.3, 1.0) / (1.0 + growth * np.arange(vessels))
    c = (content + x) * share
    slope, w = rng.uniform(0.1, 5.0), rng.choice([1.0, 0.5, 0.25], vessels)
    w[0] = 1.0
    curvature = rng.uniform(-0.25, 0.05) * slope / c.max()
    noise = 1e-3 * slope * c.max()
    signal = slope * c + curvature * c * c + rng.normal(0.0, noise, vessels) / np.sqrt(w)
    return x, share, signal, w, noise, (content, slope, curvature)


def test_a_constant_volume_is_the_root_of_a_parabola():
    """Where every vessel holds the same share the corrected points lie on a parabola with its root at -C0: the
    least-squares parabola P has that root, u = s sqrt(h)/P', and at the ends P² = t² s² h, h the variance of P in
    units of the noise (what Fieller's theorem says of a root)."""
    rng = np.random.default_rng(6)
    for _ in range(150):
        vessels = int(rng.integers(4, 9))
        x, share, signal, w, noise, _ = random_series(rng, vessels, 0.0)
        declared = bool(rng.integers(2))
        fit = one(x, share, signal, w, noise if declared else RESIDUALS)
        design = np.vander(x / x[-1], 3) * np.sqrt(w)[:, None]
        p, *_ = np.linalg.lstsq(design, signal * np.sqrt(w), rcond=None)
        inverse = np.linalg.inv(design.T @ design)
        residual_sd = math.sqrt(np.square(signal * np.sqrt(w) - design @ p).sum() / (vessels - 3))
        roots = np.roots(p)
        rising = [-r.real for r in roots if abs(r.imag) < 1e-12 and np.polyval(np.polyder(p), r.real) > 0.0]
        assert fit.content / x[-1] == pytest.approx(rising[0], rel=1e-8)
        assert fit.residual_sd == pytest.approx(residual_sd, rel=1e-8)
        s, factor = (noise, norm.ppf(0.975)) if declared else (residual_sd, t.ppf(0.975, vessels - 3))
        assert fit.dof == (math.inf if declared else vessels - 3)

        def beyond(c, p=p, inverse=inverse, limit=factor * s):
            row = np.vander([-c], 3)[0]
            return np.polyval(p, -c) ** 2 - limit**2 * (row @ inverse @ row)

        row = np.vander([-rising[0]], 3)[0]
        u = s * math.sqrt(row @ inverse @ row) / np.polyval(np.polyder(p), -rising[0])
        assert fit.fit_uncertainty / x[-1] == pytest.approx(u, rel=1e-7)
        for end, side in ((fit.low, -1.0), (fit.high, 1.0)):
            if math.isfinite(end):  # the first crossing on the way outwards
                assert abs(beyond(end / x[-1])) < 1e-7 * (factor * s) ** 2
                way = rising[0] + np.linspace(0.0, 0.999, 50) * (end / x[-1] - rising[0])
                assert all(beyond(c) < 0.0 for c in way)
                assert side * (end - fit.content) > 0.0
            else:
                assert all(beyond(rising[0] + side * u * factor * 1.1**n) < 0.0 for n in range(60))


def test_agrees_with_another_program():
    """Levenberg and Marquardt's method from the truth, volumes growing."""
    rng = np.random.default_rng(7)
    for _ in range(100):
        vessels = int(rng.integers(4, 9))
        x, share, signal, w, _, (content, slope, curvature) = random_series(rng, vessels, rng.uniform(0.0, 0.08))

        def left(p, x=x, share=share, signal=signal, w=w):
            c = (p[0] + x) * share
            return np.sqrt(w) * (signal - p[1] * c - p[2] * c * c)

        fit = one(x, share, signal, w)
        solution = least_squares(
            left, (content, slope, curvature), method="lm", x_scale="jac", xtol=1e-15, ftol=1e-15, gtol=1e-15
        )
        per_noise = math.sqrt(np.linalg.inv(solution.jac.T @ solution.jac)[0, 0])
        assert fit.content == pytest.approx(solution.x[0], rel=1e-8, abs=1e-6 * fit.fit_uncertainty)
        assert fit.slope == pytest.approx(solution.x[1], rel=1e-6)
        assert fit.curvature == pytest.approx(solution.x[2], rel=1e-6, abs=1e-6 * fit.slope / fit.content)
        assert fit.residual_sd == pytest.approx(math.sqrt(2.0 * solution.cost / (vessels - 3)), rel=1e-9)
        assert fit.fit_uncertainty == pytest.approx(fit.residual_sd * per_noise, rel=1e-5)
        assert fit.fitted == pytest.approx(tuple(signal - left(solution.x) / np.sqrt(w)), rel=1e-7)


def test_the_ends_in_a_growing_volume():
    """At both ends the least squares over slope and curvature have risen by t² s²; here by another program."""
    rng = np.random.default_rng(17)
    for _ in range(40):
        x, share, signal, w, _, _ = random_series(rng, 6, 0.06)
        fit = one(x, share, signal, w)

        def squares(content, x=x, share=share, signal=signal, w=w):
            c = (content + x) * share
            design, aim = np.column_stack([c, c * c]) * np.sqrt(w)[:, None], signal * np.sqrt(w)
            return np.square(aim - design @ np.linalg.lstsq(design, aim, rcond=None)[0]).sum()

        rise = squares(fit.content) + (t.ppf(0.975, 3) * fit.residual_sd) ** 2

        def beyond(content, squares=squares, rise=rise):
            return squares(content) - rise

        width = 0.9 * (fit.content - fit.low)
        assert fit.low == pytest.approx(brentq(beyond, fit.content - 1.2 * width, fit.content, xtol=1e-15), rel=1e-7)
        width = 0.9 * (fit.high - fit.content)
        assert fit.high == pytest.approx(brentq(beyond, fit.content, fit.content + 1.2 * width, xtol=1e-15), rel=1e-7)


def test_what_is_no_rising_curve_has_no_content():
    """A response that turns down before the last vessel, one that falls, one that never comes to zero."""
    share = np.ones(5)
    x = np.arange(5.0)
    for signal in (
        [1.0, 1.9, 2.4, 2.5, 2.2],
        [5.0, 4.0, 3.2, 2.5, 2.0],
        [2.0, 2.1, 2.5, 3.2, 4.2],
    ):
        assert math.isnan(one(x, share, signal).content)
    assert math.isfinite(one(x, share, [1.0, 1.9, 2.6, 3.2, 3.6]).content)


numbers = st.floats(0.01, 100.0)


@given(
    st.lists(numbers, min_size=2, max_size=8), numbers, st.tuples(numbers, numbers), st.sampled_from([RESIDUALS, 0.1])
)
def test_two_levels_do_not_tell_content_and_curve(signals, top, shares, noise):
    """However often both are measured, and whatever the shares."""
    level = np.arange(len(signals)) % 2
    assert math.isnan(one(top * level, np.where(level == 0, *shares), signals, noise=noise).content)


def packed(series, deepest=0) -> CurveFits:
    deepest = max(deepest, *(len(one_of[0]) for one_of in series))
    arrays = np.zeros((4, deepest, len(series)))
    for column, one_of in enumerate(series):
        for nth in range(4):
            arrays[nth, : len(one_of[0]), column] = one_of[nth]
    return fit_curves(*arrays, np.array([one_of[4] for one_of in series]), 0.95)


def same(one_of: CurveFit, other: CurveFit) -> bool:
    """Bit for bit; the padding of a deeper company is not a number."""
    for name in CurveFit.__slots__:
        a, b = (np.atleast_1d(np.array(getattr(fit, name), dtype=float)) for fit in (one_of, other))
        depth = min(len(a), len(b))
        if not (np.array_equal(a[:depth], b[:depth], equal_nan=True) and np.isnan([*a[depth:], *b[depth:]]).all()):
            return False
    return True


def test_company_leaves_every_bit():
    rng = np.random.default_rng(4)
    series = []
    for _ in range(300):
        x, share, signal, w, noise, _ = random_series(rng, int(rng.integers(2, 9)), rng.uniform(0.0, 0.08))
        series.append((x, share, signal, w, noise if rng.integers(2) else RESIDUALS))
    together, backwards, deeper = packed(series), packed(series[::-1]), packed(series, deepest=17)
    for column in range(300):
        fit = together.of(column)
        assert same(fit, backwards.of(299 - column))
        assert same(fit, deeper.of(column))
        if column % 6 == 0:
            assert same(fit, packed(series[column : column + 1]).of(0))
            assert same(fit, packed(series[column : column + 7]).of(0))
    assert np.isfinite(together.content).sum() > 200


@given(st.integers(-200, 200), st.integers(-200, 200))
def test_a_power_of_two_changes_no_digit(x_power, y_power):
    x, share, signal = in_growing_volume(-0.05)
    signal = signal + np.array([0.01, -0.02, 0.01, 0.015, -0.01])
    plain = one(x, share, signal)
    scaled = one(np.ldexp(x, x_power), share, np.ldexp(signal, y_power))
    for name in ("content", "fit_uncertainty", "low", "high"):
        assert getattr(scaled, name) == np.ldexp(getattr(plain, name), x_power)
    assert scaled.slope == np.ldexp(plain.slope, y_power - x_power)
    assert scaled.curvature == np.ldexp(plain.curvature, y_power - 2 * x_power)
    assert scaled.residual_sd == np.ldexp(plain.residual_sd, y_power)


ILL = [
    ([0, 1, 2, 3], [1, 1, 1, 1], [5, 5, 5, 5]),
    ([0, 1, 2, 3], [1, 1, 1, 1], [0, 0, 0, 0]),
    ([1, 1, 1, 1], [1, 1, 1, 1], [5, 6, 7, 8]),
    ([0, 0, 1, 1], [1, 1, 1, 1], [5, 6, 20, 21]),
    ([0, 1, np.nan, 3], [1, 1, 1, 1], [1, 2, 3, 4]),
    ([0, 1, 2, 3], [1, 1, 1, 1], [1, 2, np.inf, 4]),
    ([0, 1, 2, 3], [0, 0, 0, 0], [1, 2, 3, 4]),
    ([0, 1e308, 1.7e308, 1.75e308], [1, 1, 1, 1], [-1e308, 0, 1e308, 1.7e308]),
    ([0, 5e-324, 1e-323, 1.5e-323], [1, 1, 1, 1], [5e-324, 5e-324, 5e-324, 1e-323]),
    ([0, 1, 2, 3], [1e-300, 1, 1e-300, 1], [1, 2, 3, 4]),
    ([1], [1], [1]),
    ([0, 1], [1, 1], [1, 2]),
    ([], [], []),
]  # fmt: skip


@pytest.mark.parametrize(("x", "share", "signal"), ILL)
@pytest.mark.parametrize("noise", [RESIDUALS, 0.1])
def test_nothing_warns_and_neighbours_stay(x, share, signal, noise):
    good = (*in_growing_volume(-0.05), np.ones(5), 0.01)
    both = packed([good, (x, share, signal, np.ones(len(x)), noise)])
    assert same(both.of(0), packed([good]).of(0))
    fit = both.of(1)
    assert not math.isfinite(fit.content)
    assert math.isnan(fit.fit_uncertainty)
