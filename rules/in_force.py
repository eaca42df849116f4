"""Which readings count: duplicates are counted once, contradictions fail their series and name both sources.

The identity of a reading is its natural key, never its path, file time or time of arrival.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace

from spikeward.rules.conflicts import Dispute, conflict_sentences
from spikeward.rules.naming import level_order
from spikeward.rules.records import (
    SERIES_ROLES,
    Batch,
    BatchKey,
    BenchEntry,
    Decision,
    Members,
    Reading,
    SeriesKey,
)
from spikeward.rules.rulebook import Rulebook

Identity = tuple[str, ...]


@dataclass(frozen=True, slots=True)
class State:
    """What is known of a batch besides its readings: entered as data, never decided here."""

    closed: bool = False
    lapsed: frozenset[SeriesKey] = frozenset()
    bench: tuple[BenchEntry, ...] = ()
    decisions: tuple[Decision, ...] = ()


@dataclass(slots=True)
class _Found:
    kept: list[Reading] = field(default_factory=list)
    disputes: list[Dispute] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)
    warnings: list[str] = field(default_factory=list)


Memory = dict[SeriesKey, tuple[tuple[Reading, ...], tuple[Decision, ...], Members]]


def in_force(
    readings: Iterable[Reading],
    rules: Rulebook,
    states: Mapping[BatchKey, State] | None = None,
    memory: Memory | None = None,
) -> tuple[Batch, ...]:
    """Group readings into batches and decide which of them count.

    Parameters
    ----------
    readings : of any number of files, in any order; the answer does not depend on it
    states : closings, lapses, bench entries and decisions by batch
    memory : what this function decided before under the same rules, kept by the caller; it saves time and never changes
        the answer

    Returns
    -------
    batches in the order of their keys, each member's readings in canonical order
    """
    by_series: dict[SeriesKey, list[Reading]] = defaultdict(list)
    for reading in readings:
        by_series[reading.series].append(reading)
    twins = _equal_files(by_series)
    batches: dict[BatchKey, dict[SeriesKey, Members]] = defaultdict(dict)
    for key in sorted(by_series):
        state = (states or {}).get(key.batch_key, State())
        members = _remembered(key, tuple(by_series[key]), rules, state.decisions, memory)
        if key in twins:
            members = replace(members, warnings=members.warnings + tuple(sorted(twins[key])))
        batches[key.batch_key][key] = members
    result = []
    for batch_key in sorted(batches):
        state = (states or {}).get(batch_key, State())
        result.append(Batch(batch_key, batches[batch_key], state.bench, state.decisions, state.closed, state.lapsed))
    return tuple(result)


def canonical(reading: Reading) -> tuple[object, ...]:
    """The sort key of readings inside a series: by level, vessel, run, repetition, analyte, time, and place."""
    return (
        level_order(reading.level),
        level_order(reading.vessel),
        level_order(reading.block),
        level_order(reading.injection),
        level_order(reading.reading),
        reading.analyte,
        reading.line,
        reading.when,
        reading.path,
        reading.row,
    )


def _vessel_identity(reading: Reading) -> Identity:
    return (
        reading.level, reading.vessel, reading.block, reading.injection, reading.reading, reading.analyte, reading.line,
    )  # fmt: skip


def _remembered(
    key: SeriesKey,
    readings: tuple[Reading, ...],
    rules: Rulebook,
    decisions: tuple[Decision, ...],
    memory: Memory | None,
) -> Members:
    known = memory.get(key) if memory is not None else None
    if known is not None and known[:2] == (readings, decisions):
        return known[2]
    members = _members(key, readings, rules, decisions)
    if memory is not None:
        memory[key] = (readings, decisions, members)
    return members


def _members(key: SeriesKey, readings: Iterable[Reading], rules: Rulebook, decisions: Iterable[Decision]) -> Members:
    repeats = key.role not in SERIES_ROLES or rules.series.same_name == "reading"
    groups: dict[Identity, list[Reading]] = defaultdict(list)
    occurrence: dict[tuple[str, Identity], int] = defaultdict(int)
    for reading in sorted(readings, key=lambda r: (r.path, r.row)):
        identity = (*_vessel_identity(reading), reading.measured_at, str(reading.order))
        if repeats and not reading.measured_at and reading.order is None:
            # Without a time, rows of one name in one file are told apart by their turn in that file.
            turn = occurrence[reading.path, identity]
            occurrence[reading.path, identity] += 1
            identity = (*identity, str(turn))
        groups[identity].append(reading)
    found = _Found()
    preferred = {decision.target: decision for decision in decisions if decision.kind == "prefer"}
    for identity in sorted(groups):
        _one(groups[identity], preferred, found)
    if not repeats:
        _refuse_met_again(found)
    found.kept.sort(key=canonical)
    return Members(
        key,
        tuple(found.kept),
        conflict_sentences(found.disputes, found.kept, repeats),
        tuple(dict.fromkeys(found.notes)),
        tuple(dict.fromkeys(sorted(found.warnings))),
    )


def _value(reading: Reading) -> tuple[object, ...]:
    return (
        reading.signal, reading.qualifier, reading.unit, reading.sd, reading.readings, reading.values, reading.already,
        reading.text if reading.signal is None else "",
    )  # fmt: skip


def _place(reading: Reading) -> str:
    return f"{reading.path} row {reading.row}"


def _one(candidates: list[Reading], preferred: Mapping[str, Decision], found: _Found) -> None:
    """Decide between the readings of one natural key; candidates come in the order of path and row."""
    distinct: dict[tuple[object, ...], Reading] = {}
    for reading in candidates:
        first = distinct.setdefault(_value(reading), reading)
        if first is not reading:
            found.notes.append(f"{_place(reading)} repeats {_place(first)} with equal values; one counts")
    rivals = list(distinct.values())
    if len(rivals) == 1:
        found.kept.append(rivals[0])
        return
    chosen = _chosen(rivals, candidates, preferred)
    if chosen is None:
        # in one file every row counts as one time more, whatever it says; between files an equal copy is no rival
        if len({reading.path for reading in rivals}) == 1:
            rivals = [reading for reading in candidates if reading.path == rivals[0].path]
        found.disputes.append(Dispute(tuple(rivals), False))
        found.kept.append(rivals[0])
        return
    found.kept.append(chosen)
    found.notes += [
        f"{_place(r)} ({r.text}) is superseded by {_place(chosen)} ({chosen.text})" for r in rivals if r is not chosen
    ]


def _chosen(rivals: list[Reading], candidates: list[Reading], preferred: Mapping[str, Decision]) -> Reading | None:
    in_preferred = [reading for reading in candidates if reading.path in preferred]
    if in_preferred and len({_value(reading) for reading in in_preferred}) == 1:
        return in_preferred[0]
    latest = max(reading.processed_at for reading in candidates)
    last = [reading for reading in candidates if reading.processed_at == latest]
    if all(reading.processed_at for reading in candidates) and len({_value(reading) for reading in last}) == 1:
        return last[0]
    return None


def _refuse_met_again(found: _Found) -> None:
    met: dict[Identity, list[Reading]] = defaultdict(list)
    for reading in sorted(found.kept, key=lambda r: (r.path, r.row)):
        met[_vessel_identity(reading)].append(reading)
    found.disputes += [Dispute(tuple(readings), True) for readings in met.values() if len(readings) > 1]


def _some_equal(by_series: Mapping[SeriesKey, list[Reading]]) -> bool:
    """Whether any content came under two paths at all; it seldom does."""
    paths: dict[str, str] = {}
    return any(
        reading.file_digest and paths.setdefault(reading.file_digest, reading.path) != reading.path
        for readings in by_series.values()
        for reading in readings
    )


def _equal_files(by_series: Mapping[SeriesKey, list[Reading]]) -> dict[SeriesKey, set[str]]:
    """Equal bytes under names that mean different vessels: all count, with a warning."""
    if not _some_equal(by_series):
        return {}
    seen: dict[tuple[object, ...], dict[tuple[object, ...], Reading]] = defaultdict(dict)
    for key, readings in by_series.items():
        for reading in readings:
            if reading.file_digest:
                place = (key.batch_key, reading.file_digest, reading.row, reading.analyte, reading.line)
                identity = (key, *_vessel_identity(reading))
                known = seen[place].get(identity)
                if known is None or reading.path < known.path:
                    seen[place][identity] = reading
    warnings: dict[SeriesKey, set[str]] = defaultdict(set)
    for identities in seen.values():
        if len(identities) > 1:
            paths = " and ".join(sorted({reading.path for reading in identities.values()}))
            for reading in identities.values():
                warnings[reading.series].add(
                    f"{paths} have equal content under names that mean different vessels; all count. "
                    "Check whether one was exported twice"
                )
    return warnings
