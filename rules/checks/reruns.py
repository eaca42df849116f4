"""Runs of one sample again at another dilution: which one is reported, and whether those in range agree."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import replace

from spikeward.rules.checks.chance import allowed, amount_words, factor_of, gravest, in_sample_pair, of_fit
from spikeward.rules.checks.signal import linear_top
from spikeward.rules.checks.subject import (
    NO_LIMITS,
    Context,
    LineKey,
    Subject,
    not_evaluated,
    number,
    plain,
    series_words,
    source_of,
)
from spikeward.rules.outcomes import FAIL, NOT_EVALUATED, PASS, WARN, Check
from spikeward.rules.prepared import PreparedLine
from spikeward.rules.records import Members, SeriesKey
from spikeward.rules.rounding import figure
from spikeward.rules.rulebook import Limits
from spikeward.rules.solve.solved import Solved
from spikeward.rules.words import listed

_NAME = "rerun"


def original(line: PreparedLine) -> str:
    """The sample that a series is a run of: what it was run again for, or itself."""
    return line.rerun_of or line.key.sample


def original_of(members: Members) -> str:
    """The same before a series is prepared, from the names of its solutions."""
    told = sorted({text for r in members.readings for meaning, text, _ in r.values if meaning == "rerun_of" and text})
    return told[0] if told else members.key.sample


def beside_each_other(context: Context, lines: Iterable[Solved]) -> Context:
    """The context with the lines of its batch in it, by role and line, and by the sample that they are runs of."""
    solved: dict[tuple[str, LineKey], list[Solved]] = {}
    runs: dict[tuple[str, LineKey, str], list[Solved]] = {}
    for line in lines:
        role, place = line.prepared.key.role, (line.prepared.analyte, line.prepared.line)
        solved.setdefault((role, place), []).append(line)
        runs.setdefault((role, place, original(line.prepared)), []).append(line)
    return replace(
        context,
        solved={place: tuple(found) for place, found in solved.items()},
        runs={place: tuple(found) for place, found in runs.items()},
    )


def runs_of(subject: Subject) -> tuple[Solved, ...]:
    """Every run of the subject's sample on its line, itself among them, the lowest dilution first."""
    name = original(subject.solved.prepared)
    found = subject.context.runs.get((subject.role, subject.line_key, name), (subject.solved,))
    return tuple(sorted(found, key=_order))


def _order(solved: Solved) -> tuple[float, bool, SeriesKey]:
    """By dilution; among equal ones the original comes first, for nobody runs a sample until it suits."""
    return _dilution(solved), bool(solved.prepared.rerun_of), solved.prepared.key


def _dilution(solved: Solved) -> float:
    back = solved.prepared.way_back
    return back.dilution if back is not None else 1.0


def in_range(solved: Solved, context: Context) -> bool:
    """Whether a run gives a number with no signal above the straight part, and nothing of it is still to come."""
    if solved.no_number or solved.content is None or solved.prepared.key in context.waiting:
        return False
    limits = context.rules.checks.get("linear_top", NO_LIMITS)
    return linear_top(Subject(solved, context), limits).verdict != FAIL


def reported_rerun(runs: Sequence[Solved], context: Context) -> SeriesKey | None:
    """Which of several runs of one sample on one line is reported: the lowest dilution that is in range.

    Parameters
    ----------
    runs : linked by folder, batch, role, original sample, analyte and line, in any order

    Returns
    -------
    None where none is in range; the digits of the runs do not matter, so nothing is chosen for its result
    """
    return next((one.prepared.key for one in sorted(runs, key=_order) if in_range(one, context)), None)


def rerun(subject: Subject, limits: Limits) -> Check:
    """Which run of a sample is reported, and whether the runs that are in range agree in the sample."""
    runs, context, own = runs_of(subject), subject.context, subject.solved.prepared.key
    name = original(subject.solved.prepared)
    if len(runs) < 2:
        return not_evaluated(_NAME, f"{name} was run once")
    late = [solved for solved in runs if solved.prepared.key in context.waiting]
    if late:
        return not_evaluated(_NAME, f"{listed([series_words(one.prepared.key) for one in late])} is not complete yet")
    chosen = reported_rerun(runs, context)
    if chosen is None:
        sentence = f"None of the {len(runs)} runs of {name} gives a number in range."
        return plain(_NAME, FAIL, sentence, "Run it again at another dilution", "the linear top")
    reported = next(one for one in runs if one.prepared.key == chosen)
    told = f"{_told(reported)} is the one to report of {len(runs)} runs of {name}: the lowest dilution in range"
    if own != chosen and not in_range(subject.solved, context):
        return plain(_NAME, PASS, f"{told}; this one is not in range.")
    others = [one for one in runs if one.prepared.key != chosen and in_range(one, context)]
    if not others:
        return plain(_NAME, PASS, f"{told}; no other one is.")
    partners = others if own == chosen else [subject.solved]
    return gravest([_overlap(reported, other, told, limits) for other in partners])


def _overlap(reported: Solved, other: Solved, told: str, limits: Limits) -> Check:
    """The contents in the sample of two runs in range; background and blank are common to both."""
    pair, p = in_sample_pair(reported, other), number(limits, "warn_p")
    parts = [part for one in (reported, other) for part in of_fit(one, factor_of(one))]
    chance = allowed(parts, p) if p is not None and of_fit(reported) and of_fit(other) else None
    if pair is None or chance is None or p is None:
        why = "their contents are not on one basis" if pair is None else "the scatter of one of them is not known"
        return Check(_NAME, NOT_EVALUATED, f"Not evaluated: {told}, but whether the runs agree is open: {why}.")
    apart = abs(pair[0].content - pair[1].content)
    sentence = (
        f"{told}, with {amount_words(pair[0].content, pair[0])}; {_told(other)} gives "
        f"{amount_words(pair[1].content, pair[1])}, and chance allows them to be {amount_words(chance, pair[0])} apart "
        f"at p {p:g}."
    )
    verdict = PASS if apart <= chance else WARN
    remedy = "Look for a slip in a dilution, or for an interference that dilution changes; run it at a third dilution"
    return Check(
        _NAME, verdict, sentence, apart, pair[0].unit, f"at most {amount_words(chance, pair[0])} apart",
        source_of(limits, "warn_p", _NAME), remedy if verdict == WARN else "",
    )  # fmt: skip


def _told(solved: Solved) -> str:
    return f"{series_words(solved.prepared.key)} (dilution {figure(_dilution(solved))})"
