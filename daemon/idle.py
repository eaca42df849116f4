"""For how long nothing of a batch has arrived: monotonic, accumulated over restarts, stopped while a share is away."""

from __future__ import annotations

import json
from collections.abc import Iterable, Mapping

from spikeward.rules.records import BatchKey


class Idle:
    """Seconds of quiet by batch. ``now`` is monotonic; ``carried`` is what an earlier run had counted, by key text."""

    def __init__(self, now: float, carried: Mapping[str, float]) -> None:
        self._last = now
        self._carried = {BatchKey(*json.loads(text)): seconds for text, seconds in carried.items()}
        self._seconds: dict[BatchKey, float] = {}

    def arrived(self, keys: Iterable[BatchKey], now: float) -> None:
        """Something of these batches arrived; what an earlier run had counted stands for the first look after it."""
        self.go_on(now)
        for key in keys:
            self._seconds[key] = self._carried.pop(key, 0.0)

    def go_on(self, now: float, counting: bool = True) -> None:
        """Let time pass up to ``now``."""
        if counting:
            for key in self._seconds:
                self._seconds[key] += max(0.0, now - self._last)
        self._last = now

    def of(self, key: BatchKey) -> float:
        """Seconds for which nothing of a batch has arrived."""
        return self._seconds.get(key, 0.0)

    def seconds(self) -> dict[str, float]:
        """All counts, to be carried over a restart."""
        return {json.dumps([key.root, key.folder, key.batch]): seconds for key, seconds in self._seconds.items()}
