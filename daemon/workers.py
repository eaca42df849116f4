"""Readers at work in processes of their own: one that hangs, dies or eats memory costs its file, never the daemon."""

from __future__ import annotations

import errno
import hashlib
import multiprocessing
import os
import resource
import signal
import stat
from collections import deque
from collections.abc import Iterable
from contextlib import suppress
from dataclasses import dataclass
from multiprocessing.connection import Connection, wait
from types import TracebackType
from typing import NamedTuple

from spikeward.daemon.settle import Stamp
from spikeward.parsers.bench import read_bench
from spikeward.parsers.registry import reader_for
from spikeward.rules.records import BenchEntry, Layout, Table, Unreadable
from spikeward.rules.rulebook import BenchRule

BATCH = 32  # files that a worker takes at once
LARGEST = 64 << 20  # bytes; a larger file is refused unread
SECONDS = 10.0  # for one file
MEMORY = 1 << 30  # bytes above what a worker needs anyway
_LATER = (errno.EACCES, errno.EPERM, errno.EIO, errno.ESTALE, errno.ENOENT, errno.EBUSY, errno.EAGAIN, errno.EMFILE)

Key = tuple[str, str, str]  # watched folder, path below it, way of reading


class ReadJob(NamedTuple):
    """One file to read. ``how`` is a layout for instrument exports or a rule for bench files."""

    path: str
    key: Key
    how: Layout | BenchRule | None


@dataclass(frozen=True, slots=True)
class ReadReply:
    """What became of one job. ``sentence`` says why there is nothing; ``temporary`` that it is worth another try."""

    key: Key
    sha256: str = ""
    stamp: Stamp = Stamp(0, 0, 0)
    table: Table | None = None
    bench: tuple[BenchEntry, ...] = ()
    sentence: str = ""
    temporary: bool = False


def read_one(job: ReadJob) -> ReadReply:
    """Open, hash and read one file; never raises for anything that the file or the disk can be blamed for."""
    try:
        content, stamp = _content(job.path)
    except Unreadable as refused:
        return ReadReply(job.key, stamp=_stamp_of(job.path), sentence=str(refused))
    except OSError as error:
        return ReadReply(job.key, sentence=error.strerror or str(error), temporary=error.errno in _LATER)
    digest = hashlib.sha256(content).hexdigest()
    try:
        if isinstance(job.how, BenchRule):
            folder, _, path = job.key[1].rpartition("/")
            entries = read_bench(content, job.how, folder, f"{folder}/{path}" if folder else path)
            return ReadReply(job.key, digest, stamp, bench=entries)
        assert job.how is not None
        return ReadReply(job.key, digest, stamp, table=reader_for(job.how.format).read(content, job.how))
    except Unreadable as refused:
        return ReadReply(job.key, digest, stamp, sentence=str(refused))
    except MemoryError:
        return ReadReply(job.key, digest, stamp, sentence=_TOO_MUCH)
    except Exception as error:  # a reader from outside may raise anything; its file is reported and others go on
        said = f"the reader failed on this file ({type(error).__name__}: {error}); tell who keeps the reader"
        return ReadReply(job.key, digest, stamp, sentence=said)


_TOO_MUCH = "reading it takes more memory than a reader may have; export it in smaller files"
_STUCK = "reading it took longer than a reader may take, or ended the reader; look at the file, or at the reader"


def _content(path: str) -> tuple[bytes, Stamp]:
    handle = os.open(path, os.O_RDONLY | os.O_NOFOLLOW | os.O_NONBLOCK | os.O_CLOEXEC)
    with open(handle, "rb") as file:
        found = os.fstat(handle)
        if not stat.S_ISREG(found.st_mode):
            raise Unreadable("it is not a regular file and is never opened; take it away")
        if found.st_size > LARGEST:
            raise Unreadable(
                f"it holds {found.st_size >> 20} MiB; files above {LARGEST >> 20} MiB are not read. Export less at once"
            )
        content = file.read(LARGEST + 1)
    return content, Stamp(found.st_size, found.st_mtime_ns, found.st_ino)


def _stamp_of(path: str) -> Stamp:
    found = os.lstat(path)
    return Stamp(found.st_size, found.st_mtime_ns, found.st_ino)


