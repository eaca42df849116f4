"""A summary page and a result: making them, beside writing them durably."""

from __future__ import annotations

import time

import pytest

from spikeward.daemon.demo.night import night, play
from spikeward.daemon.opening import open_station
from spikeward.daemon.pages.result_json import render_result
from spikeward.daemon.pages.summary import render_summary
from spikeward.daemon.sweep import Pauses, sweep
from spikeward.daemon.workers import Readers

REPEATS = 20


@pytest.mark.bench
@pytest.mark.timeout(600)
@pytest.mark.parametrize("invented", ["one analyte", "three analytes"])
def test_summary_page(station, bench, table, tmp_path, invented):
    if invented == "one analyte":
        station.set_rules()
        for series in bench.many(1, 1):
            (station.inbox / series.folder).mkdir()
            for level in bench.LEVELS:
                station.path(series, level).write_bytes(series.export(level))
    else:
        usual = night()
        (station.base / "rules.yaml").write_text(usual.rules, encoding="utf-8")
        play(usual, station.inbox, 0, time.sleep)
    with open_station(str(station.base / "rules.yaml")) as opened, Readers(0) as readers:
        solved = sweep(opened.pipeline, readers, Pauses(time.monotonic, time.sleep), close=True)
    outcomes = [outcome for one in solved for outcome in one.outcome.outcomes if outcome.key.role == "sample"]
    assert outcomes
    for what, render in (("summary page", lambda one: render_summary(one, (), "bench")), ("result", render_result)):
        made, written, sizes = [], [], []
        for number in range(REPEATS):
            outcome = outcomes[number % len(outcomes)]
            began = time.perf_counter()
            data = render(outcome)
            made.append(time.perf_counter() - began)
            began = time.perf_counter()
            bench.write_durably(str(tmp_path), "page", data)
            written.append(time.perf_counter() - began)
            sizes.append(len(data))
        median = bench.quantile(made, 0.5), bench.quantile(written, 0.5)
        size = f"{bench.quantile(sizes, 0.5):,} bytes"
        table.append(
            bench.Row(f"{what}, {invented}; floor: writing it", 1e3 * median[0], "ms", 1e3 * median[1], None, size)
        )
