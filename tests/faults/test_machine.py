"""Full disks, clocks that jump, second daemons, lost journals, edited outputs, signals: nothing is lost."""

from __future__ import annotations

import errno
import os
import signal
import sqlite3
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path
from unittest import mock

import pytest
from harness import Clock, Life, MortalDisk, lives, soon, swept
from processes import COMMAND, STOPS_WITHIN, Station, until
from small_night import CLOSING, HEAD, RULES, batch, renamed, series, vessel

NIGHT = batch("N1", 2, "a", brackets=True)
DECISION = b"- {exclude: N1_01_A3, by: N. Invented, on: 2031-03-03, why: flask was cracked}\n"
UNREADABLE = (HEAD + "N1_02_A9,Cd,what,cps,2031-03-02T20:00:00,2031-03-02T20:00:00\n").encode()


@pytest.fixture
def clock() -> Clock:
    return Clock()


@pytest.fixture
def station(tmp_path: Path) -> Station:
    return Station(tmp_path / "home", CLOSING)


def fresh(tmp_path: Path, rules: str, files: dict[str, bytes], name: str = "fresh") -> Station:
    other = Station(tmp_path / name, rules)
    other.put_all(files)
    swept(str(other.home), Clock())
    return other


# ---- M3: no room ---------------------------------------------------------------------------------

REFUSING: dict[str, Callable[[str], bool]] = {
    "the data folder": lambda path: "/inbox" in path,
    "the ledger": lambda path: path.endswith("ledger.jsonl"),
    "the state folder": lambda path: "/.spikeward/" in path,
    "flags": lambda path: path.endswith(".flag"),
    "everything": lambda path: True,
}


@pytest.mark.parametrize("where", REFUSING)
@pytest.mark.parametrize("error", [errno.ENOSPC, errno.EDQUOT, errno.EROFS])
def test_a_full_disk_makes_it_late_and_nothing_else(
    station: Station, clock: Clock, tmp_path: Path, where: str, error: int
) -> None:
    """While nothing can be written: vessels, a file that cannot be read, a decision, a rule edit, a file that goes."""
    disk = MortalDisk(fails_with=error)
    last = {"a/N1_BR2.csv": NIGHT["a/N1_BR2.csv"], "a/N1_02_A3.csv": NIGHT["a/N1_02_A3.csv"]}
    station.put_all({path: content for path, content in NIGHT.items() if path not in last})
    station.put("a/odd.csv", UNREADABLE)

    def fills_up(life: Life) -> None:
        disk.refuses = REFUSING[where]
        station.put_all(last)
        station.put("a/odd too.csv", UNREADABLE)
        station.put("a/decisions.yaml", DECISION)
        (station.data / "a/odd.csv").unlink()
        (station.home / "rules.yaml").write_text(CLOSING.replace("settle: 1 s", "settle: 0.5 s"))

    def room_again(life: Life) -> None:
        assert disk.refused
        disk.refuses = lambda path: False

    def nothing(life: Life) -> None:
        return None

    lives(str(station.home), clock, fills_up, soon(100, room_again), soon(200, nothing), disk=disk)
    rules = (station.home / "rules.yaml").read_text()
    files = NIGHT | {"a/odd too.csv": UNREADABLE, "a/decisions.yaml": DECISION}
    station.equals(fresh(tmp_path, rules, files))


def test_a_disk_that_is_full_at_the_end_does_not_keep_it_from_ending(
    station: Station, clock: Clock, tmp_path: Path
) -> None:
    disk = MortalDisk()
    station.put_all({path: content for path, content in NIGHT.items() if "BR2" not in path})

    def fills_up(life: Life) -> None:
        disk.refuses = REFUSING["everything"]
        station.put("a/N1_BR2.csv", NIGHT["a/N1_BR2.csv"])

    life = Life(str(station.home), clock, disk)
    with pytest.raises(StopIteration):
        life.run(fills_up, soon(30, lambda life: next(iter(()))))
    lives(str(station.home), clock)
    station.equals(fresh(tmp_path, CLOSING, NIGHT))


# ---- M5: clocks ----------------------------------------------------------------------------------


