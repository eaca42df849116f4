"""One daemon per state folder, and one per data folder: locks of the operating system, which end with their process."""

from __future__ import annotations

import errno
import fcntl
import itertools
import os
from collections.abc import Collection, Iterable, Iterator
from contextlib import suppress
from dataclasses import dataclass

from spikeward.daemon.names import STATION, shown

_REFUSED = (errno.EACCES, errno.EROFS, errno.EPERM, errno.ENOLCK, errno.ENOTSUP, errno.ENOSYS, errno.EINVAL)
_LEVELS_BELOW = 2
_MOST_LOOKED_AT = 2000  # folders
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

    def __init__(self, path: str, handle: int, identity: Identity, what: str) -> None:
        self.path = path
        self._handle = handle
        self._identity = identity
        self._what = what

    def lost(self) -> bool:
        """Whether somebody deleted or replaced the lock file, so that a second daemon could take another one."""
        return not _same(self.path, self._handle)

    def take_again(self) -> None:
        """Take a lock that was lost, under the same name.

        Raises
        ------
        Locked : another process has it meanwhile
        OSError : the file cannot be opened or locked
        """
        again = acquire(self.path, self._identity, self._what)
        os.close(self._handle)
        self._handle = again._handle

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
                return Held(path, handle, identity, what)
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

    A lock that another daemon holds on a folder above, or on one a few levels below, is found too.

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
        own = sorted({os.path.realpath(each) for each in folders})
        for folder in own:
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
        for folder in own:  # after taking its own: of two that start at the same time at least one finds the other
            _refuse_around(folder, own)
    except BaseException:
        for each in held:
            each.release()
        raise
    return held, warnings


def _refuse_around(folder: str, own: Collection[str]) -> None:
    """Look for other stations that hold a folder above or below.

    Raises
    ------
    Locked : there is one
    """
    for other in itertools.islice(itertools.chain(_above(folder), _below(folder, _LEVELS_BELOW)), _MOST_LOOKED_AT):
        holder = None if other in own else _holder(os.path.join(other, STATION))
        if holder is not None:
            raise Locked(_taken(f"the folder {shown(other)}, which overlaps with {shown(folder)}", holder))


def _above(folder: str) -> Iterator[str]:
    while folder != os.path.dirname(folder):
        folder = os.path.dirname(folder)
        yield folder


def _below(folder: str, levels: int) -> Iterator[str]:
    """Level by level, so that a bound on the number leaves out the deepest; links are not followed."""
    level = [folder]
    for _ in range(levels):
        found = []
        for each in level:
            with suppress(OSError), os.scandir(each) as scan:
                found += [entry.path for entry in scan if entry.is_dir(follow_symlinks=False)]
            if len(found) > _MOST_LOOKED_AT:
                break
        yield from found
        level = found


def _holder(path: str) -> bytes | None:
    """What the holder of a lock says of itself, None where nobody holds it or nothing can be found out."""
    try:
        handle = os.open(path, os.O_RDONLY | os.O_NOFOLLOW | os.O_NONBLOCK | os.O_CLOEXEC)
    except OSError:
        return None
    try:
        fcntl.flock(handle, fcntl.LOCK_SH | fcntl.LOCK_NB)
    except BlockingIOError:
        return os.read(handle, _LONGEST)
    except OSError:
        return None
    finally:
        os.close(handle)
    return None


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
