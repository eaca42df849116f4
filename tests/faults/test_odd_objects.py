"""Something odd under one of our names: it keeps back what it belongs to at most, and nothing is followed or lost."""

from __future__ import annotations

import contextlib
import errno
import hashlib
import json
import os
import sqlite3
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest
from harness import Clock, Life, MortalDisk, lives, opened_sweep, soon, swept
from processes import Station, until
from small_night import HEAD, RULES, batch, series, vessel

from spikeward.daemon.journal import Journal, JournalUnavailable
from spikeward.daemon.lock import Held, Identity, acquire
from spikeward.daemon.trouble import Trouble

NIGHT = batch("N1", 2)
ODD: dict[str, Callable[[Path, Path], None]] = {
    "folder": lambda path, precious: path.mkdir(),
    "link": lambda path, precious: path.symlink_to(precious),
    "link to nothing": lambda path, precious: path.symlink_to("/nowhere/at all"),
    "pipe": lambda path, precious: os.mkfifo(path),
}
NAMES = ["N1_01.result.json", "N1_01.summary.html", "N1_01.warn.flag", "N1_01.pass.flag", "N1.board.html"]
UNREADABLE = (HEAD + "N1_02_A9,Cd,what,cps,2031-03-02T20:00:00,2031-03-02T20:00:00\n").encode()


@pytest.fixture
def clock() -> Clock:
    return Clock()


@pytest.fixture
def station(tmp_path: Path) -> Station:
    station = Station(tmp_path / "home", RULES)
    station.put_all(NIGHT)
    return station


@pytest.fixture
def precious(tmp_path: Path) -> Path:
    path = tmp_path / "precious"
    path.write_bytes(b"precious")
    return path


def fresh(tmp_path: Path, files: dict[str, bytes]) -> Station:
    other = Station(tmp_path / "fresh", RULES)
    other.put_all(files)
    swept(str(other.home), Clock())
    return other


def in_the_way(path: Path, kind: str, precious: Path) -> None:
    path.unlink(missing_ok=True)
    ODD[kind](path, precious)


def kept(path: Path, number: int = 1) -> Path:
    return path.with_name(f"{path.name}.kept-{number}")


@pytest.mark.parametrize("kind", ODD)
@pytest.mark.parametrize("name", NAMES)
def test_it_is_set_aside_and_everything_is_published(
    station: Station, clock: Clock, tmp_path: Path, precious: Path, name: str, kind: str
) -> None:
    swept(str(station.home), clock)
    in_the_way(station.data / name, kind, precious)
    more = series("N1", 7)
    station.put_all(more)
    with opened_sweep(str(station.home), clock) as opened:
        assert any(f"{name}.kept-1" in notice for notice in opened.pipeline.needs_a_person())
    station.equals(fresh(tmp_path, NIGHT | more))
    assert precious.read_bytes() == b"precious"
    assert not kept(station.data / name).is_file() or kept(station.data / name).is_symlink()
    assert os.path.lexists(kept(station.data / name))


@pytest.mark.parametrize("kind", ODD)
def test_the_flag_of_an_unread_file(station: Station, clock: Clock, precious: Path, kind: str) -> None:
    station.put("odd.csv", UNREADABLE)
    flag = station.data / "odd.csv.unread.flag"
    in_the_way(flag, kind, precious)
    swept(str(station.home), clock)
    assert flag.is_file()
    assert not flag.is_symlink()
    assert (station.data / "N1_01.warn.flag").is_file()
    assert os.path.lexists(kept(flag))
    in_the_way(flag, kind, precious)
    station.put("odd.csv", vessel("N1", 2, 3, again=9))
    swept(str(station.home), clock)
    assert not os.path.lexists(flag)
    assert precious.read_bytes() == b"precious"


def test_the_name_for_an_edit_is_taken_by_a_folder(station: Station, clock: Clock) -> None:
    swept(str(station.home), clock)
    summary = station.data / "N1_01.summary.html"
    summary.write_bytes(b"my note")
    kept(summary).mkdir()
    swept(str(station.home), clock)
    assert kept(summary, 2).read_bytes() == b"my note"
    assert b"my note" not in summary.read_bytes()