def test_the_time_of_day_decides_nothing(station: Station, clock: Clock, tmp_path: Path) -> None:
    """Set back a day, forward a year, the same hour twice: only history tells it, and with its zone."""
    times = iter(
        ["2031-03-02T20:00:00Z", "2031-03-01T20:00:00Z", "2032-03-01T20:00:00Z", "1970-01-01T00:00:00Z"] * 2000
    )
    with mock.patch("spikeward.daemon.opening.wall_clock", side_effect=times):
        paths = list(NIGHT)
        steps = [soon(3, lambda life, path=path: station.put(path, NIGHT[path])) for path in paths]  # type: ignore[misc]
        lives(str(station.home), clock, *steps)
    station.equals(fresh(tmp_path, CLOSING, NIGHT))


def test_a_series_lapses_by_time_that_was_lived_through(tmp_path: Path, clock: Clock) -> None:
    """Sixty minutes of watching, over three lives; the weeks between them do not count."""
    station = Station(tmp_path / "home", RULES)
    station.put_all({path: each for path, each in series("N1", 1).items() if "A3" not in path})
    seen: list[list[str]] = []

    def minutes(life: Life) -> None:
        clock.sleep(25 * 60.0)

    for _ in range(2):
        lives(str(station.home), clock, minutes)
        seen.append([path.name for path in station.out.glob("*.flag")])
        clock.sleep(14 * 86400.0)
    lives(str(station.home), clock, minutes)
    seen.append([path.name for path in station.out.glob("*.flag")])
    assert seen == [["N1_01.waiting.flag"], ["N1_01.waiting.flag"], ["N1_01.warn.flag"]]


# ---- M6: two daemons -----------------------------------------------------------------------------


@pytest.mark.parametrize("command", ["watch", "sweep"])
def test_a_second_daemon_is_refused_and_told_of_the_first(tmp_path: Path, command: str) -> None:
    station = Station(tmp_path / "home", RULES)
    (station.home / "other.yaml").write_text(RULES.replace("station:", "state: elsewhere\nstation:"))
    with station.watch() as watch:
        until(watch.is_up, "the first is up")
        for rules in ("rules.yaml", "other.yaml"):
            second = subprocess.run(
                [*COMMAND, command, rules], cwd=station.home, capture_output=True, text=True, timeout=30, check=False
            )
            assert second.returncode == 2
            assert "Another spikeward already works on" in second.stderr
            assert f"pid: {watch.process.pid}" in second.stderr
            assert "Traceback" not in second.stderr
        assert watch.stop() == 0


def test_a_lock_of_a_killed_daemon_is_taken_over(tmp_path: Path) -> None:
    station = Station(tmp_path / "home", RULES)
    with station.watch() as watch:
        until(watch.is_up, "the first is up")
        watch.kill()
    assert (station.home / ".spikeward" / "lock").exists()
    station.sweep()


# ---- M7: the journal -----------------------------------------------------------------------------


def test_a_journal_of_a_newer_version_is_refused_with_a_sentence(station: Station) -> None:
    station.put_all(NIGHT)
    station.sweep()
    with sqlite3.connect(station.home / ".spikeward" / "journal.sqlite") as db:
        db.execute("pragma user_version = 99")
    db.close()
    refused = subprocess.run(
        [*COMMAND, "sweep", "rules.yaml"], cwd=station.home, capture_output=True, text=True, timeout=30, check=False
    )
    assert refused.returncode == 2
    assert "newer version" in refused.stderr
    assert "Traceback" not in refused.stderr


