"""What must hold whatever the numbers are: company, order, portions, units, common factors, further vessels, time."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import fields, replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from spikeward.rules.prepared import PreparedLine, PreparedVessel
from spikeward.rules.records import Reading, SeriesKey
from spikeward.rules.solve import line
from spikeward.rules.solve.job import Job
from spikeward.rules.solve.line import Fit, fit_lines
from spikeward.rules.solve.lines import solve_lines
from spikeward.rules.solve.robust import theil_sen
from spikeward.rules.solve.straightness import straightness
from spikeward.rules.solve.weights import fit_by_noise
from spikeward.rules.uncertainty.fieller import (
    g_value,
    g_values,
    half_widths,
    half_widths_each,
    t_quantile,
    t_quantiles,
)

DEEPEST = 14
Packed = tuple[np.ndarray, ...]


def night(seed: int, series: int) -> Packed:
    """x, y, w, factor of series of 1 to 14 vessels, from ordinary to the ends of the range of numbers."""
    rng = np.random.default_rng(seed)
    there = np.arange(DEEPEST)[:, np.newaxis] < rng.integers(1, DEEPEST + 1, series)
    x = rng.integers(0, 9, there.shape) * rng.uniform(0.1, 2.0, series)
    y = 0.3 * (2.0 + x) + rng.normal(0.0, 0.01, x.shape)
    power = np.where(rng.uniform(size=series) < 0.1, rng.integers(-900, 900, series), 0)
    y = np.ldexp(y, power)
    x = np.ldexp(x, np.roll(power, 1))
    y[:, rng.uniform(size=series) < 0.02] = 1.0
    x[:, rng.uniform(size=series) < 0.02] = 3.0
    y[0, rng.uniform(size=series) < 0.02] = np.nan
    w, factor = rng.uniform(0.05, 1.0, x.shape), rng.uniform(1.0, 5.0, x.shape)
    return tuple(np.where(there, rows, 0.0) for rows in (x, y, w, factor))


def everything(x, y, w, factor) -> dict[str, np.ndarray]:
    """All that is calculated of lines, by name; the last axis is that of the series."""
    found = {}
    known = np.where(np.arange(x.shape[1]) < 0, 1.0, 0.01 * np.abs(y).max(axis=0))
    fits = fit_lines(x, y, w, factor)
    noisy = fit_by_noise(x, y, factor, known, 0.02 + 0.0 * known, known)
    for name, results in {
        "fits": fits, "with a known sd": fit_lines(x, y, w, factor, known), "noise": noisy, "its fits": noisy.fits,
        "straightness": straightness(x, y, w), "medians": theil_sen(x, y, w),
    }.items():  # fmt: skip
        for field in fields(results):
            value = getattr(results, field.name)
            if isinstance(value, np.ndarray):
                found[f"{name}: {field.name}"] = value
    t = t_quantiles(fits.dof, 0.95)
    g = g_values(t, fits.slope, fits.slope_uncertainty)
    lower, upper = half_widths_each(fits.content, fits.x_mean, fits.spread, fits.weight, g)
    return found | {"t": t, "g": g, "lower": lower, "upper": upper}


def same(one: np.ndarray, other: np.ndarray) -> bool:
    """Bit for bit, signs of zeros too, whatever kind of not-a-number stands there."""
    one, other = (np.where(np.isnan(rows), np.nan, rows) for rows in (one, other))
    return one.shape == other.shape and one.tobytes() == other.tobytes()


@pytest.fixture(scope="module")
def together() -> tuple[Packed, dict[str, np.ndarray]]:
    packed = night(1, 700)
    return packed, everything(*packed)


def test_alone_as_in_company(together):
    packed, company = together
    for place in (*range(0, 700, 9), 699):
        alone = everything(*(rows[:, place : place + 1] for rows in packed))
        for name, value in company.items():
            assert same(alone[name], value[..., place : place + 1]), (place, name)


def test_padding_changes_no_digit(together):
    """A series alone and without any padding, as deep as it is."""
    packed, company = together
    for place in range(0, 700, 13):
        deep = int((packed[2][:, place] > 0).sum())
        alone = everything(*(rows[:deep, place : place + 1] for rows in packed))
        for name, value in company.items():
            assert same(alone[name], value[..., place : place + 1][: len(alone[name])]), (place, name)


def test_the_order_of_series_changes_no_digit(together):
    packed, company = together
    order = np.random.default_rng(2).permutation(700)
    mixed = everything(*(rows[:, order] for rows in packed))
    for name, value in company.items():
        assert same(mixed[name], value[..., order]), name


@pytest.mark.parametrize("cells", [1, 100, 1000, 4999, 10**9])
def test_portions_change_no_digit(together, monkeypatch, cells):
    packed, company = together
    monkeypatch.setattr(line, "CELLS", cells)
    portioned = everything(*packed)
    for name, value in company.items():
        assert same(portioned[name], value), name


def test_rows_of_any_layout_give_the_same_digits(together):
    packed, company = together
    other = everything(*(np.asfortranarray(rows) for rows in packed))
    for name, value in company.items():
        assert same(other[name], value), name


# ---- one interval, for one series and for many -------------------------------------------------------------------

WIDE = st.floats(1e-300, 1e300)


@given(st.floats(-1e300, 1e300), WIDE, WIDE, st.floats(1.0, 300.0), st.floats(0.0, 1.0, exclude_max=True))
def test_halves_of_one_are_halves_of_many(content, x_mean, spread, weight, g):
    lower, upper = half_widths(content, x_mean, spread, weight, g)
    many = half_widths_each(*(np.array([value]) for value in (content, x_mean, spread, weight, g)))
    assert same(np.array([[lower], [upper]]), np.array(many))


@given(st.floats(0.1, 700), st.floats(-1e200, 1e200), st.floats(0.0, 1e200))
def test_g_of_one_is_g_of_many(t, slope, uncertainty):
    many = g_values(np.array([t]), np.array([slope]), np.array([uncertainty]))
    assert same(np.array([g_value(t, slope, uncertainty)]), many)


def test_t_of_one_is_t_of_many():
    dof = np.array([-1.0, 0.0, 1.0, 2.0, 2.0, 40.0, math.inf, math.nan])
    assert same(
        t_quantiles(dof, 0.95),
        np.array([math.nan, math.nan, *(t_quantile(nu, 0.95) for nu in (1, 2, 2, 40, math.inf)), math.nan]),
    )
    # the normal distribution's two-sided 95 %, common tables
    assert t_quantile(math.inf, 0.95) == pytest.approx(1.959964, abs=5e-7)


# ---- what a content must not depend on -----------------------------------------------------------------------------

value = st.floats(0.05, 20.0)
POINTS = st.lists(st.tuples(value, st.floats(-0.03, 0.03)), min_size=3, max_size=10)


def points_of(drawn, content: float = 2.0, slope: float = 0.7) -> tuple[np.ndarray, np.ndarray]:
    x = np.array([0.0, *(x for x, _ in drawn)])
    scatter = np.array([0.01, *(each for _, each in drawn)])
    return x, slope * (content + x) * (1.0 + scatter)


def fit(x, y, w=None, factor=None) -> Fit:
    ones = np.ones_like(x)
    columns = (x, y, ones if w is None else w, ones if factor is None else factor)
    return fit_lines(*(np.reshape(rows, (-1, 1)) for rows in columns)).of(0)


def steep(one: Fit) -> bool:
    """Whether the line is known well enough for its content to be compared to nine digits."""
    return one.spread > 0.1 and abs(one.slope) > 0.1


@given(POINTS, st.sampled_from([1e-9, 1e-3, 0.7, 1e3, 1e9]))
def test_another_unit_of_content(drawn, unit):
    x, y = points_of(drawn)
    plain, other = fit(x, y), fit(x * unit, y)
    if steep(plain):
        assert other.content == pytest.approx(plain.content * unit, rel=1e-9)
        assert other.fit_uncertainty == pytest.approx(plain.fit_uncertainty * unit, rel=1e-9)
        assert other.residual_sd == pytest.approx(plain.residual_sd, rel=1e-9)
        assert other.correlation == pytest.approx(plain.correlation, rel=1e-9)


@given(POINTS, st.sampled_from([1e-9, 1e-3, 0.6, 1e3, 1e9]))
def test_a_common_factor_of_signals(drawn, factor):
    """A suppression that is the same in every vessel cancels: standard addition is for that."""
    x, y = points_of(drawn)
    plain, other = fit(x, y), fit(x, y * factor)
    if steep(plain):
        assert other.content == pytest.approx(plain.content, rel=1e-9)
        assert other.fit_uncertainty == pytest.approx(plain.fit_uncertainty, rel=1e-9)
        assert other.slope == pytest.approx(plain.slope * factor, rel=1e-9)


@given(POINTS, st.floats(0.0, 30.0), st.floats(0.01, 1.0))
def test_a_further_vessel_on_the_line(drawn, where, weight):
    """It leaves the line where it is; the content stays and is known better."""
    x, y = points_of(drawn)
    plain = fit(x, y)
    more = fit(
        np.append(x, where), np.append(y, plain.intercept + plain.slope * where), np.append(np.ones(len(x)), weight)
    )
    if steep(plain):
        assert more.content == pytest.approx(plain.content, rel=1e-9, abs=1e-9)
        assert more.slope == pytest.approx(plain.slope, rel=1e-9)
        assert more.residual_sd <= plain.residual_sd * (1 + 1e-9)


@given(POINTS, st.lists(st.floats(0.05, 1.0), min_size=11, max_size=11), st.floats(0.01, 100.0))
def test_only_the_ratio_of_weights_counts(drawn, weights, common):
    """Content and its uncertainty do not change with a factor on all weights; s does, with its root."""
    x, y = points_of(drawn)
    w = np.array(weights[: len(x)])
    plain, other = fit(x, y, w), fit(x, y, w * common)
    if steep(plain) and plain.spread > 1:
        assert other.content == pytest.approx(plain.content, rel=1e-9)
        assert other.fit_uncertainty == pytest.approx(plain.fit_uncertainty, rel=1e-8)
        assert other.residual_sd == pytest.approx(plain.residual_sd * math.sqrt(common), rel=1e-8)


@given(POINTS, st.floats(-0.2, 0.2), st.lists(st.floats(1.0, 4.0), min_size=11, max_size=11))
def test_the_background_effect_is_the_change_of_the_content(drawn, background, factors):
    """A small background on all signals, times V/V0 in y, moves the content by the effect times its size."""
    x, y = points_of(drawn)
    factor = np.array(factors[: len(x)])
    plain = fit(x, y, factor=factor)
    small = 1e-6 * background
    moved = fit(x, y - small * factor, factor=factor)
    if steep(plain) and plain.spread > 1:
        assert moved.content - plain.content == pytest.approx(small * plain.background_effect, rel=1e-3, abs=1e-11)


# ---- prepared lines, through the door of the solver ------------------------------------------------------------------

KEY = SeriesKey("", "", "B1", "sample", "S1")


def vessel(number: int, x: float, signal: float, at: str) -> PreparedVessel:
    """An aliquot of 10 mL in 25 mL."""
    level = str(number)
    reading = Reading(
        KEY, level, "", "", "", f"S1-{level}", "X", "", "A", signal, str(signal), "", 1, None, at, "", None, (), (),
        "run.csv", 2 + number, "",
    )  # fmt: skip
    return PreparedVessel(level, "", 10.0, 0.0, 25.0, 10.0 * x, (reading,))


def solve(vessels: list[PreparedVessel]):
    line = PreparedLine(KEY, "X", "", "flasks", "mg/L", "A", tuple(vessels), None, "", "")
    return solve_lines([Job(line)], 0.95)[0]


def numbers_of(solved) -> tuple:
    """All but what it was made from."""
    return tuple(
        getattr(solved, field.name)
        for field in fields(solved)
        if field.name not in ("prepared", "points") and not isinstance(getattr(solved, field.name), PreparedLine)
    )


def vessels_of(drawn, hours: Callable[[int], int] = lambda number: number) -> list[PreparedVessel]:
    x, y = points_of(drawn)
    return [
        vessel(number, added, signal / 2.5, f"2030-05-0{1 + hours(number) // 24}T{hours(number) % 24:02d}:00:00Z")
        for number, (added, signal) in enumerate(zip(x.tolist(), y.tolist(), strict=True))
    ]


@given(POINTS, st.randoms(use_true_random=False))
def test_the_order_of_vessels_changes_no_digit(drawn, random):
    vessels = vessels_of(drawn)
    plain = solve(vessels)
    random.shuffle(vessels)
    assert numbers_of(solve(vessels)) == numbers_of(plain)


@given(POINTS, st.integers(0, 40))
def test_the_time_of_measurement_changes_no_digit(drawn, later):
    """Without a drift correction, when a series was measured is of no matter."""
    plain, other = solve(vessels_of(drawn)), solve(vessels_of(drawn, lambda number: number + later))
    assert numbers_of(other) == numbers_of(plain)


def test_a_reading_that_differs_would_be_seen():
    vessels = vessels_of([(1.0, 0.0), (2.0, 0.01), (3.0, -0.01)])
    signal = vessels[1].readings[0].signal
    vessels[1] = replace(vessels[1], readings=(replace(vessels[1].readings[0], signal=math.nextafter(signal, 1.0)),))
    plain = solve(vessels_of([(1.0, 0.0), (2.0, 0.01), (3.0, -0.01)]))
    assert numbers_of(solve(vessels)) != numbers_of(plain)
