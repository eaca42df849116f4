"""Checks of a series as a whole, complete and free of contradictions, and of its preparation."""

from __future__ import annotations

from collections.abc import Sequence

from spikeward.rules.checks.subject import Subject, capital, not_evaluated, plain
from spikeward.rules.outcomes import FAIL, PASS, WARN, Check
from spikeward.rules.records import Members
from spikeward.rules.rulebook import Limits, Rulebook
from spikeward.rules.words import line_words, listed

_IN_FORCE = "the readings in force"


def completeness(members: Members, missing: Sequence[str], over: bool, rules: Rulebook) -> Check:
    """Whether the series is complete, and what it means if nothing more is expected.

    Parameters
    ----------
    missing : what the series still lacks
    over : the series lapsed, or its batch is closed: nothing more is expected

    Notes
    -----
    An analyte that lacks more than it can do without fails by its own checks; the others stand.
    """
    told = listed(missing) or "every reading"
    if not missing and members.readings:
        return plain("completeness", PASS, "Every level and every reading is there.")
    if not over:
        return not_evaluated("completeness", f"still expected: {told}")
    verdict = FAIL if rules.series.lapsed == FAIL or not members.readings else WARN
    remedy = "Measure or enter what is missing; late files are still read"
    sentence = f"The series is not complete; it lacks {told}."
    return plain("completeness", verdict, sentence, remedy, "the rule file, series: lapsed")


def answered(members: Members) -> Check:
    """Of a series that was read and of which no line is left to report; it never passes by having nothing to check."""
    read = listed(sorted({line_words(reading.analyte, reading.line) for reading in members.readings}))
    sentence = f"No analyte of this series is reported: the rules use {read} for others only."
    remedy = "Look at overlap and internal_standard in the rule file"
    return plain("reported", FAIL, sentence, remedy, "the rule file")


def conflicts(members: Members) -> tuple[Check, ...]:
    """Contradictions between sources, which fail the series, and doubts, which warn; a pass where there are none."""
    return (
        *_contradictions(members.conflicts),
        *_one_each("identity", members.warnings, WARN, "The origin of every reading is clear.", "Look at these files"),
    )


def preparation(subject: Subject, limits: Limits) -> Check:
    """Whether volumes, standard and the way back to the sample are known."""
    prepared = subject.solved.prepared
    if prepared.problems:
        told = " ".join(_sentence(problem) for problem in prepared.problems)
        return plain("preparation", FAIL, told, "Correct the rule file or the bench entries", "what the design needs")
    if prepared.missing and prepared.key in subject.context.waiting:
        return not_evaluated("preparation", f"still expected: {listed(prepared.missing)}")
    if prepared.missing:
        told = f"Without {listed(prepared.missing)} there is no result of {subject.name}."
        return plain("preparation", FAIL, told, "Enter it; late entries are still read", "what the design needs")
    return plain("preparation", PASS, "Volumes, standard and the way back to the sample are known.")


def _contradictions(sentences: Sequence[str]) -> tuple[Check, ...]:
    """Each says after its last semicolon what to do about it."""
    if not sentences:
        return (plain("conflict", PASS, "No source contradicts another."),)
    parts = [text.rpartition("; ") for text in sentences]
    return tuple(
        plain("conflict", FAIL, _sentence(what or do), capital(do) if what else "Decide which one is right", _IN_FORCE)
        for what, _, do in parts
    )


def _one_each(name: str, sentences: Sequence[str], verdict: str, good: str, remedy: str) -> tuple[Check, ...]:
    if not sentences:
        return (plain(name, PASS, good),)
    return tuple(plain(name, verdict, _sentence(text), remedy, _IN_FORCE) for text in sentences)


def _sentence(text: str) -> str:
    text = capital(text)
    return text if text.endswith(".") else f"{text}."
