"""What a watcher of 20,000 files costs while nothing happens."""

from __future__ import annotations

import json
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
import json, os, sys, time

def look(folder):
    with os.scandir(folder) as found:
        for entry in found:
            entry.stat(follow_symlinks=False)
            if entry.is_dir(follow_symlinks=False):
                look(entry.path)

taken = []
for _ in range(11):
    began, used = time.monotonic(), time.process_time()
    look(sys.argv[1])
    taken.append((time.process_time() - used, time.monotonic() - began))
pages = int(open("/proc/self/statm").read().split()[1])
used, took = (sorted(values)[5] for values in zip(*taken))
print(json.dumps({"used": used, "took": took, "memory": pages * os.sysconf("SC_PAGE_SIZE") / (1 << 20)}))
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
    told = subprocess.run([sys.executable, "-c", _BARE, str(station.inbox)], capture_output=True, check=True)
    bare = json.loads(told.stdout)
    interval = max(SCAN_EVERY[backend], SHARE_OF_TIME * bare["took"])  # as the daemon spaces its looks
    note = f"the bare loop looks every {interval:.0f} s, {1e3 * bare['used']:.0f} ms of processor each"
    name = f"idle on 20,000 files, {backend}"
    table.append(bench.Row(f"{name}: processor", 100 * share, "%", 100 * bare["used"] / interval, None, note))
    table.append(bench.Row(f"{name}: memory", memory, "MiB", bare["memory"]))


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
