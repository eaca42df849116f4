"""Several lines of one analyte: the reported one against the others, never a silent switch."""

from __future__ import annotations

from spikeward.rules.checks.chance import allowed, amount_words, gravest, near_zero_of, of_background, of_fit
from spikeward.rules.checks.subject import Subject, not_evaluated, number, plain, source_of
from spikeward.rules.outcomes import FAIL, PASS, WARN, Check, Estimate
from spikeward.rules.rounding import percent, percent_apart
from spikeward.rules.rulebook import Limits, LinesRule, Rulebook
from spikeward.rules.solve.solved import Solved
from spikeward.rules.words import line_words

_NAME = "line_agreement"
_RULES = "the rule file; key lines"


def is_reported(analyte: str, line: str, rules: Rulebook) -> bool:
    """Whether this line of an analyte is the one that the rules report; any is, where they name none."""
    rule = rules.lines.get(analyte)
    return rule is None or rule.report in (line, line_words(analyte, line))


def other_lines(subject: Subject) -> tuple[Solved, ...]:
    """The same analyte of the same series on its other lines, in the order of their names."""
    analyte, own = subject.line_key
    found = [
        solved
        for (role, (other, line)), every in subject.context.solved.items()
        if role == subject.role and other == analyte and line != own
        for solved in every
        if solved.prepared.key == subject.solved.prepared.key
    ]
    return tuple(sorted(found, key=lambda solved: solved.prepared.line))


def line_agreement(subject: Subject, limits: Limits) -> Check:
    """The content by the reported line against that by each other line.

    What is common to both, standard and volumes, cancels; what is left are the scatters of the two fits and the two
    backgrounds. They agree within t(ν_eff) times the combined standard uncertainty, or within the declared share.
    """
    analyte, own = subject.line_key
    rules, others = subject.context.rules, other_lines(subject)
    rule = rules.lines.get(analyte)
    if rule is None:
        if not others:
            return not_evaluated(_NAME, f"{analyte} was read at one line only")
        why = f"the rules do not say which line of {analyte} is reported"
        return not_evaluated(_NAME, why, "Declare it under lines")
    if is_reported(analyte, own, rules):
        if not others:
            return not_evaluated(_NAME, f"{analyte} was read at its reported line only", "Read a second line as well")
        return gravest([_compared(subject.solved, other, rule, limits) for other in others])
    reported = [other for other in others if is_reported(analyte, other.prepared.line, rules)]
    if not reported:
        sentence = f"{line_words(analyte, rule.report)}, the line of {analyte} that is reported, is not in the export."
        remedy = "Export it as well, or declare under lines another one to report"
        return plain(_NAME, FAIL, sentence, remedy, _RULES)
    return gravest([_compared(one, subject.solved, rule, limits) for one in reported])


def _compared(reported: Solved, other: Solved, rule: LinesRule, limits: Limits) -> Check:
    names = [_name(reported), _name(other)]
    for solved, name in zip((reported, other), names, strict=True):
        if solved.content is None:
            return not_evaluated(_NAME, f"{name} gives no number", "Look at the checks of that line")
    first, second = reported.content, other.content
    if first is None or second is None or first.unit != second.unit:
        return not_evaluated(_NAME, f"{names[0]} and {names[1]} were solved in different units")
    apart = abs(first.content - second.content)
    told = f"{names[0]} gives {amount_words(first.content, first)} in the test solution and {names[1]} "
    told += amount_words(second.content, second)
    if rule.agree is not None:
        if near_zero_of(first):
            return not_evaluated(_NAME, f"the content by {names[0]} cannot be told from zero")
        share = apart / first.content
        told += f", {percent_apart(share, [rule.agree])} apart (warns above {percent(rule.agree, 3)})."
        return _verdict(share <= rule.agree, told, apart, first, f"at most {percent(rule.agree, 3)} apart", _RULES)
    p = number(limits, "warn_p")
    if p is None:
        return not_evaluated(_NAME, "the rules ask for no limit")
    parts = [component for solved in (reported, other) for component in (*of_fit(solved), *of_background(solved))]
    chance = allowed(parts, p) if of_fit(reported) and of_fit(other) else None
    if chance is None:
        remedy = "Measure more vessels, or declare under lines how near they must agree"
        return not_evaluated(_NAME, "the scatter about one of the two lines is not known", remedy)
    widest = amount_words(chance, first)
    told += f"; chance allows them to be {widest} apart at p {p:g}."
    return _verdict(apart <= chance, told, apart, first, f"at most {widest} apart", source_of(limits, "warn_p", _NAME))


def _verdict(agrees: bool, sentence: str, apart: float, content: Estimate, limit: str, source: str) -> Check:
    remedy = "Look for an interference on one of the two lines; the reported line is not changed by itself"
    verdict = PASS if agrees else WARN
    return Check(_NAME, verdict, sentence, apart, content.unit, limit, source, "" if agrees else remedy)


def _name(solved: Solved) -> str:
    return line_words(solved.prepared.analyte, solved.prepared.line)


def several_lines(subject: Subject) -> bool:
    """Whether the analyte has several lines in this series, or the rules name one to report."""
    return subject.line_key[0] in subject.context.rules.lines or bool(other_lines(subject))
