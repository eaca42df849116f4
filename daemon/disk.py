"""The disk as the daemon sees it: a few primitives, passed in, so that a test can let the disk die between any two.

Paths are text; names that are not valid UTF-8 carry their bytes as surrogates (the file system's own escape).
"""

from __future__ import annotations

import errno
import os
import stat
from collections.abc import Callable
from typing import NamedTuple, Protocol

FILE, FOLDER, LINK, OTHER = "file", "folder", "link", "other"
TEMPORARY = ".spikeward-tmp-"
_OF_ONE_NAME = frozenset(
    {
        errno.EACCES, errno.EBUSY, errno.EEXIST, errno.EINVAL, errno.EISDIR, errno.ELOOP, errno.ENAMETOOLONG,
        errno.ENOENT, errno.ENOTDIR, errno.ENOTEMPTY, errno.ENXIO, errno.EPERM, errno.ETXTBSY,
    }
)  # fmt: skip


class Listed(NamedTuple):
    """One entry of a folder; ``kind`` is file, folder, link or other (FIFO, socket, device). Size in bytes."""

    name: str
    kind: str
    size: int
    mtime_ns: int
    inode: int


def concerns_one_name(error: OSError) -> bool:
    """Whether a refusal is about the one file or folder it names, not about the whole disk, a share or the journal."""
    return error.errno in _OF_ONE_NAME


def temporary(path: str) -> str:
    """The hidden name beside ``path`` under which its next content is written; the same after every restart."""
    folder, name = os.path.split(path)
    return os.path.join(folder, TEMPORARY + name)


class Disk(Protocol):
    """What publishing, the ledger and the survey need of a disk. Every method raises ``OSError`` as the system does."""

    def entries(self, folder: str, skip: Callable[[str], bool] = ...) -> list[Listed]:
        """What a folder holds, in no particular order, without the names that ``skip`` takes; links not followed."""

    def look(self, path: str) -> Listed | None:
        """One entry, or None where there is none; a link is not followed."""

    def read(self, path: str, at_most: int | None = None) -> bytes:
        """A regular file's content; refuses links, FIFOs and devices, and files above ``at_most`` bytes (EFBIG)."""

    def write(self, path: str, data: bytes) -> None:
        """Create a file anew with this content and bring the content (not its name) to the medium."""

    def append(self, path: str, data: bytes) -> None:
        """Add to the end of a file, which is created where it is missing, and bring the content to the medium."""

    def truncate(self, path: str, size: int) -> None:
        """Cut a file to ``size`` bytes and bring that to the medium."""

    def rename(self, source: str, target: str) -> None:
        """Give a file another name in one step, replacing what had it."""

    def remove(self, path: str) -> None:
        """Remove a file."""

    def sync_folder(self, folder: str) -> None:
        """Bring the names in a folder to the medium."""

    def mkdirs(self, folder: str) -> None:
        """Create a folder and those above it that are missing."""

    def exists(self, path: str) -> bool:
        """Whether the path names anything."""
        return self.look(path) is not None

    def replace(self, path: str, data: bytes) -> None:
        """Give a file new content so that every reader finds the old or the new one whole.

        The name is on the medium only after ``sync_folder``.
        """
        beside = temporary(path)
        try:
            self.write(beside, data)
            self.rename(beside, path)
        except OSError:
            self._tidy(beside)
            raise

    def write_atomic(self, path: str, data: bytes) -> None:
        """``replace``, and the name is on the medium too."""
        self.replace(path, data)
        self.sync_folder(os.path.dirname(path))

    def _tidy(self, beside: str) -> None:
        """A full disk gets its room back; where even that fails, the first error is the one to report."""
        try:
            if self.exists(beside):
                self.remove(beside)
        except OSError:
            pass


def _nothing(name: str) -> bool:
    return False


