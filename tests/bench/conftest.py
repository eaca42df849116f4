"""Measurements beside their floors: `python -m pytest tests/bench -m bench -s`.

Nothing here fails for being slow: goals are told as met or missed in the table at the end. Where the environment
variable SPIKEWARD_BENCH_JSON names a file, the table is written there too.
"""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import asdict, dataclass
from pathlib import Path
from types import ModuleType

import pytest

JSON_PATH = "SPIKEWARD_BENCH_JSON"
SETTLE = 0.1  # s; the time itself is taken off what is measured
LEVELS = (0, 1, 2, 3)
SCATTER = (0.0004, -0.0007, 0.0005, -0.0002)  # of signals about a top of about 0.4: a good series
_DRIVE = "import sys; from spikeward.daemon.cli import main; sys.exit(main())"

_RULES = """
station: bench of measurements
watch:
  - {{folder: inbox, settle: {settle} s, events: {events}}}
readers:
  readings:
    files: "*.csv"
    header_contains: [Solution, Signal]
    columns: {{solution: Solution, analyte: Element, line: Line, signal: Signal, unit: Unit, measured_at: Measured}}
    time_zone: UTC
names:
  - {{role: sample, match: '(?P<batch>B\\d+)_(?P<sample>\\d+)_A(?P<level>\\d)(_r(?P<reading>\\d))?'}}
series:
  expects: {{readings: 2}}
standards:
  Cd-10: {{analyte: Cd, content: 10 mg/L, expires: 2031-03-31}}
preparations:
  - design: flasks
    aliquot: 10 mL
    final: 25 mL
    additions: {{levels: {{0: 0 mL, 1: 0.25 mL, 2: 0.5 mL, 3: 0.75 mL}}}}
    sample: {{mass: 0.5 g, digest: 50 mL}}
    report_in: mg/kg
checks:
  use: pack:general
"""


def rules_text(events: str = "native", settle: float = SETTLE) -> str:
    """The rule file of all measurements."""
    return _RULES.format(events=events, settle=settle)


# ---- what is asked for -----------------------------------------------------------------------------------------------


def pytest_collection_modifyitems(config: pytest.Config, items: list[pytest.Item]) -> None:
    if "bench" in config.getoption("-m"):
        return
    for item in items:
        if item.get_closest_marker("bench"):
            item.add_marker(pytest.mark.skip(reason="a measurement: python -m pytest tests/bench -m bench -s"))


@dataclass(frozen=True)
class Row:
    """One line of the table. ``floor`` is measured in the same run; ``goal`` is the largest ratio to it."""

    name: str
    measured: float
    unit: str
    floor: float | None = None
    goal: float | None = None
    note: str = ""

    @property
    def ratio(self) -> float | None:
        return self.measured / self.floor if self.floor else None

    @property
    def verdict(self) -> str:
        if self.goal is None or self.ratio is None:
            return ""
        return "met" if self.ratio <= self.goal else "missed"


_ROWS = pytest.StashKey[list[Row]]()


@pytest.fixture(scope="session")
def table(pytestconfig: pytest.Config) -> list[Row]:
    """Where measurements are entered."""
    return pytestconfig.stash.setdefault(_ROWS, [])


def pytest_terminal_summary(terminalreporter: pytest.TerminalReporter, config: pytest.Config) -> None:
    rows = config.stash.get(_ROWS, [])
    if not rows:
        return
    terminalreporter.section("measurements")
    head = f"{'':58}{'measured':>12}{'floor':>12} {'':8}{'ratio':>8}{'goal':>6}  "
    terminalreporter.write_line(head.rstrip())
    for row in rows:
        floor, ratio, goal = (_short(value) for value in (row.floor, row.ratio, row.goal))
        line = f"{row.name:58}{_short(row.measured):>12}{floor:>12} {row.unit:8}{ratio:>8}{goal:>6}  {row.verdict}"
        terminalreporter.write_line(line.rstrip() + (f"  ({row.note})" if row.note else ""))
    if path := os.environ.get(JSON_PATH):
        told = [{**asdict(row), "ratio": row.ratio, "verdict": row.verdict} for row in rows]
        Path(path).write_text(json.dumps(told, indent=1) + "\n", encoding="utf-8")


def _short(value: float | None) -> str:
    return "" if value is None else f"{value:.4g}"


def quantile(values: Sequence[float], share: float) -> float:
    """The value below or at which this share of the values lies."""
    ordered = sorted(values)
    return ordered[min(len(ordered) - 1, int(share * len(ordered)))]


# ---- a bench with its exports ----------------------------------------------------------------------------------------


