"""`watch`: the same way for every file, for as long as it is let run. Events are hints; the scan is the truth."""

from __future__ import annotations

import os
import signal
import threading
import time
from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import Future
from contextlib import contextmanager, suppress
from dataclasses import dataclass, field
from typing import TypeVar

from spikeward.daemon.events import NATIVE, POLL, Hints, RootWatch
from spikeward.daemon.idle import Idle
from spikeward.daemon.journal import Journal
from spikeward.daemon.lock import Held, Locked
from spikeward.daemon.log import Log
from spikeward.daemon.memory import recall, remember
from spikeward.daemon.mounts import read_mounts
from spikeward.daemon.opening import Opened, open_station
from spikeward.daemon.pipeline import Pipeline
from spikeward.daemon.reading import ReadReply
from spikeward.daemon.rule_edits import RuleEdits
from spikeward.daemon.solving import Solved
from spikeward.daemon.survey import Listing, survey
from spikeward.daemon.trouble import Trouble
from spikeward.daemon.workers import Readers
from spikeward.rules.records import BatchKey, SeriesKey

SCAN_EVERY = {POLL: 1.0, NATIVE: 15.0}  # s between looks at everything: the longest that a lost event makes a file late
SHARE_OF_TIME = 50  # a look that takes long is repeated the more seldom: at most 1/50 of the time goes to looking
DISK_PAUSE = 10.0  # s until what the disk refused is tried again
CHECK_EVENTS_EVERY = 30.0  # s
BOARDS_WITHIN = 2.0  # s; boards are written when there is time, at the latest so long after a flag
_FAR = 1e9  # s, not at all
_TICK = 0.5  # s, the longest sleep: signals, rule edits and replies are looked for so often


def watch_command(config: str, workers: int, json_log: bool) -> int:
    """Run `watch` from the command line until a signal ends it; the exit code."""
    stop = threading.Event()
    with (
        open_station(config, json_log=json_log) as opened,
        Readers(workers) as readers,
        stopping(stop, opened.journal.hurry),
    ):
        Watching(opened, readers, time.monotonic).run(stop)
    return 0


Answer = TypeVar("Answer")


def in_background(work: Callable[..., Answer], *arguments: object) -> Future[Answer]:
    """Do one thing in a thread that keeps nobody from ending: a share may hang for ever."""
    future: Future[Answer] = Future()

    def run() -> None:
        try:
            future.set_result(work(*arguments))
        except BaseException as error:
            future.set_exception(error)

    threading.Thread(target=run, daemon=True).start()
    return future


@contextmanager
def stopping(stop: threading.Event, hurry: Callable[[], None]) -> Iterator[None]:
    """SIGTERM, SIGINT and SIGHUP ask for an end; the series in hand is finished first, and ``hurry`` is called."""

    def ask(number: int, frame: object) -> None:
        stop.set()
        hurry()

    before = {number: signal.signal(number, ask) for number in (signal.SIGTERM, signal.SIGINT, signal.SIGHUP)}
    try:
        yield
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)


@dataclass(slots=True)
class _Scan:
    """When a watched folder is due for its next look, and the look that is under way."""

    full_due: float = 0.0
    due: float = 0.0  # of the hinted folders, and of files that settle
    hinted: set[str] = field(default_factory=set)
    under_way: Future[tuple[Listing, float]] | None = None
    not_before: float = 0.0