def truncated(journal: Path) -> None:
    journal.write_bytes(journal.read_bytes()[: journal.stat().st_size // 2])


def overwritten(journal: Path) -> None:
    data = bytearray(journal.read_bytes())
    data[4096:8192] = b"\x5a" * 4096
    journal.write_bytes(data)


def something_else(journal: Path) -> None:
    journal.write_bytes(b"no journal at all\n" * 1000)


@pytest.mark.parametrize("damage", [truncated, overwritten, something_else, Path.unlink])
def test_a_damaged_journal_costs_time_only(
    station: Station, clock: Clock, tmp_path: Path, damage: Callable[[Path], None]
) -> None:
    station.put_all({path: content for path, content in NIGHT.items() if "BR2" not in path})
    lives(str(station.home), clock)
    journal = station.home / ".spikeward" / "journal.sqlite"
    damage(journal)
    station.put_all(NIGHT)
    life = lives(str(station.home), clock)
    assert life.notices() == []
    station.equals(fresh(tmp_path, CLOSING, NIGHT))
    assert not list(station.out.rglob("*.kept-*"))


def test_a_damaged_journal_while_it_runs(station: Station, clock: Clock, tmp_path: Path) -> None:
    station.put_all({path: content for path, content in NIGHT.items() if "BR2" not in path})

    def lost(life: Life) -> None:
        for left in (station.home / ".spikeward").glob("journal.sqlite*"):
            left.unlink()
        station.put_all(NIGHT)

    lives(str(station.home), clock, lost)
    lives(str(station.home), clock)
    station.equals(fresh(tmp_path, CLOSING, NIGHT))
    assert not list(station.out.rglob("*.kept-*"))


def test_a_file_that_went_while_nobody_watched_never_counts_again(tmp_path: Path, clock: Clock) -> None:
    """Read, then deleted with its result, so that the series is solved from what is there: not remembered."""
    station = Station(tmp_path / "home", RULES)
    files = series("N1", 1) | {"N1_01_A2 too.csv": vessel("N1", 1, 2, slip=1.02)}
    station.put_all(files)
    lives(str(station.home), clock)
    assert (station.out / "N1_01.fail.flag").exists()
    (station.data / "N1_01_A2 too.csv").unlink()
    for path in station.out.glob("N1_01.*"):
        path.unlink()
    life = lives(str(station.home), clock)
    assert life.notices() == []
    other = Station(tmp_path / "fresh", RULES)
    other.put_all(series("N1", 1))
    lives(str(other.home), Clock())
    station.equals(other)


def test_a_watched_folder_that_the_rules_no_longer_name(station: Station, clock: Clock) -> None:
    """What was read of it is remembered still, and must not stand in the way."""
    station.put_all(NIGHT)
    lives(str(station.home), clock)
    (station.home / "elsewhere").mkdir()
    (station.home / "rules.yaml").write_text(CLOSING.replace("folder: inbox", "folder: elsewhere"))
    assert lives(str(station.home), clock).notices() == []


def test_a_watched_folder_that_is_taken_out_of_the_rules_while_a_file_is_read(station: Station, clock: Clock) -> None:
    (station.home / "elsewhere").mkdir()
    rules = CLOSING.replace("folder: inbox", "folder: elsewhere")

    def edit_before_the_reply(life: Life) -> None:
        station.put_all(NIGHT)
        real = life.watching.readers.replies

        def replies(timeout: float) -> object:
            found = real(timeout)
            if found:
                (station.home / "rules.yaml").write_text(rules)
                clock.sleep(5.0)
                life.watching._edits.look(clock())
            return found

        life.watching.readers.replies = replies  # type: ignore[method-assign, assignment]

    assert lives(str(station.home), clock, edit_before_the_reply).notices() == []


# ---- M8: what people do to outputs ---------------------------------------------------------------


@pytest.mark.parametrize("suffix", [".result.json", ".summary.html", ".pass.flag"])
@pytest.mark.parametrize("deed", ["edited", "deleted", "read-only", "emptied"])
def test_outputs_that_a_person_touched(station: Station, clock: Clock, tmp_path: Path, suffix: str, deed: str) -> None:
    """They come back with `sweep`; an edit is kept aside."""
    station.put_all(NIGHT)
    lives(str(station.home), clock)
    found = next(path for path in (station.data / "a").iterdir() if path.name.startswith("N1_01") and (
        path.name.endswith(suffix) or (suffix == ".pass.flag" and path.name.endswith(".flag"))
    ))  # fmt: skip
    note = b"my own note\n"
    if deed == "edited":
        found.write_bytes(found.read_bytes() + note)
    elif deed == "emptied":
        found.write_bytes(b"")
    elif deed == "deleted":
        found.unlink()
    else:
        found.chmod(0o444)
    swept(str(station.home), clock)
    station.equals(fresh(tmp_path, CLOSING, NIGHT))
    kept = list(station.data.rglob("*.kept-1"))
    assert len(kept) == (deed in ("edited", "emptied"))
    if deed == "edited":
        assert kept[0].read_bytes().endswith(note)
    swept(str(station.home), clock)
    assert list(station.data.rglob("*.kept-*")) == kept


def test_an_edit_is_kept_aside_with_the_next_revision(tmp_path: Path, clock: Clock) -> None:
    station = Station(tmp_path / "home", RULES)
    station.put_all({path: each for path, each in series("N1", 1).items() if "A3" not in path})
    flag = station.data / "N1_01.waiting.flag"

    def edit(life: Life) -> None:
        flag.write_bytes(b"seen, N. Invented\n")
        station.put("N1_01_A3.csv", vessel("N1", 1, 3))

    life = lives(str(station.home), clock, edit)
    assert [path.read_bytes() for path in station.data.glob("*.kept-1")] == [b"seen, N. Invented\n"]
    assert any("the edit was kept aside" in notice for notice in life.notices())
    swept(str(station.home), clock)
    station.equals(fresh(tmp_path, RULES, series("N1", 1)))


# ---- M10: signals --------------------------------------------------------------------------------


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT, signal.SIGHUP])
def test_a_signal_in_the_middle_of_work_ends_it_in_time(tmp_path: Path, number: int) -> None:
    """The service manager, Ctrl-C and a terminal that is closed; the signal reaches the readers as well."""
    station = Station(tmp_path / "home", RULES.replace("settle: 1 s", "settle: 0.2 s"))
    files = {path: each for folder in range(12) for path, each in renamed(batch("N1", 6), f"{folder:02d}").items()}
    station.put_all(files)
    with station.watch(workers=2) as watch:
        until(lambda: "published" in watch.log(), "work has begun")
        children = _children(watch.process.pid)
        for child in children:
            os.kill(child, number)
        assert watch.stop(number) == 0
        until(lambda: not any(_lives(child) for child in children), "the readers have ended", STOPS_WITHIN)
    assert not list(station.data.rglob("*.unread.flag"))
    other = Station(tmp_path / "fresh", (station.home / "rules.yaml").read_text())
    other.put_all(files)
    other.sweep()
    with station.watch() as watch:
        until(watch.is_up, "it is up again")
        assert watch.stop() == 0
    station.sweep()
    station.equals(other)


