"""Stations run by real processes: a folder with a rule file, `watch` as a child, `sweep` as the reference."""

from __future__ import annotations

import os
import shutil
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import contextmanager, suppress
from pathlib import Path

from spikeward.daemon.tree_digest import tree_digest

COMMAND = (sys.executable, "-m", "spikeward.daemon.cli")
STOPS_WITHIN = 10.0  # s, from SIGTERM to the end of the process
DEADLINE = 90.0  # s


def until(holds: Callable[[], bool], what: str, within: float = DEADLINE) -> None:
    """Look again and again until something holds; fail with ``what`` when it does not in time."""
    end = time.monotonic() + within
    while not holds():
        assert time.monotonic() < end, f"not within {within:.0f} s: {what}"
        time.sleep(0.02)


class Watch:
    """A running `spikeward watch`; its log goes to a file, so that no pipe can fill up."""

    def __init__(self, home: Path, env: Mapping[str, str], umask: int, command: Sequence[str]) -> None:
        self._log = home / "watch.log"
        self._before = self._log.stat().st_size if self._log.exists() else 0
        with self._log.open("ab") as log:
            self.process = subprocess.Popen(
                command, cwd=home, env={**os.environ, **env}, umask=umask, stdout=log, stderr=log,
                stdin=subprocess.DEVNULL,
            )  # fmt: skip

    def log(self) -> str:
        """What it has said so far, and its forerunners in this station."""
        return self._log.read_text(errors="replace")

    def is_up(self) -> bool:
        """Whether it has begun to watch; before that a signal ends it as it ends any program."""
        return b" watching " in self._log.read_bytes()[self._before :]

    def kill(self) -> None:
        """End it as a crash would."""
        self.process.send_signal(signal.SIGKILL)
        self.process.wait(STOPS_WITHIN)

    def stop(self, number: int = signal.SIGTERM) -> int:
        """Ask for an end; the exit code."""
        self.process.send_signal(number)
        try:
            return self.process.wait(STOPS_WITHIN)
        except subprocess.TimeoutExpired:
            raise AssertionError(f"still running {STOPS_WITHIN:.0f} s after signal {number}\n{self.log()}") from None


class Station:
    """A folder with a rule file; ``data`` is the watched folder, ``out`` where its results go."""

    def __init__(self, home: Path, rules: str, out: str = "inbox") -> None:
        self.home = home
        self.data = home / "inbox"
        self.out = home / out
        self.data.mkdir(parents=True)
        self.out.mkdir(exist_ok=True)
        (home / "rules.yaml").write_text(rules, encoding="utf-8")

    def put(self, path: str, content: bytes) -> None:
        """Write a file under a temporary name and rename it into its place."""
        target = self.data / path
        target.parent.mkdir(parents=True, exist_ok=True)
        beside = target.with_name(f"{target.name}.part")
        beside.write_bytes(content)
        beside.replace(target)

    def put_all(self, files: Mapping[str, bytes]) -> None:
        """Write files in the order of the mapping."""
        for path, content in files.items():
            self.put(path, content)

    def digest(self) -> str:
        """The digest of everything published; of nothing where a file was replaced while it was being read."""
        try:
            return tree_digest(str(self.out))
        except FileNotFoundError:
            return ""

    def published(self) -> dict[str, bytes]:
        """Every published file that the digest looks at, for the message of a failed test."""
        found = [*self.out.rglob("*.flag"), *self.out.rglob("*.result.json"), *self.out.rglob("*.results.csv")]
        return {str(path.relative_to(self.out)): path.read_bytes() for path in found}

    def sweep(
        self, *arguments: str, env: Mapping[str, str] | None = None, umask: int = 0o022
    ) -> subprocess.CompletedProcess[str]:
        """Run `spikeward sweep`; it must not end with a traceback or be unable to run."""
        done = subprocess.run(
            [*COMMAND, "sweep", "rules.yaml", *arguments],
            cwd=self.home, env={**os.environ, **(env or {})}, umask=umask, capture_output=True, text=True,
            encoding="utf-8", timeout=DEADLINE, check=False,
        )  # fmt: skip
        assert done.returncode in (0, 1), done.stderr
        return done

    @contextmanager
    def watch(
        self, env: Mapping[str, str] | None = None, umask: int = 0o022, workers: int = 1, program: Sequence[str] = ()
    ) -> Iterator[Watch]:
        """`spikeward watch`, ended at the latest with the context; or a ``program`` of Python that runs it."""
        command = (
            [sys.executable, *program] if program else [*COMMAND, "watch", "rules.yaml", "--workers", str(workers)]
        )
        watch = Watch(self.home, env or {}, umask, command)
        try:
            yield watch
        finally:
            with suppress(ProcessLookupError):
                watch.process.kill()
            watch.process.wait()

    def comes_to(self, other: Station | Reference, watch: Watch) -> None:
        """Wait until what is published equals what stands in another tree; stays so after the watch has ended."""
        try:
            until(lambda: watch.is_up() or watch.process.poll() is not None, "the daemon is up")
            until(lambda: self.digest() == other.digest() or watch.process.poll() is not None, "equal trees")
        except AssertionError:
            raise AssertionError(f"{self.differs_from(other)}\n{watch.log()[-3000:]}") from None
        assert watch.stop() == 0, watch.log()[-3000:]
        self.equals(other)

    def equals(self, other: Station | Reference) -> None:
        """What is published equals what stands in another tree."""
        assert self.digest() == other.digest(), self.differs_from(other)

    def differs_from(self, other: Station | Reference) -> str:
        """Which files differ, for the message of a failed test."""
        mine, theirs = self.published(), other.published()
        lines = [f"only here: {path}" for path in sorted(mine.keys() - theirs.keys())[:10]]
        lines += [f"missing: {path}" for path in sorted(theirs.keys() - mine.keys())[:10]]
        for path in sorted(path for path in mine.keys() & theirs.keys() if mine[path] != theirs[path])[:4]:
            at = next(
                (at for at, (a, b) in enumerate(zip(mine[path], theirs[path], strict=False)) if a != b),
                min(len(mine[path]), len(theirs[path])),
            )
            cut = slice(max(0, at - 150), at + 250)
            lines.append(f"{path} differs at byte {at}:\n  here  {mine[path][cut]!r}\n  there {theirs[path][cut]!r}")
        return "\n".join(lines) or "only summaries differ"


class Reference:
    """What a sweep without any past makes of a tree of files."""

    def __init__(self, station: Station) -> None:
        self._digest = station.digest()
        self._published = station.published()
        self.home = station.home

    def digest(self) -> str:
        """The digest of everything published."""
        return self._digest

    def published(self) -> dict[str, bytes]:
        """Every published file that the digest looks at."""
        return self._published


def reference(home: Path, rules: str, files: Mapping[str, bytes], out: str = "inbox") -> tuple[Reference, Reference]:
    """Fresh sweeps of a tree, before and after ``--close``."""
    station = Station(home, rules, out)
    station.put_all(files)
    station.sweep()
    before = Reference(station)
    station.sweep("--close")
    closed = Reference(station)
    shutil.rmtree(home)
    return before, closed
