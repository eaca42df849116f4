"""What one file or folder refused: it keeps back what it belongs to and nothing else, and is tried again later."""

from __future__ import annotations

import errno
import os
from collections.abc import Callable, Collection, Hashable, Iterator
from contextlib import contextmanager
from typing import NamedTuple

from spikeward.daemon.disk import TEMPORARY, concerns_one_name
from spikeward.daemon.names import shown
from spikeward.daemon.pages.facts import Notice
from spikeward.rules.records import BatchKey, SeriesKey

Noticed = tuple[str, str, Notice]  # root, output folder, notice


class Again(NamedTuple):
    """What was refused, by what is to be done: batches with such series, or boards; files with a flag; old outputs."""

    series: set[BatchKey]
    boards: set[BatchKey]
    files: set[tuple[str, str]]
    orphans: bool


class Refusals:
    """Refusals that stand, by what they keep back: a series, a batch with its board, the flag of a file."""

    def __init__(self) -> None:
        self.standing: dict[Hashable, Noticed] = {}
        self._told: set[Notice] = set()

    @contextmanager
    def apart(self, key: Hashable, root: str, folder: str) -> Iterator[None]:
        """Do something whose refusal keeps back ``key`` alone.

        Raises
        ------
        OSError : the refusal concerns more than one name: a full disk, a share, the journal
        """
        try:
            yield
        except OSError as error:
            if not concerns_one_name(error):
                raise
            self.standing[key] = (root, folder, _notice(error))
        else:
            self.standing.pop(key, None)

    def forget(self, over: Callable[[Hashable], bool]) -> None:
        """Forget what is kept back no longer, because it is no more."""
        self.standing = {key: each for key, each in self.standing.items() if not over(key)}

    def again(self, roots: Collection[str], batches: Collection[BatchKey]) -> Again:
        """What is to be tried again; what belongs to a root or batch that is no more is forgotten."""

        def known(batch: BatchKey | None) -> bool:
            return batch is None or batch in batches

        self.forget(lambda key: self.standing[key][0] not in roots or not known(_batch(key)))
        keys = list(self.standing)
        parts = [key for key in keys if isinstance(key, tuple)]
        return Again(
            series={key.batch_key for key in keys if isinstance(key, SeriesKey)},
            boards={key for key in keys if isinstance(key, BatchKey)},
            files={(key[1], key[2]) for key in parts if key[0] == "unread"},
            orphans=any(key[0] in ("orphans", "unknown", "withdrawn") for key in parts),
        )

    def fresh(self) -> list[Notice]:
        """The notices that are new since the last call."""
        notices = list(dict.fromkeys(notice for _, _, notice in self.standing.values()))
        new = [notice for notice in notices if notice not in self._told]
        self._told = set(notices)
        return new


def _batch(key: Hashable) -> BatchKey | None:
    if isinstance(key, SeriesKey):
        return key.batch_key
    return key if isinstance(key, BatchKey) else None


def _notice(error: OSError) -> Notice:
    """The name that is in the way, not the temporary one under which its content was to be written first."""
    folder, name = os.path.split(os.fsdecode(error.filename or ""))
    if error.errno != errno.EISDIR:  # a folder under the temporary name is itself in the way
        name = name.removeprefix(TEMPORARY)
    path = shown(os.path.join(folder, name))
    return Notice(
        "not written", path,
        f"{path} is in the way or cannot be changed ({error.strerror or type(error).__name__}); take it away, or give "
        "this program the right to replace it. It is tried again by itself, and everything else goes on",
    )  # fmt: skip
