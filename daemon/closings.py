"""Closings and lapses: decided by time, recorded once in the ledger, and from then on data like any reading."""

from __future__ import annotations

import hashlib
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import Any

from spikeward.rules.records import Batch, BatchKey, Members, SeriesKey


@dataclass(frozen=True, slots=True)
class Closing:
    """One closing of a batch: the rules and calculation that then applied, and the series that it covers."""

    rules_digest: str
    calculation_version: str
    series: frozenset[SeriesKey]


def readings_digest(members: Members) -> str:
    """Identifies what a series held when it lapsed; any later reading ends the lapse."""
    digest = hashlib.sha256()
    for reading in members.readings:
        digest.update(f"{reading.path}\n{reading.row}\n{reading.digest}\n".encode("utf-8", "surrogatepass"))
    return digest.hexdigest()


@dataclass(slots=True)
class Closings:
    """The closings and lapses that the ledger holds."""

    closed: dict[BatchKey, Closing] = field(default_factory=dict)
    lapsed: dict[SeriesKey, str] = field(default_factory=dict)

    def take(self, event: Mapping[str, Any]) -> None:
        """Enter one event of the ledger; events of other kinds change nothing."""
        if event["event"] == "closing":
            key = BatchKey(*event["batch"])
            series = frozenset(SeriesKey(*fields) for fields in event["series"])
            self.closed[key] = Closing(event["rules_digest"], event["calculation_version"], series)
        elif event["event"] == "lapse":
            self.lapsed[SeriesKey(*event["series"])] = event["readings"]

    def covers(self, key: BatchKey, members: Iterable[SeriesKey]) -> bool:
        """Whether a batch is closed: a series that came after the closing opens it again."""
        closing = self.closed.get(key)
        return closing is not None and closing.series.issuperset(members)

    def lapses_of(self, batch: Batch) -> frozenset[SeriesKey]:
        """The series of a batch whose recorded lapse still stands."""
        return frozenset(
            key
            for key, members in batch.members.items()
            if key in self.lapsed and self.lapsed[key] == readings_digest(members)
        )


def closing_event(batch: Batch, rules_digest: str, calculation_version: str, at: str) -> dict[str, Any]:
    """The ledger's record of a closing."""
    return {
        "event": "closing",
        "batch": _fields(batch.key),
        "rules_digest": rules_digest,
        "calculation_version": calculation_version,
        "series": [_fields(key) for key in sorted(batch.members)],
        "at": at,
    }


def lapse_event(members: Members, at: str) -> dict[str, Any]:
    """The ledger's record of a lapse."""
    return {"event": "lapse", "series": _fields(members.key), "readings": readings_digest(members), "at": at}


def _fields(key: BatchKey | SeriesKey) -> list[str]:
    fields = [key.root, key.folder, key.batch]
    return [*fields, key.role, key.sample] if isinstance(key, SeriesKey) else fields
