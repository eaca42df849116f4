"""The files of a batch as a whole: its board and its table of results; and a board for a folder without any batch."""

from __future__ import annotations

from collections.abc import Callable, Collection, Iterable
from contextlib import AbstractContextManager
from dataclasses import dataclass, field

from spikeward.daemon.names import BOARD, SUMMARY, TABLE, batch_stem, stems
from spikeward.daemon.pages.board import render_board
from spikeward.daemon.pages.csv_file import render_csv
from spikeward.daemon.pages.facts import Notice
from spikeward.daemon.records import Records
from spikeward.rules.outcomes import BatchOutcome
from spikeward.rules.records import BatchKey

Place = tuple[str, str]  # root, output folder
Noticed = tuple[str, str, Notice]  # root, output folder, notice


@dataclass(slots=True)
class BoardOutput:
    """Writes boards; what would come out as before is not written again."""

    records: Records
    folder_of: Callable[[str, str], str]
    station: str
    _last: dict[BatchKey, tuple[BatchOutcome, list[Notice]]] = field(default_factory=dict)

    def publish(self, outcome: BatchOutcome, notices: Iterable[Noticed]) -> None:
        """Write board and table of one batch, with what a person should know of its folder."""
        key = outcome.key
        named, _ = stems(one.key for one in outcome.outcomes)
        links = {series: stem + SUMMARY for series, stem in named.items()}
        mine = [notice for root, folder, notice in notices if root == key.root and _concerns(folder, key.folder)]
        if self._last.get(key) == (outcome, mine):
            return
        stem = batch_stem(key)
        files = {stem + BOARD: render_board(outcome, mine, links, self.station), stem + TABLE: render_csv(outcome)}
        self._last.pop(key, None)
        with self.records.refusals.apart(key, key.root, key.folder):
            self.records.publish_files(self.folder_of(key.root, key.folder), files)
            self._last[key] = (outcome, mine)

    def publish_folders(
        self, notices: Iterable[Noticed], batches: Collection[BatchKey], places: Collection[Place]
    ) -> None:
        """A board of its own for each folder that has something to say and no batch to say it on.

        ``places`` are the folders in which such a board may stand from earlier; it goes when nothing is left to say.
        """
        self.records.refusals.forget(lambda key: isinstance(key, tuple) and key[0] == "board")
        with_batch = {(key.root, key.folder) for key in batches}
        found: dict[Place, list[Notice]] = {}
        for root, folder, notice in notices:
            if not any(where == root and _concerns(folder, below) for where, below in with_batch):
                found.setdefault((root, folder), []).append(notice)
        for (root, folder), mine in sorted(found.items(), key=lambda item: item[0]):
            board = render_board(None, mine, {}, self.station, folder or root)
            with self._apart(root, folder):
                self.records.publish_files(self.folder_of(root, folder), {"folder" + BOARD: board})
        nameless = {(key.root, key.folder) for key in batches if not key.batch}
        for root, folder in sorted(set(places) - set(found) - nameless):
            with self._apart(root, folder):
                self.records.withdraw_file(self.folder_of(root, folder), "folder" + BOARD)

    def _apart(self, root: str, folder: str) -> AbstractContextManager[None]:
        return self.records.refusals.apart(("board", root, folder), root, folder)


def _concerns(noticed: str, folder: str) -> bool:
    """What is noticed of a folder stands on the boards of its batches; of a watched folder, on all below it."""
    return noticed in ("", folder)
