"""Analytes whose signals overlap, as results: several lines of one series solved together."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

from spikeward.rules.outcomes import Parameter, Point
from spikeward.rules.rulebook import Overlap as OverlapRule
from spikeward.rules.solve.common import bare, with_interval, without_uncertainty
from spikeward.rules.solve.h_point import solve_h_point
from spikeward.rules.solve.job import Job
from spikeward.rules.solve.overlap import Overlap, solve_overlap
from spikeward.rules.solve.solved import OWN, Background, Scatter, Solved
from spikeward.rules.solve.transform import Transformed, transform
from spikeward.rules.solve.verdict import NO_NOISE, negative
from spikeward.rules.uncertainty.fieller import t_quantile
from spikeward.rules.uncertainty.interval import FitPart
from spikeward.rules.words import line_words, listed

Place = tuple[str, str, str]  # level, vessel, run

_OF_THESE_LINES = Scatter(words="its own scatter, because lines that overlap are solved with no other")


def members_of(jobs: Sequence[Job], rule: OverlapRule) -> tuple[Job, ...]:
    """The lines of one series that a rule solves together, in its order; nothing where it has none of them."""
    by_words = {line_words(job.line.analyte, job.line.line): job for job in jobs}
    return tuple(by_words[name] for name in rule.at if name in by_words)


def solve_together(jobs: Sequence[Job], rule: OverlapRule, coverage: float) -> list[Solved]:
    """Solve the lines of one series that overlap.

    Parameters
    ----------
    jobs : as ``members_of`` gives them, at least one
    rule : what overlaps

    Returns
    -------
    one for each analyte of the rule that the series was read for, with response overlap
    """
    transformed = [transform(job.line, job.corrections) for job in jobs]
    found = [
        (analyte, next((n for n, job in enumerate(jobs) if job.line.analyte == analyte), None))
        for analyte in rule.analytes
    ]
    refused = _refused(jobs, transformed, rule)
    shown = {analyte: _drawn(jobs[place], transformed[place]) for analyte, place in found if place is not None}
    if refused:
        return [replace(one, no_number=one.no_number or refused) for one in shown.values()]
    places = _places(transformed)
    if rule.method == "h_point":
        solved = [_by_h_point(one, jobs, transformed, places, rule, coverage) for one in shown.values()]
    else:
        solved = _generalised(shown, jobs, transformed, places, rule, coverage)
    return [_told(one, rule) for one in solved]


def _told(solved: Solved, rule: OverlapRule) -> Solved:
    """With what was solved together, and what that does not show."""
    line, at = solved.prepared, listed(rule.at)
    if rule.method == "h_point":
        interferent = rule.interferent or "the interferent"
        told = f"{at} were solved together: what {interferent} adds equally at both is not in the result."
        open_question = f"That {interferent} answers equally at {at} was declared; these vessels do not show it."
    else:
        told = f"{at} were solved together for {listed(rule.analytes)}, each of which was added."
        open_question = "What overlaps and was not itself added is not corrected."
    return replace(
        solved,
        prepared=replace(line, cannot_tell=(open_question, *line.cannot_tell)),
        corrected=(*solved.corrected, told),
    )


def _drawn(job: Job, transformed: Transformed) -> Solved:
    one = bare(job, transformed)
    scatter = one.scatter if one.scatter == OWN else _OF_THESE_LINES
    return replace(one, prepared=replace(one.prepared, response="overlap"), scatter=scatter)


def _refused(jobs: Sequence[Job], transformed: Sequence[Transformed], rule: OverlapRule) -> str:
    """Why the lines cannot be solved together, or an empty text."""
    names = [line_words(job.line.analyte, job.line.line) for job in jobs]
    lacking = [name for name in rule.at if name not in names]
    if lacking:
        return f"{listed(lacking)} is missing, which is solved together with {listed(names)}: export every line"
    if any(row.block for one in transformed for row in one.rows):
        return f"{listed(names)} overlap and were measured in several runs: give each run a sample name of its own"
    if any(job.line.entered for job in jobs):
        return "lines that overlap are not solved with an internal standard: leave it out of their preparation"
    if any(one.reagent is not None for one in transformed):
        return "lines that overlap are not solved with a reagent blank: subtract a process blank instead"
    if rule.method == "h_point" and len(jobs) != 2:
        return f"h_point takes two lines, and {len(jobs)} are named: correct at under overlap"
    if len({one.background is not None for one in transformed}) > 1:
        return f"the background is off only some of {listed(names)}: measure it on every line that overlaps"
    if len({bool(one.not_drifted) for one in transformed}) > 1:
        why = next(one.not_drifted for one in transformed if one.not_drifted)
        return f"the drift was corrected only on some of {listed(names)}: {why}"
    return next((one.problem for one in transformed if one.problem), "")


def _places(transformed: Sequence[Transformed]) -> list[Place]:
    """The vessels that count on every line."""
    kept = [{_place(point) for point in one.points if not point.excluded} for one in transformed]
    return sorted(set.intersection(*kept))


def _place(point: Point) -> Place:
    return point.level, point.vessel, point.block


def _signals(transformed: Transformed, places: Sequence[Place]) -> list[float]:
    by_place = {_place(point): point.y for point in transformed.points}
    return [by_place[place] for place in places]


def _dilutions(transformed: Transformed, places: Sequence[Place]) -> list[float]:
    by_place = {_place(point): point.factor for point in transformed.points}
    return [by_place[place] for place in places]


def _additions(jobs: Sequence[Job], analyte: str, places: Sequence[Place]) -> list[float] | None:
    """Contents added of one analyte; None where no standard of the series holds it."""
    own = next((job.line for job in jobs if job.line.analyte == analyte), None)
    line = own or jobs[0].line
    by_place: dict[Place, float] = {}
    for vessel in line.vessels:
        added = vessel.added if own is not None else dict(vessel.others).get(analyte)
        if added is None:
            return None
        by_place[vessel.level, vessel.vessel, vessel.block] = added / vessel.aliquot
    return [by_place[place] for place in places]


def _generalised(
    shown: Mapping[str, Solved],
    jobs: Sequence[Job],
    transformed: Sequence[Transformed],
    places: Sequence[Place],
    rule: OverlapRule,
    coverage: float,
) -> list[Solved]:
    columns = {analyte: _additions(jobs, analyte, places) for analyte in rule.analytes}
    unknown = [analyte for analyte, column in columns.items() if column is None]
    if unknown:
        told = f"no standard of this series holds {listed(unknown)}: every analyte that overlaps must be added"
        return [replace(one, no_number=told) for one in shown.values()]
    added = [column for column in columns.values() if column is not None]
    signals = [_signals(one, places) for one in transformed]
    found = solve_overlap(
        list(zip(*added, strict=True)),
        list(zip(*signals, strict=True)),
        _dilutions(transformed[0], places),
        rule.analytes,
        [line_words(job.line.analyte, job.line.line) for job in jobs],
        coverage,
    )
    return [
        _of_analyte(one, found, rule.analytes.index(analyte), jobs, transformed, places, coverage)
        for analyte, one in shown.items()
    ]


def _of_analyte(
    drawn: Solved,
    found: Overlap,
    place: int,
    jobs: Sequence[Job],
    transformed: Sequence[Transformed],
    places: Sequence[Place],
    coverage: float,
) -> Solved:
    if found.no_number:
        return replace(drawn, no_number=found.no_number)
    parameters = [
        Parameter(f"sensitivity at {sensor}", found.sensitivities[place][n], "signal per content")
        for n, sensor in enumerate(found.sensors)
    ]
    for name, value in (
        ("condition number of the sensitivities", found.condition_scaled),
        ("condition number of the sensitivities as given", found.condition_as_given),
        ("condition number of the additions", found.condition_of_additions),
        ("chance that the lines agree so badly", found.sensors_agree_p),
    ):
        if value is not None:
            parameters.append(Parameter(name, value, "1"))
    own = next(n for n, job in enumerate(jobs) if job.line == replace(drawn.prepared, response=job.line.response))
    fitted = {where: found.fitted[row][own] for row, where in enumerate(places)}
    drawn = replace(
        drawn,
        points=tuple(replace(point, fitted=fitted.get(_place(point))) for point in drawn.points),
        parameters=tuple(parameters),
        degrees_of_freedom=found.degrees_of_freedom,
        notes=(*drawn.notes, *negative(found.contents[place], drawn.subtracted)),
    )
    if found.standard_uncertainties is None:
        return without_uncertainty(drawn, found.contents[place], coverage, found.no_uncertainty or NO_NOISE)
    u, dof = found.standard_uncertainties[place], found.degrees_of_freedom
    half = t_quantile(dof, coverage) * u
    part = FitPart(found.contents[place], u, (half, half), dof)
    backgrounds = _backgrounds([one.background for one in transformed], found.background_effects[place])
    drawn = replace(drawn, scatter_degrees_of_freedom=dof)
    return with_interval(replace(drawn, other_backgrounds=backgrounds), part, coverage, found.no_uncertainty)


def _backgrounds(
    backgrounds: Sequence[Background | None], effects: Sequence[float]
) -> tuple[tuple[Background, float], ...]:
    """The background of every line with its effect on the content; those of different lines count as independent."""
    return tuple((one, effect) for one, effect in zip(backgrounds, effects, strict=True) if one is not None)


def _by_h_point(
    drawn: Solved,
    jobs: Sequence[Job],
    transformed: Sequence[Transformed],
    places: Sequence[Place],
    rule: OverlapRule,
    coverage: float,
) -> Solved:
    first, second = (line_words(job.line.analyte, job.line.line) for job in jobs[:2])
    added = _additions(jobs, drawn.prepared.analyte, places)
    if added is None:
        return replace(drawn, no_number=f"no standard of this series holds {drawn.prepared.analyte}")
    found = solve_h_point(
        added,
        (_signals(transformed[0], places), _signals(transformed[1], places)),
        _dilutions(transformed[0], places),
        (first, second),
        coverage,
    )
    if found.no_number or found.content is None:
        return replace(drawn, no_number=found.no_number)
    unit = drawn.prepared.signal_unit or "1"
    name = f"signal of {rule.interferent or 'the interferent'}"
    parameters = []
    if found.interferent_signal is not None:
        parameters.append(Parameter(name, found.interferent_signal, unit, found.interferent_uncertainty))
    for words, line in zip((first, second), found.lines or (), strict=False):
        parameters.append(Parameter(f"slope at {words}", line.slope, f"{unit} per {drawn.prepared.unit}"))
    drawn = replace(
        drawn,
        parameters=tuple(parameters),
        g=found.g,
        degrees_of_freedom=found.degrees_of_freedom,
        notes=(*drawn.notes, *negative(found.content, drawn.subtracted)),
    )
    if found.standard_uncertainty is None or found.half_widths is None:
        return without_uncertainty(drawn, found.content, coverage, found.no_uncertainty or NO_NOISE)
    part = FitPart(found.content, found.standard_uncertainty, found.half_widths, found.degrees_of_freedom)
    backgrounds = _backgrounds([one.background for one in transformed[:2]], found.background_effects or (0.0, 0.0))
    drawn = replace(drawn, scatter_degrees_of_freedom=found.degrees_of_freedom)
    return with_interval(replace(drawn, other_backgrounds=backgrounds), part, coverage, found.no_uncertainty)
