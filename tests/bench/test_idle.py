"""What a watcher of 20,000 files costs while nothing happens."""

from __future__ import annotations

import os
import subprocess
import sys
import time

import pytest

from spikeward.daemon.watch import SCAN_EVERY, SHARE_OF_TIME

SERIES = 5000  # of four vessels, a file each
IN_A_BATCH = 50
SECONDS = 30.0
QUIET = 5.0

_BARE = """
import os, sys, time

def look(folder):
    with os.scandir(folder) as found:
        for entry in found:
            entry.stat(follow_symlinks=False)
            if entry.is_dir(follow_symlinks=False):
                look(entry.path)

root, every, share = sys.argv[1], float(sys.argv[2]), float(sys.argv[3])
while True:
    began = time.monotonic()
    look(root)
    time.sleep(max(every, share * (time.monotonic() - began)))
"""


@pytest.mark.bench
@pytest.mark.timeout(2400)
def test_idle(station, bench, table):
    station.set_rules()
    every = bench.many(SERIES, IN_A_BATCH)
    for series in every:
        (station.inbox / series.folder).mkdir(exist_ok=True)
        for level in bench.LEVELS:
            station.path(series, level).write_bytes(series.export(level))
    with station.watching() as daemon:
        took = bench.until(lambda: station.count(".pass.flag") == SERIES, daemon, 1800.0, pause=2.0)
        table.append(bench.Row("20,000 files that were there already, all flags final", took, "s"))
        settle_down(daemon)
        measure(daemon, "native", station, bench, table)
    station.set_rules(events="poll")
    with station.watching() as daemon:
        settle_down(daemon)
        measure(daemon, "poll", station, bench, table)
    assert station.count(".pass.flag") == station.count(".flag") == SERIES


def settle_down(daemon) -> None:
    """Wait until the daemon has had nothing to do for a while."""
    for _ in range(120):
        before = used(daemon.pid)
        time.sleep(QUIET)
        if used(daemon.pid) - before < 0.25 * QUIET:
            return


def measure(daemon, backend, station, bench, table) -> None:
    share = share_of_processor(daemon.pid)
    memory = resident(daemon.pid)
    arguments = [str(station.inbox), str(SCAN_EVERY[backend]), str(SHARE_OF_TIME)]
    bare = subprocess.Popen([sys.executable, "-c", _BARE, *arguments])
    try:
        time.sleep(2.0)
        floor, floor_memory = share_of_processor(bare.pid), resident(bare.pid)
    finally:
        bare.kill()
        bare.wait()
    table.append(bench.Row(f"idle on 20,000 files, {backend}: processor", 100 * share, "%", 100 * floor))
    table.append(bench.Row(f"idle on 20,000 files, {backend}: memory", memory, "MiB", floor_memory))


def share_of_processor(pid: int) -> float:
    before = used(pid)
    time.sleep(SECONDS)
    return (used(pid) - before) / SECONDS


def family(pid: int) -> list[int]:
    """A process and all below it."""
    found = subprocess.run(["ps", "-o", "pid=", "--ppid", str(pid)], capture_output=True, text=True, check=False)
    return [pid, *(each for child in found.stdout.split() for each in family(int(child)) if is_alive(each))]


def is_alive(pid: int) -> bool:
    return os.path.exists(f"/proc/{pid}/statm")


def used(pid: int) -> float:
    """Seconds of processor time of a process and all below it."""
    total = 0.0
    for each in family(pid):
        with open(f"/proc/{each}/stat", encoding="ascii") as stat:
            fields = stat.read().rsplit(") ", 1)[1].split()
        total += (int(fields[11]) + int(fields[12])) / os.sysconf("SC_CLK_TCK")
    return total


def resident(pid: int) -> float:
    """MiB of a process and all below it; what they share counts for each."""
    pages = 0
    for each in family(pid):
        with open(f"/proc/{each}/statm", encoding="ascii") as statm:
            pages += int(statm.read().split()[1])
    return pages * os.sysconf("SC_PAGE_SIZE") / (1 << 20)
