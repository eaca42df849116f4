"""Microseconds a series, beside the same sums in bare numpy and a loop of a statistics library."""

from __future__ import annotations

import time
import warnings
from collections.abc import Callable

import numpy as np
import pytest

from spikeward.daemon.rule_file.load import load_rules
from spikeward.rules.evaluate import evaluate
from spikeward.rules.preparation import prepare
from spikeward.rules.records import Batch, BatchKey, Members, Reading, SeriesKey
from spikeward.rules.solve.lines import solve_lines

IN_A_BATCH = 20
REPEATS = 5


@pytest.mark.bench
@pytest.mark.timeout(1200)
@pytest.mark.parametrize("count", [100, 10_000])
def test_solver(bench, table, count):
    rules, problems = load_rules(bench.rules_text(), "rules.yaml")
    assert rules is not None, problems
    batches = batches_of(bench, count)
    members = [(batch, batch.members[key]) for batch in batches for key in sorted(batch.members)]
    lines = [line for batch, each in members for line in prepare(each, batch, rules)]
    assert len(lines) == count
    x = np.array([[vessel.added / vessel.aliquot_ml for vessel in line.vessels] for line in lines]).T.copy()
    y = np.array([[mean(vessel) for vessel in line.vessels] for line in lines]).T.copy()

    solved = solve_lines(lines, {}, 0.95)
    contents, _ = bare(x, y)
    assert [line.content.content for line in solved] == pytest.approx(list(contents), rel=1e-9)
    verdicts = [outcome.verdict for batch in evaluate(batches, rules) for outcome in batch.outcomes]
    assert verdicts == ["pass"] * count

    floor = microseconds(lambda: bare(x, y), count)
    loop = microseconds(lambda: by_library(x, y), count, 1 if count > 1000 else REPEATS)
    of_lines = microseconds(lambda: solve_lines(lines, {}, 0.95), count)
    of_all = microseconds(lambda: evaluate(batches, rules), count, 2 if count > 1000 else REPEATS)
    name = f"of {count:,} series"
    table.append(bench.Row(f"solve_lines {name}, each; floor: bare numpy", of_lines, "µs", floor))
    table.append(bench.Row(f"evaluate {name}, each; floor: bare numpy", of_all, "µs", floor))
    table.append(bench.Row(f"evaluate {name}, each; floor: a statistics library", of_all, "µs", loop))


def microseconds(work: Callable[[], object], count: int, repeats: int = REPEATS) -> float:
    """The median of some turns, for one of ``count``."""
    taken = []
    for _ in range(repeats):
        began = time.perf_counter()
        work()
        taken.append(time.perf_counter() - began)
    return 1e6 * sorted(taken)[len(taken) // 2] / count


def bare(x, y):
    """Content and its standard uncertainty from the fit, vessel by vessel, all series at once."""
    n = float(len(x))
    x_mean, y_mean = sum(x) / n, sum(y) / n
    dx, dy = x - x_mean, y - y_mean
    sxx, sxy = sum(dx * dx), sum(dx * dy)
    slope = sxy / sxx
    residuals = dy - slope * dx
    s = np.sqrt(sum(residuals * residuals) / (n - 2.0))
    content = (y_mean - slope * x_mean) / slope
    return content, s / np.abs(slope) * np.sqrt(1.0 / n + (y_mean / slope) ** 2 / sxx)


def by_library(x, y) -> list[float]:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        from statsmodels.api import OLS, add_constant

        contents = []
        for xs, ys in zip(x.T, y.T, strict=True):
            fit = OLS(ys, add_constant(xs)).fit()
            intercept, slope = fit.params
            fit.cov_params()
            contents.append(intercept / slope)
    return contents


def mean(vessel) -> float:
    signal = sum(reading.signal for reading in vessel.readings) / len(vessel.readings)
    return signal * vessel.final_ml / vessel.aliquot_ml


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
