"""Outputs whose series or batch is no more, because the rules give its readings another name now.

What is left of it is kept aside, not deleted, and the flag goes: a script that waits for it would wait for ever, or go
on by a dead pass. While a quoted source is missing nothing is withdrawn: deleting raw data never retracts a result.
"""

from __future__ import annotations

import json
from collections.abc import Callable, Collection, Iterable, Mapping
from dataclasses import dataclass
from typing import Any

from spikeward.daemon.changes import quoted
from spikeward.daemon.disk import Disk
from spikeward.daemon.ledger import EventLog
from spikeward.daemon.names import BOARD, RESULT, SUMMARY, TABLE, VERDICTS, batch_stem, flag_name
from spikeward.rules.records import BatchKey, SeriesKey

Place = tuple[str, str]  # root, output folder
_OWN_BOARD = "folder"


@dataclass(frozen=True, slots=True)
class Orphans:
    """Finds and withdraws such outputs. ``present`` tells whether a quoted reading (series, path, digest) is there."""

    disk: Disk
    ledger: EventLog
    folder_of: Callable[[str, str], str]
    present: Callable[[SeriesKey, str, str], bool]
    clock: Callable[[], str]

    def withdraw(
        self, places: Iterable[Place], series: Collection[SeriesKey], batches: Collection[BatchKey]
    ) -> list[str]:
        """Withdraw what belongs to none of the series and batches that are known.

        Returns
        -------
        the stems that were withdrawn
        """
        gone: list[str] = []
        for root, folder in sorted(set(places)):
            path = self.folder_of(root, folder)
            try:
                names = {entry.name for entry in self.disk.entries(path)}
            except FileNotFoundError:
                continue
            stand = {batch_stem(key) for key in batches if (key.root, key.folder) == (root, folder)} | {_OWN_BOARD}
            for name in sorted(names):
                if not name.endswith(RESULT):
                    continue
                key, result = self._read(f"{path}/{name}", root, folder)
                if key is None or key in series or not self._sources_there(key, result):
                    stand |= {batch_stem(key.batch_key)} if key is not None else set()
                    continue
                stem = name.removesuffix(RESULT)
                self._withdraw_series(path, stem, key, names)
                gone.append(stem)
            for name in sorted(names):
                if name.endswith(BOARD) and name.removesuffix(BOARD) not in stand:
                    self._aside(path, [name, name.removesuffix(BOARD) + TABLE], names)
                    gone.append(name.removesuffix(BOARD))
        return gone

    def _read(self, path: str, root: str, folder: str) -> tuple[SeriesKey | None, Mapping[str, Any]]:
        try:
            result = json.loads(self.disk.read(path))
            fields = result["series"]
            key = SeriesKey(*(fields[name] for name in ("root", "folder", "batch", "role", "sample")))
        except (ValueError, KeyError, TypeError, OSError):
            return None, {}  # a person's file, not a result of ours
        return (key if (key.root, key.folder) == (root, folder) else None), result

    def _sources_there(self, key: SeriesKey, result: Mapping[str, Any]) -> bool:
        try:
            return all(self.present(key, path, digest) for path, _, digest in quoted(result))
        except (KeyError, TypeError):
            return False

    def _withdraw_series(self, path: str, stem: str, key: SeriesKey, names: Collection[str]) -> None:
        """The ledger first; then the flag goes, and what it stood for is kept aside."""
        self.ledger.append(
            {
                "event": "withdrawn",
                "series": [key.root, key.folder, key.batch, key.role, key.sample],
                "at": self.clock(),
            }
        )
        for verdict in VERDICTS:
            if flag_name(stem, verdict) in names:
                self.disk.remove(f"{path}/{flag_name(stem, verdict)}")
        self._aside(path, [stem + RESULT, stem + SUMMARY], names)

    def _aside(self, path: str, wanted: Iterable[str], names: Collection[str]) -> None:
        for name in wanted:
            if name in names:
                number = 1
                while self.disk.exists(f"{path}/{name}.kept-{number}"):
                    number += 1
                self.disk.rename(f"{path}/{name}", f"{path}/{name}.kept-{number}")
        self.disk.sync_folder(path)

