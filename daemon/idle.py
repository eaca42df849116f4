"""For how long nothing has arrived: monotonic time, accumulated over restarts, stopped while a share is away."""

from __future__ import annotations

import json
from collections.abc import Iterable, Mapping

from spikeward.rules.records import BatchKey, SeriesKey

Key = BatchKey | SeriesKey


class Idle:
    """Seconds of quiet by batch and by series.

    ``now`` is monotonic time in seconds; ``carried`` is what an earlier run had counted, by the key's text. What was
    carried stands for the first arrival after a restart, which is this run's own reading of what lay there.
    """

    def __init__(self, now: float, carried: Mapping[str, float]) -> None:
        self._last = now
        self._counted = 0.0
        self._carried = dict(carried)
        self._since: dict[Key, float] = {}

    def arrived(self, keys: Iterable[Key]) -> None:
        """Something of these batches or series arrived."""
        for key in keys:
            self._since[key] = self._counted - self._carried.pop(_text(key), 0.0)

    def go_on(self, now: float, counting: bool = True) -> None:
        """Let time pass up to ``now``."""
        self._counted += max(0.0, now - self._last) if counting else 0.0
        self._last = now

    def of(self, key: Key) -> float:
        """Seconds for which nothing of a batch or series has arrived."""
        return self._counted - self._since.get(key, self._counted)

    def seconds(self) -> dict[str, float]:
        """All counts, to be carried over a restart."""
        return {_text(key): self._counted - since for key, since in self._since.items()}


def _text(key: Key) -> str:
    fields = [key.root, key.folder, key.batch]
    return json.dumps([*fields, key.role, key.sample] if isinstance(key, SeriesKey) else fields)