@dataclass(slots=True)
class Watching:
    """The loop of a running daemon. One thread per watched folder lists it, so that a hung share stalls only itself."""

    opened: Opened
    readers: Readers
    monotonic: Callable[[], float]
    hints: Hints = field(default_factory=Hints)
    _scans: dict[str, _Scan] = field(default_factory=dict)
    _watches: dict[str, RootWatch] = field(default_factory=dict)
    _boards_due: float | None = None
    _health_due: float = 0.0
    _time_due: float = 0.0
    _rules_changed: bool = False
    _board_work: Iterator[BatchKey] | None = None
    _unremembered: list[ReadReply] = field(default_factory=list)
    _disk_wait: float = 0.0
    _again_due: float = 0.0
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
        intake = self.pipeline.intake
        waiting = any(intake.settles_in(folder) is not None for folder in intake.roots)
        return waiting or self.readers.busy or bool(self.pipeline.ready()) or self._boards_due is not None

    def run(self, stop: threading.Event) -> None:
        """Go on until ``stop`` is set; then finish what is in hand."""
        recall(self.pipeline, self.journal)
        self.pipeline.intake.carry(self.journal.load_waiting())
        self._follow_watches()
        self.log.info("watching", folders=", ".join(self.pipeline.intake.roots), workers=self.readers.count)
        try:
            while not stop.is_set():
                self.step()
                if self.readers.busy and self.monotonic() >= self._disk_wait:
                    self.readers.wait(min(self._pause(), 0.02))
                else:
                    self.hints.wake.wait(self._pause())
        except Trouble:
            self._end()  # another daemon works here now: nothing more is published
            raise
        except BaseException:
            self._finish()
            raise
        self._finish()

    def step(self) -> None:
        """One turn: look, read, solve, publish, close. What the disk refuses is tried again after a pause.

        A refusal of one name keeps back only what it belongs to; the work pauses for what concerns the whole disk.
        """
        now = self.monotonic()
        self._mind(now)
        self._look(now)
        if now < self._disk_wait:
            return
        try:
            self._unremembered += self._read()
            self._publish(now)
            if self._unremembered:
                remember(self.pipeline, self.journal, self._unremembered)
                self._unremembered.clear()
            self._let_time_decide(now)
            if self._boards_due is not None and now >= self._boards_due and not self.readers.busy:
                self._write_a_board()
            self._tell_refusals()
        except OSError as error:
            self._disk_wait = now + DISK_PAUSE
            self._board_work = None  # it begins anew
            said = f"{error.strerror or error}; tried again in {DISK_PAUSE:.0f} s"
            self.log.error("disk", file=str(error.filename), note=said)

    def _pause(self) -> float:
        now = self.monotonic()
        waits = [0.0 if self._board_work is not None else _TICK]
        waits += [min(scan.due, scan.full_due) - now for scan in self._scans.values() if scan.under_way is None]
        return max(0.001, min(waits))

    # ---- looking -----------------------------------------------------------------------------------------------------

    def _follow_watches(self) -> None:
        """Begin with new watched folders, end with those that the rules no longer name."""
        roots = self.pipeline.intake.roots
        for folder in [each for each in self._scans if each not in roots]:
            self._watches.pop(folder).stop()
            del self._scans[folder]
        for folder, root in roots.items():
            if folder not in self._scans:
                path = self.pipeline.places.inputs(root.watch)
                self._scans[folder] = _Scan()
                self._watches[folder] = RootWatch(folder, path, root.watch.events, self.hints, read_mounts())
                self.log.info("folder", note=self._watches[folder].start())

    def _mind(self, now: float) -> None:
        """Rule edits, the locks, and the health of the event sources."""
        if self._edits.look(now):
            self._follow_watches()
            self._boards_due = now
            self._rules_changed = True
            for scan in self._scans.values():
                scan.full_due = now
        self._keep_locks(self.opened.locks[:1])  # the state folder's, on this machine: asked every time
        if now < self._health_due:
            return
        self._health_due = now + CHECK_EVENTS_EVERY
        for watch in self._watches.values():
            if said := watch.check():
                self.log.warning("events", note=said)
        self._keep_locks(self.opened.locks[1:])
        for sentence in self.opened.new_sentences():
            self.log.warning("state", note=sentence)
        with suppress(OSError):
            self.pipeline.touched |= {key.batch_key for key in self.pipeline.output.released()}
            self.journal.record_waiting(self.pipeline.intake.waiting())
            self.journal.record_idle(self._idle.seconds())

    def _keep_locks(self, locks: Iterable[Held]) -> None:
        """A lock that somebody took away is taken again, before a second daemon can have it."""
        for lock in locks:
            try:
                if lock.lost():
                    lock.take_again()
                    self.log.warning("state", file=lock.path, note="the lock was taken away, and was taken again")
            except Locked as other:
                raise Trouble(f"The lock {lock.path} was taken away meanwhile. {other}") from None
            except OSError:
                continue  # said with the sentences of the state folder

    def _look(self, now: float) -> None:
        for folder, below in self.hints.take().items():
            if folder in self._scans:
                self._scans[folder].hinted.update(below)
                self._scans[folder].due = min(self._scans[folder].due, now)
        for folder, scan in self._scans.items():
            if scan.under_way is None:
                self._begin_look(folder, scan, now)
            elif scan.under_way.done():
                self._end_look(folder, scan, now)

    def _begin_look(self, folder: str, scan: _Scan, now: float) -> None:
        """Look through everything, or only where something seems to have happened."""
        if now < scan.not_before or (now < scan.due and now < scan.full_due):
            return
        root = self.pipeline.intake.roots[folder]
        start = "" if now >= scan.full_due or len(scan.hinted) != 1 else next(iter(scan.hinted))
        scan.hinted.clear()
        path = self.pipeline.places.inputs(root.watch)
        scan.under_way = in_background(self._timed_survey, path, start)
        scan.under_way.add_done_callback(lambda _: self.hints.wake.set())

    def _timed_survey(self, path: str, start: str) -> tuple[Listing, float]:
        """A listing and the seconds that it took, in the thread that lists."""
        began = self.monotonic()
        return survey(self.pipeline.disk, path, start), self.monotonic() - began

    def _end_look(self, folder: str, scan: _Scan, now: float) -> None:
        assert scan.under_way is not None
        (listing, took), scan.under_way = scan.under_way.result(), None
        root = self.pipeline.intake.roots[folder]
        was_away = root.away
        self.readers.start(self.pipeline.see(folder, listing, now))
        if root.away != was_away:
            self.log.warning("share", folder=folder, note=root.away or "back")
            self._boards_due = now
        scan.not_before = now + took
        if not listing.start:
            scan.full_due = now + max(SCAN_EVERY[self._watches[folder].backend], SHARE_OF_TIME * took)
        due = self.pipeline.intake.due_in(folder, now)
        # What was hinted at while the look was under way is looked at at once.
        scan.due = now if scan.hinted else now + (_FAR if due is None else due + 0.001)
        scan.hinted.update(os.path.dirname(waited.place[1]) for waited in root.settling.waiting())

    # ---- reading, solving, publishing --------------------------------------------------------------------------------

    def _read(self) -> list[ReadReply]:
        """Take in what was read; the replies are to be remembered, which no flag needs to wait for."""
        if self.pipeline.gone:
            self.journal.forget(self.pipeline.gone)
            self.pipeline.gone.clear()
        replies = self.readers.replies(0.0)
        self.pipeline.take(replies)
        for reply in replies:
            if reply.sentence:
                self.log.warning("unread", file=reply.key[1], note=reply.sentence)
        return replies

    def _publish(self, now: float) -> None:
        again = self._try_again(now) - self.pipeline.touched
        self.pipeline.touched |= again
        self.pipeline.catch_up()
        touched = self.pipeline.ready()
        if not touched:
            return
        self._idle.go_on(now)
        solved = self.pipeline.solve(touched)
        self._idle.arrived(touched - again)
        for one in solved:
            self._idle.arrived(changed_members(self.pipeline.solved.get(one.batch.key), one))
        written = self.pipeline.publish(solved)
        self.pipeline.touched -= touched
        for key in written:
            outcome = self.pipeline.output.outcome(key)
            self.log.info("published", batch=key.batch, sample=key.sample, role=key.role, verdict=outcome.verdict)
        self._boards_due = now + BOARDS_WITHIN if self._boards_due is None else self._boards_due

    def _try_again(self, now: float) -> set[BatchKey]:
        """What one name refused is tried again after a pause, which is no arrival of anything."""
        if not self.pipeline.records.refusals.standing:
            self._again_due = now + DISK_PAUSE
        if now < self._again_due:
            return set()
        self._again_due = now + DISK_PAUSE
        self._boards_due = now
        again = self.pipeline.try_again()
        self._rules_changed |= again.orphans
        return again.series

    def _tell_refusals(self) -> None:
        for notice in self.pipeline.records.refusals.fresh():
            self.log.error("not written", file=notice.subject, note=notice.sentence)

    def _write_a_board(self) -> None:
        """One board a turn: flags do not wait for boards."""
        if self._board_work is None:
            if self._rules_changed and not self.pipeline.intake.reads_again:
                self.pipeline.withdraw_orphans()
                self._rules_changed = False
            self._board_work = self.pipeline.board_work()
        if next(self._board_work, None) is None:
            self._board_work = None
            self._boards_due = self.monotonic() if self.pipeline.board_due else None  # solved meanwhile

    def _let_time_decide(self, now: float) -> None:
        """Series that waited long enough lapse; batches without closing members close."""
        self._idle.go_on(now, counting=not any(root.away for root in self.pipeline.intake.roots.values()))
        if now < self._time_due:
            return
        self._time_due = now + _TICK
        for one in list(self.pipeline.solved.values()):
            if not one.outcome.closed:
                self.pipeline.time_is_up(one, self._idle.of)

    def _finish(self) -> None:
        """Publish what is in hand, and remember what would make the next start slower."""
        with suppress(OSError):
            self._publish(self.monotonic())
            self.pipeline.publish_boards()
            self.journal.record_idle(self._idle.seconds())
            self.journal.record_waiting(self.pipeline.intake.waiting())
        self._end()

    def _end(self) -> None:
        for watch in self._watches.values():
            watch.stop()
        self.log.info("stopped")


def changed_members(before: Solved | None, after: Solved) -> list[SeriesKey]:
    """The series of a batch in which other readings are in force than before."""
    known = before.batch.members if before is not None else {}
    return [
        key
        for key, members in after.batch.members.items()
        if key not in known or known[key].readings != members.readings
    ]
