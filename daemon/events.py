"""Native events of the file system, used as hints only: they say where to look soon, never what happened.

A lost event, a dead thread, a reached limit or a network share makes a file later, not lost: the scan finds it.
"""

from __future__ import annotations

import os
import threading
from collections import defaultdict
from collections.abc import Callable
from typing import Protocol

from watchdog.events import (
    DirCreatedEvent,
    DirDeletedEvent,
    DirMovedEvent,
    FileClosedEvent,
    FileCreatedEvent,
    FileDeletedEvent,
    FileModifiedEvent,
    FileMovedEvent,
    FileSystemEvent,
    FileSystemEventHandler,
)
from watchdog.observers import Observer

from spikeward.daemon.mounts import network_kind
from spikeward.daemon.names import is_ours, shown

AUTO, NATIVE, POLL = "auto", "native", "poll"

# No opening and no reading: the daemon's own reads must not fill the queue.
_WANTED: list[type[FileSystemEvent]] = [
    FileCreatedEvent, FileModifiedEvent, FileMovedEvent, FileClosedEvent, FileDeletedEvent,
    DirCreatedEvent, DirMovedEvent, DirDeletedEvent,
]  # fmt: skip


class Hints:
    """The folders that are worth a look, gathered from any thread; ``wake`` is set while there are any."""

    def __init__(self) -> None:
        self.wake = threading.Event()
        self._lock = threading.Lock()
        self._dirty: dict[str, set[str]] = defaultdict(set)

    def add(self, root: str, folder: str) -> None:
        """Mark a folder, given by its path below the watched folder, with all that is in it."""
        with self._lock:
            self._dirty[root].add(folder)
            self.wake.set()

    def take(self) -> dict[str, list[str]]:
        """All marks since the last call, by watched folder; a folder inside another marked one is left out."""
        with self._lock:
            dirty, self._dirty = self._dirty, defaultdict(set)
            self.wake.clear()
        return {root: _outermost(folders) for root, folders in sorted(dirty.items())}


class Observed(Protocol):
    """A running observer of one folder tree."""

    def alive(self) -> bool:
        """Whether events can still arrive."""

    def stop(self) -> None:
        """End its threads."""


Observe = Callable[[str, Callable[[str], None]], Observed]
"""Begin to observe a folder tree; the callable gets the path of everything that happens. Raises ``OSError``."""


class RootWatch:
    """The hints of one watched folder, and the watch over their source.

    Parameters
    ----------
    root : the watched folder as the rule file names it, under which hints are marked
    path : where it lies
    mode : ``auto`` (native unless the file system is a network one), ``native`` or ``poll``
    mounts : the system's list of mounts

    ``backend`` is ``native`` or ``poll`` and ``why`` the reason as a sentence. With ``poll`` there are no hints: the
    scan on a timer finds everything.
    """

    def __init__(
        self, root: str, path: str, mode: str, hints: Hints, mounts: str, observe: Observe | None = None
    ) -> None:
        self.backend = POLL
        self.why = ""
        self._root = root
        self._path = path
        self._hints = hints
        self._observe = observe or NativeObserver
        self._observed: Observed | None = None
        self._inode: tuple[int, int] | None = None
        kind = network_kind(path, mounts) if mode == AUTO else ""
        self._wants_native = mode == NATIVE or (mode == AUTO and not kind)
        if not self._wants_native:
            self.why = f"{shown(root)} lies on a network file system ({kind}), which sends no events" if kind else ""
            self.why = f"{self.why or f'the rule file says so for {shown(root)}'}; it is looked through on a timer."

    def start(self) -> str:
        """Begin; the sentence to log."""
        if self._wants_native:
            self._begin()
        return self.why

    def check(self) -> str:
        """Whether events still arrive, and if not, begin again; a sentence when something changed, else nothing.

        Call it now and then: a thread that died says nothing, and a folder that was replaced sends no events.
        """
        if not self._wants_native:
            return ""
        if self._observed is not None and self._observed.alive() and self._inode == _inode(self._path):
            return ""
        before = self.why
        broken = self._observed is not None
        self.stop()
        self._begin()
        if self.backend == NATIVE:
            self._hints.add(self._root, "")  # whatever happened in between
            how = "had stopped and were taken up again" if broken else "can be had now"
            return f"Native events of {shown(self._root)} {how}."
        return "" if self.why == before else self.why

    def stop(self) -> None:
        """End the threads of this watched folder."""
        if self._observed is not None:
            self._observed.stop()
        self._observed = None
        self.backend = POLL

    def _begin(self) -> None:
        self._inode = _inode(self._path)
        try:
            self._observed = self._observe(self._path, self._happened)
        except OSError as error:
            reason = error.strerror or str(error)
            self.why = f"No native events of {shown(self._root)} ({reason}); it is looked through on a timer instead."
            return
        self.backend = NATIVE
        self.why = f"{shown(self._root)} is watched by native events, and looked through on a timer as well."

    def _happened(self, path: str) -> None:
        name = os.path.basename(path)
        if is_ours(name):
            return
        folder = os.path.relpath(os.path.dirname(path), self._path)
        self._hints.add(self._root, "" if folder == "." or folder.startswith("..") else folder)


class NativeObserver:
    """The operating system's own events. Raises ``OSError`` where they cannot be had (a limit, a missing folder)."""

    def __init__(self, path: str, happened: Callable[[str], None]) -> None:
        self._observer = Observer()
        try:
            self._observer.schedule(_Handler(happened), path, recursive=True, event_filter=_WANTED)
            self._observer.start()
        except BaseException:
            self._observer.stop()
            raise

    def alive(self) -> bool:
        """Asks the emitters and the thread that reads for them: the observer itself says yes when they are dead."""
        source = getattr(self._observer, "_inotify_fd", None)
        reading = source.is_alive() if isinstance(source, threading.Thread) else True
        emitters = self._observer.emitters
        return self._observer.is_alive() and reading and bool(emitters) and all(each.is_alive() for each in emitters)

    def stop(self) -> None:
        """End all threads and wait for them."""
        self._observer.stop()
        self._observer.join()


def folders_watched() -> int | None:
    """How many folders this process gets events of, None where the system does not tell.

    When the system's limit is reached inside a tree, the folders that are left out are not reported otherwise.
    """
    try:
        handles = os.listdir("/proc/self/fd")
    except OSError:
        return None
    return sum(_folders_of(handle) for handle in handles)


def _folders_of(handle: str) -> int:
    try:
        if os.readlink(f"/proc/self/fd/{handle}") != "anon_inode:inotify":
            return 0
        with open(f"/proc/self/fdinfo/{handle}", encoding="ascii") as file:
            return sum(line.startswith("inotify ") for line in file)
    except OSError:  # closed meanwhile, such as the one that listed the handles
        return 0


class _Handler(FileSystemEventHandler):
    def __init__(self, happened: Callable[[str], None]) -> None:
        self._happened = happened

    def on_any_event(self, event: FileSystemEvent) -> None:
        for path in (event.src_path, event.dest_path):
            if path:
                self._happened(os.fsdecode(path))


def _inode(path: str) -> tuple[int, int] | None:
    try:
        found = os.stat(path)
    except OSError:
        return None
    return found.st_dev, found.st_ino


def _outermost(folders: set[str]) -> list[str]:
    kept: list[str] = []
    for folder in sorted(folders, key=lambda each: (each.count("/"), each)):
        above = folder.split("/")
        if "" not in kept and not any("/".join(above[:depth]) in kept for depth in range(1, len(above))):
            kept.append(folder)
    return kept
