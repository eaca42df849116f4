"""From the last file of a series, closed, to its flag: the settling time is taken off."""

from __future__ import annotations

import hashlib
import os
import sqlite3
import time
from pathlib import Path

import pytest

SERIES = 300
IN_A_BATCH = 20
IN_A_BLOCK = 50  # series, then as many turns of the floor: both see the same machine
QUIET = 3.0  # s after which the daemon has nothing left to write


class Floor:
    """What no daemon can do without: read, write three outputs durably, one ledger line, one transaction."""

    def __init__(self, folder: Path, write_durably) -> None:
        folder.mkdir()
        self.write_durably = write_durably
        self.folder = str(folder)
        self.journal = sqlite3.connect(folder / "journal.sqlite", isolation_level=None)
        self.journal.execute("pragma journal_mode = wal")
        self.journal.execute("pragma synchronous = full")
        self.journal.execute("create table files (path text primary key, digest text)")
        self.ledger = os.open(folder / "ledger.jsonl", os.O_WRONLY | os.O_CREAT | os.O_APPEND)

    def turn(self, source: Path, outputs: dict[str, bytes]) -> float:
        began = time.perf_counter()
        digest = hashlib.sha256(source.read_bytes()).hexdigest()
        for name, data in outputs.items():
            self.write_durably(self.folder, name, data)
        os.write(self.ledger, b'{"event":"revision","digest":"' + digest.encode() + b'"}\n')
        os.fsync(self.ledger)
        self.journal.execute("begin immediate")
        self.journal.execute("insert or replace into files values (?, ?)", (str(source), digest))
        self.journal.execute("commit")
        return time.perf_counter() - began

    def close(self) -> None:
        os.close(self.ledger)
        self.journal.close()


@pytest.mark.bench
@pytest.mark.timeout(1200)
@pytest.mark.parametrize("in_a_batch", [IN_A_BATCH, SERIES], ids=["batches of 20", "one batch of 300"])
def test_last_file_to_flag(station, bench, table, tmp_path, in_a_batch):
    station.set_rules()
    floor = Floor(tmp_path / "floor", bench.write_durably)
    latencies, floors = [], []
    every = bench.many(SERIES, in_a_batch)
    with station.watching() as daemon:
        for start in range(0, SERIES, IN_A_BLOCK):
            block = every[start : start + IN_A_BLOCK]
            latencies += [deliver(station, bench, series, daemon) for series in block]
            time.sleep(QUIET)
            for series in block:
                floors.append(floor.turn(station.path(series, 3), bench.outputs_of(station, series)))
    floor.close()
    assert len(latencies) == len(floors) == station.count(".pass.flag") == station.count(".flag") == SERIES
    name = f"last file to flag, batches of {in_a_batch}"
    for what, share, goal in (("median", 0.5, None), ("p99", 0.99, 3.0 if in_a_batch == IN_A_BATCH else None)):
        measured, floor_measured = (1e3 * bench.quantile(values, share) for values in (latencies, floors))
        table.append(bench.Row(f"{name}: {what}", measured, "ms", floor_measured, goal))


def deliver(station, bench, series, daemon) -> float:
    """All vessels but the last, until the series waits for it; then the last one, until the flag says pass."""
    for level in bench.LEVELS[:-1]:
        put(station.path(series, level), series.export(level))
    bench.until(station.flag(series, "waiting").exists, daemon, 30.0)
    put(station.path(series, bench.LEVELS[-1]), series.export(bench.LEVELS[-1]))
    return bench.until(station.flag(series, "pass").exists, daemon, 30.0) - bench.SETTLE


def put(path: Path, data: bytes) -> None:
    path.parent.mkdir(exist_ok=True)
    path.write_bytes(data)
