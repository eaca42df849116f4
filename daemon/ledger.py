"""What cannot be derived from raw data: closings, lapses, decisions adopted, revisions published. Append-only."""

from __future__ import annotations

import json
import os
from collections.abc import Iterable, Mapping
from typing import Any, Protocol

from spikeward.daemon.disk import FOLDER, Disk, Listed
from spikeward.daemon.ledger_events import DIGEST, read_line, what_is_wrong
from spikeward.daemon.names import VERDICTS, flag_name, shown
from spikeward.rules.outcomes import WAITING


class EventLog(Protocol):
    """What the way of a file needs of a ledger."""

    def append(self, *events: Mapping[str, Any]) -> None:
        """Record events, all or none of them."""

    def read(self) -> list[dict[str, Any]]:
        """All events, oldest first."""


class LedgerDamaged(OSError):
    """No result may rest on the ledger as it is: one sentence for a person.

    An ``OSError``, because a running daemon meets it like any other refusal of a disk: it publishes nothing, says why,
    and goes on once the ledger is mended.
    """

    def __init__(self, path: str, sentence: str) -> None:
        super().__init__()
        self.filename = path
        self.strerror = sentence

    def __str__(self) -> str:
        return str(self.strerror)


class Ledger:
    """JSON lines, each brought to the medium before the call returns: one event, or a list of events of one call.

    A last line that a power cut left torn is cut off when the ledger is read, and ``sentences`` says so. Damage
    anywhere else raises ``LedgerDamaged``: no result may rest on a ledger with a hole. Neither may it on one that was
    changed by somebody else meanwhile, so before each addition the file must look as it was left.
    """

    def __init__(self, disk: Disk, path: str) -> None:
        self.sentences: list[str] = []
        self._disk = disk
        self._path = path
        self._known: bytes | None = None  # the whole ledger, as far as it was recorded
        self._attempt = b""  # what a refused addition may have left behind it, whole or in part
        self._left: Listed | None = None  # how the file looked when it was last known to be right

    def append(self, *events: Mapping[str, Any]) -> None:
        """Record events, all or none.

        Raises
        ------
        LedgerDamaged : the file was changed by somebody else
        OSError : the disk refuses; then none counts, and a repetition records them once
        """
        said = json.dumps(
            events[0] if len(events) == 1 else events, separators=(",", ":"), sort_keys=True, allow_nan=False
        )
        line = said.encode("ascii") + b"\n"
        if self._known is None:
            self.read()
        known = self._as_left()
        self._attempt = line
        self._disk.append(self._path, line)
        if not known:
            self._disk.sync_folder(os.path.dirname(self._path))
        self._known, self._attempt = known + line, b""
        self._left = self._disk.look(self._path)

    def read(self) -> list[dict[str, Any]]:
        """All events, oldest first; leaves the ledger ending with a whole line."""
        data = self._disk.read(self._path) if self._disk.exists(self._path) else b""
        events, end = whole_events(data, self._path)
        if end == len(data) and data and not data.endswith(b"\n"):
            self._disk.append(self._path, b"\n")  # whole but for its end, or saved so by an editor
            data += b"\n"
        elif data[end:]:
            self._disk.truncate(self._path, end)
            self.sentences.append(_TORN.format(self._path, len(data) - end))
            data = data[:end]
        self._known, self._attempt = data, b""
        self._left = self._disk.look(self._path)
        return events

    def _as_left(self) -> bytes:
        """What the ledger holds, after making sure that the file still holds just that."""
        known = self._known or b""
        look = self._disk.look(self._path)
        if look == self._left and (look is None or look.size == len(known)):
            return known
        if look is None:
            self._put_back(known)
        else:
            data = self._disk.read(self._path)
            if self._attempt and data.startswith(known) and self._attempt.startswith(data[len(known) :]):
                self._disk.truncate(self._path, len(known))
            elif data != known:
                raise LedgerDamaged(self._path, self._changed(known))
        self._left = self._disk.look(self._path)
        return known

    def _put_back(self, known: bytes) -> None:
        """The file was deleted while it was in use; all that it held is still known."""
        self._disk.mkdirs(os.path.dirname(self._path))
        if known:
            self._disk.write_atomic(self._path, known)
            self.sentences.append(
                f"The ledger {self._path} was deleted while it was in use; it was written again, nothing is lost."
            )

    def _changed(self, known: bytes) -> str:
        copy = f"{self._path}.as-recorded"
        self._disk.write_atomic(copy, known)
        return (
            f"The ledger {self._path} was changed by somebody else while it was in use, so nothing is published. What "
            f"was recorded is kept as {copy}: put that in its place"
        )


_TORN = (
    "The last line of {} was torn, as a power cut leaves it, and was cut off ({} bytes). If a power cut did it, "
    "nothing that the line recorded had been acted on; if somebody changed the file, put back its last good copy."
)


def whole_events(data: bytes, path: str) -> tuple[list[dict[str, Any]], int]:
    """The events of a ledger, and the number of bytes that its whole lines take; what follows them was torn.

    Raises
    ------
    LedgerDamaged : a line that is not the last one cannot be read, or a line can be read but not be used
    """
    lines = data.split(b"\n")
    unfinished = lines.pop()
    events: list[dict[str, Any]] = []
    end = 0
    for number, line in enumerate(lines, start=1):
        found = _events(line, path, number)
        if found is None:
            if number < len(lines) or unfinished:
                raise LedgerDamaged(path, _hole(path, number, "cannot be read"))
            break
        events += found
        end += len(line) + 1
    if unfinished and (found := _events(unfinished, path, len(lines) + 1)) is not None:
        return events + found, len(data)
    return events, end


def history_lost(disk: Disk, path: str, folders: Iterable[str]) -> list[str]:
    """The sentence that the ledger is gone though results stand in or below the output folders; else nothing."""
    if disk.exists(path):
        return []
    found = next((hit for folder in sorted(folders) if (hit := _result_below(disk, folder))), None)
    if found is None:
        return []
    return [
        f"There is no ledger {shown(path)}, though results stand beside the data ({shown(found)}): closings, adopted "
        "decisions and the history of revisions are lost, and batches count as open. If you have a copy of the ledger, "
        "stop, put it there and start again."
    ]


def _result_below(disk: Disk, folder: str) -> str | None:
    """A flag that was published with a revision: one that says more than that something is waited for."""
    endings = tuple(flag_name("", verdict) for verdict in VERDICTS if verdict != WAITING)
    folders = [folder]
    while folders:
        try:
            entries = disk.entries(here := folders.pop())
        except OSError:
            continue
        for entry in entries:
            if entry.kind == FOLDER:
                folders.append(os.path.join(here, entry.name))
            elif entry.name.endswith(endings):
                return os.path.join(here, entry.name)
    return None


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
        if not DIGEST.fullmatch(digest):
            raise ValueError(f"not a digest: {digest!r}")
        return os.path.join(self._folder, f"{digest}.yaml")


def _events(line: bytes, path: str, number: int) -> list[dict[str, Any]] | None:
    events = read_line(line)
    for event in events or ():
        if wrong := what_is_wrong(event):
            raise LedgerDamaged(path, _hole(path, number, f"cannot be used: {wrong}"))
    return events


def _hole(path: str, number: int, how: str) -> str:
    return (
        f"Line {number} of the ledger {path} {how}. The ledger is the only record of closings and decisions: "
        "put back its last good copy, or take out the line if you know what it said."
    )
