"""Checks of the result: how well it is known, what was subtracted, and whether the standard was in date."""

from __future__ import annotations

from dataclasses import replace

from spikeward.rules.checks.line import covers_zero, fitted_points, near_zero
from spikeward.rules.checks.subject import (
    BLANK_ROLES,
    Subject,
    as_percent,
    graded,
    near_limits,
    not_evaluated,
    number,
    plain,
    source_of,
)
from spikeward.rules.outcomes import FAIL, PASS, WARN, Check, Estimate
from spikeward.rules.rounding import figure, rounded
from spikeward.rules.rulebook import Limits
from spikeward.rules.words import counted, unit_words

_BLANKS = "the rule file; key blanks"


def reported(subject: Subject) -> Estimate | None:
    """The content in the sample where it is known, else in the test solution."""
    return subject.solved.in_sample or subject.solved.content


def expanded_uncertainty(subject: Subject, limits: Limits) -> Check:
    """The expanded uncertainty over the content; a precision from few vessels only warns."""
    estimate, count = reported(subject), len(fitted_points(subject))
    name = "expanded_uncertainty"
    if estimate is not None and _below_zero(estimate):
        return _negative(subject, estimate)
    if subject.role in BLANK_ROLES:
        return not_evaluated(name, near_zero(subject))
    if estimate is None or estimate.expanded_uncertainty is None:
        why = estimate.reason if estimate is not None and estimate.reason else "there is no uncertainty"
        return not_evaluated(name, why.rstrip("."), "Four or more vessels show the scatter")
    wide = estimate.expanded_uncertainty
    if wide == 0:
        sentence = "All vessels lie on the line to the last digit; a scatter of zero is not a real one."
        return plain(name, WARN, sentence, "Export signals with more digits, or measure more vessels", "theory")
    remedy = "Measure more vessels, or find what scatters"
    if estimate.content <= 0 or wide >= estimate.content:
        value, spread = rounded(estimate.content, wide)
        sentence = f"The content, {value} ± {spread} {unit_words(estimate.unit)}, cannot be told from zero."
        return plain(name, WARN, sentence, "Take it for not detected, or concentrate the test solution", "theory")
    share = wide / estimate.content
    check = graded(
        name, share, limits, f"The expanded uncertainty is {near_limits(share, limits)} of the content", remedy,
        show=as_percent,
    )  # fmt: skip
    needed = number(limits, "fails_from_vessels")
    if check.verdict == FAIL and needed is not None and count < needed:
        few = f"with the precision of {count} vessels alone it only warns"
        return replace(check, verdict=WARN, sentence=f"{check.sentence[:-1]}; {few}.")
    return check


def _below_zero(estimate: Estimate) -> bool:
    """Whether a content lies below zero with its whole interval, or without one that could be asked."""
    return estimate.content < 0 if estimate.interval is None else estimate.interval[1] < 0


def _negative(subject: Subject, estimate: Estimate) -> Check:
    """A content that is truly below zero: no sample holds it, so what was subtracted or the zero is wrong."""
    value = figure(estimate.content)
    told = f"The content, {value} {unit_words(estimate.unit)}, is below zero"
    if estimate.expanded_uncertainty:
        value, spread = rounded(estimate.content, estimate.expanded_uncertainty)
        unit = unit_words(estimate.unit)
        told = f"The content, {value} ± {spread} {unit}, is below zero by more than its uncertainty"
    why, remedy = "though nothing was subtracted", "Look at the zero of the instrument and at the unspiked vessel"
    if subject.solved.subtracted:
        why, remedy = "background or blank was subtracted too high", "Look at background and blanks; measure them again"
    surely = estimate.interval is not None and subject.role not in BLANK_ROLES
    return plain("expanded_uncertainty", FAIL if surely else WARN, f"{told}: {why}.", remedy, "theory")


def blank(subject: Subject, limits: Limits) -> Check:
    """The blanks that the rules subtract: that they came, and the process blank's share of the result."""
    asked = subject.context.rules.blanks
    if not asked.background and not asked.process and not asked.reagent:
        return not_evaluated("blank", "the rules subtract no blank", "Declare it under blanks")
    if lacking := blank_lacking(subject):
        if subject.context.batch.closed:
            sentence = f"{lacking[:1].upper()}{lacking[1:]}, though the rules subtract it."
            remedy = "Measure it, or take it out of the rules"
            if subject.solved.blank_note:
                remedy = "Look at the process blank's own summary and at its preparation"
            return plain("blank", FAIL, sentence, remedy, _BLANKS)
        return not_evaluated("blank", f"{lacking}; it is still expected")
    solved = subject.solved
    if solved.background is not None and solved.background.problem:
        sentence = f"The background is not known: {solved.background.problem}."
        return plain("blank", FAIL, sentence, "Measure the background again", _BLANKS)
    if solved.reagent is not None and solved.reagent.problem:
        sentence = f"What the reagents bring in is not known: {solved.reagent.problem.rstrip('.')}."
        return plain("blank", FAIL, sentence, "Look at the reagent blank's own summary; measure it again", _BLANKS)
    declared = subject.line_key[0] in asked.reagent_amounts
    if solved.reagent is not None and not declared and (failed := _failed("reagent_blank", subject)):
        sentence = f"The reagent blank that was subtracted failed its own checks (reagent blank {failed})."
        return plain("blank", FAIL, sentence, "Look at the blank's own summary; repeat it", "theory")
    if subject.role in BLANK_ROLES:
        return plain("blank", PASS, "This series is a blank itself.")
    if not asked.process or solved.blank is None:
        return _without_process_blank(subject)
    return _share(subject, limits, solved.blank)