REFUSED = {
    "a result": "N1_01.result.json",
    "a summary": "N1_01.summary.html",
    "a flag": "N1_01.warn.flag",
    "the board": "N1.board.html",
    "the flag of an unread file": "odd.csv.unread.flag",
}


@pytest.mark.parametrize("error", [errno.EPERM, errno.EACCES])
@pytest.mark.parametrize("what", REFUSED)
def test_what_cannot_be_changed_keeps_back_itself_only_and_is_tried_again(
    station: Station, clock: Clock, tmp_path: Path, capsys: pytest.CaptureFixture[str], what: str, error: int
) -> None:
    disk = MortalDisk(fails_with=error)
    path = station.data / REFUSED[what]
    more = series("N1", 7) | {"odd.csv": UNREADABLE, "N1_01_A3.csv": vessel("N1", 1, 3, again=5)}
    disk.refuses = lambda changed: changed.removesuffix(".kept-1") == str(path)

    def others_went_on(life: Life) -> None:
        assert disk.refused
        assert (station.data / "N1_07.warn.flag").is_file()
        assert (station.data / "N1_02.warn.flag").is_file()
        told = [notice for notice in life.notices() if notice.startswith("not written")]
        assert len(told) == 1
        assert str(path) in told[0]
        assert what == "the board" or str(path) in (station.data / "N1.board.html").read_text()
        assert life.watching._disk_wait == 0.0
        disk.refuses = lambda changed: False

    def wait(life: Life) -> None:
        clock.sleep(11)

    def all_is_well(life: Life) -> None:
        assert not [notice for notice in life.notices() if notice.startswith("not written")]
        assert "not written" not in (station.data / "N1.board.html").read_text()
        found = next(station.data.glob("N1_01.*.flag")).read_text()
        digest = hashlib.sha256((station.data / "N1_01.result.json").read_bytes()).hexdigest()
        assert f"result_digest: {digest}" in found
        assert path.is_file()

    station.put_all(more)
    lives(str(station.home), clock, others_went_on, wait, all_is_well, disk=disk)
    swept(str(station.home), clock)  # closes the batch
    station.equals(fresh(tmp_path, NIGHT | more))
    lines = [line for line in capsys.readouterr().err.splitlines() if "not written" in line]
    assert len(lines) == 1, "said once, not with every attempt"
    assert str(path) in lines[0]


def test_a_refusal_that_lasts_does_not_count_as_an_arrival(station: Station, clock: Clock) -> None:
    disk = MortalDisk(fails_with=errno.EPERM)
    disk.refuses = lambda changed: changed.endswith("N1_01.summary.html")

    def long_after(life: Life) -> None:
        clock.sleep(61 * 60)

    def closed(life: Life) -> None:
        assert life.opened.pipeline.closings.closed

    lives(str(station.home), clock, *[lambda life: clock.sleep(11)] * 3, long_after, closed, disk=disk)


def test_a_sweep_that_is_refused_one_name_says_so_and_does_the_rest(
    station: Station, clock: Clock, monkeypatch: pytest.MonkeyPatch
) -> None:
    real = os.replace

    def replace(source: str, target: str) -> None:
        if target.endswith("N1_01.summary.html"):
            raise PermissionError(errno.EPERM, os.strerror(errno.EPERM), source, None, target)
        real(source, target)

    monkeypatch.setattr(os, "replace", replace)
    with opened_sweep(str(station.home), clock) as opened:
        told = [line for line in opened.pipeline.needs_a_person() if line.startswith("not written")]
    assert len(told) == 1
    assert str(station.data / "N1_01.summary.html") in told[0]
    assert "take it away" in told[0]
    assert (station.data / "N1_02.warn.flag").is_file()
    assert not list(station.data.glob("N1_01.*.flag"))
    assert not list(station.data.glob(".spikeward-tmp-*"))


def test_a_board_comes_after_the_disk_was_full_for_it_alone(station: Station, clock: Clock) -> None:
    disk = MortalDisk(fails_with=errno.ENOSPC)
    disk.refuses = lambda changed: changed.endswith("N1.board.html")

    def room(life: Life) -> None:
        assert disk.refused
        disk.refuses = lambda changed: False

    def wait(life: Life) -> None:
        clock.sleep(11)

    def there(life: Life) -> None:
        assert (station.data / "N1.board.html").is_file()

    lives(str(station.home), clock, soon(60, room), wait, wait, there, disk=disk)