@dataclass(frozen=True)
class Series:
    """One invented addition series of cadmium, complete with four vessels of two readings."""

    batch: int
    sample: int

    @property
    def folder(self) -> str:
        return f"B{self.batch:03d}"

    @property
    def stem(self) -> str:
        return f"{self.folder}_{self.sample:03d}"

    def file_name(self, level: int) -> str:
        return f"{self.stem}_A{level}.csv"

    def rows(self, level: int) -> list[list[str]]:
        """Heading and two readings of one vessel; the signal grows by 0.4 per mg/L."""
        content = 0.2 + 0.001 * ((37 * self.batch + 11 * self.sample) % 200)
        signal = 0.4 * (content + 0.25 * level) + SCATTER[level] * 0.4
        found = [["Solution", "Element", "Line", "Signal", "Unit", "Measured"]]
        for reading in (1, 2):
            minute = 8 * (self.sample % 100) + 2 * level + reading
            at = f"2030-05-01 {minute // 60:02d}:{minute % 60:02d}:00"
            read = signal + (0.0002 if reading == 1 else -0.0002)
            found.append([f"{self.stem}_A{level}_r{reading}", "Cd", "Cd 228.8", f"{read:.5f}", "A", at])
        return found

    def export(self, level: int) -> bytes:
        """What the instrument writes for one vessel."""
        return "".join(",".join(row) + "\n" for row in self.rows(level)).encode()


def many(count: int, in_a_batch: int) -> list[Series]:
    """So many series, batch by batch."""
    return [Series(1 + number // in_a_batch, 1 + number % in_a_batch) for number in range(count)]


@dataclass
class Station:
    """A rule file with its watched folder, and the daemon that runs on it as a process of its own."""

    base: Path

    @property
    def inbox(self) -> Path:
        return self.base / "inbox"

    def path(self, series: Series, level: int) -> Path:
        return self.inbox / series.folder / series.file_name(level)

    def flag(self, series: Series, verdict: str) -> Path:
        return self.inbox / series.folder / f"{series.stem}.{verdict}.flag"

    def count(self, suffix: str) -> int:
        return sum(1 for _ in self.inbox.rglob(f"*{suffix}"))

    def set_rules(self, events: str = "native", settle: float = SETTLE) -> None:
        self.inbox.mkdir(parents=True, exist_ok=True)
        (self.base / "rules.yaml").write_text(rules_text(events, settle), encoding="utf-8")

    def command(self, name: str) -> list[str]:
        return [sys.executable, "-c", _DRIVE, name, str(self.base / "rules.yaml")]

    @contextmanager
    def watching(self) -> Iterator[subprocess.Popen[bytes]]:
        """The daemon for as long as the context lasts; its end is asked for and must be clean."""
        log = self.base / "watch.log"
        with log.open("wb") as told:
            process = subprocess.Popen(self.command("watch"), stderr=told, stdout=told)
        try:
            until(lambda: b"looked through on a timer" in log.read_bytes(), process, seconds=30.0)
            yield process
            process.send_signal(signal.SIGTERM)
            assert process.wait(60.0) == 0, log.read_text(errors="replace")[-2000:]
        finally:
            if process.poll() is None:
                process.kill()
                process.wait()


def until(true: Callable[[], bool], process: subprocess.Popen[bytes], seconds: float, pause: float = 0.0005) -> float:
    """Wait until something holds; the seconds that it took."""
    began = time.perf_counter()
    while not true():
        assert time.perf_counter() - began < seconds, "it does not come"
        assert process.poll() is None, "the daemon has ended"
        time.sleep(pause)
    return time.perf_counter() - began


def write_durably(folder: str, name: str, data: bytes) -> None:
    """Temporary name, flush, rename, folder flushed: what every output needs."""
    beside = os.path.join(folder, "." + name)
    handle = os.open(beside, os.O_WRONLY | os.O_CREAT | os.O_TRUNC)
    os.write(handle, data)
    os.fsync(handle)
    os.close(handle)
    os.rename(beside, os.path.join(folder, name))
    handle = os.open(folder, os.O_RDONLY | os.O_DIRECTORY)
    os.fsync(handle)
    os.close(handle)


def outputs_of(station: Station, series: Series) -> dict[str, bytes]:
    """The three files that stand for a series that passed."""
    names = (f"{series.stem}.result.json", f"{series.stem}.summary.html", f"{series.stem}.pass.flag")
    return {name: (station.inbox / series.folder / name).read_bytes() for name in names}


@pytest.fixture
def station(tmp_path: Path) -> Station:
    return Station(tmp_path)


@pytest.fixture(scope="session")
def bench() -> ModuleType:
    """This module under one name: test modules do not import each other."""
    return sys.modules[__name__]