def _work(connection: Connection, seconds: float, memory: int) -> None:
    """A worker's life: batches in, replies out, until the connection closes."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    signal.signal(signal.SIGALRM, signal.SIG_DFL)  # the default action ends a stuck worker even without the daemon
    nothing = os.open(os.devnull, os.O_RDWR)
    for stream in (0, 1, 2):
        os.dup2(nothing, stream)
    with open("/proc/self/statm", encoding="ascii") as statm:
        present = int(statm.read().split()[0]) * resource.getpagesize()
    resource.setrlimit(resource.RLIMIT_AS, (present + memory, present + memory))
    resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
    with suppress(EOFError, OSError, KeyboardInterrupt):
        while True:
            replies = []
            for job in connection.recv():
                signal.setitimer(signal.ITIMER_REAL, seconds)
                replies.append(read_one(job))
                signal.setitimer(signal.ITIMER_REAL, 0)
            connection.send(replies)


class _Worker:
    """One process and the batch that it has in hand."""

    def __init__(self, seconds: float, memory: int) -> None:
        context = multiprocessing.get_context("spawn")
        self.connection, theirs = context.Pipe()
        self.process = context.Process(target=_work, args=(theirs, seconds, memory), daemon=True)
        self.process.start()
        theirs.close()
        self.jobs: list[ReadJob] = []

    def end(self) -> None:
        self.connection.close()
        self.process.kill()
        self.process.join(5.0)


class Readers:
    """Reader processes, spawned when they are needed and kept; with ``count`` 0 files are read in this process."""

    def __init__(self, count: int = 1, seconds: float = SECONDS, memory: int = MEMORY) -> None:
        self.count = count
        self._seconds = seconds
        self._memory = memory
        self._workers: list[_Worker] = []
        self._queue: deque[ReadJob] = deque()
        self._alone: deque[ReadJob] = deque()  # of a batch that failed: file by file
        self._done: list[ReadReply] = []

    def __enter__(self) -> Readers:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    @property
    def busy(self) -> bool:
        """Whether files are waiting to be read, or being read."""
        return bool(self._queue or self._alone or self._done or any(worker.jobs for worker in self._workers))

    def start(self, jobs: Iterable[ReadJob]) -> None:
        """Put files in line."""
        self._queue += jobs

    def replies(self, timeout: float) -> list[ReadReply]:
        """What was read since the last call, after at most ``timeout`` seconds of waiting for something."""
        if self.count == 0:
            self._done += [read_one(job) for job in self._queue]
            self._queue.clear()
        else:
            self._hand_out()
            self._collect(timeout)
            self._hand_out()
        done, self._done = self._done, []
        return done

    def read_many(self, jobs: Iterable[ReadJob]) -> list[ReadReply]:
        """Read files and wait for all of them."""
        self.start(jobs)
        found: list[ReadReply] = []
        while self.busy:
            found += self.replies(1.0)
        return found

    def wait(self, seconds: float) -> None:
        """Wait until a worker has answered or died, at most so long."""
        wait([worker.connection for worker in self._workers if worker.jobs], seconds)

    def close(self) -> None:
        """End the processes; what they had in hand is forgotten."""
        for worker in self._workers:
            worker.end()
        self._workers.clear()

    def _hand_out(self) -> None:
        while (self._queue or self._alone) and (worker := self._idle()) is not None:
            if self._alone:
                worker.jobs = [self._alone.popleft()]
            else:
                worker.jobs = [self._queue.popleft() for _ in range(min(BATCH, len(self._queue)))]
            try:
                worker.connection.send(worker.jobs)
            except OSError:
                self._lost(worker)

    def _idle(self) -> _Worker | None:
        for worker in self._workers:
            if not worker.jobs:
                return worker
        if len(self._workers) < self.count:
            try:
                self._workers.append(_Worker(self._seconds, self._memory))
            except OSError as error:
                said = f"no reader process could be started ({error.strerror}); tried again"
                self._done += [ReadReply(job.key, sentence=said, temporary=True) for job in (*self._alone, *self._queue)]
                self._alone.clear()
                self._queue.clear()
                return None
            return self._workers[-1]
        return None

    def _collect(self, timeout: float) -> None:
        waiting = {worker.connection: worker for worker in self._workers if worker.jobs}
        if self._done:
            timeout = 0.0
        for ready in wait(list(waiting), timeout) if waiting else ():
            worker = waiting[ready]  # type: ignore[index]
            try:
                self._done += worker.connection.recv()
                worker.jobs = []
            except (EOFError, OSError):
                self._lost(worker)

    def _lost(self, worker: _Worker) -> None:
        """A worker died: of several files one is to blame, so each is tried alone; a single file is the culprit."""
        jobs, worker.jobs = worker.jobs, []
        self._workers.remove(worker)
        worker.end()
        if len(jobs) > 1:
            self._alone += jobs
            return
        for job in jobs:
            try:
                stamp = _stamp_of(job.path)
            except OSError:
                self._done.append(ReadReply(job.key, sentence="it vanished while it was read", temporary=True))
            else:
                self._done.append(ReadReply(job.key, hashlib.sha256().hexdigest(), stamp, sentence=_STUCK))