# ---- what a person wrote into a result -----------------------------------------------------------


def with_(result: dict[str, Any], **changes: Any) -> bytes:
    return json.dumps({**result, **changes}).encode()


def edits(result: dict[str, Any]) -> Iterator[bytes]:
    """Edits of a result, none of which a program would write."""
    yield b"[" * 200_000
    yield b'{"a":' * 200_000
    yield b"\xff\xfe\x00\xd8x"
    yield b'{"vessels": [], "results": {"a": 1}}'
    yield b"[1, 2]"
    reading, vessel_, line = result["vessels"][0]["readings"][0], result["vessels"][0], result["results"][0]
    for name in ("path", "row", "text", "digest"):
        yield with_(result, vessels=[{"readings": [{key: reading[key] for key in reading if key != name}]}])
        yield with_(result, vessels=[{"readings": [{**reading, name: []}]}])
    yield with_(result, vessels=[{"readings": [{**reading, "path": "\ud800"}]}])
    yield with_(result, vessels=[{"readings": {}}])
    yield with_(result, vessels={"a": vessel_})
    yield with_(result, vessels=None)
    yield with_(result, context=[5])
    yield with_(result, results=[{**line, "content": "much"}])
    yield with_(result, results=[{**line, "content": 10**400, "in_sample": None}])
    yield with_(result, results=[{**line, "content": float("inf"), "in_sample": None}])
    yield with_(result, results=[{**line, "in_sample": {"content": 5}}])
    yield with_(result, results=[{**line, "analyte": []}])
    yield with_(result, series=[])
    yield with_(result, series={**result["series"], "sample": ["01"]})
    yield with_(result, verdict=["pass"])


def test_nothing_that_a_person_writes_into_a_result_stops_it(station: Station, clock: Clock, tmp_path: Path) -> None:
    swept(str(station.home), clock)
    path = station.data / "N1_01.result.json"
    for number, edit in enumerate(edits(json.loads(path.read_bytes())), start=1):
        path.write_bytes(edit)
        station.put("N1_01_A2.csv", vessel("N1", 1, 2, slip=1 + number / 1000, again=5))
        (station.home / "rules.yaml").write_text(RULES.replace("Made-up", f"Made-up {number}"))
        swept(str(station.home), clock, again="")
        assert kept(path, number).read_bytes() == edit
    other = Station(tmp_path / "other", (station.home / "rules.yaml").read_text())
    other.put_all({path.name: path.read_bytes() for path in station.data.glob("*.csv")})
    swept(str(other.home), Clock())
    station.equals(other)


def test_an_edited_result_whose_series_is_no_more(station: Station, clock: Clock) -> None:
    for edit in edits(json.loads(_result(station, clock))):
        (station.data / "N9_01.result.json").write_bytes(edit)
        swept(str(station.home), clock)
        assert (station.data / "N9_01.result.json").read_bytes() == edit, "no result of ours"


def _result(station: Station, clock: Clock) -> bytes:
    swept(str(station.home), clock)
    return (station.data / "N1_01.result.json").read_bytes()


def test_an_orphan_whose_flag_cannot_go_is_recorded_once(station: Station, clock: Clock) -> None:
    """The rules give the samples other names; an old flag is stuck for a while."""
    lives(str(station.home), clock)
    disk = MortalDisk(fails_with=errno.EPERM)
    disk.refuses = lambda changed: changed.endswith("N1_01.warn.flag")
    mended = RULES.replace(r"(?P<sample>\d+)_A", r"0(?P<sample>\d+)_A")

    def edit(life: Life) -> None:
        (station.home / "rules.yaml").write_text(mended)

    def wait(life: Life) -> None:
        clock.sleep(11)

    def stuck(life: Life) -> None:
        assert disk.refused > 1
        assert (station.data / "N1_01.warn.flag").exists()
        assert not (station.data / "N1_02.warn.flag").exists()
        disk.refuses = lambda changed: False

    lives(str(station.home), clock, edit, wait, wait, wait, stuck, wait, wait, disk=disk)
    assert not (station.data / "N1_01.warn.flag").exists()
    assert (station.data / "N1_1.warn.flag").exists()
    ledger = (station.home / ".spikeward" / "ledger.jsonl").read_text()
    assert ledger.count('"withdrawn"') == 2


