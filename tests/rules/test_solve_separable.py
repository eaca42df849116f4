"""The engine of separable models on profiles whose valleys and ends are known."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import brentq

from spikeward.rules.solve.line import Bools, Floats
from spikeward.rules.solve.separable import ABOVE_ZERO, BOTH_SIDES, Best, Look, deviation_of, interval, lowest, root


@pytest.fixture(autouse=True)
def _silent():
    """As the models call it: what has no value is recognised by its result."""
    with np.errstate(all="ignore"):
        yield


@dataclass
class Profile:
    """squares(C), its derivative, and where it is sound; the stiffness is one."""

    squares: Callable[[Floats], Floats]
    rises: Callable[[Floats], Floats]
    good: Callable[[Floats], Bools] = np.isfinite

    def look(self, content: Floats) -> Look:
        return Look(self.squares(content), -0.5 * self.rises(content), np.ones(content.shape))

    def sound(self, content: Floats) -> Bools:
        return self.good(content)


# (C² - 1)² + C/5 has valleys near -1 and 1, the one below zero being the lower
TWO = Profile(lambda c: (c * c - 1.0) ** 2 + 0.2 * c, lambda c: 4.0 * c * (c * c - 1.0) + 0.2)


def valley(start: float, end: float) -> float:
    return brentq(lambda c: 4.0 * c * (c * c - 1.0) + 0.2, start, end, xtol=1e-15)


def test_the_lowest_valley_is_taken():
    found = lowest(TWO, BOTH_SIDES, 3)
    assert found.content.shape == (1, 3)
    assert found.content[0] == pytest.approx([valley(-2.0, -0.5)] * 3, rel=1e-14)
    assert found.squares[0] == pytest.approx(TWO.squares(found.content)[0], rel=0)
    assert found.rival[0] == pytest.approx([valley(0.5, 2.0)] * 3, rel=1e-14)
    assert found.rival_squares[0] == pytest.approx(TWO.squares(found.rival)[0], rel=0)


def test_two_valleys_that_fit_to_all_digits_are_no_content():
    alike = Profile(lambda c: (c * c - 1.0) ** 2, lambda c: 4.0 * c * (c * c - 1.0))
    found = lowest(alike, BOTH_SIDES, 1)
    assert found.ambiguous()
    assert math.isnan(found.content[0, 0])
    assert not lowest(TWO, BOTH_SIDES, 1).ambiguous()


def test_a_valley_that_is_not_sound_is_passed_over():
    upper = Profile(TWO.squares, TWO.rises, lambda c: c > 0.0)
    assert lowest(upper, BOTH_SIDES, 1).content[0, 0] == pytest.approx(valley(0.5, 2.0), rel=1e-14)
    assert math.isnan(lowest(Profile(TWO.squares, TWO.rises, lambda c: c > 9.0), BOTH_SIDES, 1).content[0, 0])


def test_no_valley_is_no_content():
    """A profile that falls for ever, and one that is not a number."""
    assert math.isnan(lowest(Profile(lambda c: 1.0 / c, lambda c: -1.0 / (c * c)), ABOVE_ZERO, 1).content[0, 0])
    assert math.isnan(lowest(Profile(lambda c: c * np.nan, lambda c: c * np.nan), BOTH_SIDES, 1).content[0, 0])


def test_many_series_try_the_grid_in_parts():
    """More series than are tried in one step: the same, and each its own."""
    truth = 2.0 ** np.linspace(-10.0, 10.0, 9000)[None]
    model = Profile(lambda c: (c - truth) ** 2, lambda c: 2.0 * (c - truth))
    assert lowest(model, BOTH_SIDES, 9000).content == pytest.approx(truth, rel=1e-15)


@given(st.floats(0.2, 100.0), st.floats(-3.0, 3.0), st.integers(1, 9))
def test_roots(scale, shift, power):
    """Odd powers, an exponential and a step, against Brent's method."""
    functions = [
        lambda c: (c - shift) ** (2 * (power // 2) + 1),
        lambda c: np.exp(scale / 20.0 * c) - 1.5,
        lambda c: np.where(c < shift, -1.0, scale),
    ]
    start, end = np.full((1, 3), -50.0), np.full((1, 3), 61.0)
    found = root(lambda at: np.concatenate([f(at[:, n : n + 1]) for n, f in enumerate(functions)], 1), start, end)[0]
    assert found[0] == pytest.approx(shift, abs=1e-15 if power < 2 else 2e-3 if power > 5 else 1e-4)
    assert found[1] == pytest.approx(20.0 * math.log(1.5) / scale, rel=1e-13)
    assert found[2] == pytest.approx(shift, rel=1e-14, abs=1e-15)


def test_roots_at_the_edge_and_none():
    start, end = np.array([[0.0, -1.0, 1.0, np.nan, -1.0]]), np.array([[1.0, 0.0, 2.0, 1.0, 3.0]])
    shift = np.array([[0.0, 0.0, 0.0, 0.0, 0.0]])
    found = root(lambda at: at - shift, start, end)[0]
    assert found.tolist()[:2] == [0.0, 0.0]
    assert np.isnan(found[2:4]).all()
    assert abs(found[4]) < 1e-20


def best_of(content, squares, stiffness) -> Best:
    return Best(*(np.array([[value]]) for value in (content, squares, stiffness, 9.0, math.inf)))


def bowl():
    """The profile 3 + (C - 2)², and its lowest point."""
    model = Profile(lambda c: 3.0 + (c - 2.0) ** 2, lambda c: 2.0 * (c - 2.0))
    return model, best_of(2.0, 3.0, 1.0)


def ends_of(model, best, deviation, dof, floor=-math.inf):
    found = interval(model, best, np.array([[deviation]]), np.array([[dof]]), 0.95, floor)
    return found.dof[0, 0], found.uncertainty[0, 0], found.low[0, 0], found.high[0, 0]


def test_the_interval_of_a_parabola():
    """2 ± t s; t(2) = 4.30265 and the normal 1.95996 (common tables)."""
    assert ends_of(*bowl(), 0.1, 2.0) == pytest.approx((2.0, 0.1, 2.0 - 0.430265, 2.0 + 0.430265), abs=1e-6)
    assert ends_of(*bowl(), 0.1, math.inf) == pytest.approx((math.inf, 0.1, 2.0 - 0.195996, 2.0 + 0.195996), abs=1e-6)


def test_no_interval_without_noise():
    """Without scatter it is a point; where nothing tells the noise there is none."""
    assert ends_of(*bowl(), 0.0, 2.0) == (2.0, 0.0, 2.0, 2.0)
    for deviation, dof in ((math.nan, 2.0), (0.1, 0.0), (0.1, -1.0), (math.inf, math.inf)):
        dof, *others = ends_of(*bowl(), deviation, dof)
        assert dof == 0.0
        assert all(map(math.isnan, others))


def test_ends_that_do_not_exist():
    """A profile that levels off on one side, and one that a floor ends before it has risen."""
    one_sided = Profile(
        lambda c: np.where(c < 2.0, (c - 2.0) ** 2, (c - 2.0) ** 2 / (1.0 + (c - 2.0) ** 2)), lambda c: c * np.nan
    )
    best = best_of(2.0, 0.0, 1.0)
    _, _, low, high = ends_of(one_sided, best, 1.0, math.inf)
    assert low == pytest.approx(2.0 - 1.959964, abs=1e-6)
    assert high == math.inf
    _, _, low, high = ends_of(*bowl(), 2.0, math.inf, 0.0)
    assert low == -math.inf
    assert high == pytest.approx(2.0 + 2.0 * 1.959964, abs=1e-5)


def test_an_end_is_the_first_crossing():
    """A rise that falls again further out ends the interval."""
    model = Profile(lambda c: 1.0 - np.cos(c), lambda c: np.sin(c))
    best = best_of(0.0, 0.0, 0.5)
    _, _, low, high = ends_of(model, best, 0.6, math.inf)
    assert high == pytest.approx(math.acos(1.0 - (0.6 * 1.959964) ** 2), rel=1e-6)
    assert low == pytest.approx(-high, rel=1e-12)


def test_a_rival_within_the_limit_takes_the_end_away():
    """Two valleys with a rise of one between them: narrow limits give an interval, wider ones none on that side."""
    model = Profile(lambda c: TWO.squares(c) + 0.2, TWO.rises)
    best = lowest(model, BOTH_SIDES, 1)
    _, _, low, high = ends_of(model, best, 0.2, math.inf)
    assert -1.2 < low < best.content[0, 0] < high < -0.7
    _, _, low, high = ends_of(
        model, best, 0.4, math.inf
    )  # (1.96 0.4)² is more than the rival's 0.4, less than the rise
    assert -1.5 < low < best.content[0, 0]
    assert high == math.inf


def test_residuals_that_are_rounding_only():
    found = deviation_of(np.array([[4.0, 1e-33, 1.0, 1.0]]), np.array([[4.0, 1.0, 0.0, -1.0]]))[0]
    assert found[:2].tolist() == [1.0, 0.0]
    assert np.isnan(found[2:]).all()
