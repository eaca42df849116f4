"""The process blank: analyte that the preparation itself brings in, subtracted as an amount, never as a signal."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

from spikeward.rules.outcomes import Estimate
from spikeward.rules.prepared import PreparedLine, WayBack
from spikeward.rules.quantities import UNITS
from spikeward.rules.solve.lines import background_component
from spikeward.rules.solve.solved import Solved
from spikeward.rules.solve.transform import mean_of
from spikeward.rules.solve.verdict import NEGATIVE, OUT_OF_RANGE
from spikeward.rules.uncertainty.interval import Component, FitPart, is_finite, printed

NO_WAY_BACK = "no process blank was subtracted: the rule file declares no way back from the test solution"
ALREADY = "the export had the blank taken off already, so neither background nor process blank was subtracted"


def blank_amount(blank: Solved, sample: PreparedLine) -> float | None:
    """What one process blank contributes to a sample, in the unit of the sample's result.

    The blank's amount is C_b V_dig,b; divided by the sample's mass as the sample's own amount is: C_b times the ratio
    of the two digest volumes (dilutions included) times the sample's preparation factor.

    Returns
    -------
    None where the blank has no number, or one of the two has no digest volume to compare
    """
    factor = _blank_factor(blank, sample)
    return None if factor is None or blank.content is None else blank.content.content * factor


def subtract_process_blank(solved: Solved, blanks: Sequence[Solved], coverage: float) -> Solved:
    """Take the mean of the batch's process blanks off the content in the sample.

    C = (C0 V_dig - mean(C_b V_dig,b)) / m. The mean of blanks is a shared error, and the sample's own blank still
    varies: u² = s_b² (1 + 1/n_b). One blank lends its own standard uncertainty once to the mean and once to the
    sample's own blank.

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
        return replace(solved, blank_note=NO_WAY_BACK)
    if any("blank" in r.already for vessel in sample.vessels if not vessel.excluded for r in vessel.readings):
        return replace(solved, blank_note=ALREADY)
    ordered = sorted(blanks, key=lambda one: one.prepared.key)
    left_out = [_why_left_out(one, sample) for one in ordered if blank_amount(one, sample) is None]
    used = [one for one in ordered if blank_amount(one, sample) is not None]
    if not used:
        why = "; ".join(left_out) or "the batch has none that is solved"
        return replace(solved, blank_note=f"no process blank was subtracted: {why}")
    return _subtracted(solved, sample.way_back, used, left_out, coverage)


def _blank_factor(blank: Solved, sample: PreparedLine) -> float | None:
    """From the blank's content to the sample's result."""
    back, own = sample.way_back, blank.prepared.way_back
    if back is None or blank.content is None:
        return None
    ours, theirs = UNITS[sample.unit], UNITS[blank.prepared.unit]
    if ours[0] != theirs[0]:
        return None
    factor = back.factor * float(theirs[1] / ours[1])
    blank_digest = own.digest_ml if own is not None else None
    if blank_digest is None or back.digest_ml is None:
        return factor if blank_digest is None and back.digest_ml is None else None
    return factor * (blank_digest / back.digest_ml)


def _why_left_out(blank: Solved, sample: PreparedLine) -> str:
    name = blank.prepared.key.sample
    if blank.no_number:
        return f"{name} gives no number ({blank.no_number})"
    if UNITS[blank.prepared.unit][0] != UNITS[sample.unit][0]:
        return f"{name} was solved in {blank.prepared.unit} and the sample in {sample.unit}"
    return f"the digest volumes of {name} and of the sample are not both known"


def _subtracted(
    solved: Solved, back: WayBack, used: Sequence[Solved], left_out: Sequence[str], coverage: float
) -> Solved:
    amounts = [amount for one in used if (amount := blank_amount(one, solved.prepared)) is not None]
    mean = mean_of(amounts, [1] * len(amounts))
    component, known = _component(used, amounts, mean, solved.prepared)
    told = f"mean of {len(amounts)} process blanks" if len(amounts) > 1 else "one process blank"
    note = "; ".join([f"{told}, {mean:.3g} {back.unit}, subtracted as an amount{known}", *left_out])
    estimate, nu = _estimate(solved, back, mean, component, coverage)
    if not is_finite(estimate):
        return replace(solved, content=None, in_sample=None, no_number=OUT_OF_RANGE)
    notes = solved.notes
    if estimate.content < 0.0 and NEGATIVE not in notes:
        notes = (*notes, NEGATIVE)
    return replace(
        solved, in_sample=estimate, effective_degrees_of_freedom=nu, blank=mean, blank_note=note, notes=notes
    )


def _component(
    used: Sequence[Solved], amounts: Sequence[float], mean: float, sample: PreparedLine
) -> tuple[list[Component], str]:
    """The uncertainty that the blank brings, and how it is known, in words."""
    n = len(amounts)
    if n > 1:
        s_b = math.hypot(*(amount - mean for amount in amounts)) / math.sqrt(n - 1)
        return [Component(s_b * math.sqrt(1.0 + 1.0 / n), n - 1)], ""
    factor, content = _blank_factor(used[0], sample), used[0].content
    if factor is None or content is None or content.standard_uncertainty is None:
        return [], "; its uncertainty is not known and not in that of the result"
    u = content.standard_uncertainty * abs(factor) * math.sqrt(2.0)
    how = "; its own uncertainty counts once for the mean and once for the blank of this sample"
    return [Component(u, used[0].effective_degrees_of_freedom)], how


def _estimate(
    solved: Solved, back: WayBack, mean: float, blank: list[Component], coverage: float
) -> tuple[Estimate, int]:
    content, before = solved.content, solved.in_sample
    if content is None or before is None:
        raise ValueError("a blank is subtracted from a number")
    if solved.fit_half_widths is None or solved.fit_uncertainty is None or solved.background_effect is None:
        return replace(before, content=before.content - mean), solved.effective_degrees_of_freedom
    halves, dof = solved.fit_half_widths, solved.degrees_of_freedom
    fit = FitPart(content.content, solved.fit_uncertainty, halves, dof).times(back.factor)
    shared = background_component(solved.background, solved.background_effect * back.factor)
    return printed(replace(fit, content=fit.content - mean), [*shared, *blank], back.unit, coverage, before.reason)
