"""The checks by the names that rule files, results and pages use."""

from __future__ import annotations

from dataclasses import dataclass

from spikeward.rules.checks import brackets, curvature, line, quality, reference, series, signal
from spikeward.rules.checks.subject import NO_LIMITS, CheckOfLine, Subject
from spikeward.rules.outcomes import Check

RESULT, SERIES, BATCH = "result", "series", "batch"


@dataclass(frozen=True, slots=True)
class Registered:
    """A check, what it looks at, and one line that says what it asks.

    ``certain_early``: what it finds on some levels cannot be undone by those still missing. ``not_shown``: what a
    reader should know is not shown where the check is not evaluated. ``always``: made whether the rules name it or not.
    ``not_for``: roles of which it makes no sense. ``in_percent``: people read what it observes in per cent.
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
        Registered("residual", line.residual, RESULT, "no vessel lies far off the line", in_percent=True),
        Registered("studentised", line.studentised, RESULT, "no vessel lies off the line by more than chance"),
        Registered("precision", signal.precision, RESULT, "readings of one vessel repeat", in_percent=True),
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
            "brackets", brackets.brackets, BATCH, "the sensitivity held on both sides",
            not_shown="drift", in_percent=True,
        ),
        Registered(
            "reference", reference.reference, BATCH, "the reference is recovered",
            not_shown="trueness", not_for=("process_blank",), in_percent=True,
        ),
        Registered(
            "check_sample", reference.check_sample, BATCH, "the check sample is recovered", not_for=("process_blank",),
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
    )