# ---- more than a person wants to read ------------------------------------------------------------


def test_a_thousand_files_of_one_kind_are_summed_up(station: Station, clock: Clock) -> None:
    for number in range(1000):
        station.data.joinpath(f"odd{number:04}.csv").write_bytes(UNREADABLE)
    for number in range(30):
        station.data.joinpath(f"link{number:02}").symlink_to("/nowhere")
    with opened_sweep(str(station.home), clock) as opened:
        lines = opened.pipeline.needs_a_person()
    unread = [line for line in lines if line.startswith("unread: ")]
    assert len(unread) == 6
    assert unread[0].startswith("unread: odd0000.csv: ")
    assert unread[-1].startswith("unread: and 995 more: ")
    assert [line for line in lines if line.startswith("not opened: ")][-1].startswith("not opened: and 25 more: ")
    board = (station.data / "N1.board.html").read_text()
    assert board.count(".csv") < 1000
    assert "odd0199.csv" in board
    assert "odd0200.csv" not in board
    assert "and 800 more" in board
    assert "and 25 more" in board


def test_a_few_are_all_told(station: Station, clock: Clock) -> None:
    for number in range(5):
        station.put(f"odd{number}.csv", UNREADABLE)
    with opened_sweep(str(station.home), clock) as opened:
        lines = opened.pipeline.needs_a_person()
    assert len([line for line in lines if line.startswith("unread: ")]) == 5
    assert not [line for line in lines if " more" in line]


# ---- a lock that somebody took away --------------------------------------------------------------


def test_a_lock_that_was_deleted_is_taken_again(station: Station, clock: Clock) -> None:
    locks = [station.home / ".spikeward" / "lock", station.data / ".spikeward-station"]

    def delete(life: Life) -> None:
        for lock in locks:
            lock.unlink()
        clock.sleep(31)

    def there(life: Life) -> None:
        assert all(lock.is_file() for lock in locks)
        assert not any(lock.lost() for lock in life.opened.locks)

    lives(str(station.home), clock, delete, there)
    assert not any(lock.exists() for lock in locks)


def test_a_lock_that_another_daemon_took_meanwhile_ends_this_one(station: Station, clock: Clock) -> None:
    path = station.home / ".spikeward" / "lock"
    others: list[Held] = []

    def another(life: Life) -> None:
        path.unlink()
        others.append(acquire(str(path), Identity(4711, "bench-2", "spikeward watch", "now"), "the state folder"))
        station.put_all(series("N1", 7))
        clock.sleep(31)

    with pytest.raises(Trouble, match="taken away meanwhile.*pid: 4711"):
        lives(str(station.home), clock, another, lambda life: None)
    assert not list(station.data.glob("N1_07.*.flag")), "it published beside another daemon"
    assert not others[0].lost()
    others[0].release()


# ---- a journal that another program locks --------------------------------------------------------


def test_a_journal_locked_by_another_program_does_not_keep_it_from_ending(station: Station) -> None:
    """Found while it is watching and asked to end with something in hand: it waits for the lock only briefly then."""
    with station.watch() as watch:
        until(lambda: len(list(station.data.glob("*.warn.flag"))) == 2, "the first results")
        path = station.home / ".spikeward" / "journal.sqlite"
        with contextlib.closing(sqlite3.connect(path, isolation_level=None)) as other:
            other.execute("begin immediate")
            station.put_all(series("N1", 7))
            time.sleep(2)
            asked = time.monotonic()
            assert watch.stop() == 0
            assert time.monotonic() - asked < 8.5
            other.execute("rollback")


def test_after_the_end_was_asked_for_the_journal_is_waited_for_only_briefly(tmp_path: Path) -> None:
    journal = Journal(str(tmp_path / "journal.sqlite"))
    with contextlib.closing(sqlite3.connect(tmp_path / "journal.sqlite", isolation_level=None)) as other:
        other.execute("begin immediate")
        journal.hurry()
        began = time.monotonic()
        with pytest.raises(JournalUnavailable, match="locked"):
            journal.forget([("inbox", "a.csv")])
        assert time.monotonic() - began < 3
        other.execute("rollback")
    journal.forget([("inbox", "a.csv")])
    journal.close()
