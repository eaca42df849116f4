"""`watch`: the same way for every file, for as long as it is let run. Events are hints; the scan is the truth."""

from __future__ import annotations

import signal
import threading
import time
from collections.abc import Callable, Iterator
from concurrent.futures import Future, ThreadPoolExecutor
from contextlib import contextmanager, suppress
from dataclasses import dataclass, field

from spikeward.daemon.events import Hints, RootWatch
from spikeward.daemon.idle import Idle
from spikeward.daemon.journal import Journal, JournalUnavailable
from spikeward.daemon.log import Log
from spikeward.daemon.memory import recall, remember
from spikeward.daemon.mounts import read_mounts
from spikeward.daemon.opening import Opened, open_station
from spikeward.daemon.pipeline import Pipeline
from spikeward.daemon.rule_edits import RuleEdits
from spikeward.daemon.survey import Listing, survey
from spikeward.daemon.workers import Readers

SCAN_EVERY = 5.0  # s, without events; the longest that a lost event makes a file late
CHECK_EVENTS_EVERY = 30.0  # s
BOARDS_WITHIN = 2.0  # s; boards are written when there is time, at the latest so long after a flag
_TICK = 0.5  # s, the longest sleep: signals, rule edits and replies are looked for so often


def watch_command(config: str, workers: int, json_log: bool) -> int:
    """Run `watch` from the command line until a signal ends it; the exit code."""
    stop = threading.Event()
    with open_station(config, json_log=json_log) as opened, Readers(workers) as readers, stopping(stop):
        Watching(opened, readers, time.monotonic).run(stop)
    return 0


@contextmanager
def stopping(stop: threading.Event) -> Iterator[None]:
    """SIGTERM, SIGINT and SIGHUP ask for an end; the series in hand is finished first."""

    def ask(number: int, frame: object) -> None:
        stop.set()

    before = {number: signal.signal(number, ask) for number in (signal.SIGTERM, signal.SIGINT, signal.SIGHUP)}
    try:
        yield
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)


@dataclass(slots=True)
class _Scan:
    """When a watched folder is due for its next look, and the look that is under way."""

    due: float = 0.0
    under_way: Future[Listing] | None = None