class RealDisk(Disk):
    """The machine's own disk."""

    def entries(self, folder: str, skip: Callable[[str], bool] = _nothing) -> list[Listed]:
        """See ``Disk``; an entry that vanishes while it is being listed is left out."""
        found = []
        with os.scandir(folder) as scan:
            for entry in scan:
                if skip(entry.name):
                    continue
                try:
                    found.append(_listed(entry.name, entry.stat(follow_symlinks=False)))
                except FileNotFoundError:
                    continue
        return found

    def look(self, path: str) -> Listed | None:
        """See ``Disk``."""
        try:
            return _listed(os.path.basename(path), os.lstat(path))
        except (FileNotFoundError, NotADirectoryError):
            return None

    def read(self, path: str, at_most: int | None = None) -> bytes:
        """See ``Disk``; never waits for a FIFO's other end."""
        handle = os.open(path, os.O_RDONLY | os.O_NOFOLLOW | os.O_NONBLOCK | os.O_CLOEXEC)
        mode = os.fstat(handle).st_mode
        if not stat.S_ISREG(mode):  # asked before it is wrapped, which would lose the path
            os.close(handle)
            if stat.S_ISDIR(mode):
                raise OSError(errno.EISDIR, os.strerror(errno.EISDIR), path)
            raise OSError(errno.EINVAL, "not a regular file", path)
        with open(handle, "rb") as file:
            data = file.read() if at_most is None else file.read(at_most + 1)
        if at_most is not None and len(data) > at_most:
            raise OSError(errno.EFBIG, os.strerror(errno.EFBIG), path)
        return data

    def write(self, path: str, data: bytes) -> None:
        """See ``Disk``; what stands under the name is unlinked first, so that a link there is never written through."""
        flags = os.O_WRONLY | os.O_CREAT | os.O_EXCL | os.O_CLOEXEC
        try:
            handle = os.open(path, flags, 0o666)
        except FileExistsError:
            os.unlink(path)
            handle = os.open(path, flags, 0o666)
        _write_and_close(handle, data)

    def append(self, path: str, data: bytes) -> None:
        """See ``Disk``."""
        flags = os.O_WRONLY | os.O_CREAT | os.O_APPEND | os.O_NOFOLLOW | os.O_CLOEXEC
        _write_and_close(os.open(path, flags, 0o666), data)

    def truncate(self, path: str, size: int) -> None:
        """See ``Disk``."""
        handle = os.open(path, os.O_WRONLY | os.O_NOFOLLOW | os.O_CLOEXEC)
        try:
            os.ftruncate(handle, size)
            os.fsync(handle)
        finally:
            os.close(handle)

    def rename(self, source: str, target: str) -> None:
        """See ``Disk``."""
        os.replace(source, target)

    def remove(self, path: str) -> None:
        """See ``Disk``."""
        os.unlink(path)

    def sync_folder(self, folder: str) -> None:
        """See ``Disk``; some network file systems know no syncing of folders, which is no reason to stop."""
        handle = os.open(folder or ".", os.O_RDONLY | os.O_DIRECTORY | os.O_CLOEXEC)
        try:
            os.fsync(handle)
        except OSError as error:
            if error.errno not in (errno.EINVAL, errno.ENOTSUP):
                raise
        finally:
            os.close(handle)

    def mkdirs(self, folder: str) -> None:
        """See ``Disk``."""
        missing = []
        while folder and not os.path.isdir(folder):
            missing.append(folder)
            folder = os.path.dirname(folder)
        for one in reversed(missing):
            os.makedirs(one, exist_ok=True)
            self.sync_folder(os.path.dirname(one))


def _listed(name: str, found: os.stat_result) -> Listed:
    mode = found.st_mode
    if stat.S_ISREG(mode):
        kind = FILE
    elif stat.S_ISDIR(mode):
        kind = FOLDER
    else:
        kind = LINK if stat.S_ISLNK(mode) else OTHER
    return Listed(name, kind, found.st_size, found.st_mtime_ns, found.st_ino)


def _write_and_close(handle: int, data: bytes) -> None:
    try:
        left = memoryview(data)
        while left:
            left = left[os.write(handle, left) :]
        os.fsync(handle)
    finally:
        os.close(handle)
