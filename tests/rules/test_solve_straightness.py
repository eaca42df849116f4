"""Mandel's test and lack of fit against published figures, the library's analysis of variance, and each other."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats
from statsmodels.regression.linear_model import WLS

from spikeward.rules.solve.line import fit_lines
from spikeward.rules.solve.straightness import Straightness, straightness


def column(values) -> np.ndarray:
    return np.array(values, dtype=float).reshape(-1, 1)


def one(x, y, w=None) -> Straightness:
    return straightness(column(x), column(y), column([1.0] * len(x) if w is None else w))


CADMIUM = (
    [x for x in (0.1, 0.3, 0.5, 0.7, 0.9) for _ in range(3)],
    [0.028, 0.029, 0.029, 0.084, 0.083, 0.081, 0.135, 0.131, 0.133, 0.180, 0.181, 0.183, 0.215, 0.230, 0.216],
)


def test_cadmium_calibration():
    """EURACHEM/CITAC Guide QUAM, example A5, r 0.997: its 15 readings are curved by either test (computed)."""
    found = one(*CADMIUM)
    assert found.mandel[0] == pytest.approx(15.329, abs=5e-4)
    assert found.mandel_dof[0] == 12
    assert found.mandel_p[0] < 0.01  # F 99 % with 1 and 12: 9.330, common tables
    assert found.lack_of_fit[0] == pytest.approx(4.885, abs=5e-4)
    assert (found.lack_dof[0], found.pure_dof[0]) == (3, 10)
    assert found.lack_p[0] == pytest.approx(0.024, abs=5e-4)


# F of Mandel's test with n - 3, from published points by computation, and F 95 % or 99 % of the tables beside it
MANDEL = {
    "silver, Miller and Miller, chapter 5": (
        range(0, 35, 5), [0.32, 0.41, 0.52, 0.60, 0.70, 0.77, 0.89], 0.0080, 5e-5, 7.709),
    "iron, Skoog": (range(0, 25, 5), [0.240, 0.437, 0.621, 0.809, 1.009], 0.2244, 5e-5, 18.513),
    "gold, Miller and Miller, chapter 5": (
        range(0, 80, 10), [0.257, 0.314, 0.364, 0.413, 0.468, 0.528, 0.574, 0.635], 1.166, 5e-4, 6.608),
    "nickel in ore, five points of a school book: curved, and not found with two degrees of freedom": (
        [0, 10, 20, 40, 60], [0.15, 0.25, 0.34, 0.44, 0.53], 15.69, 5e-3, 18.513),
    "fluorescein, Miller and Miller, chapter 5, with the upper points: curved": (
        range(0, 22, 2), [2.1, 5.0, 9.0, 12.6, 17.3, 21.0, 24.7, 28.4, 31.0, 32.9, 33.9], 16.10, 5e-3, 11.259),
}  # fmt: skip


@pytest.mark.parametrize("name", MANDEL)
def test_mandel(name):
    x, y, f, within, table = MANDEL[name]
    found = one(x, y)
    assert found.mandel[0] == pytest.approx(f, abs=within)
    level = 0.01 if table == 11.259 else 0.05
    assert (found.mandel_p[0] < level) == (f > table)
    assert found.mandel_p[0] == pytest.approx(stats.f.sf(found.mandel[0], 1, len(x) - 3), rel=1e-10)


def test_nickel_moves_by_half():
    """The same five points: the line gives 29.7, the curve that the book draws about 16; the parabola comes near."""
    x, y, *_ = next(case for name, case in MANDEL.items() if name.startswith("nickel"))
    found = one(x, y)
    assert found.by_line[0] == pytest.approx(29.719, abs=5e-4)
    zero = max(np.roots(np.polyfit(x, y, 2)), key=lambda root: -abs(root))
    assert found.by_parabola[0] == pytest.approx(-zero, rel=1e-10)
    assert found.by_parabola[0] == pytest.approx(16.0, abs=2.0)


def random(seed: int, series: int):
    """Levels of one to three preparations, slightly curved, with weights."""
    rng = np.random.default_rng(seed)
    x = np.sort(rng.integers(0, 6, (9, series)), axis=0) * rng.uniform(0.1, 3.0, series)
    y = 0.2 + 0.3 * x - 0.002 * x * x + rng.normal(0, 0.01, x.shape)
    w = rng.uniform(0.1, 1.0, x.shape)
    depth = rng.integers(2, 10, series)
    there = np.arange(9)[:, np.newaxis] < depth
    return *(np.where(there, rows, 0.0) for rows in (x, y, w)), depth


def test_as_the_library_compares_models():
    """Straight line, parabola and one mean per level, each fitted by the library; F from their sums of squares."""
    x, y, w, depth = random(1, 400)
    found = straightness(x, y, w)
    seen = 0
    for place, n in enumerate(depth):
        xs, ys, ws = (rows[:n, place] for rows in (x, y, w))
        levels = np.unique(xs)
        if len(levels) < 3:
            assert math.isnan(found.mandel[place])
            assert math.isnan(found.by_parabola[place])
            assert math.isnan(found.lack_of_fit[place])
            continue
        left = [
            WLS(ys, design, weights=ws).fit()
            for design in (np.vander(xs, 2), np.vander(xs, 3), (xs[:, np.newaxis] == levels).astype(float))
        ]
        line, parabola, means = (fit.ssr for fit in left)
        if n > 3:
            seen += 1
            assert found.mandel[place] == pytest.approx((line - parabola) / (parabola / (n - 3)), rel=1e-6)
            assert found.parabola[::-1, place] == pytest.approx(left[1].params, rel=1e-8)
            assert found.parabola_sd[place] == pytest.approx(math.sqrt(parabola / (n - 3)), rel=1e-8)
        else:
            assert math.isnan(found.mandel[place])
            assert math.isnan(found.mandel_p[place])
        if n > len(levels):
            f = (line - means) / (len(levels) - 2) / (means / (n - len(levels)))
            assert found.lack_of_fit[place] == pytest.approx(f, rel=1e-6)
            assert found.lack_p[place] == pytest.approx(stats.f.sf(f, len(levels) - 2, n - len(levels)), rel=1e-6)
        else:
            assert math.isnan(found.lack_of_fit[place])
    assert 100 < seen < 400


def test_the_line_is_that_of_the_fit():
    x, y, w, _ = random(2, 100)
    fits = fit_lines(x, y, w, np.ones_like(x))
    levels = (fits.vessels > 2) & ~fits.one_x
    assert straightness(x, y, w).by_line[levels] == pytest.approx(fits.content[levels], rel=1e-9)


@given(st.floats(0.2, 5), st.floats(-0.02, 0.02), st.floats(0.5, 3), st.floats(1e-6, 1e6))
def test_a_parabola_gives_its_own_content(content, bend, slope, unit):
    """Points on y = k z + q z², z = content + x, with a little scatter: the zero of the parabola is the content."""
    x = np.arange(7.0)
    z = content + x
    y = slope * z + bend * z * z + 1e-9 * np.array([1, -2, 1, 0, 1, -2, 1])
    found = one(x * unit, y)
    assert found.by_parabola[0] == pytest.approx(content * unit, rel=1e-6)
    assert found.parabola[:, 0] == pytest.approx(
        [slope * content + bend * content**2, (slope + 2 * bend * content) / unit, bend / unit / unit],
        rel=1e-6, abs=1e-8 * max(1.0, 1 / unit / unit),
    )  # fmt: skip


def test_a_parabola_that_never_reaches_zero():
    found = one([0, 1, 2, 3, 4], [1.001, 1.24, 2.0, 3.25, 5.001])
    assert math.isnan(found.by_parabola[0])
    assert math.isfinite(found.by_line[0])


def test_points_on_the_line():
    """But for rounding: no curvature, and both curves give the same content."""
    found = one([0, 1, 2, 3, 4], [0.3 + 0.1 * x for x in range(5)])
    assert found.exact[0]
    assert (found.mandel[0], found.mandel_p[0]) == (0.0, 1.0)
    assert found.by_parabola[0] == found.by_line[0] == pytest.approx(3.0, rel=1e-14)


def test_points_on_a_parabola():
    found = one([0, 1, 2, 3, 4], [1 + x + 0.05 * x * x for x in range(5)])
    assert found.mandel[0] == math.inf
    assert found.mandel_p[0] == 0.0


def test_preparations_that_agree_to_the_last_digit():
    missed = one([0, 0, 1, 1, 2, 2], [1.0, 1.0, 2.0, 2.0, 3.5, 3.5])
    assert (missed.lack_of_fit[0], missed.lack_p[0]) == (math.inf, 0.0)
    met = one([0, 0, 1, 1, 2, 2], [1.0, 1.0, 2.0, 2.0, 3.0, 3.0])
    assert (met.lack_of_fit[0], met.lack_p[0]) == (0.0, 1.0)


@pytest.mark.parametrize(
    ("x", "y"), [([0, 0, 0, 0], [1, 2, 3, 4]), ([0, 1, 2, 3], [1, math.nan, 2, 3]), ([0, 1, 2, math.inf], [1, 2, 3, 4]),
                 ([0, 1, 2, 3], [0, 0, 0, math.inf]), ([], [])],
)  # fmt: skip
def test_no_number_and_no_warning(x, y):
    found = one(x, y)
    assert math.isnan(found.mandel[0])
    assert math.isnan(found.lack_of_fit[0])


@given(st.permutations(range(15)))
def test_the_order_of_vessels_changes_no_digit(order):
    plain, other = one(*CADMIUM), one(*([values[place] for place in order] for values in CADMIUM))
    for name in Straightness.__slots__:
        assert getattr(plain, name).tobytes() == getattr(other, name).tobytes()


@pytest.mark.parametrize(("x_power", "y_power"), [(300, -300), (-300, 300), (40, 40)])
def test_a_power_of_two_changes_no_digit(x_power, y_power):
    x, y = (np.array(values) for values in CADMIUM)
    plain, scaled = one(x, y), one(np.ldexp(x, x_power), np.ldexp(y, y_power))
    for name in ("mandel", "mandel_p", "lack_of_fit", "lack_p"):
        assert getattr(plain, name) == getattr(scaled, name)
    assert scaled.by_parabola == np.ldexp(plain.by_parabola, x_power)


def test_a_sound_line_is_accused_as_often_as_the_level_says():
    """Straight lines with normal noise: p of both tests is spread evenly (simulated)."""
    rng = np.random.default_rng(3)
    x = np.repeat(np.arange(4.0), 2)[:, np.newaxis] + np.zeros(40_000)
    found = straightness(x, 1.0 + x + rng.normal(0, 0.01, x.shape), np.ones_like(x))
    for p in (found.mandel_p, found.lack_p):
        for level in (0.01, 0.1, 0.5):
            assert (p < level).mean() == pytest.approx(level, abs=0.01 if level > 0.01 else 0.002)
