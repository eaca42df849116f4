"""The one door into the core: batches in, outcomes out."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

from spikeward.rules.checks.batch import check_batch
from spikeward.rules.checks.brackets import visits
from spikeward.rules.checks.subject import Context, LineKey
from spikeward.rules.outcomes import FAIL, BatchOutcome, Outcome
from spikeward.rules.preparation import prepare
from spikeward.rules.prepared import PreparedLine
from spikeward.rules.records import SERIES_ROLES, Batch, BatchKey, Members, Reading, SeriesKey
from spikeward.rules.report import Standing, report
from spikeward.rules.rulebook import Rulebook
from spikeward.rules.series import closing_missing, closing_roles, missing_members
from spikeward.rules.solve.background import background_of
from spikeward.rules.solve.lines import solve_lines
from spikeward.rules.solve.process_blank import subtract_process_blank
from spikeward.rules.solve.solved import Background, Solved
from spikeward.rules.verdicts import depends_on_batch, settled

# Blanks are judged before what they are subtracted from, references before the samples that follow them.
_TURNS = (("process_blank",), ("reference", "check"), ("sample", "duplicate", "spiked_sample"))


@dataclass(frozen=True, slots=True)
class _Series:
    """One series on its way: its lines, what it lacks, and whether anything more is expected of it."""

    members: Members
    lines: tuple[PreparedLine, ...]
    missing: tuple[str, ...]
    over: bool

    @property
    def incomplete(self) -> bool:
        return bool(self.missing) and not self.over


@dataclass(frozen=True, slots=True)
class _Night:
    """One batch on its way. ``readings`` are those of every role that no decision excludes.

    ``standing`` holds the outcomes of an earlier evaluation that nothing has touched since. ``lacking`` is what the
    batch waits for in its closing members; samples that are still incomplete do not count there.
    """

    batch: Batch
    series: tuple[_Series, ...]
    backgrounds: Mapping[LineKey, Background]
    readings: tuple[Reading, ...]
    standing: Mapping[SeriesKey, Outcome]
    lacking: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Earlier:
    """A batch as it was evaluated before, and what came out."""

    batch: Batch
    outcome: BatchOutcome


def evaluate(
    batches: Sequence[Batch], rules: Rulebook, earlier: Mapping[BatchKey, Earlier] | None = None
) -> tuple[BatchOutcome, ...]:
    """Prepare, solve and check every series of some batches.

    Parameters
    ----------
    batches : each with everything that its results may depend on, in any order
    earlier : evaluations under the same rules. They save time and never change the answer: a sample is taken over only
        where neither its own members nor anything of the batch that it depends on has changed

    Returns
    -------
    one outcome per batch in the order of their keys, each holding its series in the order of theirs; what one batch
    says does not depend on the others
    """
    nights = [_gather(batch, rules, (earlier or {}).get(batch.key)) for batch in sorted(batches, key=lambda b: b.key)]
    lines = [line for night in nights for series in night.series for line in series.lines]
    backgrounds = {
        (night.batch.key, analyte, line): background
        for night in nights
        for (analyte, line), background in night.backgrounds.items()
    }
    solved = iter(solve_lines(lines, backgrounds, rules.coverage))
    return tuple(_finish(night, solved, rules) for night in nights)


def _gather(batch: Batch, rules: Rulebook, earlier: Earlier | None) -> _Night:
    standing = _untouched(batch, earlier) if earlier is not None else {}
    series = tuple(
        _series(batch.members[key], batch, rules)
        for key in sorted(batch.members)
        if key.role in SERIES_ROLES and key not in standing
    )
    roles = closing_roles(rules)
    complete = {each.members.key for each in series if not each.missing or each.members.key.role not in roles}
    lacking = closing_missing(batch, rules, frozenset(complete | set(standing))) if roles else ()
    if earlier is not None and standing and lacking != earlier.outcome.lacking:
        return _gather(batch, rules, None)  # what is still expected stands in every flag of the batch
    excluded = {decision.target for decision in batch.decisions if decision.kind == "exclude"}
    readings = tuple(
        reading for key in sorted(batch.members) for reading in batch.members[key].readings
        if reading.solution not in excluded
    )  # fmt: skip
    backgrounds = _backgrounds(readings) if rules.blanks.background else {}
    return _Night(batch, series, backgrounds, readings, standing, lacking)


def _series(members: Members, batch: Batch, rules: Rulebook) -> _Series:
    lines = prepare(members, batch, rules)
    missing = missing_members(members, lines, rules)
    return _Series(members, lines, missing, over=batch.closed or members.key in batch.lapsed)


def _untouched(batch: Batch, earlier: Earlier) -> dict[SeriesKey, Outcome]:
    """The outcomes of samples that still stand: nothing of theirs changed, and nothing that the batch lends them."""
    before = earlier.batch
    if (batch.closed, batch.bench, batch.decisions) != (before.closed, before.bench, before.decisions):
        return {}
    changed = {
        key
        for key in batch.members.keys() | before.members.keys()
        if batch.members.get(key) != before.members.get(key) or (key in batch.lapsed) != (key in before.lapsed)
    }
    if any(key.role not in _TURNS[-1] for key in changed):
        return {}
    return {
        outcome.key: outcome
        for outcome in earlier.outcome.outcomes
        if outcome.key.role in _TURNS[-1] and outcome.key not in changed
    }


def _backgrounds(readings: Sequence[Reading]) -> dict[LineKey, Background]:
    by_line: dict[LineKey, list[Reading]] = {}
    for reading in readings:
        if reading.series.role == "background":
            by_line.setdefault((reading.analyte, reading.line), []).append(reading)
    found = {line: background_of(of_line) for line, of_line in by_line.items()}
    return {line: background for line, background in found.items() if background is not None}


def _finish(night: _Night, solved: Iterator[Solved], rules: Rulebook) -> BatchOutcome:
    """Subtract the process blanks, check, and say what stands; takes its lines off the common iterator."""
    of_series = {series.members.key: tuple(next(solved) for _ in series.lines) for series in night.series}
    waiting = frozenset(series.members.key for series in night.series if series.incomplete)
    waiting |= {key for key, outcome in night.standing.items() if outcome.incomplete}
    if rules.blanks.process:
        of_series = _without_blanks(of_series, waiting, rules)
    brackets, untimed = visits(night.readings, night.backgrounds)
    context = Context(
        night.batch, rules, _by_role(of_series), waiting,
        backgrounds=night.backgrounds, brackets=brackets, untimed=untimed,
    )  # fmt: skip
    outcomes: dict[SeriesKey, Outcome] = dict(night.standing)
    for roles in _TURNS:
        for series in night.series:
            key = series.members.key
            if key.role in roles:
                outcomes[key] = report(_standing(series, night, rules), of_series[key], context)
        context = replace(context, failed=_failed(outcomes))
    ordered = tuple(outcomes[key] for key in sorted(outcomes))
    return BatchOutcome(
        night.batch.key,
        night.batch.closed,
        () if night.batch.closed else closing_missing(night.batch, rules, _complete(night)),
        ordered,
        check_batch(context, ordered, night.lacking),
        night.lacking,
    )


def _by_role(of_series: Mapping[SeriesKey, tuple[Solved, ...]]) -> dict[tuple[str, LineKey], tuple[Solved, ...]]:
    found: dict[tuple[str, LineKey], list[Solved]] = {}
    for key, lines in of_series.items():
        for line in lines:
            found.setdefault((key.role, (line.prepared.analyte, line.prepared.line)), []).append(line)
    return {place: tuple(lines) for place, lines in found.items()}


def _without_blanks(
    of_series: Mapping[SeriesKey, tuple[Solved, ...]], waiting: frozenset[SeriesKey], rules: Rulebook
) -> dict[SeriesKey, tuple[Solved, ...]]:
    blanks: dict[LineKey, list[Solved]] = {}
    for key, lines in of_series.items():
        if key.role == "process_blank" and key not in waiting:
            for line in lines:
                blanks.setdefault((line.prepared.analyte, line.prepared.line), []).append(line)
    return {
        key: tuple(
            subtract_process_blank(line, blanks.get((line.prepared.analyte, line.prepared.line), []), rules.coverage)
            for line in lines
        )
        for key, lines in of_series.items()
    }


def _complete(night: _Night) -> frozenset[SeriesKey]:
    gathered = {series.members.key for series in night.series if not series.missing}
    return frozenset(gathered | {key for key, outcome in night.standing.items() if not outcome.incomplete})


def _standing(series: _Series, night: _Night, rules: Rulebook) -> Standing:
    """What a series waits for: its own members first, then those of the batch."""
    stands = settled(night.batch.closed, series.incomplete, rules)
    waiting_for = series.missing if series.incomplete else ()
    if not stands and not waiting_for:
        waiting_for = night.lacking or ("the end of the batch",)
    elif not stands and depends_on_batch(rules):
        waiting_for = (*waiting_for, *night.lacking)
    return Standing(series.members, series.missing, series.over, stands, tuple(dict.fromkeys(waiting_for)))


def _failed(outcomes: Mapping[SeriesKey, Outcome]) -> frozenset[tuple[SeriesKey, LineKey]]:
    return frozenset(
        (key, (result.analyte, result.line))
        for key, outcome in outcomes.items()
        for result in outcome.results
        if result.verdict == FAIL
    )
