"""Outputs beside the data: whole or not at all, the flag last, and exactly one flag at every instant.

``known`` holds the SHA-256 digests of everything that was published, or was about to be, under the names in question.
Bytes on the disk that are neither known nor the new ones are a person's edit and are kept aside. Without ``known``
(the journal was lost) nobody can tell, and the file is replaced. What is no regular file (a folder, a link, a pipe) is
never ours: it is kept aside by its name alone, without being opened or followed.
"""

from __future__ import annotations

import hashlib
import itertools
import os
from collections.abc import Collection, Mapping
from dataclasses import dataclass

from spikeward.daemon.disk import FILE, Disk
from spikeward.daemon.names import VERDICTS, flag_name, unread_name


@dataclass(frozen=True, slots=True)
class Published:
    """What a publication did: digests of all its files by name, the names written, and edits kept aside (old, new)."""

    files: Mapping[str, str]
    written: tuple[str, ...]
    kept: tuple[tuple[str, str], ...]


def digests(outputs: Mapping[str, bytes]) -> dict[str, str]:
    """SHA-256 of each output, to be recorded *before* it is published."""
    return {name: _digest(data) for name, data in outputs.items()}


def publish(
    disk: Disk,
    folder: str,
    stem: str,
    outputs: Mapping[str, bytes],
    flag: bytes,
    verdict: str,
    known: Collection[str] | None = None,
) -> Published:
    """Publish one series: its files by suffix, then the flag that names the verdict.

    Raises ``OSError`` as the system does; a later call with the same arguments finishes what was begun.
    """
    work = _Work(disk, folder, known)
    for suffix in sorted(outputs):  # the result before the summary
        work.put(stem + suffix, outputs[suffix])
    work.sync()
    _raise_flag(work, stem, flag, verdict)
    return work.done()


def publish_files(
    disk: Disk, folder: str, outputs: Mapping[str, bytes], known: Collection[str] | None = None
) -> Published:
    """Publish files that have no verdict (board, table, the flag beside a file that could not be read), by name."""
    work = _Work(disk, folder, known)
    for name in sorted(outputs):
        work.put(name, outputs[name])
    work.sync()
    return work.done()


def withdraw_unread(disk: Disk, folder: str, file_name: str, known: Collection[str] | None = None) -> Published | None:
    """The file can be read after all, or is gone; None where there was no flag to take away."""
    work = _Work(disk, folder, known)
    name = unread_name(file_name)
    if not disk.exists(os.path.join(folder, name)):
        return None
    if work.stands(name):
        work.drop(name)
    work.sync()
    return work.done()


def _raise_flag(work: _Work, stem: str, flag: bytes, verdict: str) -> None:
    """Old content overwritten, then the file renamed: a listing never shows none or two."""
    target = flag_name(stem, verdict)
    standing = [name for name in (flag_name(stem, each) for each in VERDICTS) if work.stands(name)]
    carrier = target if target in standing or not standing else standing[0]
    work.put(carrier, flag)
    for name in standing:
        if name != carrier:
            work.drop(name)
    work.sync()
    if carrier != target:
        work.rename(carrier, target)
        work.sync()
    work.files.pop(carrier, None)
    work.files[target] = _digest(flag)


class _Work:
    """One publication into one folder."""

    def __init__(self, disk: Disk, folder: str, known: Collection[str] | None) -> None:
        self._disk = disk
        self._folder = folder
        self._known = known
        self.files: dict[str, str] = {}
        self._written: list[str] = []
        self._kept: list[tuple[str, str]] = []
        self._unsynced = False

    def stands(self, name: str) -> bool:
        """Whether a regular file has the name; anything else that has it is renamed."""
        found = self._disk.look(self._path(name))
        if found is not None and found.kind != FILE:
            aside = self._free(name)
            self._disk.rename(self._path(name), self._path(aside))
            self._kept.append((name, aside))
            self._unsynced = True
            return False
        return found is not None

    def put(self, name: str, data: bytes) -> None:
        """Bytes that stand there already are not written again."""
        self.files[name] = _digest(data)
        if self.stands(name):
            standing = self._disk.read(self._path(name))
            if standing == data:
                return
            self._keep(name, standing)
        self._disk.replace(self._path(name), data)
        self._written.append(name)
        self._unsynced = True

    def drop(self, name: str) -> None:
        self._keep(name, self._disk.read(self._path(name)))
        self._disk.remove(self._path(name))
        self._unsynced = True

    def rename(self, name: str, target: str) -> None:
        self._disk.rename(self._path(name), self._path(target))
        self._written = [target if each == name else each for each in self._written]
        self._unsynced = True

    def sync(self) -> None:
        if self._unsynced:
            self._disk.sync_folder(self._folder)
            self._unsynced = False

    def done(self) -> Published:
        return Published(dict(self.files), tuple(self._written), tuple(self._kept))

    def _keep(self, name: str, standing: bytes) -> None:
        """Copy a person's edit aside; a copy, so that the name itself is never without a file."""
        if self._known is None or _digest(standing) in self._known:
            return
        for number in itertools.count(1):
            aside = self._path(f"{name}.kept-{number}")
            found = self._disk.look(aside)
            if found is None:
                self._disk.write_atomic(aside, standing)
                self._kept.append((name, f"{name}.kept-{number}"))
                return
            if found.kind == FILE and self._disk.read(aside) == standing:
                return  # kept by a run that was cut short

    def _free(self, name: str) -> str:
        """The first name for keeping something aside that nothing has."""
        names = (f"{name}.kept-{number}" for number in itertools.count(1))
        return next(aside for aside in names if not self._disk.exists(self._path(aside)))

    def _path(self, name: str) -> str:
        return os.path.join(self._folder, name)


def _digest(data: bytes) -> str:
    return hashlib.sha256(data).hexdigest()
