"""Events are hints: which folder to look at soon, and whether any can still come."""

from __future__ import annotations

import errno
import os
import shutil
import threading
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

from spikeward.daemon.events import AUTO, NATIVE, POLL, Hints, NativeObserver, RootWatch, folders_watched

PATIENCE = 20.0  # s; an event that comes at all comes in a fraction of one
LOCAL = "/dev/sda1 / ext4 rw 0 0\n"
SHARE = LOCAL + "server:/x /mnt/nfs nfs4 rw 0 0\n"


class Observer:
    """Stands in for the operating system's events."""

    def __init__(self) -> None:
        self.running = True
        self.stopped = False

    def alive(self) -> bool:
        return self.running

    def stop(self) -> None:
        self.stopped = True


class Source:
    """Hands out observers, or the error that the system would raise."""

    def __init__(self) -> None:
        self.refuses: int | None = None
        self.observers: list[Observer] = []
        self.happened: Callable[[str], None] = lambda path: None

    def __call__(self, path: str, happened: Callable[[str], None]) -> Observer:
        if self.refuses is not None:
            raise OSError(self.refuses, os.strerror(self.refuses))
        self.happened = happened
        self.observers.append(Observer())
        return self.observers[-1]


def test_hints_are_gathered_until_taken() -> None:
    hints = Hints()
    assert hints.take() == {}
    hints.add("in", "a")
    hints.add("in", "a")
    hints.add("other", "")
    assert hints.wake.is_set()
    assert hints.take() == {"in": ["a"], "other": [""]}
    assert not hints.wake.is_set()
    assert hints.take() == {}


def test_a_folder_inside_a_marked_one_is_left_out() -> None:
    hints = Hints()
    for folder in ("a/b/c", "a/b", "ab", "x/y", "a/b/c/d", "x"):
        hints.add("in", folder)
    assert hints.take() == {"in": ["ab", "x", "a/b"]}
    for folder in ("a", "", "b/c"):
        hints.add("in", folder)
    assert hints.take() == {"in": [""]}


