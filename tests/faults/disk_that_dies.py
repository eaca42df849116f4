"""A disk in memory that dies at its k-th step, and that forgets what was not synced when the power is cut.

A step is what a kernel would do in one piece: a name created, half of the bytes written, the rest written, synced, a
name changed. ``on_step`` is called after every step: what it sees is what another program could see at that instant.
"""

from __future__ import annotations

import errno
import os
from collections.abc import Callable
from dataclasses import dataclass, field

from spikeward.daemon.disk import FILE, FOLDER, Disk, Listed


class Died(BaseException):
    """The process was killed; no handler of errors may take this for an error of the disk."""


@dataclass
class Content:
    """A file's bytes as programs see them, and as the medium holds them."""

    data: bytes
    on_medium: bytes
    inode: int


@dataclass
class NameChange:
    """A change of names that is not on the medium yet: ``content`` None takes the name away."""

    folder: str
    changes: dict[str, Content | None]


@dataclass
class DyingDisk(Disk):
    """Dies before step ``dies_at`` (counted from 1; 0: never). Folders are on the medium as soon as they are made."""

    dies_at: int = 0
    on_step: Callable[[], None] = lambda: None
    steps: int = 0
    names: dict[str, Content] = field(default_factory=dict)
    names_on_medium: dict[str, Content] = field(default_factory=dict)
    unsynced: list[NameChange] = field(default_factory=list)
    folders: set[str] = field(default_factory=lambda: {"/"})
    inodes: int = 0

    # ---- what the daemon uses ------------------------------------------------------------------------------------

    def entries(self, folder: str, skip: Callable[[str], bool] = lambda name: False) -> list[Listed]:
        if folder not in self.folders:
            raise FileNotFoundError(errno.ENOENT, os.strerror(errno.ENOENT), folder)
        paths = [each for each in [*self.names, *self.folders] if os.path.dirname(each) == folder and each != folder]
        return [found for path in paths if not skip(os.path.basename(path)) and (found := self.look(path))]

    def look(self, path: str) -> Listed | None:
        if path in self.folders:
            return Listed(os.path.basename(path), FOLDER, 0, 0, hash(path))
        content = self.names.get(path)
        return content and Listed(os.path.basename(path), FILE, len(content.data), 0, content.inode)

    def read(self, path: str, at_most: int | None = None) -> bytes:
        if path not in self.names:
            raise FileNotFoundError(errno.ENOENT, os.strerror(errno.ENOENT), path)
        return self.names[path].data

    def write(self, path: str, data: bytes) -> None:
        if path in self.names:
            self.remove(path)
        content = self._create(path)
        self._fill(content, data)

    def append(self, path: str, data: bytes) -> None:
        content = self.names.get(path) or self._create(path)
        self._fill(content, content.data + data)

    def truncate(self, path: str, size: int) -> None:
        content = self.names[path]
        self._step()
        content.data = content.data[:size]
        self.on_step()
        self._step()
        content.on_medium = content.data

    def rename(self, source: str, target: str) -> None:
        self._change(source, {source: None, target: self.names[source]})

    def remove(self, path: str) -> None:
        self._change(path, {path: None})

    def sync_folder(self, folder: str) -> None:
        self._step()
        for change in [each for each in self.unsynced if each.folder == folder]:
            self._apply(change.changes, self.names_on_medium)
            self.unsynced.remove(change)

    def mkdirs(self, folder: str) -> None:
        while folder not in self.folders:
            self.folders.add(folder)
            folder = os.path.dirname(folder)

    # ---- what befalls it -----------------------------------------------------------------------------------------

    def restart(self) -> None:
        """The killed process is started again; what it had written is there."""
        self.dies_at = self.steps = 0

    def cut_power(self, survives: Callable[[int], bool], torn: bool) -> None:
        """Forget what was not synced, save those changes of names (by number) that reached the medium all the same.

        ``torn``: half of the unsynced bytes reached the medium, otherwise none.
        """
        for number, change in enumerate(self.unsynced):
            if survives(number):
                self._apply(change.changes, self.names_on_medium)
        self.unsynced = []
        self.names = dict(self.names_on_medium)
        for content in self.names.values():
            half = content.data[: (len(content.on_medium) + len(content.data)) // 2]
            content.data = content.on_medium = half if torn and content.data != content.on_medium else content.on_medium
        self.restart()

    def tree(self) -> dict[str, bytes]:
        """Everything there is, as programs see it."""
        return {path: content.data for path, content in self.names.items()}

    # ---- steps ---------------------------------------------------------------------------------------------------

    def _step(self) -> None:
        self.steps += 1
        if self.dies_at and self.steps >= self.dies_at:
            raise Died

    def _create(self, path: str) -> Content:
        if os.path.dirname(path) not in self.folders:
            raise FileNotFoundError(errno.ENOENT, os.strerror(errno.ENOENT), path)
        self.inodes += 1
        content = Content(b"", b"", self.inodes)
        self._change(path, {path: content})
        return content

    def _fill(self, content: Content, data: bytes) -> None:
        for part in (data[: (len(content.data) + len(data)) // 2], data):
            self._step()
            content.data = part
            self.on_step()
        self._step()
        content.on_medium = content.data

    def _change(self, path: str, changes: dict[str, Content | None]) -> None:
        self._step()
        self._apply(changes, self.names)
        self.unsynced.append(NameChange(os.path.dirname(path), changes))
        self.on_step()

    @staticmethod
    def _apply(changes: dict[str, Content | None], names: dict[str, Content]) -> None:
        for path, content in changes.items():
            if content is None:
                names.pop(path, None)
            else:
                names[path] = content
