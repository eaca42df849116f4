"""Readers at work in processes of their own: one that hangs, dies or eats memory costs its file, never the daemon."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from collections import deque
from collections.abc import Callable, Iterable
from contextlib import suppress
from dataclasses import dataclass, replace
from multiprocessing import Pipe
from multiprocessing.connection import wait
from types import TracebackType

from spikeward.daemon.reading import ReadJob, ReadReply, read_file

__all__ = ["ReadJob", "ReadReply", "Readers"]

BATCH = 32  # files that a worker takes at once
SECONDS = 30.0  # of the processor, for one file: the same on a busy machine as on an idle one
PATIENCE = 60.0  # seconds of the clock, for one file; how long that takes is no property of the file
MEMORY = 1 << 30  # bytes above what a worker needs anyway
_GRACE = 10.0  # s; so long after its patience a worker is ended from outside, whatever it did to its timers
_SERVE = "from spikeward.daemon.reading import serve; serve({}, {}, {}, {})"


@dataclass(frozen=True, slots=True)
class _Task:
    """A job, whether a worker was lost over it before, and what is said if it is to blame."""

    job: ReadJob
    lost_before: bool = False
    blame: str = ""


class _Worker:
    """One process, and the tasks that it has in hand, the first of them until ``deadline``.

    Raises
    ------
    OSError : the system gives no further process
    """

    def __init__(self, seconds: float, patience: float, memory: int) -> None:
        self.tasks: deque[_Task] = deque()
        self.deadline = 0.0
        self.connection, theirs = Pipe()
        with theirs:
            served = theirs.fileno()
            # -P keeps the present folder off the module path; a session of its own keeps Ctrl-C away.
            command = [sys.executable, "-P", "-c", _SERVE.format(served, seconds, patience, memory)]
            nothing = subprocess.DEVNULL
            try:
                self.process = subprocess.Popen(
                    command, stdin=nothing, stdout=nothing, stderr=nothing, pass_fds=(served,), start_new_session=True
                )
            except OSError:
                self.connection.close()
                raise

    def end(self, patience: float = 0.0) -> int | None:
        """End the process and all that its readers started, after ``patience`` seconds for one that ends by itself.

        Returns
        -------
        its return code; None where it cannot end now, because a disk does not answer
        """
        self.connection.close()
        with suppress(ProcessLookupError):
            handle = os.pidfd_open(self.process.pid)
            try:
                wait([handle], patience)
            finally:
                os.close(handle)
        with suppress(ProcessLookupError):  # before the process is reaped: until then nobody else has its number
            os.killpg(self.process.pid, signal.SIGKILL)
        with suppress(subprocess.TimeoutExpired):
            self.process.wait(5.0)
        return self.process.returncode


class Readers:
    """Reader processes, spawned when they are needed and kept; with ``count`` 0 files are read in this process.

    Parameters
    ----------
    seconds : of the processor, for one file; a reader that needs more is to blame, and so said for good
    patience : seconds of the clock, for one file; what takes longer is tried again
    memory : bytes that reading may take
    monotonic : the daemon's clock, by which a worker that outlives its own timers is ended
    """

    def __init__(
        self,
        count: int = 1,
        seconds: float = SECONDS,
        patience: float = PATIENCE,
        memory: int = MEMORY,
        monotonic: Callable[[], float] = time.monotonic,
    ) -> None:
        self.count = count
        self._seconds = seconds
        self._patience = patience
        self._memory = memory
        self._monotonic = monotonic
        self._workers: list[_Worker] = []
        self._queue: deque[_Task] = deque()
        self._alone: deque[_Task] = deque()  # those over which a worker was lost
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
        return bool(self._queue or self._alone or self._done or any(worker.tasks for worker in self._workers))

    def start(self, jobs: Iterable[ReadJob]) -> None:
        """Put files in line."""
        self._queue += map(_Task, jobs)

    def replies(self, timeout: float) -> list[ReadReply]:
        """What was read since the last call, after at most ``timeout`` seconds of waiting for something."""
        if self.count == 0:
            self._done += [read_file(task.job) for task in self._queue]
            self._queue.clear()
        else:
            self._hand_out()
            self._collect(0.0 if self._done else timeout)
            self._hand_out()
        done, self._done = self._done, []
        return done

    def read_many(self, jobs: Iterable[ReadJob]) -> list[ReadReply]:
        """Read files and wait for all of them; replies come in no particular order."""
        self.start(jobs)
        found: list[ReadReply] = []
        while self.busy:
            found += self.replies(1.0)
        return found

    def wait(self, seconds: float) -> None:
        """Wait until a worker has answered or died, at most so long."""
        wait([worker.connection for worker in self._workers if worker.tasks], seconds)

    def close(self) -> None:
        """End the processes; what they had in hand is forgotten."""
        for worker in self._workers:
            worker.end()
        self._workers.clear()

    def _hand_out(self) -> None:
        while (self._queue or self._alone) and (worker := self._idle()) is not None:
            if self._alone:
                worker.tasks.append(self._alone.popleft())
            else:
                share = -(-len(self._queue) // self.count)
                worker.tasks.extend(self._queue.popleft() for _ in range(min(BATCH, share)))
            worker.deadline = self._monotonic() + self._patience + _GRACE
            try:
                worker.connection.send([task.job for task in worker.tasks])
            except OSError:
                self._lost(worker)

    def _idle(self) -> _Worker | None:
        for worker in self._workers:
            if not worker.tasks:
                return worker
        if len(self._workers) >= self.count:
            return None
        try:
            self._workers.append(_Worker(self._seconds, self._patience, self._memory))
        except OSError as error:
            if not self._workers:
                self._put_off(f"no reader process could be started ({error.strerror}); it is tried again")
            return None
        return self._workers[-1]

    def _put_off(self, why: str) -> None:
        """Answer that everything in line must come again later."""
        self._done += [ReadReply(task.job.key, sentence=why, temporary=True) for task in (*self._alone, *self._queue)]
        self._alone.clear()
        self._queue.clear()

    def _collect(self, timeout: float) -> None:
        at_work = {worker.connection: worker for worker in self._workers if worker.tasks}
        for ready in wait(list(at_work), timeout) if at_work else ():
            self._take(at_work[ready])  # type: ignore[index]
        now = self._monotonic()
        for worker in [each for each in self._workers if each.tasks and now > each.deadline]:
            self._lost(worker, overdue=True)

    def _take(self, worker: _Worker) -> None:
        """The replies that a worker has sent; they come in the order of its tasks."""
        try:
            while worker.tasks and worker.connection.poll():
                reply = worker.connection.recv()
                if reply.key != worker.tasks[0].job.key:
                    raise ValueError
                self._done.append(_blamed(worker.tasks.popleft(), reply))
                worker.deadline = self._monotonic() + self._patience + _GRACE
        except (EOFError, OSError):  # the process is gone
            self._lost(worker)
        except Exception:  # a reader wrote into the connection
            self._lost(worker, garbled=True)

    def _lost(self, worker: _Worker, overdue: bool = False, garbled: bool = False) -> None:
        """A worker died, or was too slow, over the first file that it had in hand; the others go back in line.

        What may be somebody else's doing is tried a second time, alone. A file that is to blame is only looked at, so
        that the reply says which content it was.
        """
        self._workers.remove(worker)
        code = worker.end(0.0 if overdue or garbled else 1.0)
        task = worker.tasks.popleft()
        self._queue.extendleft(reversed(worker.tasks))
        how = f"the reader '{getattr(task.job.how, 'format', 'bench')}'"
        if task.blame:
            self._later(task, task.blame)
        elif overdue or code == -signal.SIGALRM:
            self._later(task, f"{how} did not come to an end within {self._patience:g} s; it is tried again later")
        elif code == -signal.SIGPROF:
            self._blame(task, f"{how} did not come to an end within {self._seconds:g} s of work")
        elif not task.lost_before:
            self._alone.append(replace(task, lost_before=True))
        elif garbled:
            self._blame(task, f"{how} disturbed what its process answers on this file")
        elif code == -signal.SIGKILL:
            self._later(task, f"{how} was ended from outside (is memory short?); it is tried again later")
        else:
            told = f"by {signal.Signals(-code).name}" if code is not None and code < 0 else f"with code {code}"
            self._blame(task, f"{how} ended its process on this file ({told})")

    def _later(self, task: _Task, why: str) -> None:
        self._done.append(ReadReply(task.job.key, sentence=why, temporary=True))

    def _blame(self, task: _Task, why: str) -> None:
        blame = f"{why}; look at the file, or repair the reader"
        self._alone.append(_Task(task.job._replace(how=None), blame=blame))


def _blamed(task: _Task, reply: ReadReply) -> ReadReply:
    return replace(reply, sentence=task.blame) if task.blame and not reply.sentence else reply
