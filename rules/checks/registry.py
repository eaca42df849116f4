"""The checks by the names that rule files, results and pages use."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from spikeward.rules.checks import (
    brackets,
    curvature,
    duplicates,
    electrode,
    internal_standard,
    line,
    noise,
    quality,
    reference,
    reruns,
    series,
    signal,
    slopes,
    spectral_lines,
    spikes,
    straight,
)
from spikeward.rules.checks.declared_slope import declared_slope
from spikeward.rules.checks.subject import BLANK_ROLES, NO_LIMITS, CheckOfLine, Subject
from spikeward.rules.outcomes import Check

RESULT, SERIES, BATCH = "result", "series", "batch"


@dataclass(frozen=True, slots=True)
class Registered:
    """A check, what it looks at, and one line that says what it asks.

    ``certain_early``: what it finds on some levels cannot be undone by those still missing. ``not_shown``: what a
    reader should know is not shown where the check is not evaluated. ``always``: made whether the rules name it or not.
    ``not_for``: roles of which it makes no sense. ``concerns``: whether a line has at all what the check looks at, such
    as an electrode; where it has not, the check is not made. ``in_percent``: people read what it observes in per cent.
    """

    name: str
    function: CheckOfLine
    looks_at: str
    describes: str
    certain_early: bool = False
    not_shown: str = ""
    always: bool = False
    not_for: tuple[str, ...] = ()
    in_percent: bool = False
    concerns: Callable[[Subject], bool] = lambda subject: True


def _declares_slope(subject: Subject) -> bool:
    electrode = subject.solved.prepared.electrode
    return electrode is not None and electrode.slope is not None


def _is_electrode(subject: Subject) -> bool:
    return subject.solved.prepared.response == "log"


REGISTRY: dict[str, Registered] = {
    one.name: one
    for one in (
        Registered(
            "preparation", series.preparation, RESULT, "volumes, standard and way back are known",
            certain_early=True, always=True,
        ),
        Registered("solved", line.solved, RESULT, "the line gives a number", always=True),
        Registered("units", signal.units, RESULT, "all signals come in one unit", certain_early=True),
        Registered(
            "linear_top", signal.linear_top, RESULT, "no signal is above the straight part", certain_early=True,
            in_percent=True,
        ),
        Registered("standard", quality.standard, RESULT, "the standard was in date", certain_early=True),
        Registered("levels", line.levels, RESULT, "enough vessels carry the line", always=True),
        Registered("response", line.response, RESULT, "the signal answers to the additions"),
        Registered("correlation", line.correlation, RESULT, "r reaches what the method demands"),
        Registered("curvature", curvature.curvature, RESULT, "the response is straight", not_shown="linearity"),
        Registered("lack_of_fit", straight.lack_of_fit, RESULT, "levels lie no further off the line than preparations"),
        Registered("robust", straight.robust, RESULT, "no single vessel pulls the line", in_percent=True),
        Registered("residual", line.residual, RESULT, "no vessel lies far off the line", in_percent=True),
        Registered("studentised", line.studentised, RESULT, "no vessel lies off the line by more than chance"),
        Registered("precision", signal.precision, RESULT, "readings of one vessel repeat", in_percent=True),
        Registered(
            "noise", noise.noise, RESULT, "the scatter is that of the declared noise",
            concerns=lambda subject: subject.context.rules.precision.comes_from == "declared",
        ),
        Registered(
            "pooled_precision", noise.pooled_precision, BATCH, "the series of the batch share one scatter",
            concerns=lambda subject: subject.context.rules.precision.comes_from == "pooled", in_percent=True,
        ),
        Registered(
            "electrode_slope", electrode.electrode_slope, RESULT, "the electrode answers as theory says",
            concerns=_is_electrode, in_percent=True,
        ),
        Registered(
            "potential_steps", electrode.potential_steps, RESULT, "every addition moves the potential enough",
            concerns=_is_electrode,
        ),
        Registered(
            "declared_slope", declared_slope, RESULT, "the vessels do not contradict the declared slope",
            concerns=lambda subject: _is_electrode(subject) and _declares_slope(subject),
        ),
        Registered(
            "internal_standard", internal_standard.internal_standard, BATCH, "the internal standard is recovered",
            concerns=lambda subject: bool(subject.solved.prepared.entered), in_percent=True,
        ),
        Registered(
            "line_agreement", spectral_lines.line_agreement, RESULT, "the lines of one analyte agree",
            concerns=spectral_lines.several_lines,
        ),
        Registered("span", line.span, RESULT, "the additions suit the content"),
        Registered(
            "matrix_spread", line.matrix_spread, RESULT, "every vessel holds the same matrix", in_percent=True,
        ),
        Registered(
            "expanded_uncertainty", quality.expanded_uncertainty, RESULT, "the result is known well enough",
            in_percent=True,
        ),
        Registered(
            "blank", quality.blank, RESULT, "blanks came and are small beside the result", always=True, in_percent=True,
        ),
        Registered(
            "slope_ratio", slopes.slope_ratio, BATCH, "the matrix changes the slope no more than usual",
            concerns=lambda subject: bool(subject.context.calibrations or subject.context.rules.calibration),
            in_percent=True,
        ),
        Registered(
            "rerun", reruns.rerun, BATCH, "the lowest dilution in range is reported, and dilutions agree",
            concerns=lambda subject: len(reruns.runs_of(subject)) > 1,
        ),
        Registered(
            "duplicate", duplicates.duplicate, BATCH, "two preparations of a sample agree", in_percent=True,
            not_for=duplicates.NOT_FOR,
        ),
        Registered(
            "spike_recovery", spikes.spike_recovery, BATCH, "a known amount is found again", in_percent=True,
            not_for=spikes.NOT_FOR,
        ),
        Registered(
            "brackets", brackets.brackets, BATCH, "the sensitivity held on both sides",
            not_shown="drift", in_percent=True,
        ),
        Registered(
            "reference", reference.reference, BATCH, "the reference is recovered",
            not_shown="trueness", not_for=BLANK_ROLES, in_percent=True,
        ),
        Registered(
            "check_sample", reference.check_sample, BATCH, "the check sample is recovered", not_for=BLANK_ROLES,
            in_percent=True,
        ),
    )  # fmt: skip
}
"""Checks of one analyte on one line, in the order of a report; those that look at the batch do so for that line."""

SERIES_CHECKS: dict[str, str] = {
    "completeness": "every level, reading, analyte and bench value is there",
    "conflict": "sources do not contradict each other",
    "identity": "nothing about the origin of the readings is doubtful",
}
"""Checks of a whole series, always made; they have no limits."""


def check_line(subject: Subject, only_certain: bool = False) -> tuple[Check, ...]:
    """Every check that the rules name, and those that are always made, of one line.

    Parameters
    ----------
    only_certain : the line is not complete or not prepared; make only checks whose finding more levels cannot undo
    """
    asked = subject.context.rules.checks
    return tuple(
        one.function(subject, asked.get(name, NO_LIMITS))
        for name, one in REGISTRY.items()
        if (one.always or name in asked)
        and (one.certain_early or not only_certain)
        and subject.role not in one.not_for
        and one.concerns(subject)
    )
