"""Outputs whose series or batch is no more, because the rules give its readings another name now.

What is left of it is kept aside, not deleted, and the flag goes: a script that waits for it would wait for ever, or go
on by a dead pass. While a quoted source is missing nothing is withdrawn: deleting raw data never retracts a result.
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Iterable, Iterator, Mapping
from contextlib import suppress
from dataclasses import dataclass
from typing import Any

from spikeward.daemon.changes import quoted
from spikeward.daemon.disk import FILE, Disk
from spikeward.daemon.earlier import earlier_result
from spikeward.daemon.ledger import EventLog
from spikeward.daemon.names import BOARD, RESULT, SUMMARY, TABLE, VERDICTS, batch_stem, flag_name
from spikeward.daemon.refusals import Refusals
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
    refusals: Refusals

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
            stand = {batch_stem(key) for key in batches if (key.root, key.folder) == (root, folder)} | {_OWN_BOARD}
            gone += self._withdraw_in(root, folder, series, stand)
        return gone

    def _withdraw_in(self, root: str, folder: str, series: Collection[SeriesKey], stand: set[str]) -> Iterator[str]:
        """In one folder, the ledger first; ``stand`` are the stems of its boards that stay."""
        path = self.folder_of(root, folder)
        names: set[str] = set()
        with self.refusals.apart(("orphans", root, folder), root, folder), suppress(FileNotFoundError):
            names = {entry.name for entry in self.disk.entries(path)}
        self._forget_refusals(path, names)
        for name in sorted(name for name in names if name.endswith(RESULT)):
            key: SeriesKey | None = None
            with self.refusals.apart(("unknown", path, name), root, folder):
                key, result = self._read(f"{path}/{name}", root, folder)
            if key is None:
                continue
            if key in series or not self._sources_there(key, result):
                stand.add(batch_stem(key.batch_key))
                continue
            if ("withdrawn", path, name) not in self.refusals.standing:  # else it was recorded at the first attempt
                self.ledger.append(self._withdrawn(key))
            with self.refusals.apart(("withdrawn", path, name), root, folder):
                self._withdraw_series(path, name.removesuffix(RESULT), names)
            yield name.removesuffix(RESULT)
        for name in sorted(name for name in names if name.endswith(BOARD)):
            stem = name.removesuffix(BOARD)
            if stem not in stand:
                with self.refusals.apart(("withdrawn", path, name), root, folder):
                    self._aside(path, [stem + TABLE, name], names)
                yield stem

    def _forget_refusals(self, path: str, names: Collection[str]) -> None:
        """Those of files that are no longer in the folder."""
        self.refusals.forget(
            lambda key: (
                isinstance(key, tuple) and key[0] in ("unknown", "withdrawn") and key[1] == path and key[2] not in names
            )
        )

    def _read(self, path: str, root: str, folder: str) -> tuple[SeriesKey | None, Mapping[str, Any]]:
        found = self.disk.look(path)
        result = earlier_result(self.disk.read(path)) if found is not None and found.kind == FILE else None
        if result is None:
            return None, {}  # a person's file, not a result of ours
        key = SeriesKey(*(result["series"][name] for name in ("root", "folder", "batch", "role", "sample")))
        return (key if (key.root, key.folder) == (root, folder) else None), result

    def _sources_there(self, key: SeriesKey, result: Mapping[str, Any]) -> bool:
        return all(self.present(key, path, digest) for path, _, digest in quoted(result))

    def _withdrawn(self, key: SeriesKey) -> dict[str, Any]:
        series = [key.root, key.folder, key.batch, key.role, key.sample]
        return {"event": "withdrawn", "series": series, "at": self.clock()}

    def _withdraw_series(self, path: str, stem: str, names: Collection[str]) -> None:
        """The flag goes, and what it stood for is kept aside; the result last, for by it the rest is found again."""
        for flag in (flag_name(stem, verdict) for verdict in VERDICTS):
            found = self.disk.look(f"{path}/{flag}")
            if found is not None and found.kind == FILE:
                self.disk.remove(f"{path}/{flag}")
            else:
                self._aside(path, [flag], names)
        self._aside(path, [stem + SUMMARY, stem + RESULT], names)

    def _aside(self, path: str, wanted: Iterable[str], names: Collection[str]) -> None:
        for name in wanted:
            if name in names and self.disk.exists(f"{path}/{name}"):
                number = 1
                while self.disk.exists(f"{path}/{name}.kept-{number}"):
                    number += 1
                self.disk.rename(f"{path}/{name}", f"{path}/{name}.kept-{number}")
        self.disk.sync_folder(path)
