"""Readers at work in processes of their own: one that hangs, dies or eats memory costs its file, never the daemon."""

from __future__ import annotations

import signal
import subprocess
import sys
import time
from collections import deque
from collections.abc import Callable, Iterable, Sequence
from contextlib import suppress
from dataclasses import dataclass, field, replace
from multiprocessing import Pipe
from multiprocessing.connection import wait
from types import TracebackType

from spikeward.daemon.reading import ReadJob, ReadReply, read_file

__all__ = ["ReadJob", "ReadReply", "Readers"]

BATCH = 32  # files that a worker takes at once
SECONDS = 10.0  # for one file
MEMORY = 1 << 30  # bytes above what a worker needs anyway
_GRACE = 20.0  # s; beyond all its files' time a worker is ended from outside, whatever it did to its timer
_SERVE = "import sys; from spikeward.daemon.reading import serve; serve(int(sys.argv[1]), float(sys.argv[2]), int(sys.argv[3]))"


@dataclass(frozen=True, slots=True)
class _Task:
    """A job, how often a worker was lost over it alone, and what is said if it is to blame."""

    job: ReadJob
    losses: int = 0
    blame: str = ""


@dataclass(slots=True)
class _Worker:
    """One process, and the tasks that it has in hand until ``deadline``."""

    seconds: float
    memory: int
    tasks: Sequence[_Task] = ()
    deadline: float = 0.0
    overdue: bool = False
    process: subprocess.Popen[bytes] = field(init=False)

    def __post_init__(self) -> None:
        self.connection, theirs = Pipe()
        with theirs:
            arguments = (str(theirs.fileno()), str(self.seconds), str(self.memory))
            try:
                # -P keeps the present folder off the module path; a session of its own keeps Ctrl-C away.
                self.process = subprocess.Popen(
                    [sys.executable, "-P", "-c", _SERVE, *arguments],
                    stdin=subprocess.DEVNULL, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL,
                    pass_fds=(theirs.fileno(),), start_new_session=True,
                )  # fmt: skip
            except OSError:
                self.connection.close()
                raise

    def end(self) -> int | None:
        """End the process; its return code, or None where even that takes too long (a hung disk)."""
        self.connection.close()
        with suppress(subprocess.TimeoutExpired):
            # One that lost its connection is on its way out by itself, with a code that tells why.
            self.process.wait(0.2 if self.tasks and not self.overdue else 0)
        self.process.kill()
        with suppress(subprocess.TimeoutExpired):
            self.process.wait(5.0)
        return self.process.returncode