def _share(subject: Subject, limits: Limits, amount: float) -> Check:
    estimate = reported(subject)
    if failed := _failed("process_blank", subject):
        sentence = f"The process blank that was subtracted failed its own checks (process blank {failed})."
        return plain("blank", FAIL, sentence, "Look at the blank's own summary; repeat it", "theory")
    if estimate is None or estimate.content <= 0 or covers_zero(estimate) or near_zero(subject):
        sentence = "Blank and sample cannot be told apart: the content does not differ from zero."
        return plain("blank", WARN, sentence, "Take it for not detected, or look where the blank comes from", "theory")
    share = abs(amount) / estimate.content
    check = graded(
        "blank", share, limits, f"The process blank is {near_limits(share, limits)} of the result",
        "Find what brings the analyte in: reagents, vessels, air; prepare the sample again", show=as_percent,
    )  # fmt: skip
    return _few_blanks(check, subject, limits)


def _failed(role: str, subject: Subject) -> str:
    """The blanks of a role that failed on this line, by their samples."""
    failed = [key.sample for key, line in subject.context.failed if key.role == role and line == subject.line_key]
    return ", ".join(sorted(failed))


def _few_blanks(check: Check, subject: Subject, limits: Limits) -> Check:
    """One blank has no scatter: how blanks vary from preparation to preparation is then in no uncertainty."""
    count, needed = subject.solved.blanks, number(limits, "warn_blanks_below")
    if needed is None or count >= needed or check.verdict == FAIL:
        return check
    few = f"{counted(count, 'process blank')} of {needed:g} or more"
    if count == 1:
        few = "one process blank says nothing about how preparations vary"
    return replace(
        check, verdict=WARN, sentence=f"{check.sentence[:-1]}; {few}.",
        source=check.source if check.verdict == WARN else source_of(limits, "warn_blanks_below", "blank"),
        remedy=check.remedy or "Take two or more process blanks through the preparation with every batch",
    )  # fmt: skip


def blank_lacking(subject: Subject) -> str:
    """Which blank that the rules subtract has not been measured for this line, or an empty text."""
    asked, batch = subject.context.rules.blanks, subject.context.batch
    prepared = subject.solved.prepared
    already = subject.solved.net_by_export  # that blank is a background; a process blank is an amount
    if asked.background and not already and subject.line_key not in subject.context.backgrounds:
        return f"no background of {subject.name} was measured in this batch"
    if asked.reagent and subject.role != "reagent_blank" and (why := _reagent_lacking(subject)):
        return why
    if not asked.process or subject.role in BLANK_ROLES:
        return ""
    if not any(key.role == "process_blank" for key in batch.members):
        return "no process blank was measured in this batch"
    if prepared.way_back is not None and subject.solved.in_sample is not None and subject.solved.blank is None:
        why = subject.solved.blank_note.partition("no process blank was subtracted: ")[2]
        return f"no process blank of {subject.name} can be subtracted: {why or 'none gives a number'}"
    return ""


def _reagent_lacking(subject: Subject) -> str:
    if subject.solved.reagent is not None or subject.line_key[0] in subject.context.rules.blanks.reagent_amounts:
        return ""
    if any(key.role == "reagent_blank" for key in subject.context.batch.members):
        return f"no reagent blank of {subject.name} can be subtracted: none gives a number"
    return "no reagent blank was measured in this batch"


def _without_process_blank(subject: Subject) -> Check:
    """Nothing is subtracted in the sample: right where the rules or the export say so, else worth a look."""
    solved = subject.solved
    if subject.context.rules.blanks.process and solved.no_number:
        return not_evaluated("blank", "there is no content")
    if subject.context.rules.blanks.process:
        told = solved.blank_note or "no process blank was subtracted"
        return plain(
            "blank", WARN, f"{told[:1].upper()}{told[1:]}.", "Declare the way back to the sample under preparations"
        )
    if solved.net_by_export:
        return plain("blank", PASS, "The export had the blank taken off already; none was subtracted again.")
    if solved.reagent is not None:
        return plain("blank", PASS, "What the reagents bring into every vessel was taken off as an amount.")
    return plain("blank", PASS, f"The background of {subject.name} was taken off every reading.")


def standard(subject: Subject, limits: Limits) -> Check:
    """Whether the spiking standard was in date when the vessels were measured."""
    prepared = subject.solved.prepared
    if not prepared.expires:
        return not_evaluated("standard", "the rule file gives no date of expiry", "Declare it under standards: expires")
    times = sorted(reading.measured_at for reading in subject.readings if reading.measured_at)
    if not times:
        return not_evaluated("standard", "the export gives no acquisition time", "Declare the column measured_at")
    latest = times[-1][:10]
    told = f"in date until {prepared.expires}"
    if latest > prepared.expires:
        sentence = f"The standard {prepared.standard} was {told} and measured on {latest}."
        return Check(
            "standard", FAIL, sentence, limit=told, source="the standard's date of expiry",
            remedy="Repeat with a standard in date, or correct the date of expiry in the rule file",
        )  # fmt: skip
    return Check(
        "standard", PASS, f"The standard {prepared.standard} was {told}.", limit=told,
        source="the standard's date of expiry",
    )  # fmt: skip
