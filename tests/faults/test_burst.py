"""Thousands of files at once, with every event lost: the scan finds them all, and each is counted.

The large one takes minutes: ``python -m pytest tests/faults -m bench``.
"""

from __future__ import annotations

import json
import os
from collections import Counter
from pathlib import Path

import pytest
from processes import Station, until
from small_night import LEVELS, RULES, series

from spikeward.daemon.events import Hints, NativeObserver, RootWatch
from spikeward.daemon.mounts import read_mounts

DEAF = """
import sys
from spikeward.daemon import events

class Deaf(events.NativeObserver):
    def __init__(self, path, happened):
        super().__init__(path, lambda path: None)

if {deaf}:
    events.NativeObserver = Deaf
from spikeward.daemon.cli import main
if __name__ == "__main__":
    sys.exit(main(["watch", "rules.yaml", "--workers", "2"]))
"""


def burst(count: int) -> dict[str, bytes]:
    """So many files: series of four vessels, fifty series a batch, a batch a folder."""
    files: dict[str, bytes] = {}
    for number in range(count // len(LEVELS)):
        folder, sample = divmod(number, 50)
        files |= series(f"N{folder}", sample + 1, f"{folder:03d}")
    return files


def play_burst(station: Station, files: dict[str, bytes], mode: str, deadline: float) -> None:
    rules = RULES.replace("events: poll", f"events: {'poll' if mode == 'poll' else 'native'}")
    (station.home / "rules.yaml").write_text(rules.replace("settle: 1 s", "settle: 0.5 s"))
    program = station.home / "deaf.py"
    program.write_text(DEAF.format(deaf=mode == "native, but deaf"))
    with station.watch(program=[str(program)]) as watch:
        until(watch.is_up, "the daemon is up")
        station.put_all(files)
        wanted = len(files) // len(LEVELS)
        until(lambda: watch.process.poll() is not None or settled(station) == wanted, "every series is there", deadline)
        assert watch.stop() == 0, watch.log()[-2000:]


def settled(station: Station) -> int:
    """Series that have a verdict and wait for nothing."""
    return sum(
        name.endswith(".flag") and not name.endswith((".waiting.flag", ".unread.flag")) and not name.startswith(".")
        for _, _, names in os.walk(station.out)
        for name in names
    )


def counted(station: Station) -> Counter[str]:
    """How often each raw file is quoted by a result, one reading each."""
    found: Counter[str] = Counter()
    for path in station.out.rglob("*.result.json"):
        result = json.loads(path.read_bytes())
        found.update(reading["path"] for vessel in result["vessels"] for reading in vessel["readings"])
    return found


MODES = ["poll", "native", "native, but deaf"]


@pytest.mark.parametrize("mode", MODES)
def test_nothing_is_lost_in_a_burst(mode: str, tmp_path: Path) -> None:
    files = burst(2000 if mode == "poll" else 400)
    station = Station(tmp_path / "home", RULES)
    play_burst(station, files, mode, 60.0)
    assert counted(station) == Counter(dict.fromkeys(files, 1))


@pytest.mark.bench
@pytest.mark.timeout(900)
@pytest.mark.parametrize("mode", MODES)
def test_nothing_is_lost_in_a_large_burst(mode: str, tmp_path: Path) -> None:
    files = burst(20000)
    station = Station(tmp_path / "home", RULES)
    play_burst(station, files, mode, 600.0)
    assert counted(station) == Counter(dict.fromkeys(files, 1))


def test_an_observer_that_is_killed_is_replaced(tmp_path: Path) -> None:
    """The watch over the watcher: a dead thread is noticed, said, and hints come again."""
    observers: list[NativeObserver] = []

    def observe(path: str, happened: object) -> NativeObserver:
        observers.append(NativeObserver(path, happened))  # type: ignore[arg-type]
        return observers[-1]

    hints = Hints()
    watch = RootWatch("inbox", str(tmp_path), "native", hints, read_mounts(), observe)
    watch.start()
    observers[0].stop()
    assert "had stopped and were taken up again" in watch.check()
    assert hints.take() == {"inbox": [""]}
    (tmp_path / "N1_01_A0.csv").write_bytes(b"1")
    until(lambda: bool(hints.take()), "a hint", 10.0)
    watch.stop()
