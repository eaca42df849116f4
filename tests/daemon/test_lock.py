"""One daemon per state folder and per data folder."""

from __future__ import annotations

import errno
import fcntl
import os
import subprocess
import sys
from pathlib import Path

import pytest

from spikeward.daemon.lock import Identity, Locked, acquire, acquire_stations
from spikeward.daemon.names import STATION

ME = Identity(4711, "bench-2", "spikeward watch rules.yaml", "2026-12-01T03:00:00Z")


def test_the_second_is_told_who_the_first_is(tmp_path: Path) -> None:
    path = str(tmp_path / "lock")
    held = acquire(path, ME, "the state folder S")
    with pytest.raises(Locked) as refused:
        acquire(path, Identity(1, "other", "spikeward sweep", "now"), "the state folder S")
    sentence = str(refused.value)
    assert "the state folder S" in sentence
    for part in ("pid: 4711", "host: bench-2", "command: spikeward watch rules.yaml", "since: 2026-12-01T03:00:00Z"):
        assert part in sentence
    held.release()
    held.release()
    assert not os.path.exists(path)
    acquire(path, ME, "the state folder S").release()


def test_a_refused_attempt_leaves_the_holders_name(tmp_path: Path) -> None:
    held = acquire(str(tmp_path / "lock"), ME, "S")
    for _ in range(2):
        with pytest.raises(Locked, match="pid: 4711"):
            acquire(str(tmp_path / "lock"), Identity(1, "o", "c", "n"), "S")
    held.release()


def test_a_lock_of_a_dead_process_is_taken_over(tmp_path: Path) -> None:
    program = (
        "import os, sys\n"
        "from spikeward.daemon.lock import *\n"
        "held = acquire(sys.argv[1], Identity(os.getpid(), 'h', 'c', 's'), 'S')\n"
        "print('held', flush=True); sys.stdin.read()\n"
    )
    path = str(tmp_path / "lock")
    other = subprocess.Popen([sys.executable, "-c", program, path], stdin=subprocess.PIPE, stdout=subprocess.PIPE)
    assert other.stdout is not None
    assert other.stdin is not None
    other.stdout.readline()
    with pytest.raises(Locked, match=f"pid: {other.pid}"):
        acquire(path, ME, "S")
    other.kill()
    other.wait()
    other.stdout.close()
    other.stdin.close()
    assert f"pid: {other.pid}" in Path(path).read_text()
    held = acquire(path, ME, "S")
    assert "pid: 4711" in Path(path).read_text()
    held.release()


def test_a_lock_file_that_somebody_deletes_is_noticed(tmp_path: Path) -> None:
    path = tmp_path / "lock"
    held = acquire(str(path), ME, "S")
    assert not held.lost()
    path.unlink()
    assert held.lost()
    second = acquire(str(path), ME, "S")
    assert held.lost()
    held.release()
    assert not second.lost(), "the first one leaves alone what is no longer its own"
    second.release()


