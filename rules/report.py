"""One series as it is told: results with their checks, vessels, context, verdict and first words."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from spikeward.rules.checks.brackets import around
from spikeward.rules.checks.quality import blank_lacking
from spikeward.rules.checks.registry import BATCH, REGISTRY, check_line
from spikeward.rules.checks.series import answered, completeness, conflicts
from spikeward.rules.checks.slopes import calibration_for
from spikeward.rules.checks.spectral_lines import is_reported
from spikeward.rules.checks.straight import robust_beside
from spikeward.rules.checks.subject import Context, Subject
from spikeward.rules.digests import inputs_digest
from spikeward.rules.naming import level_order
from spikeward.rules.outcomes import PASS, WAITING, Beside, Check, Outcome, Result, VesselReport, worst
from spikeward.rules.prepared import PreparedLine, PreparedVessel
from spikeward.rules.records import Members, Reading
from spikeward.rules.rulebook import Rulebook
from spikeward.rules.sentences import headline, result_sentence
from spikeward.rules.solve.calibration import beside
from spikeward.rules.solve.solved import Solved
from spikeward.rules.solve.vessel_signal import vessel_name
from spikeward.rules.verdicts import published
from spikeward.rules.words import line_words, listed


@dataclass(frozen=True, slots=True)
class Standing:
    """How far a series is. ``over``: nothing more is expected of it; ``settled``: its verdict stands."""

    members: Members
    missing: tuple[str, ...]
    over: bool
    settled: bool
    waiting_for: tuple[str, ...]

    @property
    def incomplete(self) -> bool:
        """Whether members are missing that may still come."""
        return bool(self.missing) and not self.over


def report(standing: Standing, solved: Sequence[Solved], context: Context) -> Outcome:
    """Check one series and say all that is known about it.

    Parameters
    ----------
    solved : its lines, process blanks subtracted
    context : of its batch
    """
    rules, members = context.rules, standing.members
    lines = [line.prepared for line in solved]
    checks = (completeness(members, standing.missing, standing.over, rules), *conflicts(members))
    if members.readings and not lines and not standing.incomplete:
        checks = (*checks, answered(members))
    subjects = [Subject(line, context) for line in solved]
    results = tuple(
        _result(subject, checks, standing, _reported_line(subject.solved.prepared, lines, rules))
        for subject in subjects
    )
    deciding = [result for result in results if result.reported_line]
    so_far = worst([check.verdict for check in (*checks, *(c for result in deciding for c in result.checks))])
    if so_far == PASS and not standing.settled and not all(result.reported for result in deciding):
        so_far = WAITING  # nothing has failed yet, but there is no number that could pass
    verdict = published(so_far, standing.settled)
    entered = _entered(subjects)
    told = [check for result in results for check in result.checks if _from_batch(check)]
    return Outcome(
        key=members.key,
        verdict=verdict,
        so_far=so_far,
        final=standing.settled,
        waiting_for=standing.waiting_for,
        design=", ".join(dict.fromkeys(line.design for line in lines if line.design)),
        sentence=headline(
            members.key, verdict, so_far, standing.settled, checks, results, standing.waiting_for, _excluded(lines)
        ),
        results=results,
        checks=checks,
        vessels=_vessels(members, lines),
        context=entered,
        notes=_notes(members, solved),
        inputs_digest=inputs_digest(
            members, context.batch, entered, told, _lent(subjects), standing.waiting_for, standing.settled, rules
        ),
        rules_digest=rules.digest,
        incomplete=standing.incomplete,
    )


def _reported_line(prepared: PreparedLine, every: Sequence[PreparedLine], rules: Rulebook) -> bool:
    """Whether the line of an analyte is the one that is reported; all are where the rules name none that was read."""
    named = [one for one in every if one.analyte == prepared.analyte and is_reported(one.analyte, one.line, rules)]
    return not named or prepared in named


def _from_batch(check: Check) -> bool:
    return check.name == "blank" or (check.name in REGISTRY and REGISTRY[check.name].looks_at == BATCH)


def _result(subject: Subject, common: Sequence[Check], standing: Standing, reported_line: bool) -> Result:
    """One line; its verdict counts the checks of the whole series too, for a table shows it beside the number."""
    solved = subject.solved
    checks = check_line(subject, only_certain=standing.incomplete or bool(solved.prepared.problems))
    so_far = worst([check.verdict for check in (*common, *checks)])
    withheld = _withheld(subject, standing)
    back = solved.prepared.way_back
    result = Result(
        analyte=solved.prepared.analyte,
        line=solved.prepared.line,
        verdict=published(so_far, standing.settled),
        content=None if withheld else solved.content,
        in_sample=None if withheld else solved.in_sample,
        no_number=withheld,
        signal_unit="ratio" if solved.ratio else solved.prepared.signal_unit,
        content_unit=solved.prepared.unit,
        basis=back.basis if back is not None else "",
        slope=solved.slope,
        slope_uncertainty=solved.slope_uncertainty,
        intercept=solved.intercept,
        intercept_uncertainty=solved.intercept_uncertainty,
        residual_sd=solved.residual_sd,
        correlation=solved.correlation,
        degrees_of_freedom=solved.degrees_of_freedom if solved.slope is not None or solved.parameters else 0,
        points=solved.points,
        checks=checks,
        background=_subtracted_background(solved),
        background_unit=solved.prepared.signal_unit,
        blank=None if withheld else solved.blank,
        preparation=solved.preparation,
        reported_line=reported_line,
        response=solved.prepared.response,
        precision=solved.scatter.words,
        parameters=solved.parameters,
        beside=() if withheld else _beside(subject),
        corrected=solved.corrected,
        cannot_tell=solved.prepared.cannot_tell,
    )
    return replace(result, sentence=result_sentence(result, solved))


def _beside(subject: Subject) -> tuple[Beside, ...]:
    """What other ways of calculation give."""
    calibration, solved = calibration_for(subject), subject.solved
    found = [robust_beside(solved)]
    if calibration is not None:
        found.append(beside(solved, calibration, subject.context.rules.coverage))
    return tuple(one for one in found if one is not None)


def _withheld(subject: Subject, standing: Standing) -> str:
    """Why no number is shown: the line gives none, members are missing, or a blank that must come off is not there."""
    if subject.solved.no_number:
        return subject.solved.no_number
    if standing.incomplete:
        return f"the series is not complete; it lacks {listed(standing.missing)}"
    return blank_lacking(subject)


def _subtracted_background(solved: Solved) -> float | None:
    background = solved.background
    return background.mean if background is not None and not background.problem else None


def _entered(subjects: Sequence[Subject]) -> tuple[Reading, ...]:
    """The readings of the batch that enter the numbers or the drift of a series: each once, in a fixed order."""
    found: dict[Reading, None] = {}
    for subject in subjects:
        if subject.solved.background is not None:
            found.update(dict.fromkeys(subject.solved.background.readings))
        if subject.solved.blank is not None:
            for blank in subject.context.solved.get(("process_blank", subject.line_key), ()):
                found.update(dict.fromkeys(Subject(blank, subject.context).readings))
        if subject.solved.reagent is not None:
            for blank in subject.context.solved.get(("reagent_blank", subject.line_key), ()):
                found.update(dict.fromkeys(Subject(blank, subject.context).readings))
        if "brackets" in subject.context.rules.checks or subject.context.rules.drift == "correct":
            found.update(dict.fromkeys(reading for bracket in around(subject) for reading in bracket.readings))
            found.update(dict.fromkeys(_internal_brackets(subject)))
        calibration = calibration_for(subject)
        if calibration is not None:
            found.update(dict.fromkeys(calibration.readings))
    return tuple(found)


def _internal_brackets(subject: Subject) -> tuple[Reading, ...]:
    """The internal standard in the brackets, where there is one."""
    lines = sorted({(r.analyte, r.line) for vessel in subject.solved.prepared.vessels for r in vessel.internal})
    brackets = [bracket for line in lines for bracket in subject.context.brackets.get(line, ())]
    return tuple(reading for bracket in brackets for reading in bracket.readings)


def _lent(subjects: Sequence[Subject]) -> list[str]:
    """What the batch lends to the uncertainty of a series that is no reading of its own."""
    scatters = [subject.solved.scatter for subject in subjects]
    return [f"{one.words} {one.relative!r} {one.degrees_of_freedom!r}" for one in scatters]


Place = tuple[str, str, str]  # level, vessel, run


def _vessels(members: Members, lines: Sequence[PreparedLine]) -> tuple[VesselReport, ...]:
    grouped: dict[Place, list[Reading]] = {}
    for reading in members.readings:
        grouped.setdefault((reading.level, reading.vessel, reading.block), []).append(reading)
    prepared: dict[Place, tuple[PreparedVessel, PreparedLine]] = {}
    for line in lines:
        for vessel in line.vessels:
            prepared.setdefault((vessel.level, vessel.vessel, vessel.block), (vessel, line))
    places = sorted(grouped, key=lambda place: tuple(level_order(part) for part in place))
    return tuple(_vessel(place, grouped[place], prepared.get(place)) for place in places)


def _vessel(
    place: Place, readings: Sequence[Reading], found: tuple[PreparedVessel, PreparedLine] | None
) -> VesselReport:
    level, name, block = place
    if found is None:
        return VesselReport(level, name, None, None, None, "", tuple(readings), block=block)
    vessel, line = found
    return VesselReport(
        level, name, vessel.aliquot, vessel.addition, vessel.final, line.standard, tuple(readings), vessel.excluded,
        line.aliquot_unit, line.addition_unit, line.final_unit, block,
    )  # fmt: skip


def _excluded(lines: Sequence[PreparedLine]) -> tuple[str, ...]:
    found = (vessel_name(vessel.level, vessel.vessel) for line in lines for vessel in line.vessels if vessel.excluded)
    return tuple(dict.fromkeys(found))


def _notes(members: Members, solved: Sequence[Solved]) -> tuple[str, ...]:
    notes: dict[str, None] = {}
    for line in solved:
        name = f"{line_words(line.prepared.analyte, line.prepared.line)}: " if len(solved) > 1 else ""
        notes.update(dict.fromkeys(f"{name}{note}" for note in line.notes))
        if line.blank_note:
            notes[f"{name}{line.blank_note}"] = None
        for vessel in line.prepared.vessels:
            if vessel.excluded:
                notes[f"level {vessel.level}{vessel.vessel} is excluded by decision ({vessel.excluded})"] = None
    return tuple(notes)
