"""One batch on its way through an evaluation: its series as they were prepared, and what the batch lends them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from spikeward.rules.checks.reruns import original_of
from spikeward.rules.outcomes import BatchOutcome, Outcome
from spikeward.rules.preparation import prepare
from spikeward.rules.prepared import PreparedLine
from spikeward.rules.records import SERIES_ROLES, Batch, Members, Reading, SeriesKey
from spikeward.rules.rulebook import Rulebook
from spikeward.rules.series import closing_missing, closing_roles, missing_members
from spikeward.rules.solve.background import background_of
from spikeward.rules.solve.calibration import Calibration, CalibrationKey, calibrations
from spikeward.rules.solve.drift import Bracket, visits
from spikeward.rules.solve.solved import Background

LineKey = tuple[str, str]  # analyte, line

TURNS = (
    ("reagent_blank",),
    ("process_blank",),
    ("reference", "check"),
    ("sample", "duplicate", "spiked_sample"),
)
"""Blanks are judged before what they are subtracted from, references before the samples that follow them."""


@dataclass(frozen=True, slots=True)
class Series:
    """One series on its way: its lines, what it lacks, and whether anything more is expected of it."""

    members: Members
    lines: tuple[PreparedLine, ...]
    missing: tuple[str, ...]
    over: bool

    @property
    def incomplete(self) -> bool:
        """Whether members are missing that may still come."""
        return bool(self.missing) and not self.over


@dataclass(frozen=True, slots=True)
class Night:
    """One batch on its way.

    ``standing`` holds the outcomes of an earlier evaluation that nothing has touched since. ``lacking`` is what the
    batch waits for in its closing members; samples that are still incomplete do not count there. ``untimed`` are the
    lines on which brackets cannot be put in order.
    """

    batch: Batch
    series: tuple[Series, ...]
    backgrounds: Mapping[LineKey, Background]
    brackets: Mapping[LineKey, tuple[Bracket, ...]]
    untimed: frozenset[LineKey]
    calibrations: Mapping[CalibrationKey, Calibration]
    standing: Mapping[SeriesKey, Outcome]
    lacking: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Earlier:
    """A batch as it was evaluated before, and what came out."""

    batch: Batch
    outcome: BatchOutcome


def gather(batch: Batch, rules: Rulebook, earlier: Earlier | None) -> Night:
    """Prepare the series of a batch that must be evaluated, and find what the batch lends them.

    Parameters
    ----------
    earlier : an evaluation under the same rules, or None
    """
    standing = _untouched(batch, earlier, rules) if earlier is not None else {}
    series = tuple(
        _series(batch.members[key], batch, rules)
        for key in sorted(batch.members)
        if key.role in SERIES_ROLES and key not in standing
    )
    roles = closing_roles(rules)
    complete = {each.members.key for each in series if not each.missing or each.members.key.role not in roles}
    lacking = closing_missing(batch, rules, frozenset(complete | set(standing))) if roles else ()
    if earlier is not None and standing and lacking != earlier.outcome.lacking:
        return gather(batch, rules, None)  # what is still expected stands in every flag of the batch
    readings = _readings(batch)
    backgrounds = _backgrounds(readings) if rules.blanks.background else {}
    brackets, untimed = visits(readings, backgrounds)
    if earlier is not None and standing and brackets and _brackets_of(earlier.batch, backgrounds) != brackets:
        return gather(batch, rules, None)  # a reading between two brackets parts what was one visit
    beside = calibrations(readings, backgrounds, rules)
    return Night(batch, series, backgrounds, brackets, untimed, beside, standing, lacking)


def _readings(batch: Batch) -> tuple[Reading, ...]:
    """The readings of every role that no decision excludes."""
    excluded = {decision.target for decision in batch.decisions if decision.kind == "exclude"}
    return tuple(
        reading for key in sorted(batch.members) for reading in batch.members[key].readings
        if reading.solution not in excluded
    )  # fmt: skip


def _brackets_of(batch: Batch, backgrounds: Mapping[LineKey, Background]) -> Mapping[LineKey, tuple[Bracket, ...]]:
    return visits(_readings(batch), backgrounds)[0]


def _series(members: Members, batch: Batch, rules: Rulebook) -> Series:
    lines = prepare(members, batch, rules)
    missing = missing_members(members, lines, rules)
    return Series(members, lines, missing, over=batch.closed or members.key in batch.lapsed)


def _untouched(batch: Batch, earlier: Earlier, rules: Rulebook) -> dict[SeriesKey, Outcome]:
    """The outcomes of samples that still stand: nothing of theirs changed, and nothing that the batch lends them."""
    before = earlier.batch
    if (batch.closed, batch.bench, batch.decisions) != (before.closed, before.bench, before.decisions):
        return {}
    changed = {
        key
        for key in batch.members.keys() | before.members.keys()
        if batch.members.get(key) != before.members.get(key) or (key in batch.lapsed) != (key in before.lapsed)
    }
    if rules.precision.comes_from == "pooled" and batch.closed:
        return {}  # samples lend their scatter to blanks and references, which are solved again whatever has changed
    if any(key.role not in TURNS[-1] for key in changed):
        return {}
    touched = {name for each in (batch, before) for name in _originals(each, changed)}
    return {
        outcome.key: outcome
        for outcome in earlier.outcome.outcomes
        if outcome.key.role in TURNS[-1] and outcome.key not in changed
        and not touched & _originals(batch, [outcome.key])
    }


def _originals(batch: Batch, keys: Sequence[SeriesKey] | set[SeriesKey]) -> set[str]:
    """The samples behind some series: a duplicate, a spiked sample or another dilution is judged with its original."""
    return {original_of(batch.members[key]) for key in keys if key in batch.members}


def _backgrounds(readings: Sequence[Reading]) -> dict[LineKey, Background]:
    by_line: dict[LineKey, list[Reading]] = {}
    for reading in readings:
        if reading.series.role == "background":
            by_line.setdefault((reading.analyte, reading.line), []).append(reading)
    found = {line: background_of(of_line) for line, of_line in by_line.items()}
    return {line: background for line, background in found.items() if background is not None}
