"""Reference materials and check samples: recovery, and whether the distance from what is known is more than chance."""

from __future__ import annotations

import math
from dataclasses import replace

from spikeward.rules.checks.subject import Subject, as_percent, graded, near_limits, not_evaluated, number, source_of
from spikeward.rules.outcomes import FAIL, NOT_EVALUATED, SEVERITY, WARN, Check
from spikeward.rules.rounding import percent
from spikeward.rules.rulebook import Known, Limits
from spikeward.rules.solve.solved import Solved
from spikeward.rules.uncertainty.fieller import t_quantile
from spikeward.rules.words import unit_words

_WORDS = {"reference": "reference", "check": "check sample"}


def reference(subject: Subject, limits: Limits) -> Check:
    """Of a reference its own recovery; of every other series the worst recovery of the batch's references."""
    return _of(subject, limits, "reference", "reference")


def check_sample(subject: Subject, limits: Limits) -> Check:
    """Of a check sample its own recovery; of every other series the worst of the batch's check samples."""
    return _of(subject, limits, "check_sample", "check")


def _of(subject: Subject, limits: Limits, name: str, role: str) -> Check:
    if subject.role == role:
        return recovery(subject.solved, subject, limits, name)
    if not number(limits, "samples_follow"):
        return not_evaluated(name, f"the rules keep samples apart from the {_WORDS[role]}")
    found = [
        recovery(solved, subject, limits, name)
        for solved in subject.context.solved.get((role, subject.line_key), ())
    ]
    if not found:
        return _none_measured(subject, name, role)
    judged = [check for check in found if check.verdict != NOT_EVALUATED]
    return max(judged, key=lambda check: (SEVERITY[check.verdict], check.sentence)) if judged else found[0]


def _none_measured(subject: Subject, name: str, role: str) -> Check:
    told = f"no {_WORDS[role]} of {subject.name} was measured in this batch"
    if role not in subject.context.rules.series.closes_with:
        return not_evaluated(name, told, f"Measure a {_WORDS[role]} with the batch")
    if not subject.context.batch.closed:
        return not_evaluated(name, f"{told}; it is still expected")
    sentence = f"{told[:1].upper()}{told[1:]}, though the rules close a batch with one."
    remedy = f"Measure a {_WORDS[role]} with the batch"
    return Check(name, WARN, sentence, source="the rule file; key series: closes_with", remedy=remedy)


def recovery(solved: Solved, subject: Subject, limits: Limits, name: str) -> Check:
    """What one reference found of its known content.

    Beyond limits on the recovery, the zeta score (x - X) / sqrt(u_x² + u_X²) of ISO 13528 is held against Student's t
    at ``warn_p`` and ``fail_p`` (two-sided) with the effective degrees of freedom of that uncertainty, not against 2
    and 3.
    """
    key, analyte = solved.prepared.key, solved.prepared.analyte
    told = f"{_WORDS.get(key.role, key.role)} {key.sample}"
    known = subject.context.rules.references.get(key.sample, {}).get(analyte)
    if known is None:
        return not_evaluated(name, f"no content of {analyte} is declared for {told}", "Declare it under references")
    if key in subject.context.waiting:
        return not_evaluated(name, f"{told} is not complete yet")
    estimate = solved.in_sample or solved.content
    if estimate is None:
        sentence = f"{told[:1].upper()}{told[1:]} gives no number for {subject.name}: {_reason(solved)}."
        return Check(name, FAIL, sentence, source="theory", remedy=f"Repeat the {told}")
    try:
        content = known.content.to(estimate.unit)
    except ValueError:
        why = f"{told} is declared in {unit_words(known.content.unit)} and found in {unit_words(estimate.unit)}"
        return Check(
            name, FAIL, f"No recovery: {why}.", source="the rule file; key references",
            remedy="Give both in one kind of unit, under references or report_in",
        )  # fmt: skip
    found = estimate.content / content
    remedy = f"Find the cause before reporting; repeat {told} and the samples of the batch"
    share = near_limits(found, limits, 3)
    sentence = f"{told[:1].upper()}{told[1:]}: {share} of {_declared(known)} {analyte} found"
    check = graded(name, found, limits, sentence, remedy, show=as_percent)
    check = _by_distance(check, solved, known, limits, remedy)
    own = key == subject.solved.prepared.key
    if not own and (key, subject.line_key) in subject.context.failed and check.verdict != FAIL:
        sentence = f"{check.sentence[:-1]}; the {told} failed its own checks."
        return replace(check, verdict=WARN, sentence=sentence, remedy=f"Look at the summary of {told}")
    return check


def _declared(known: Known) -> str:
    return f"{known.content.value:f} {unit_words(known.content.unit)}"


def _reason(solved: Solved) -> str:
    return solved.no_number or "it is not solved"


def _by_distance(check: Check, solved: Solved, known: Known, limits: Limits, remedy: str) -> Check:
    """The same check with its zeta score told, and judged by it where that is worse."""
    estimate = solved.in_sample or solved.content
    if estimate is None or not estimate.standard_uncertainty:
        return check
    content = known.content.to(estimate.unit)
    scale = content / float(known.content.value) if known.content.value else 1.0
    u_known = (known.standard_uncertainty or 0.0) * scale
    u = math.hypot(estimate.standard_uncertainty, u_known)
    # Welch-Satterthwaite; the declared uncertainty counts as known
    freedom = solved.effective_degrees_of_freedom * (u / estimate.standard_uncertainty) ** 4
    zeta = (estimate.content - content) / u
    told = f"zeta score {zeta:.1f}" + ("" if u_known else ", the uncertainty of what is known not being declared")
    for limit, verdict in (("fail_p", FAIL), ("warn_p", WARN)):
        p = number(limits, limit)
        if p is None or freedom <= 0 or SEVERITY[verdict] <= SEVERITY[check.verdict]:
            continue
        t = t_quantile(freedom, 1.0 - p)
        if abs(zeta) > t:
            sentence = f"{check.sentence[:-1]}; {told}: chance allows {t:.1f} at {percent(p)}."
            return Check(
                check.name, verdict, sentence, check.observed, check.unit, check.limit,
                source_of(limits, limit, check.name), remedy,
            )  # fmt: skip
    return replace(check, sentence=f"{check.sentence[:-1]}; {told}.")
