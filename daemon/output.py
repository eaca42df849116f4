"""Outcomes become files beside the data; a change of content is a revision, in the ledger before it is on the disk."""

from __future__ import annotations

import json
import os
from collections import defaultdict
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field, replace
from typing import Any

from spikeward.daemon.changes import quoted, what_changed
from spikeward.daemon.disk import FILE, Disk
from spikeward.daemon.earlier import earlier_result
from spikeward.daemon.ledger import EventLog
from spikeward.daemon.names import RESULT, SUMMARY, series_stem, shown, stems
from spikeward.daemon.pages.facts import Notice, Revision
from spikeward.daemon.pages.flag import render_flag
from spikeward.daemon.pages.result_json import render_result
from spikeward.daemon.pages.summary import render_summary
from spikeward.daemon.publish import digests
from spikeward.daemon.records import Records
from spikeward.rules.outcomes import FAIL, WAITING, BatchOutcome, Check, Outcome
from spikeward.rules.records import SeriesKey

Present = Callable[[SeriesKey, str, str], bool]


@dataclass(frozen=True, slots=True)
class _Sheaf:
    """One series, ready to be written; ``revision`` is the ledger's record where its content changed."""

    outcome: Outcome
    folder: str
    stem: str
    result: bytes
    digest: str
    revision: Mapping[str, Any] | None


