"""One daemon per state folder, and one per data folder: locks of the operating system, which end with their process."""

from __future__ import annotations

import errno
import fcntl
import os
from collections.abc import Iterable
from dataclasses import dataclass

from spikeward.daemon.names import STATION, shown

_REFUSED = (errno.EACCES, errno.EROFS, errno.EPERM, errno.ENOLCK, errno.ENOTSUP, errno.ENOSYS, errno.EINVAL)
_LONGEST = 4096  # bytes of another daemon's identity that are quoted


class Locked(Exception):
    """Another daemon holds the lock: one sentence that says which."""


@dataclass(frozen=True, slots=True)
class Identity:
    """Who holds a lock, in words for the one who finds it taken. ``since`` is a time of day with its zone."""

    pid: int
    host: str
    command: str
    since: str

    def text(self) -> str:
        """Identity as it stands in the lock file."""
        return (
            f"pid: {self.pid}\nhost: {shown(self.host)}\ncommand: {shown(self.command)}\nsince: {shown(self.since)}\n"
        )


class Held:
    """A lock that is held until it is released or the process ends."""

    def __init__(self, path: str, handle: int) -> None:
        self.path = path
        self._handle = handle

    def lost(self) -> bool:
        """Whether somebody deleted or replaced the lock file, so that a second daemon could take another one."""
        return not _same(self.path, self._handle)

    def release(self) -> None:
        """Take the file away and let go; a second call does nothing."""
        if self._handle < 0:
            return
        if not self.lost():
            os.unlink(self.path)
        os.close(self._handle)
        self._handle = -1


def acquire(path: str, identity: Identity, what: str) -> Held:
    """Take a lock, also one that a dead process left.

    Parameters
    ----------
    path : the lock file; its folder exists
    what : what is locked, for the sentence ("the state folder X")

    Raises
    ------
    Locked : another process holds it
    OSError : the file cannot be opened or locked
    """
    while True:
        handle = os.open(path, os.O_RDWR | os.O_CREAT | os.O_NOFOLLOW | os.O_CLOEXEC, 0o666)
        try:
            fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
            if _same(path, handle):  # else its holder took it away between the two calls
                os.ftruncate(handle, 0)
                os.write(handle, identity.text().encode("utf-8", "backslashreplace"))
                return Held(path, handle)
        except BlockingIOError:
            holder = os.read(handle, _LONGEST)
            os.close(handle)
            raise Locked(_taken(what, holder)) from None
        except BaseException:
            os.close(handle)
            raise
        os.close(handle)


def acquire_stations(folders: Iterable[str], identity: Identity) -> tuple[list[Held], list[str]]:
    """Lock each data folder (watched folders and output roots), so that two stations do not publish into one.

    Returns
    -------
    the locks, and a sentence for each folder that cannot be locked because nothing can be written or locked there

    Raises
    ------
    Locked : another daemon watches one of them; none of the locks is held then
    """
    held: list[Held] = []
    warnings = []
    try:
        for folder in sorted({os.path.realpath(each) for each in folders}):
            try:
                held.append(acquire(os.path.join(folder, STATION), identity, f"the folder {shown(folder)}"))
            except FileNotFoundError:
                warnings.append(f"The folder {shown(folder)} is not there and could not be locked.")
            except OSError as error:
                if error.errno not in _REFUSED:
                    raise
                warnings.append(
                    f"The folder {shown(folder)} could not be locked ({error.strerror}): nothing keeps a second "
                    "station from watching it. See to it that only one does."
                )
    except BaseException:
        for each in held:
            each.release()
        raise
    return held, warnings


def _same(path: str, handle: int) -> bool:
    try:
        named = os.lstat(path)
    except OSError:
        return False
    open_one = os.fstat(handle)
    return (named.st_dev, named.st_ino) == (open_one.st_dev, open_one.st_ino)


def _taken(what: str, holder: bytes) -> str:
    lines = holder.decode("utf-8", "replace").splitlines()
    who = ", ".join(shown(line) for line in lines if line.strip()) or "no name given"
    return f"Another spikeward already works on {what} ({who}). Stop that one, or give this one folders of its own."
