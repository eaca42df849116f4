"""Batches are solved in the order in which their parts need each other: reagents first, process blanks last."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace

from spikeward.rules.checks.curvature import curvature
from spikeward.rules.checks.line import residual
from spikeward.rules.checks.signal import linear_top, precision
from spikeward.rules.checks.subject import Context, Subject
from spikeward.rules.night import LineKey, Night
from spikeward.rules.outcomes import FAIL
from spikeward.rules.prepared import PreparedLine
from spikeward.rules.records import SeriesKey
from spikeward.rules.rulebook import Rulebook
from spikeward.rules.solve.corrections import Corrections
from spikeward.rules.solve.drift import drift_of
from spikeward.rules.solve.job import Job
from spikeward.rules.solve.lines import solve_lines
from spikeward.rules.solve.pooling import Pooling, lends, pooling_of, scatter_before, scatter_by_pool
from spikeward.rules.solve.process_blank import subtract_process_blank
from spikeward.rules.solve.reagent_blank import reagent_of
from spikeward.rules.solve.solved import Solved
from spikeward.rules.solve.together import members_of, solve_together
from spikeward.rules.words import line_words, listed

_LENDING = ("sample", "duplicate", "spiked_sample", "reference", "check")
_OWN_CHECKS = {"linear_top": linear_top, "precision": precision, "residual": residual, "curvature": curvature}

BySeries = Mapping[SeriesKey, tuple[Solved, ...]]


@dataclass(frozen=True, slots=True)
class Solution:
    """One batch after solving: every line of every series, process blanks subtracted, and what was pooled."""

    lines: BySeries
    pooling: Mapping[LineKey, Pooling]


def solve_nights(nights: Sequence[Night], rules: Rulebook) -> tuple[Solution, ...]:
    """Solve every series of some batches, all lines of a kind together; no digit depends on what is beside it."""
    reagents = _solved(nights, rules, [{}] * len(nights), reagent=True)
    blanks = [
        by_line(lines for key, lines in found.items() if key not in _incomplete(night))
        for night, found in zip(nights, reagents, strict=True)
    ]
    found = _solved(nights, rules, blanks, reagent=False)
    every = [{**own, **others} for own, others in zip(reagents, found, strict=True)]
    pooled = [_pooling(night, lines, rules) for night, lines in zip(nights, every, strict=True)]
    every = _with_pooled(nights, every, pooled, rules, blanks)
    return tuple(
        Solution(_without_blanks(lines, night, rules) if rules.blanks.process else lines, pooling or {})
        for night, lines, pooling in zip(nights, every, pooled, strict=True)
    )


_Lines = dict[SeriesKey, tuple[Solved, ...]]
_Blanks = Mapping[LineKey, tuple[Solved, ...]]


def _solved(nights: Sequence[Night], rules: Rulebook, blanks: Sequence[_Blanks], reagent: bool) -> list[_Lines]:
    """The series of role reagent_blank, or all others."""
    jobs = [
        {
            series.members.key: [
                _job(_named_otherwise(line, series.lines, rules), night, rules, known) for line in series.lines
            ]
            for series in night.series
            if (series.members.key.role == "reagent_blank") == reagent
        }
        for night, known in zip(nights, blanks, strict=True)
    ]
    single = [job for of_night in jobs for of_series in of_night.values() for job in _apart(of_series, rules)]
    solved = iter(solve_lines(single, rules.coverage))
    return [
        {
            key: (*(next(solved) for _ in _apart(of_series, rules)), *_together(of_series, rules))
            for key, of_series in of_night.items()
        }
        for of_night in jobs
    ]


def _named_otherwise(line: PreparedLine, every: Sequence[PreparedLine], rules: Rulebook) -> PreparedLine:
    """The line with a problem where its analyte overlaps with others and no line has a name that the rules give."""
    names = {line_words(one.analyte, one.line) for one in every}
    for rule in rules.overlap:
        if line.analyte in rule.analytes and not names & set(rule.at):
            told = f"{listed(rule.analytes)} overlap at {listed(rule.at)}, and this series has {listed(sorted(names))}"
            return replace(line, problems=(*line.problems, f"{told}; write the lines under overlap as exports do"))
    return line


def _apart(jobs: Sequence[Job], rules: Rulebook) -> list[Job]:
    """The lines of one series that are solved each by itself."""
    together = {name for rule in rules.overlap for name in rule.at}
    return [job for job in jobs if line_words(job.line.analyte, job.line.line) not in together]


def _together(jobs: Sequence[Job], rules: Rulebook) -> list[Solved]:
    members = [(rule, members_of(jobs, rule)) for rule in rules.overlap]
    return [one for rule, of_rule in members if of_rule for one in solve_together(of_rule, rule, rules.coverage)]


def _job(line: PreparedLine, night: Night, rules: Rulebook, blanks: _Blanks) -> Job:
    place = line.analyte, line.line
    background = night.backgrounds.get(place)
    corrections = Corrections(
        background=background,
        drift=drift_of(line, night.brackets, night.untimed, background) if rules.drift == "correct" else None,
        reagent=reagent_of(blanks.get(place, ()), line, rules),
        censored=rules.censored,
        weights=rules.precision.weights,
    )
    return Job(line, corrections, scatter_before(line, rules))


def by_line(series: Iterable[tuple[Solved, ...]]) -> dict[LineKey, tuple[Solved, ...]]:
    """Solved lines of any series by analyte and line."""
    found: dict[LineKey, list[Solved]] = {}
    for lines in series:
        for one in lines:
            found.setdefault((one.prepared.analyte, one.prepared.line), []).append(one)
    return {place: tuple(lines) for place, lines in found.items()}


def _pooling(night: Night, lines: _Lines, rules: Rulebook) -> dict[LineKey, Pooling] | None:
    """What the series of a closed batch lend each other; None where nothing is pooled yet."""
    if rules.precision.comes_from != "pooled" or not night.batch.closed:
        return None
    context = Context(night.batch, rules, backgrounds=night.backgrounds)
    lenders = {key: found for key, found in lines.items() if key.role in _LENDING}
    found = {}
    for place, of_line in by_line(lenders.values()).items():
        pooling = pooling_of([one for one in of_line if lends(one) and _sound(one, context)])
        if pooling is not None:
            found[place] = pooling
    return found


def _sound(solved: Solved, context: Context) -> bool:
    """Whether a line passes the checks that tell of its own precision; a vessel that slipped is no noise."""
    subject, asked = Subject(solved, context), context.rules.checks
    return all(
        check(subject, asked[name]).verdict != FAIL for name, check in _OWN_CHECKS.items() if name in asked
    )


def _with_pooled(
    nights: Sequence[Night],
    lines: Sequence[_Lines],
    pooled: Sequence[Mapping[LineKey, Pooling] | None],
    rules: Rulebook,
    blanks: Sequence[_Blanks],
) -> list[_Lines]:
    """The lines once more, with the pooled scatter where there is one."""
    again: list[tuple[int, SeriesKey, int, Job]] = []
    for number, (night, found, pooling, known) in enumerate(zip(nights, lines, pooled, blanks, strict=True)):
        for key, of_series in found.items() if pooling is not None else ():
            for place, one in enumerate(of_series):
                job = _job(one.prepared, night, rules, known)
                mine = (pooling or {}).get((one.prepared.analyte, one.prepared.line))
                again.append((number, key, place, replace(job, scatter=scatter_by_pool(one.prepared, mine))))
    result = [{key: list(of_series) for key, of_series in found.items()} for found in lines]
    solving = [entry for entry in again if entry[3].line.response != "overlap"]
    for (number, key, place, _), one in zip(
        solving, solve_lines([job for *_, job in solving], rules.coverage), strict=True
    ):
        result[number][key][place] = one
    return [{key: tuple(of_series) for key, of_series in found.items()} for found in result]


def _incomplete(night: Night) -> frozenset[SeriesKey]:
    return frozenset(series.members.key for series in night.series if series.incomplete)


def _without_blanks(lines: _Lines, night: Night, rules: Rulebook) -> _Lines:
    waiting = _incomplete(night)
    blanks = by_line(found for key, found in lines.items() if key.role == "process_blank" and key not in waiting)
    return {
        key: tuple(
            subtract_process_blank(one, blanks.get((one.prepared.analyte, one.prepared.line), ()), rules.coverage)
            for one in found
        )
        for key, found in lines.items()
    }
