"""A station in this process, on a real folder, driven turn by turn by a clock that only moves when nobody is at work.

`Life` is one life of the daemon, from its start to its end or its death: the loop of `watch` itself runs, but its
pauses move a made-up clock instead of waiting, and its looks at folders happen at once. `MortalDisk` dies or refuses at
a chosen step; the files themselves are real, so that the next life finds what a killed process leaves.
"""

from __future__ import annotations

import errno
import json
import os
import shutil
import threading
from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import Future
from contextlib import contextmanager
from dataclasses import dataclass, field
from typing import Any
from unittest import mock

from disk_that_dies import Died

from spikeward.daemon import watch as watch_module
from spikeward.daemon.disk import Disk, Listed, RealDisk
from spikeward.daemon.events import Hints
from spikeward.daemon.opening import Opened, open_station
from spikeward.daemon.solving import Solved
from spikeward.daemon.sweep import Pauses, sweep
from spikeward.daemon.watch import Watching
from spikeward.daemon.workers import Readers

QUIET = 4.0  # s of made-up time in which nothing is left to do, longer than a settling time and two looks
PATIENCE = 4000  # turns of the loop; a life that is not quiet by then never will be


class Clock:
    """Monotonic time that moves only when it is told to."""

    def __init__(self, now: float = 1000.0) -> None:
        self.now = now

    def __call__(self) -> float:
        return self.now

    def sleep(self, seconds: float) -> None:
        """Let time pass."""
        self.now += max(0.0, seconds)


class _Wake(threading.Event):
    """What the loop waits on: instead of waiting, time passes."""

    def __init__(self, clock: Clock) -> None:
        super().__init__()
        self._clock = clock

    def wait(self, timeout: float | None = None) -> bool:
        if not self.is_set():
            self._clock.sleep(timeout or 0.0)
        return self.is_set()


def _at_once(work: Callable[..., Any], *arguments: Any) -> Future[Any]:
    future: Future[Any] = Future()
    try:
        future.set_result(work(*arguments))
    except Exception as error:
        future.set_exception(error)
    return future