def test_marks_from_many_threads_are_all_there() -> None:
    hints = Hints()
    threads = [threading.Thread(target=lambda n=n: [hints.add("in", f"{n}-{k}") for k in range(200)]) for n in range(8)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert len(hints.take()["in"]) == 1600


@pytest.mark.parametrize(
    ("mode", "path", "backend"),
    [
        (AUTO, "/data", NATIVE),
        (AUTO, "/mnt/nfs/a", POLL),
        (NATIVE, "/mnt/nfs/a", NATIVE),
        (POLL, "/data", POLL),
    ],
)
def test_the_back_end_is_chosen_per_folder_and_said(mode: str, path: str, backend: str) -> None:
    watch = RootWatch("in", path, mode, Hints(), SHARE, Source())
    said = watch.start()
    assert watch.backend == backend
    assert "in" in said
    assert said.endswith(".")
    if mode == AUTO and backend == POLL:
        assert "nfs4" in said


def test_what_happens_marks_its_folder_and_our_own_files_do_not() -> None:
    hints, source = Hints(), Source()
    RootWatch("in", "/data/in", NATIVE, hints, LOCAL, source).start()
    source.happened("/data/in/a/tray.csv")
    source.happened("/data/in/tray.csv")
    assert hints.take() == {"in": [""]}
    source.happened("/data/in/a/b/tray.csv")
    source.happened("/data/in")
    assert hints.take() == {"in": [""]}
    for name in ("MD1_07.pass.flag", ".spikeward-tmp-MD1_07.result.json", "MD1.results.csv"):
        source.happened(f"/data/in/a/{name}")
    assert hints.take() == {}


@pytest.mark.parametrize("code", [errno.ENOSPC, errno.EMFILE, errno.ENOENT])
def test_where_there_are_no_events_the_timer_does_it_and_they_are_tried_again(code: int) -> None:
    hints, source = Hints(), Source()
    source.refuses = code
    watch = RootWatch("in", "/data/in", NATIVE, hints, LOCAL, source)
    said = watch.start()
    assert watch.backend == POLL
    assert os.strerror(code) in said
    assert watch.check() == "", "the same trouble is said once"
    source.refuses = None
    assert "can be had now" in watch.check()
    assert watch.backend == NATIVE
    assert hints.take() == {"in": [""]}, "what happened before is looked for"
    assert watch.check() == ""


def test_a_dead_observer_is_replaced_and_the_folder_looked_through() -> None:
    hints, source = Hints(), Source()
    watch = RootWatch("in", "/data/in", NATIVE, hints, LOCAL, source)
    watch.start()
    source.observers[0].running = False
    assert "taken up again" in watch.check()
    assert source.observers[0].stopped
    assert len(source.observers) == 2
    assert hints.take() == {"in": [""]}


def test_a_dead_observer_that_cannot_be_replaced_is_said() -> None:
    source = Source()
    watch = RootWatch("in", "/data/in", NATIVE, Hints(), LOCAL, source)
    watch.start()
    source.observers[0].running = False
    source.refuses = errno.ENOSPC
    assert "on a timer instead" in watch.check()
    assert watch.backend == POLL


# ---- the operating system's own events -------------------------------------------------------------------------------


@pytest.fixture
def watched(tmp_path: Path) -> Iterator[tuple[Path, Hints, RootWatch]]:
    root = tmp_path / "in"
    (root / "a").mkdir(parents=True)
    hints = Hints()
    watch = RootWatch("in", str(root), NATIVE, hints, LOCAL)
    watch.start()
    assert watch.backend == NATIVE
    yield root, hints, watch
    watch.stop()


def comes(hints: Hints, folder: str) -> bool:
    """Whether a mark comes that covers the folder."""
    deadline = threading.Event()
    timer = threading.Timer(PATIENCE, deadline.set)
    timer.start()
    try:
        while not deadline.is_set():
            hints.wake.wait(0.05)
            for marked in hints.take().get("in", []):
                if not marked or marked == folder or folder.startswith(marked + "/"):
                    return True
    finally:
        timer.cancel()
    return False


def test_a_file_written_renamed_moved_in_or_changed_is_hinted_at(
    watched: tuple[Path, Hints, RootWatch], tmp_path: Path
) -> None:
    root, hints, _ = watched
    (root / "a" / "tray.csv").write_bytes(b"1")
    assert comes(hints, "a")
    (tmp_path / "outside.csv").write_bytes(b"1")
    os.replace(tmp_path / "outside.csv", root / "inside.csv")
    assert comes(hints, "")
    (tmp_path / "night").mkdir()
    (tmp_path / "night" / "tray.csv").write_bytes(b"1")
    os.replace(tmp_path / "night", root / "a" / "night")
    assert comes(hints, "a/night")
    hints.take()
    with open(root / "a" / "night" / "tray.csv", "ab") as file:
        file.write(b"2")
    assert comes(hints, "a/night")


def test_a_root_that_was_replaced_is_watched_again(watched: tuple[Path, Hints, RootWatch]) -> None:
    root, hints, watch = watched
    shutil.rmtree(root)
    assert "on a timer instead" in watch.check()
    (root / "b").mkdir(parents=True)
    assert watch.check()
    assert watch.backend == NATIVE
    hints.take()
    (root / "b" / "tray.csv").write_bytes(b"1")
    assert comes(hints, "b")


def test_a_root_that_was_moved_away_is_noticed_though_its_threads_live(watched: tuple[Path, Hints, RootWatch]) -> None:
    root, hints, watch = watched
    os.replace(root, root.with_name("old"))
    root.mkdir()
    assert watch.check()
    hints.take()
    (root / "tray.csv").write_bytes(b"1")
    assert comes(hints, "")


def test_a_real_observer_that_is_stopped_is_not_alive(tmp_path: Path) -> None:
    observer = NativeObserver(str(tmp_path), lambda path: None)
    assert observer.alive()
    observer.stop()
    assert not observer.alive()


def test_a_dead_emitter_is_noticed_though_the_observer_lives(tmp_path: Path) -> None:
    observer = NativeObserver(str(tmp_path), lambda path: None)
    for emitter in list(observer._observer.emitters):
        emitter.stop()
        emitter.join()
    assert observer._observer.is_alive()
    assert not observer.alive()
    observer.stop()


def test_a_folder_that_is_not_there_leaves_no_threads(tmp_path: Path) -> None:
    before = threading.active_count()
    with pytest.raises(FileNotFoundError):
        NativeObserver(str(tmp_path / "nowhere"), lambda path: None)
    assert threading.active_count() == before


def test_folders_that_send_events_are_counted(tmp_path: Path) -> None:
    for name in ("a", "b", "a/c"):
        (tmp_path / name).mkdir()
    before = folders_watched()
    assert before is not None
    observer = NativeObserver(str(tmp_path), lambda path: None)
    during = folders_watched()
    observer.stop()
    assert during == before + 4
