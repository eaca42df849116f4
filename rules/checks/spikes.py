"""Spiked samples: how much of a known amount is found again, both contents counted on one mass."""

from __future__ import annotations

import math

from spikeward.rules.checks.chance import factor_of, in_sample_pair, of_fit
from spikeward.rules.checks.duplicates import partner
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
from spikeward.rules.prepared import PreparedLine
from spikeward.rules.quantities import UNITS
from spikeward.rules.records import SERIES_ROLES
from spikeward.rules.rounding import figure, percent, rounded
from spikeward.rules.rulebook import Limits
from spikeward.rules.solve.solved import Solved
from spikeward.rules.uncertainty.fieller import t_quantile
from spikeward.rules.uncertainty.interval import Component, effective_degrees_of_freedom

_NAME = "spike_recovery"
_PARTNER = {"sample": "spiked_sample", "spiked_sample": "sample"}
NOT_FOR = tuple(role for role in SERIES_ROLES if role not in _PARTNER)
"""Roles that are not compared so."""
_AFTER = "after digestion"


def spike_recovery(subject: Subject, limits: Limits) -> Check:
    """R = (C_spiked m - C_native m) / n_added, with m the mass of the spiked digest, dry where results are dry.

    Told of the spiked sample and of the one that it belongs to.
    """
    role = _PARTNER.get(subject.role, "")
    name = subject.solved.prepared.key.sample
    if not role:
        return not_evaluated(_NAME, "only a spiked sample and its sample are compared")
    other = partner(subject, role)
    if other is None:
        remedy = f"Measure {'the sample as it is' if role == 'sample' else 'a spiked sample'} with the batch"
        return not_evaluated(_NAME, f"no {role.replace('_', ' ')} {name} was measured in this batch", remedy)
    spiked, native = (subject.solved, other) if role == "sample" else (other, subject.solved)
    if {spiked.prepared.key, native.prepared.key} & subject.context.waiting:
        return not_evaluated(_NAME, f"{name} and its spiked sample are not both complete yet")
    for one in (spiked, native):
        if one.no_number or one.content is None:
            return not_evaluated(_NAME, f"{series_words(one.prepared.key)} gives no number for {subject.name}")
    return _recovery(spiked, native, subject, limits)


def _recovery(spiked: Solved, native: Solved, subject: Subject, limits: Limits) -> Check:
    added, size = spiked.prepared.spiked_amount, sample_size(spiked.prepared)
    if added is None or not added > 0.0:
        remedy = "Declare standard and volume under preparations: spike"
        return not_evaluated(_NAME, "the amount of the spike is not known", remedy)
    pair = in_sample_pair(spiked, native)
    if pair is None or size is None or spiked.in_sample is None:
        remedy = "Declare the way back to the sample in the same unit for both, under preparations"
        return not_evaluated(_NAME, "the contents of spiked and native sample are not on one basis", remedy)
    held, least = max(pair[1].content, 0.0) * size, number(limits, "needs_share")
    told = f"{_amount(added, spiked.prepared)} added {spiked.prepared.spiked_when}".rstrip()
    if least is not None and added < least * held:
        share = percent(added / held)
        remedy = "Spike with about as much as the sample holds"
        return not_evaluated(_NAME, f"the spike, {told}, is only {share} of what the sample holds", remedy)
    found = (pair[0].content - pair[1].content) * size / added
    half = _half(spiked, native, size / added, subject)
    recovered = near_limits(found, limits, 3)
    if half > 0.0:
        share, spread = rounded(100.0 * found, 100.0 * half)
        recovered = f"{share} % ± {spread} %"
    sentence = f"Of {told}, {recovered} is found again"
    if spiked.prepared.spiked_when == _AFTER:
        sentence += ", which proves nothing about the digestion"
    if spiked.prepared.way_back is not None and spiked.prepared.way_back.relative_uncertainty:
        sentence += ", after results were divided by the declared recovery"
    remedy = "Look for losses in the preparation, a slip in the spike, or species that the additions do not meet"
    return graded(_NAME, found, limits, sentence, remedy, show=as_percent)


def _half(spiked: Solved, native: Solved, per_content: float, subject: Subject) -> float:
    """The expanded uncertainty of the recovery by the scatter of both fits; zero where it is not known."""
    parts = [Component(part.standard_uncertainty * per_content, part.degrees_of_freedom)
             for one in (spiked, native) for part in of_fit(one, factor_of(one))]  # fmt: skip
    if len(parts) < 2:
        return 0.0
    u = math.hypot(*(part.standard_uncertainty for part in parts))
    return u * t_quantile(effective_degrees_of_freedom(parts), subject.context.rules.coverage)


def sample_size(line: PreparedLine) -> float | None:
    """How much sample went into a digest: g, dry where results are dry, or mL of a liquid one; None where unknown."""
    back = line.way_back
    if back is None:
        return None
    return back.mass_g if back.mass_g is not None else back.volume_ml


def _amount(amount: float, line: PreparedLine) -> str:
    """An amount that is told in the unit of the way back times g or mL, in µg or µmol."""
    if line.way_back is None:
        return figure(amount)
    kind, size = UNITS[line.way_back.unit]
    per = 1e-3 if kind.endswith("per volume") else 1.0  # the table is in g/L and g/g, the sample in mL and g
    return f"{figure(amount * float(size) * per * 1e6)} {'µmol' if kind.startswith('amount') else 'µg'}"