@dataclass
class MortalDisk(RealDisk):
    """The machine's disk, until its ``dies_at``-th change (0: never); ``refuses`` names paths that take no change."""

    dies_at: int = 0
    changes: int = 0
    refuses: Callable[[str], bool] = lambda path: False
    refused: int = 0
    fails_with: int = errno.ENOSPC

    def _change(self, path: str, half: Callable[[], None] = lambda: None) -> None:
        """Before each change: dead disks stay dead, and of the fatal write half may be all that there ever is."""
        self.changes += 1
        if self.dies_at and self.changes >= self.dies_at:
            if self.changes == self.dies_at:
                half()
            raise Died
        if self.refuses(path):
            self.refused += 1
            raise OSError(self.fails_with, os.strerror(self.fails_with), path)

    def write(self, path: str, data: bytes) -> None:
        """Create a file anew."""
        self._change(path, lambda: super(MortalDisk, self).write(path, data[: len(data) // 2]))
        super().write(path, data)

    def append(self, path: str, data: bytes) -> None:
        """Add to a file."""
        self._change(path, lambda: super(MortalDisk, self).append(path, data[: len(data) // 2]))
        super().append(path, data)

    def rename(self, source: str, target: str) -> None:
        """One step: done or not."""
        self._change(target)
        super().rename(source, target)

    def remove(self, path: str) -> None:
        """One step: done or not."""
        self._change(path)
        super().remove(path)

    def mkdirs(self, folder: str) -> None:
        """Refused like any change."""
        if not os.path.isdir(folder):
            self._change(folder)
        super().mkdirs(folder)


class BlinkingDisk(RealDisk):
    """The machine's disk, whose watched folder may be away or look empty."""

    def __init__(self, root: str) -> None:
        self._root = root
        self.state = ""

    def entries(self, folder: str, skip: Callable[[str], bool] = lambda name: False) -> list[Listed]:
        """As the share shows them."""
        if folder.startswith(self._root):
            if self.state == "away":
                raise OSError(errno.ESTALE, os.strerror(errno.ESTALE), folder)
            if self.state == "empty":
                return []
        return super().entries(folder, skip)


Step = Callable[["Life"], object]


@dataclass
class Life:
    """One life of the daemon. ``run`` takes steps, each after the daemon has become quiet unless it says otherwise."""

    home: str
    clock: Clock
    disk: Disk | None = None
    opened: Opened = field(init=False)
    watching: Watching = field(init=False)
    turns: int = 0
    happened: bool = False  # what a test had in mind to let happen

    def run(self, *steps: Step) -> None:
        """Live through the steps, then end as after SIGTERM. A ``MortalDisk`` may end it earlier, with ``Died``."""
        with (
            open_station(os.path.join(self.home, "rules.yaml"), disk=self.disk) as self.opened,
            mock.patch.object(watch_module, "in_background", _at_once),
            Readers(0) as readers,
        ):
            hints = Hints()
            hints.wake = _Wake(self.clock)
            self.watching = Watching(self.opened, readers, self.clock, hints)
            self.watching.run(_Script(self, steps))  # type: ignore[arg-type]

    def notices(self) -> list[str]:
        """What the board says needs a person."""
        return self.opened.pipeline.needs_a_person()


class _Script:
    """Stands in for the event that ends the loop: asked once a turn, it takes the next step when it is time."""

    def __init__(self, life: Life, steps: Iterable[Step]) -> None:
        self._life = life
        self._steps = list(steps)
        self._since = life.clock()
        self._left = PATIENCE

    def is_set(self) -> bool:
        life = self._life
        life.turns += 1
        self._left -= 1
        assert self._left > 0, "the daemon never became quiet"
        if self._steps and getattr(self._steps[0], "turns", None) is not None:
            if life.turns >= self._since_turn + self._steps[0].turns:  # type: ignore[attr-defined]
                self._next()
            return False
        if life.watching.busy:
            self._since = life.clock()
        if life.clock() - self._since < QUIET:
            return False
        if not self._steps:
            return True
        self._next()
        return False

    _since_turn = 0

    def _next(self) -> None:
        self._steps.pop(0)(self._life)
        self._since = self._life.clock()
        self._since_turn = self._life.turns
        self._left = PATIENCE


def soon(turns: int, step: Step) -> Step:
    """A step that comes so many turns after the one before it, whatever the daemon is doing."""

    def taken(life: Life) -> None:
        step(life)

    taken.turns = turns  # type: ignore[attr-defined]
    return taken


def lives(home: str, clock: Clock, *steps: Step, disk: Disk | None = None) -> Life:
    """One whole life of the daemon."""
    life = Life(home, clock, disk)
    life.run(*steps)
    return life


def swept(home: str, clock: Clock, close: bool = False, again: str | None = None) -> list[Solved]:
    """A sweep in this process."""
    with open_station(os.path.join(home, "rules.yaml")) as opened, Readers(0) as readers:
        return sweep(opened.pipeline, readers, Pauses(clock, clock.sleep), close=close, again=again)


@contextmanager
def opened_sweep(home: str, clock: Clock, **options: Any) -> Iterator[Opened]:
    """A sweep in this process, and the station still open after it."""
    with open_station(os.path.join(home, "rules.yaml")) as opened, Readers(0) as readers:
        sweep(opened.pipeline, readers, Pauses(clock, clock.sleep), **options)
        yield opened


def with_the_same_past(old: str, new: str) -> None:
    """Give a fresh station what the ledger of another one decided (closings, lapses, decisions), and nothing else."""
    entries = []
    with open(os.path.join(old, ".spikeward", "ledger.jsonl"), encoding="ascii") as ledger:
        for line in ledger:
            found = json.loads(line)
            entries += [each for each in (found if isinstance(found, list) else [found]) if each["event"] in _DECIDED]
    state = os.path.join(new, ".spikeward")
    shutil.copytree(os.path.join(old, ".spikeward", "rules"), os.path.join(state, "rules"))
    with open(os.path.join(state, "ledger.jsonl"), "w", encoding="ascii") as ledger:
        ledger.writelines(json.dumps(each) + "\n" for each in entries)


_DECIDED = ("closing", "lapse", "decisions", "again")