def test_a_holder_that_leaves_between_opening_and_locking(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The file that was opened is taken away before it is locked: a lock on it would keep nobody out."""
    path = tmp_path / "lock"
    real = fcntl.flock
    asked = []

    def flock(handle: int, operation: int) -> None:
        if not asked:
            path.unlink()
        asked.append(handle)
        real(handle, operation)

    monkeypatch.setattr(fcntl, "flock", flock)
    held = acquire(str(path), ME, "S")
    assert len(asked) == 2
    assert not held.lost()
    with pytest.raises(Locked):
        acquire(str(path), ME, "S")
    held.release()


def test_a_link_in_place_of_the_lock_is_not_followed(tmp_path: Path) -> None:
    (tmp_path / "raw").write_bytes(b"raw data")
    (tmp_path / "lock").symlink_to(tmp_path / "raw")
    with pytest.raises(OSError, match=os.strerror(errno.ELOOP)):
        acquire(str(tmp_path / "lock"), ME, "S")
    assert (tmp_path / "raw").read_bytes() == b"raw data"


def test_line_breaks_in_a_command_stay_in_their_line(tmp_path: Path) -> None:
    assert Identity(1, "h", "spikeward watch a\nhost: b", "s").text().count("\n") == 4


def test_two_stations_on_one_data_folder(tmp_path: Path) -> None:
    one, two, three = (tmp_path / name for name in ("one", "two", "three"))
    for folder in (one, two, three):
        folder.mkdir()
    held, warnings = acquire_stations([str(one), str(two), str(one) + "/."], ME)
    assert len(held) == 2
    assert warnings == []
    with pytest.raises(Locked, match="pid: 4711"):
        acquire_stations([str(three), str(two)], Identity(1, "h", "c", "s"))
    assert not (three / STATION).exists(), "nothing is held by the one that was refused"
    for each in held:
        each.release()
    assert list(one.iterdir()) == []


def test_folders_that_cannot_be_locked_are_said(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    real = os.open

    def read_only(path: str, flags: int, mode: int = 0o777) -> int:
        if str(path).startswith(str(tmp_path / "ro")):
            raise OSError(errno.EROFS, os.strerror(errno.EROFS), path)
        return real(path, flags, mode)

    for name in ("ro", "rw"):
        (tmp_path / name).mkdir()
    monkeypatch.setattr(os, "open", read_only)
    held, warnings = acquire_stations([str(tmp_path / name) for name in ("ro", "rw", "missing")], ME)
    assert len(held) == 1
    assert len(warnings) == 2
    assert any("Read-only" in each for each in warnings)
    held[0].release()


OTHER = Identity(1, "h", "c", "s")


@pytest.mark.parametrize("held_by_the_first", ["night", "night/tray", "night/tray/raw"])
@pytest.mark.parametrize("asked_by_the_second", ["night", "night/tray", "night/tray/raw"])
def test_two_stations_whose_folders_overlap(tmp_path: Path, held_by_the_first: str, asked_by_the_second: str) -> None:
    (tmp_path / "night" / "tray" / "raw").mkdir(parents=True)
    first, _ = acquire_stations([str(tmp_path / held_by_the_first)], ME)
    with pytest.raises(Locked, match="pid: 4711"):
        acquire_stations([str(tmp_path / asked_by_the_second)], OTHER)
    assert not first[0].lost()
    assert len(list(tmp_path.rglob(STATION))) == 1, "nothing is held by the one that was refused"
    first[0].release()
    second, _ = acquire_stations([str(tmp_path / asked_by_the_second)], OTHER)
    second[0].release()


def test_one_station_may_have_folders_within_each_other(tmp_path: Path) -> None:
    (tmp_path / "night" / "out").mkdir(parents=True)
    held, warnings = acquire_stations([str(tmp_path / "night"), str(tmp_path / "night" / "out")], ME)
    assert len(held) == 2
    assert warnings == []
    for each in held:
        each.release()


@pytest.mark.parametrize("where", ["night", "night/tray/raw", "aside"])
def test_folders_beside_each_other_and_locks_of_the_dead_keep_nobody_out(tmp_path: Path, where: str) -> None:
    for folder in ("night/tray/raw", "aside"):
        (tmp_path / folder).mkdir(parents=True)
    (tmp_path / where / STATION).write_text("pid: 1\n")
    aside, _ = acquire_stations([str(tmp_path / "aside")], ME)
    held, _ = acquire_stations([str(tmp_path / "night" / "tray")], OTHER)
    for each in (*aside, *held):
        each.release()


@pytest.mark.parametrize("odd", ["pipe", "link"])
def test_something_odd_under_the_name_of_a_lock_above_is_not_opened(tmp_path: Path, odd: str) -> None:
    (tmp_path / "night").mkdir()
    if odd == "pipe":
        os.mkfifo(tmp_path / STATION)
    else:
        (tmp_path / STATION).symlink_to("/etc/passwd")
    held, _ = acquire_stations([str(tmp_path / "night")], ME)
    held[0].release()


def test_a_lock_that_was_lost_is_taken_again(tmp_path: Path) -> None:
    path = tmp_path / "lock"
    held = acquire(str(path), ME, "S")
    path.unlink()
    held.take_again()
    assert not held.lost()
    with pytest.raises(Locked, match="pid: 4711"):
        acquire(str(path), OTHER, "S")
    held.release()
    assert not path.exists()


def test_a_lock_that_another_one_took_meanwhile_stays_theirs(tmp_path: Path) -> None:
    path = tmp_path / "lock"
    held = acquire(str(path), ME, "S")
    path.unlink()
    other = acquire(str(path), OTHER, "S")
    with pytest.raises(Locked, match="pid: 1"):
        held.take_again()
    held.release()
    assert not other.lost()
    other.release()
