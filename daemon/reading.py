"""Reading one file, from its name on the disk to a reply; and the life of a process that does nothing else."""

from __future__ import annotations

import errno
import hashlib
import math
import os
import resource
import signal
import stat
from collections.abc import Callable, Iterator
from contextlib import AbstractContextManager, contextmanager, nullcontext, suppress
from dataclasses import dataclass
from multiprocessing.connection import Connection
from operator import attrgetter
from typing import NamedTuple

from spikeward.daemon.settle import Stamp
from spikeward.parsers.bench import read_bench
from spikeward.parsers.registry import reader_for
from spikeward.rules.records import BenchEntry, Entry, Layout, Table, Unreadable
from spikeward.rules.rulebook import BenchRule

LARGEST = 64 << 20  # bytes; a larger file is refused unread

Key = tuple[str, str, str]  # watched folder, path below it, way of reading


class ReadJob(NamedTuple):
    """One file to read. ``how`` is the layout of an export or the rule of bench files; None: only look at it."""

    path: str
    key: Key
    how: Layout | BenchRule | None


@dataclass(frozen=True, slots=True)
class ReadReply:
    """What became of one job. ``sentence`` says why there is nothing; ``temporary`` that it is worth another try.

    ``sha256`` is empty where the content was not read; ``stamp`` is how the file looked when it was opened.
    """

    key: Key
    sha256: str = ""
    stamp: Stamp = Stamp(0, 0, 0)
    table: Table | None = None
    bench: tuple[BenchEntry, ...] = ()
    sentence: str = ""
    temporary: bool = False


class _NotYet(Exception):
    """The file cannot be read now; the message says why."""


def read_file(job: ReadJob, limited: Callable[[], AbstractContextManager[None]] = nullcontext) -> ReadReply:
    """Open, hash and read one file; whatever the file, the disk or a reader does wrong becomes a sentence.

    Only what a reader does with the bytes is ``limited``: it is not to blame for a slow share.
    """
    try:
        content, stamp = _content(job.path)
    except Unreadable as refused:
        return _refused(job, str(refused))
    except _NotYet as why:
        return ReadReply(job.key, sentence=str(why), temporary=True)
    except OSError as error:
        if error.errno in (errno.ELOOP, errno.ENXIO):
            return _refused(job, "it is a link, a socket or a pipe and is never opened; put the file itself here")
        return ReadReply(job.key, sentence=_told(error), temporary=True)
    except MemoryError:
        return _refused(job, _TOO_MUCH)
    digest = hashlib.sha256(content).hexdigest()
    try:
        with limited():
            if isinstance(job.how, BenchRule):
                return ReadReply(job.key, digest, stamp, bench=_bench(content, job.how, job.key[1]))
            return ReadReply(job.key, digest, stamp, table=_table(content, job.how) if job.how else None)
    except Unreadable as refused:
        said = str(refused)
    except MemoryError:
        said = _TOO_MUCH
    except (Exception, SystemExit) as error:  # a reader from outside may do anything; other files go on
        said = f"the reader failed on this file ({type(error).__name__}: {error}); repair the reader, or export anew"
    return ReadReply(job.key, digest, stamp, sentence=said)


_TOO_MUCH = "reading it takes more memory than a reader may have; export it in smaller files"


def _told(error: OSError) -> str:
    return f"it cannot be read now ({error.strerror or error})"


def _refused(job: ReadJob, sentence: str) -> ReadReply:
    try:
        found = os.lstat(job.path)
    except OSError as error:
        return ReadReply(job.key, sentence=_told(error), temporary=True)
    return ReadReply(job.key, stamp=_stamp(found), sentence=sentence)


def _stamp(found: os.stat_result) -> Stamp:
    return Stamp(found.st_size, found.st_mtime_ns, found.st_ino)


