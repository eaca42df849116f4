"""Five thousand files at once, until every flag is final."""

from __future__ import annotations

import csv
import hashlib
import io
import time

import pytest

SERIES = 1250  # of four vessels, a file each
IN_A_BATCH = 50


@pytest.mark.bench
@pytest.mark.timeout(1200)
def test_burst(station, bench, table, tmp_path):
    station.set_rules()
    every = bench.many(SERIES, IN_A_BATCH)
    waiting = tmp_path / "delivered"
    for series in every:
        (station.inbox / series.folder).mkdir(exist_ok=True)
        (waiting / series.folder).mkdir(parents=True, exist_ok=True)
        for level in bench.LEVELS:
            (waiting / series.folder / series.file_name(level)).write_bytes(series.export(level))
    with station.watching() as daemon:
        began = time.perf_counter()
        for series in every:
            for level in bench.LEVELS:
                (waiting / series.folder / series.file_name(level)).rename(station.path(series, level))
        for series in every:
            bench.until(station.flag(series, "pass").exists, daemon, 900.0, pause=0.02)
        took = time.perf_counter() - began - bench.SETTLE
    assert station.count(".pass.flag") == station.count(".flag") == SERIES
    floor = bare(station, bench, every, tmp_path / "floor")
    table.append(bench.Row("burst of 5,000 files, all flags final", took, "s", floor, 2.0))


def bare(station, bench, every, folder) -> float:
    """Read, hash and take apart every file; three durable outputs a series, of the same bytes."""
    folder.mkdir()
    outputs = {series: bench.outputs_of(station, series) for series in every}
    began = time.perf_counter()
    for series in every:
        for level in bench.LEVELS:
            content = station.path(series, level).read_bytes()
            hashlib.sha256(content).hexdigest()
            assert len(list(csv.reader(io.StringIO(content.decode())))) == 3
        for name, data in outputs[series].items():
            bench.write_durably(str(folder), name, data)
    return time.perf_counter() - began
