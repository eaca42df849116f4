"""What cannot be derived from raw data: closings, lapses, decisions adopted, revisions published. Append-only."""

from __future__ import annotations

import json
import os
import re
from collections.abc import Mapping
from typing import Any, Protocol

from spikeward.daemon.disk import Disk

_DIGEST = re.compile(r"[0-9a-f]{8,64}")


class EventLog(Protocol):
    """What the way of a file needs of a ledger."""

    def append(self, *events: Mapping[str, Any]) -> None:
        """Record events, all or none of them."""

    def read(self) -> list[dict[str, Any]]:
        """All events, oldest first."""


class LedgerDamaged(Exception):
    """A line in the middle of the ledger cannot be read: one sentence for a person."""


class Ledger:
    """JSON lines, each brought to the medium before the call returns: one event, or a list of events of one call.

    A last line that a power cut left torn is cut off when the ledger is read, and ``sentences`` says so. Damage
    anywhere else raises ``LedgerDamaged``: no result may rest on a ledger with a hole.
    """

    def __init__(self, disk: Disk, path: str) -> None:
        self.sentences: list[str] = []
        self._disk = disk
        self._path = path
        self._sound = False

    def append(self, *events: Mapping[str, Any]) -> None:
        """Record events, all or none. Raises ``OSError``; then none counts, and a repetition records them once."""
        line = json.dumps(
            events[0] if len(events) == 1 else events, separators=(",", ":"), sort_keys=True, allow_nan=False
        )
        if not self._sound:
            self._mend()
        is_new = not self._disk.exists(self._path)
        self._sound = False  # until the write is known to be whole
        self._disk.append(self._path, line.encode("ascii") + b"\n")
        if is_new:
            self._disk.sync_folder(os.path.dirname(self._path))
        self._sound = True

    def read(self) -> list[dict[str, Any]]:
        """All events, oldest first."""
        return self._mend()

    def _mend(self) -> list[dict[str, Any]]:
        """Read the ledger and leave it ending with a whole line."""
        data = self._disk.read(self._path) if self._disk.exists(self._path) else b""
        events, end = whole_events(data, self._path)
        if end == len(data) and data and not data.endswith(b"\n"):
            self._disk.append(self._path, b"\n")  # whole but for its end, or saved so by an editor
        elif data[end:]:
            self._disk.truncate(self._path, end)
            self.sentences.append(
                f"The last line of {self._path} was torn, as a power cut leaves it, and was cut off ({len(data) - end} "
                f"bytes). What it recorded had not been acted on."
            )
        self._sound = True
        return events


def whole_events(data: bytes, path: str) -> tuple[list[dict[str, Any]], int]:
    """The events of a ledger, and the number of bytes that its whole lines take; what follows them was torn.

    Raises
    ------
    LedgerDamaged : a line that is not the last one cannot be read
    """
    lines = data.split(b"\n")
    unfinished = lines.pop()
    events: list[dict[str, Any]] = []
    end = 0
    for number, line in enumerate(lines, start=1):
        found = _events(line)
        if found is None:
            if number < len(lines) or unfinished:
                raise LedgerDamaged(_hole(path, number))
            break
        events += found
        end += len(line) + 1
    if unfinished and (found := _events(unfinished)) is not None:
        return events + found, len(data)
    return events, end


class RuleTexts:
    """The texts of rule files by digest, so that a closed batch can always be solved again under its own rules."""

    def __init__(self, disk: Disk, folder: str) -> None:
        self._disk = disk
        self._folder = folder

    def keep(self, digest: str, text: str) -> None:
        """Keep a text; one that is kept already is not written again."""
        path = self._path(digest)
        data = text.encode("utf-8")
        if self._disk.exists(path) and self._disk.read(path) == data:
            return
        self._disk.mkdirs(self._folder)
        self._disk.write_atomic(path, data)

    def get(self, digest: str) -> str | None:
        """The text with this digest, or None where it was never kept."""
        path = self._path(digest)
        return self._disk.read(path).decode("utf-8") if self._disk.exists(path) else None

    def _path(self, digest: str) -> str:
        if not _DIGEST.fullmatch(digest):
            raise ValueError(f"not a digest: {digest!r}")
        return os.path.join(self._folder, f"{digest}.yaml")


def _events(line: bytes) -> list[dict[str, Any]] | None:
    try:
        found = json.loads(line)
    except ValueError:
        return None
    events = found if isinstance(found, list) else [found]
    return events if all(isinstance(each, dict) for each in events) else None


def _hole(path: str, number: int) -> str:
    return (
        f"Line {number} of the ledger {path} cannot be read. The ledger is the only record of closings and decisions: "
        "put back its last good copy, or take out the line if you know what it said."
    )
