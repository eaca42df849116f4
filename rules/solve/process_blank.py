"""The process blank: analyte that the preparation itself brings in, subtracted as an amount, never as a signal."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

from spikeward.rules.outcomes import Estimate
from spikeward.rules.prepared import PreparedLine, WayBack
from spikeward.rules.quantities import UNITS
from spikeward.rules.solve.common import (
    background_component,
    background_effect_of,
    drift_components,
    reagent_component,
    recovery_component,
    with_drift,
)
from spikeward.rules.solve.solved import Solved
from spikeward.rules.solve.verdict import NEGATIVE, NEGATIVE_AS_READ, OUT_OF_RANGE
from spikeward.rules.solve.vessel_signal import mean_of
from spikeward.rules.uncertainty.interval import (
    Component,
    FitPart,
    effective_degrees_of_freedom,
    is_finite,
    printed,
)
from spikeward.rules.words import unit_words

NO_WAY_BACK = "no process blank was subtracted: the rule file declares no way back from the test solution"
UNKNOWN = "; its uncertainty is not known and not in that of the result"


def blank_amount(blank: Solved, sample: PreparedLine) -> float | None:
    """What one process blank contributes to a sample, in the unit of the sample's result.

    The blank's amount is C_b V_dig,b; divided by the sample's mass as the sample's own amount is: C_b times the ratio
    of the two digest volumes (dilutions included) times the sample's preparation factor. Where neither was made up to a
    digest volume both are plain dilutions, and the blank's is its own: C_b times the dilution of the blank.

    Returns
    -------
    None where the blank has no number or no way back, or one of the two has no digest volume to compare
    """
    factor = _blank_factor(blank, sample)
    return None if factor is None or blank.content is None else blank.content.content * factor


def subtract_process_blank(solved: Solved, blanks: Sequence[Solved], coverage: float) -> Solved:
    """Take the mean of the batch's process blanks off the content in the sample.

    C = (C0 V_dig - mean(C_b V_dig,b)) / m, a blank taken off by the export being a background and no process blank.
    The mean of blanks is a shared error, and the sample's own blank still varies: u² = s_b² (1 + 1/n_b), and never less
    than the uncertainty of the mean by the fits of the blanks. One blank lends the uncertainty of its fit once to the
    mean and once to the sample's own blank, and shows nothing of how preparations vary. The background is common to
    sample and blanks, so its error enters once, by the sensitivity of the difference (correlated inputs, JCGM 100:2008,
    5.2).

    Parameters
    ----------
    solved : any line; without a number, or a process blank itself, it comes back as it is
    blanks : the process blanks of the same batch, analyte and line, in any order
    coverage : of the interval, such as 0.95
    """
    sample = solved.prepared
    if solved.content is None or sample.key.role == "process_blank":
        return solved
    if sample.way_back is None:
        return replace(solved, blank_note=_joined(solved.blank_note, NO_WAY_BACK))
    ordered = sorted(blanks, key=lambda one: one.prepared.key)
    left_out = [why for one in ordered if (why := _why_left_out(one, solved))]
    used = [one for one in ordered if not _why_left_out(one, solved)]
    if not used:
        why = "; ".join(left_out) or "the batch has none that is solved"
        return replace(solved, blank_note=_joined(solved.blank_note, f"no process blank was subtracted: {why}"))
    return _subtracted(solved, sample.way_back, used, left_out, coverage)


def _blank_factor(blank: Solved, sample: PreparedLine) -> float | None:
    """From the blank's content to the sample's result."""
    back, own = sample.way_back, blank.prepared.way_back
    if back is None or own is None or blank.content is None:
        return None
    ours, theirs = UNITS[sample.unit], UNITS[blank.prepared.unit]
    if ours[0] != theirs[0]:
        return None
    if own.digest_ml is None and back.digest_ml is None:
        same = UNITS[own.unit][0] == UNITS[back.unit][0]
        return own.factor * float(UNITS[own.unit][1] / UNITS[back.unit][1]) if same else None
    if own.digest_ml is None or back.digest_ml is None:
        return None
    return back.factor * float(theirs[1] / ours[1]) * (own.digest_ml / back.digest_ml)


def _joined(*notes: str) -> str:
    return "; ".join(note for note in notes if note)


def _is_net(solved: Solved) -> bool:
    """Whether the background is off: subtracted here, or by the export."""
    return solved.background is not None or solved.net_by_export


def _why_left_out(blank: Solved, solved: Solved) -> str:
    """Why a process blank cannot be subtracted from a sample, or an empty text."""
    name, sample = blank.prepared.key.sample, solved.prepared
    if blank.no_number:
        return f"{name} gives no number ({blank.no_number})"
    if _is_net(blank) != _is_net(solved):
        return f"the background is off only one of process blank {name} and the sample: export both in the same way"
    if blank.prepared.way_back is None:
        return f"process blank {name} has no way back: declare its digest volume or dilution under preparations"
    if blank_amount(blank, sample) is not None:
        return ""
    if UNITS[blank.prepared.unit][0] != UNITS[sample.unit][0]:
        return f"{name} was solved in {unit_words(blank.prepared.unit)} and the sample in {unit_words(sample.unit)}"
    return f"the digest volumes of {name} and of the sample are not both known"


def _subtracted(
    solved: Solved, back: WayBack, used: Sequence[Solved], left_out: Sequence[str], coverage: float
) -> Solved:
    amounts = [amount for one in used if (amount := blank_amount(one, solved.prepared)) is not None]
    mean = mean_of(amounts, [1] * len(amounts))
    component, known = _component(used, amounts, mean, solved.prepared)
    told = f"mean of {len(amounts)} process blanks" if len(amounts) > 1 else "one process blank"
    told = f"{told}, {mean:.3g} {unit_words(back.unit)}, subtracted as an amount{known}"
    note = _joined(solved.blank_note, told, *left_out)
    shared = [*_background(solved, back, used), *_reagent(solved, back, used), *drift_components(solved, back.factor)]
    shared += recovery_component(before.content - mean, back) if (before := solved.in_sample) is not None else []
    estimate, nu = _estimate(solved, back, mean, [*shared, *component], coverage)
    if not is_finite(estimate):
        return replace(solved, content=None, in_sample=None, no_number=OUT_OF_RANGE)
    notes = tuple(one for one in solved.notes if one not in (NEGATIVE, NEGATIVE_AS_READ))
    if estimate.content < 0.0:
        notes = (*notes, NEGATIVE)
    return replace(
        solved, in_sample=estimate, effective_degrees_of_freedom=nu, blank=mean, blanks=len(used), blank_note=note,
        notes=notes, corrected=(*solved.corrected, f"{note[:1].upper()}{note[1:]}."),
    )  # fmt: skip


def _component(
    used: Sequence[Solved], amounts: Sequence[float], mean: float, sample: PreparedLine
) -> tuple[list[Component], str]:
    """What the blanks bring of their own, the background apart, and how it is known, in words."""
    n = len(amounts)
    fits = [
        Component(abs(_blank_factor(one, sample) or 0.0) * with_drift(one), one.scatter_degrees_of_freedom)
        for one in used
        if one.fit_uncertainty is not None
    ]
    pooled = math.hypot(*(fit.standard_uncertainty for fit in fits)) / math.sqrt(len(fits)) if fits else 0.0
    if n > 1:
        s_b = math.hypot(*(amount - mean for amount in amounts)) / math.sqrt(n - 1)
        between, floor = s_b * math.sqrt(1.0 + 1.0 / n), pooled / math.sqrt(n)
        if between >= floor:
            return ([Component(between, n - 1)], "") if between > 0.0 else ([], UNKNOWN)
        return [Component(floor, effective_degrees_of_freedom(fits))], "; they agree as closely as their fits allow"
    if not fits:
        return [], UNKNOWN
    how = (
        "; the uncertainty of its fit counts once for the mean and once for the blank of this sample, and how "
        "preparations vary is not in it"
    )
    return [Component(pooled * math.sqrt(2.0), used[0].scatter_degrees_of_freedom)], how


def _background(solved: Solved, back: WayBack, used: Sequence[Solved]) -> list[Component]:
    """The error of the common background in the difference: dC/dB = f e - mean(f_b e_b), e = dC0/dB."""
    own = back.factor * background_effect_of(solved) if solved.background is not None else 0.0
    of_blanks = [
        (_blank_factor(one, solved.prepared) or 0.0) * background_effect_of(one) if one.background is not None else 0.0
        for one in used
    ]
    background = solved.background or next((one.background for one in used if one.background is not None), None)
    found = background_component(background, own - mean_of(of_blanks, [1] * len(of_blanks)))
    for place, (other, effect) in enumerate(solved.other_backgrounds):  # the lines of blanks stand in the same order
        of_others = [
            (_blank_factor(one, solved.prepared) or 0.0) * one.other_backgrounds[place][1]
            if place < len(one.other_backgrounds)
            else 0.0
            for one in used
        ]
        found += background_component(other, back.factor * effect - mean_of(of_others, [1] * len(of_others)))
    return found


def _reagent(solved: Solved, back: WayBack, used: Sequence[Solved]) -> list[Component]:
    """The error of the common reagent amount in the difference; it cancels where blanks were made like the sample."""
    own = back.factor * (solved.reagent_effect or 0.0)
    of_blanks = [(_blank_factor(one, solved.prepared) or 0.0) * (one.reagent_effect or 0.0) for one in used]
    return reagent_component(solved.reagent, own - mean_of(of_blanks, [1] * len(of_blanks)))


def _estimate(
    solved: Solved, back: WayBack, mean: float, rest: list[Component], coverage: float
) -> tuple[Estimate, float]:
    content, before = solved.content, solved.in_sample
    if content is None or before is None:
        raise ValueError("a blank is subtracted from a number")
    if solved.fit_half_widths is None or solved.fit_uncertainty is None:
        return replace(before, content=before.content - mean), solved.effective_degrees_of_freedom
    halves, dof = solved.fit_half_widths, solved.scatter_degrees_of_freedom
    fit = FitPart(content.content, solved.fit_uncertainty, halves, dof).times(back.factor)
    return printed(replace(fit, content=fit.content - mean), rest, back.unit, coverage, before.reason)