def _children(pid: int) -> list[int]:
    tasks = Path(f"/proc/{pid}/task").glob("*/children")
    return [int(child) for task in tasks for child in task.read_text().split()]


def _lives(pid: int) -> bool:
    try:
        return Path(f"/proc/{pid}/stat").read_text().rsplit(")", 1)[1].split()[0] != "Z"
    except FileNotFoundError:
        return False


HUNG = """
import sys, threading, time
from unittest import mock
from spikeward.daemon.disk import RealDisk

real = RealDisk.entries

def hang(self, folder, skip=lambda name: False):
    if folder.endswith("inbox") and threading.current_thread() is not threading.main_thread():
        print("hangs", file=sys.stderr, flush=True)
        time.sleep(600)
    return real(self, folder, skip)

with mock.patch.object(RealDisk, "entries", hang):
    from spikeward.daemon.cli import main
    sys.exit(main(["watch", "rules.yaml"]))
"""


def test_a_share_that_hangs_does_not_keep_it_from_ending(tmp_path: Path) -> None:
    station = Station(tmp_path / "home", RULES)
    log = tmp_path / "log"
    with log.open("wb") as out:
        process = subprocess.Popen([sys.executable, "-c", HUNG], cwd=station.home, stdout=out, stderr=out)
    try:
        until(lambda: b"hangs" in log.read_bytes(), "the share hangs")
        process.send_signal(signal.SIGTERM)
        began = time.monotonic()
        assert process.wait(STOPS_WITHIN) == 0
        assert time.monotonic() - began < STOPS_WITHIN
    finally:
        process.kill()
        process.wait()