@dataclass(slots=True)
class Output:
    """Remembers what was published, so that only changed content is rendered and written.

    ``folder_of`` gives the absolute output folder of a (root, folder); ``present`` tells whether a quoted reading
    (series, path, digest) is still at hand.
    """

    disk: Disk
    ledger: EventLog
    folder_of: Callable[[str, str], str]
    station: str
    clock: Callable[[], str]
    present: Present
    records: Records
    history: dict[SeriesKey, list[Revision]] = field(default_factory=lambda: defaultdict(list))
    recorded: dict[SeriesKey, str] = field(default_factory=dict)  # digest of the last result in the ledger
    held: dict[SeriesKey, Notice] = field(default_factory=dict)
    _outcomes: dict[SeriesKey, Outcome] = field(default_factory=dict)

    def take(self, event: Mapping[str, Any]) -> None:
        """Enter a revision from the ledger; events of other kinds change nothing."""
        if event["event"] == "revision":
            key = SeriesKey(*event["series"])
            self.history[key].append(
                Revision(
                    event["number"],
                    event["at"],
                    event["verdict"],
                    event["inputs_digest"],
                    event["why"],
                    tuple(event["changed"]),
                )  # fmt: skip
            )
            self.recorded[key] = event["result"]

    def outcome(self, key: SeriesKey) -> Outcome:
        """The outcome of a series as it was last published."""
        return self._outcomes[key]

    def publish(self, batch: BatchOutcome, check_all: bool = False) -> list[SeriesKey]:
        """Publish what changed in a batch; with ``check_all`` also restore what a person deleted or edited.

        A series of which one file cannot be read or written is kept back and stands in the refusals of ``records``;
        a later call with the same batch publishes it.

        Returns
        -------
        the series whose files were written

        Raises
        ------
        OSError : the disk does not take anything now; a later call with the same batch finishes what was begun
        """
        named, clashing = stems(outcome.key for outcome in batch.outcomes)
        changed = []
        for outcome in batch.outcomes:
            if outcome.key in clashing:
                outcome = _clash(outcome, [other for other in clashing if other != outcome.key])
            if check_all or self._outcomes.get(outcome.key) != outcome:
                changed.append(outcome)
        for outcome in changed:
            self._outcomes.pop(outcome.key, None)  # until it is published whole
        sheaves = self._sheaves(changed, named)
        events = [sheaf.revision for sheaf in sheaves if sheaf.revision is not None]
        if events:
            self.ledger.append(*events)
        for event in events:
            self.take(event)
        self._forget_refusals(batch)
        return [sheaf.outcome.key for sheaf in sheaves if self._write(sheaf)]

    def _sheaves(self, changed: Iterable[Outcome], named: Mapping[SeriesKey, str]) -> list[_Sheaf]:
        sheaves = []
        for outcome in changed:
            key = outcome.key
            with self.records.refusals.apart(key, key.root, key.folder):
                sheaf = self._sheaf(outcome, named[key])
                if sheaf is not None:
                    sheaves.append(sheaf)
        return sheaves

    def _forget_refusals(self, batch: BatchOutcome) -> None:
        """Those of series that the batch no longer has."""
        keys = {outcome.key for outcome in batch.outcomes}
        self.records.refusals.forget(
            lambda key: isinstance(key, SeriesKey) and key.batch_key == batch.key and key not in keys
        )

    def _sheaf(self, outcome: Outcome, stem: str) -> _Sheaf | None:
        """What is to be written for a series; None while a quoted source is missing."""
        key = outcome.key
        folder = self.folder_of(key.root, key.folder)
        result = render_result(outcome)
        digest = digests({RESULT: result})[RESULT]
        revision = None
        if self.recorded.get(key) != digest:
            before = self._standing(os.path.join(folder, stem + RESULT))
            if not self._sources_there(key, before):
                return None
            if outcome.verdict != WAITING or key in self.history:
                revision = self._revision(outcome, digest, before, json.loads(result))
        self.held.pop(key, None)
        return _Sheaf(outcome, folder, stem, result, digest, revision)

    def released(self) -> set[SeriesKey]:
        """The series that were held back, and whose result a person has deleted: they are solved from what is there."""
        return {key for key in self.held if not self.disk.exists(self._result_of(key))}

    def _result_of(self, key: SeriesKey) -> str:
        return os.path.join(self.folder_of(key.root, key.folder), series_stem(key) + RESULT)

    def _write(self, sheaf: _Sheaf) -> bool:
        outcome = sheaf.outcome
        history = tuple(self.history.get(outcome.key, ()))
        files = {RESULT: sheaf.result, SUMMARY: render_summary(outcome, history, self.station)}
        flag = render_flag(outcome, sheaf.digest)
        key, written = outcome.key, False
        with self.records.refusals.apart(key, key.root, key.folder):
            written = self.records.publish(sheaf.folder, sheaf.stem, files, flag, outcome.verdict)
            self._outcomes[key] = outcome
        return written

    def _standing(self, path: str) -> dict[str, Any] | None:
        """The result that stands beside the data, None where there is none of ours."""
        found = self.disk.look(path)
        return earlier_result(self.disk.read(path)) if found is not None and found.kind == FILE else None

    def _sources_there(self, key: SeriesKey, before: Mapping[str, Any] | None) -> bool:
        """Deleting raw data never retracts a result: while a quoted source is missing nothing is published."""
        if before is None:
            return True
        missing = sorted({path for path, _, digest in quoted(before) if not self.present(key, path, digest)})
        if missing:
            names = ", ".join(shown(path) for path in missing)
            self.held[key] = Notice(
                "source missing", series_stem(key),
                f"the published result quotes {names}, which is no longer there; "
                "restore the file, or delete the result's files to have the series solved from what is there", "",
            )  # fmt: skip
        return not missing

    def _revision(
        self, outcome: Outcome, digest: str, before: Mapping[str, Any] | None, after: Mapping[str, Any]
    ) -> dict[str, Any]:
        """The ledger's record of a revision."""
        key = outcome.key
        why, changed = what_changed(before, after)
        return {
            "event": "revision",
            "series": [key.root, key.folder, key.batch, key.role, key.sample],
            "number": len(self.history.get(key, ())) + 1,
            "at": self.clock(),
            "verdict": outcome.verdict,
            "inputs_digest": outcome.inputs_digest,
            "result": digest,
            "why": why,
            "changed": list(changed),
        }


def _clash(outcome: Outcome, others: Iterable[SeriesKey]) -> Outcome:
    names = ", ".join(f"batch {shown(key.batch)} sample {shown(key.sample)}" for key in sorted(others))
    sentence = f"its files cannot be told apart from those of {names}; rename one of the two"
    check = Check("identity", FAIL, sentence, remedy="rename one of the two and export again")
    return replace(
        outcome, verdict=FAIL, so_far=FAIL, sentence=f"DO NOT REPORT. {sentence[0].upper()}{sentence[1:]}.",
        checks=(check, *outcome.checks),
    )  # fmt: skip
