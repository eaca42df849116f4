"""Duplicates: the same sample prepared a second time, compared in the sample."""

from __future__ import annotations

from dataclasses import replace

from spikeward.rules.checks.chance import amount_words, in_sample_pair, near_zero_of
from spikeward.rules.checks.reruns import original, reported_rerun
from spikeward.rules.checks.subject import (
    Subject,
    as_percent,
    graded,
    near_limits,
    not_evaluated,
    number,
    series_words,
)
from spikeward.rules.outcomes import Check
from spikeward.rules.records import SERIES_ROLES
from spikeward.rules.rulebook import Limits
from spikeward.rules.solve.solved import Solved

_NAME = "duplicate"
_PARTNER = {"sample": "duplicate", "duplicate": "sample"}
NOT_FOR = tuple(role for role in SERIES_ROLES if role not in _PARTNER)
"""Roles that are not compared so."""

REPEATABILITY_FACTOR = 2.8
"""Two results differ by no more than 2.8 s_r in 95 of 100 cases (ISO 5725-6; 1.96 sqrt 2 is 2.77)."""


def partner(subject: Subject, role: str) -> Solved | None:
    """The same sample's line in a series of another role of the batch; of several dilutions the one to report."""
    name = original(subject.solved.prepared)
    found = subject.context.runs.get((role, subject.line_key, name), ())
    chosen = reported_rerun(found, subject.context)
    return next((solved for solved in found if solved.prepared.key == chosen), found[0] if found else None)


def duplicate(subject: Subject, limits: Limits) -> Check:
    """The relative difference of two preparations of one sample, over their mean; told of both.

    Where the repeatability s_r of the method is declared, a share of the content, 2.8 s_r takes the place of the limit
    that warns.
    """
    name, role = subject.solved.prepared.key.sample, _PARTNER.get(subject.role, "")
    if not role:
        return not_evaluated(_NAME, "only samples and their duplicates are compared")
    other = partner(subject, role)
    if other is None:
        remedy = "Prepare one sample of the batch twice"
        return not_evaluated(_NAME, f"no {role} {name} was measured in this batch", remedy)
    words = series_words(other.prepared.key)
    if {subject.solved.prepared.key, other.prepared.key} & subject.context.waiting:
        return not_evaluated(_NAME, f"{name} and its duplicate are not both complete yet")
    for one in (subject.solved, other):
        if one.no_number or one.content is None:
            return not_evaluated(_NAME, f"{series_words(one.prepared.key)} gives no number for {subject.name}")
    pair = in_sample_pair(subject.solved, other)
    if pair is None:
        remedy = "Declare the same way back to the sample for both, under preparations"
        return not_evaluated(_NAME, f"the contents of {name} and {words} are not on one basis", remedy)
    if any(near_zero_of(estimate) for estimate in pair):
        return not_evaluated(_NAME, "a content cannot be told from zero, and a share of it means nothing")
    own, theirs = (estimate.content for estimate in pair)
    asked = _with_repeatability(limits)
    share = abs(own - theirs) / (0.5 * own + 0.5 * theirs)
    sentence = (
        f"{words[:1].upper()}{words[1:]} gives {amount_words(theirs, pair[1])} and this series "
        f"{amount_words(own, pair[0])}, {near_limits(share, asked)} of their mean apart"
    )
    remedy = "Look for a slip in one of the two preparations, or for a sample that is not even; prepare it a third time"
    return graded(_NAME, share, asked, sentence, remedy, show=as_percent)


def _with_repeatability(limits: Limits) -> Limits:
    s_r = number(limits, "repeatability")
    if s_r is None:
        return limits
    widest = REPEATABILITY_FACTOR * s_r
    fails = number(limits, "fail_above")
    values = {**limits.values, "warn_above": widest, "fail_above": fails if fails is None or fails > widest else None}
    source = limits.sources.get("repeatability", "")
    return replace(limits, values=values, sources={**limits.sources, "warn_above": f"2.8 s_r, ISO 5725-6; {source}"})