@dataclass(slots=True)
class Watching:
    """The loop of a running daemon. One thread per watched folder lists it, so that a hung share stalls only itself."""

    opened: Opened
    readers: Readers
    monotonic: Callable[[], float]
    hints: Hints = field(default_factory=Hints)
    scan_every: float = SCAN_EVERY
    _scans: dict[str, _Scan] = field(default_factory=dict)
    _watches: dict[str, RootWatch] = field(default_factory=dict)
    _threads: dict[str, ThreadPoolExecutor] = field(default_factory=dict)
    _boards_due: float | None = None
    _events_due: float = 0.0
    _disk_wait: float = 0.0
    _idle: Idle = field(init=False)
    _edits: RuleEdits = field(init=False)

    def __post_init__(self) -> None:
        self._idle = Idle(self.monotonic(), self.journal.load_idle())
        self._edits = RuleEdits(self.opened.rule_file, self.pipeline, self.log)

    @property
    def pipeline(self) -> Pipeline:
        """The way of a file."""
        return self.opened.pipeline

    @property
    def log(self) -> Log:
        """Where events are told."""
        return self.opened.log

    @property
    def journal(self) -> Journal:
        """What outlives a restart."""
        return self.opened.journal

    @property
    def busy(self) -> bool:
        """Whether anything is being read, waits to settle, or waits to be published."""
        waiting = any(root.settling.due_in() is not None for root in self.pipeline.intake.roots.values())
        return waiting or self.readers.busy or bool(self.pipeline.touched) or self._boards_due is not None

    def run(self, stop: threading.Event) -> None:
        """Go on until ``stop`` is set; then finish what is in hand."""
        recall(self.pipeline, self.journal)
        self._follow_watches()
        self.log.info("watching", folders=", ".join(self.pipeline.intake.roots), workers=self.readers.count)
        try:
            while not stop.is_set():
                self.step()
                self.hints.wake.wait(self._pause())
        finally:
            self._finish()

    def step(self) -> None:
        """One turn: look, read, solve, publish, close."""
        now = self.monotonic()
        self._mind(now)
        self._look(now)
        self._read()
        if now >= self._disk_wait:
            self._publish(now)
            self._let_time_decide(now)
        if self._boards_due is not None and now >= self._boards_due and not self.readers.busy:
            self._boards(now)

    def _pause(self) -> float:
        now = self.monotonic()
        waits = [_TICK, *(scan.due - now for scan in self._scans.values() if scan.under_way is None)]
        if self.readers.busy or any(scan.under_way for scan in self._scans.values()):
            waits.append(0.002)
        return max(0.0, min(waits))

    # ---- looking -----------------------------------------------------------------------------------------------------

    def _follow_watches(self) -> None:
        """Begin with new watched folders, end with those that the rules no longer name."""
        roots = self.pipeline.intake.roots
        for folder in [each for each in self._scans if each not in roots]:
            self._watches.pop(folder).stop()
            self._threads.pop(folder).shutdown(wait=False, cancel_futures=True)
            del self._scans[folder]
        for folder, root in roots.items():
            if folder not in self._scans:
                path = self.pipeline.places.inputs(root.watch)
                self._scans[folder] = _Scan()
                self._threads[folder] = ThreadPoolExecutor(1, thread_name_prefix=f"survey {folder}")
                self._watches[folder] = RootWatch(folder, path, root.watch.events, self.hints, read_mounts())
                self.log.info("folder", note=self._watches[folder].start())

    def _mind(self, now: float) -> None:
        """Rule edits, and the health of the event sources."""
        if self._edits.look(now):
            self._follow_watches()
            self._boards_due = now
            for scan in self._scans.values():
                scan.due = now
        if now >= self._events_due:
            self._events_due = now + CHECK_EVENTS_EVERY
            for watch in self._watches.values():
                if said := watch.check():
                    self.log.warning("events", note=said)

    def _look(self, now: float) -> None:
        for folder in self.hints.take():
            if folder in self._scans:
                self._scans[folder].due = min(self._scans[folder].due, now)
        for folder, scan in self._scans.items():
            root = self.pipeline.intake.roots[folder]
            if scan.under_way is None and now >= scan.due:
                path = self.pipeline.places.inputs(root.watch)
                scan.under_way = self._threads[folder].submit(survey, self.pipeline.disk, path)
                scan.under_way.add_done_callback(lambda _: self.hints.wake.set())
            elif scan.under_way is not None and scan.under_way.done():
                listing, scan.under_way = scan.under_way.result(), None
                was_away = root.away
                self.readers.start(self.pipeline.see(folder, listing, now))
                if root.away != was_away:
                    self.log.warning("share", folder=folder, away=root.away or "back")
                    self._boards_due = now
                settles = root.settling.due_in()
                scan.due = now + min(self.scan_every, self.scan_every if settles is None else settles + 0.001)

    # ---- reading, solving, publishing --------------------------------------------------------------------------------

    def _read(self) -> None:
        replies = self.readers.replies(0.0)
        if not replies:
            return
        self.pipeline.take(replies)
        remember(self.pipeline, self.journal, replies)
        for reply in replies:
            if reply.sentence:
                self.log.warning("unread", file=reply.key[1], note=reply.sentence)

    def _publish(self, now: float) -> None:
        touched = set(self.pipeline.touched)
        if not touched:
            return
        self._idle.arrived(touched, now)
        try:
            solved = self.pipeline.solve(touched)
            written = self.pipeline.publish(solved)
        except OSError as error:
            self._disk_wait = now + 10.0
            self.log.error("disk", file=str(error.filename), note=f"{error.strerror}; tried again in 10 s")
            return
        self.pipeline.touched -= touched
        for key in written:
            outcome = self.pipeline.output.outcome(key)
            self.log.info("published", batch=key.batch, sample=key.sample, role=key.role, verdict=outcome.verdict)
        self._boards_due = now + BOARDS_WITHIN if self._boards_due is None else self._boards_due

    def _boards(self, now: float) -> None:
        self._boards_due = None
        try:
            self.pipeline.publish_boards(self.pipeline.solved)
        except OSError as error:
            self._boards_due = now + 10.0
            self.log.error("disk", file=str(error.filename), note=f"{error.strerror}; tried again in 10 s")

    def _let_time_decide(self, now: float) -> None:
        """Series that waited long enough lapse; batches without closing members close."""
        self._idle.go_on(now, counting=not any(root.away for root in self.pipeline.intake.roots.values()))
        for one in list(self.pipeline.solved.values()):
            if one.outcome.closed or self._idle.of(one.batch.key) < one.rules.series.lapses_after:
                continue
            self.pipeline.time_is_up(one)

    def _finish(self) -> None:
        """Publish what is in hand, and remember what would make the next start slower."""
        with suppress(OSError):
            self._publish(self.monotonic())
        self._boards(self.monotonic())
        for watch in self._watches.values():
            watch.stop()
        for thread in self._threads.values():
            thread.shutdown(wait=False, cancel_futures=True)
        with suppress(JournalUnavailable):
            self.journal.record_idle(self._idle.seconds())
        self.log.info("stopped")