def _content(path: str) -> tuple[bytes, Stamp]:
    """The bytes of a regular file that did not change meanwhile. A pipe is opened without waiting, and refused."""
    handle = os.open(path, os.O_RDONLY | os.O_NOFOLLOW | os.O_NONBLOCK | os.O_NOCTTY | os.O_CLOEXEC)
    try:
        before = os.fstat(handle)
        if not stat.S_ISREG(before.st_mode):
            raise Unreadable("it is no regular file and is never opened; take it away")
        if before.st_size > LARGEST:
            largest = f"{LARGEST >> 20} MiB"
            raise Unreadable(
                f"it holds {before.st_size >> 20} MiB, and none above {largest} is read; export less at once"
            )
        if not before.st_size:
            raise _NotYet("it is still empty")
        with open(handle, "rb", closefd=False) as file:
            content = file.read(LARGEST + 1)
        if _stamp(os.fstat(handle)) != _stamp(before) or len(content) != before.st_size:
            raise _NotYet("it is still being written")
    finally:
        os.close(handle)
    return content, _stamp(before)


def _bench(content: bytes, rule: BenchRule, path: str) -> tuple[BenchEntry, ...]:
    return read_bench(content, rule, path.rpartition("/")[0], path)


def _table(content: bytes, layout: Layout) -> Table:
    table = reader_for(layout.format).read(content, layout)
    if not is_sound(table):
        raise Unreadable(f"the reader '{layout.format}' gave back something that is no table; repair the reader")
    return table


_texts = attrgetter(
    "solution", "analyte", "line", "unit", "text", "qualifier", "measured_at", "processed_at", "digest"
)  # fmt: skip


def is_sound(table: object) -> bool:
    """Whether a reader gave back what it must; nothing else may leave the process."""
    return type(table) is Table and type(table.entries) is tuple and all(map(_is_sound_entry, table.entries))


def _is_sound_entry(entry: object) -> bool:
    if type(entry) is not Entry or any(type(text) is not str for text in _texts(entry)):
        return False
    numbers = (each for each in (entry.signal, entry.sd) if each is not None)
    counts = (entry.row, entry.readings, *(() if entry.order is None else (entry.order,)))
    return (
        all(type(number) is float and math.isfinite(number) for number in numbers)
        and all(type(count) is int for count in counts)
        and type(entry.values) is tuple
        and all(type(pair) is tuple and [*map(type, pair)] == [str, str] for pair in entry.values)
    )


_TIMERS = {signal.ITIMER_PROF: signal.SIGPROF, signal.ITIMER_REAL: signal.SIGALRM}


def serve(descriptor: int, seconds: float, patience: float, memory: int) -> None:
    """Read files, each answered at once, until the other end of the connection is closed.

    Parameters
    ----------
    descriptor : of the connection, inherited
    seconds : of the processor, for one file
    patience : seconds of the clock, for one file; both timers end the process even if the daemon is gone
    memory : bytes of address space beyond what is there after all imports
    """
    for number in _TIMERS.values():
        signal.signal(number, signal.SIG_DFL)
    signal.pthread_sigmask(signal.SIG_SETMASK, [])
    _limit(memory)
    myself = os.getpid()

    @contextmanager
    def limited() -> Iterator[None]:
        signal.setitimer(signal.ITIMER_PROF, seconds)
        signal.setitimer(signal.ITIMER_REAL, patience)
        try:
            yield
        finally:
            for timer in _TIMERS:
                signal.setitimer(timer, 0)

    with Connection(descriptor) as connection, suppress(EOFError, OSError):
        while True:
            for job in connection.recv():
                reply = read_file(job, limited)
                if os.getpid() != myself:
                    os._exit(0)  # a copy of this process that a reader made and forgot
                connection.send(reply)
    if os.getpgrp() == myself:  # what readers started and left running ends with this process
        signal.signal(signal.SIGTERM, signal.SIG_IGN)
        os.killpg(myself, signal.SIGTERM)


def _limit(memory: int) -> None:
    resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
    with open("/proc/self/statm", encoding="ascii") as statm:
        present = int(statm.read().split()[0]) * resource.getpagesize()
    resource.setrlimit(resource.RLIMIT_AS, (present + memory, present + memory))
