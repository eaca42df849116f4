"""Microseconds a series: the arithmetic of lines beside bare numpy and a statistics library, and the door beside both.

All of one number of series is measured in one run, in turns, so that a machine that slows down slows down all of them.
"""

from __future__ import annotations

import time
import warnings
from collections.abc import Callable

import numpy as np
import pytest

from spikeward.daemon.rule_file.load import load_rules
from spikeward.rules.evaluate import evaluate
from spikeward.rules.records import Batch, BatchKey, Members, Reading, SeriesKey
from spikeward.rules.solve.line import fit_lines
from spikeward.rules.uncertainty.fieller import g_values, half_widths_each, t_quantiles

IN_A_BATCH = 20
BY_LIBRARY = 10  # the library goes series by series, so that a part of them tells the time of each
VESSELS = 4


@pytest.mark.bench
@pytest.mark.timeout(1200)
@pytest.mark.parametrize("count", [100, 10_000, 100_000])
def test_arithmetic(bench, table, count):
    """Coefficients, covariance, s, u, r, content, background effect, Fieller's interval and residuals."""
    x, y, w, factor = random_series(count)
    across = [
        np.ascontiguousarray(rows.T) for rows in (x, y, w, factor)
    ]  # a row for each series, as one would write it
    for own, other in zip(ours(x, y, w, factor), bare(*across), strict=True):
        assert own == pytest.approx(other, rel=1e-9, abs=1e-9)
    some = min(count, BY_LIBRARY)
    assert ours(x, y, w, factor)[6][:some] == pytest.approx(by_library(x, y, w, some), rel=1e-9)

    again = max(1, 2000 // count)
    core, floor, weighted, plain = in_turns(
        15,
        (lambda: ours(x, y, w, factor), count, again),
        (lambda: bare(*across), count, again),
        (lambda: by_library(x, y, w, some), some, 20),
        (lambda: by_library(x, y, None, some), some, 20),
    )
    name = f"lines, {count:,} series, each; floor:"
    table.append(bench.Row(f"{name} bare numpy", core, "µs", floor, 3.0))
    table.append(bench.Row(f"{name} a library's WLS", core, "µs", weighted, 1 / 200))
    table.append(bench.Row(f"{name} a library's OLS", core, "µs", plain, 1 / 200))


@pytest.mark.bench
@pytest.mark.timeout(1200)
@pytest.mark.parametrize("count", [100, 10_000])
def test_door(bench, table, count):
    """From readings to verdicts with their sentences, which is what a night takes."""
    rules, problems = load_rules(bench.rules_text(), "rules.yaml")
    assert rules is not None, problems
    batches = batches_of(bench, count)
    verdicts = [outcome.verdict for batch in evaluate(batches, rules) for outcome in batch.outcomes]
    assert verdicts == ["pass"] * count
    x, y, w, factor = random_series(count)
    some = min(count, BY_LIBRARY)
    door, core, loop = in_turns(
        2 if count > 1000 else 5,
        (lambda: evaluate(batches, rules), count, 1),
        (lambda: ours(x, y, w, factor), count, max(1, 2000 // count)),
        (lambda: by_library(x, y, w, some), some, 20),
    )
    name = f"evaluate, {count:,} series, each; floor:"
    table.append(bench.Row(f"{name} their lines alone", door, "µs", core))
    table.append(bench.Row(f"{name} a library's WLS", door, "µs", loop))


def in_turns(turns: int, *works: tuple[Callable[[], object], int, int]) -> list[float]:
    """The median microseconds of a series for each work, one work after another in every turn; the first warms up.

    A work stands with the number of its series and how often it is done in a turn. Processor time is taken, each time
    by itself, so that what else runs on the machine counts for less.
    """
    taken: list[list[float]] = [[] for _ in works]
    for turn in range(turns + 1):
        for place, (work, series, again) in enumerate(works):
            for _ in range(again):
                began = time.process_time()
                work()
                if turn:
                    taken[place].append(1e6 * (time.process_time() - began) / series)
    return [sorted(one)[len(one) // 2] for one in taken]


def random_series(count: int) -> tuple[np.ndarray, ...]:
    """x, y, weight and factor of invented series, shape (vessels, series)."""
    rng = np.random.default_rng(count)
    x = np.arange(VESSELS)[:, np.newaxis] * rng.uniform(0.2, 2.0, count)
    y = 0.4 * (rng.uniform(0.5, 3.0, count) + x) * (1.0 + rng.normal(0.0, 0.005, x.shape))
    return x, y, rng.uniform(0.5, 1.0, x.shape), rng.uniform(1.0, 4.0, x.shape)


def ours(x, y, w, factor) -> tuple[np.ndarray, ...]:
    fits = fit_lines(x, y, w, factor)
    t = t_quantiles(fits.dof, 0.95)
    g = g_values(t, fits.slope, fits.slope_uncertainty)
    lower, upper = half_widths_each(fits.content, fits.x_mean, fits.spread, fits.weight, g)
    return (
        fits.intercept, fits.slope, fits.intercept_uncertainty, fits.slope_uncertainty, fits.covariance,
        fits.correlation, fits.content, fits.fit_uncertainty, fits.residual_sd, fits.background_effect, lower, upper,
        fits.residuals.T,
    )  # fmt: skip


def bare(x, y, w, factor, t=4.302652729911275) -> tuple[np.ndarray, ...]:
    """The same numbers from the same sums as one would write them down; arrays are shaped (series, vessels)."""
    n, sw = x.shape[1], w.sum(axis=1)
    x_mean, y_mean, f_mean = (w * x).sum(axis=1) / sw, (w * y).sum(axis=1) / sw, (w * factor).sum(axis=1) / sw
    dx, dy = x - x_mean[:, np.newaxis], y - y_mean[:, np.newaxis]
    sxx, sxy, syy = (w * dx**2).sum(axis=1), (w * dx * dy).sum(axis=1), (w * dy**2).sum(axis=1)
    b = sxy / sxx
    a = y_mean - b * x_mean
    residuals = dy - b[:, np.newaxis] * dx
    s = np.sqrt((w * residuals**2).sum(axis=1) / (n - 2))
    u_b, u_a = s / np.sqrt(sxx), s * np.sqrt(1 / sw + x_mean**2 / sxx)
    content = a / b
    u = s / np.abs(b) * np.sqrt(1 / sw + (y_mean / b) ** 2 / sxx)
    f_slope = (w * dx * factor).sum(axis=1) / sxx
    effect = -(f_mean - f_slope * x_mean - content * f_slope) / b
    g = (t * u_b / b) ** 2
    half = t * s / np.abs(b) / (1 - g) * np.sqrt((1 - g) / sw + (y_mean / b) ** 2 / sxx)
    offset = g * (content + x_mean) / (1 - g)
    r = sxy / np.sqrt(sxx * syy)
    return a, b, u_a, u_b, -x_mean * u_b**2, r, content, u, s, effect, half - offset, half + offset, residuals


def by_library(x, y, w, count: int) -> list[float]:
    """Contents, by a loop over fits; all else that is compared is asked for too, but Fieller's interval."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        from statsmodels.api import OLS, WLS, add_constant

        contents = []
        for place in range(count):
            design = add_constant(x[:, place])
            model = OLS(y[:, place], design) if w is None else WLS(y[:, place], design, weights=w[:, place])
            fit = model.fit()
            intercept, slope = fit.params
            _ = fit.cov_params(), fit.bse, fit.scale, fit.rsquared, fit.resid
            contents.append(intercept / slope)
    return contents


def batches_of(bench, count: int) -> list[Batch]:
    grouped: dict[BatchKey, dict[SeriesKey, Members]] = {}
    for series in bench.many(count, IN_A_BATCH):
        key = SeriesKey("inbox", series.folder, series.folder, "sample", f"{series.sample:03d}")
        readings = tuple(reading(bench, series, key, level, number) for level in bench.LEVELS for number in (1, 2))
        grouped.setdefault(key.batch_key, {})[key] = Members(key, readings)
    return [Batch(key, members) for key, members in grouped.items()]


def reading(bench, series, key: SeriesKey, level: int, number: int) -> Reading:
    solution, _, line, text, unit, at = series.rows(level)[number]
    return Reading(
        series=key, level=str(level), vessel="", injection="", reading=str(number), solution=solution, analyte="Cd",
        line=line, unit=unit, signal=float(text), text=text, qualifier="", readings=1, sd=None,
        measured_at=at.replace(" ", "T") + "Z", processed_at="", order=None, values=(), already=(),
        path=f"{series.folder}/{series.file_name(level)}", row=number + 1, digest=f"{solution} {text}",
    )  # fmt: skip
