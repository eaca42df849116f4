"""Further questions to the straight line: replicate preparations, and a line by medians beside it."""

from __future__ import annotations

import math

import numpy as np

from spikeward.rules.checks.line import fitted_points, near_zero, no_straight_line
from spikeward.rules.checks.subject import Subject, as_percent, graded, near_limits, not_evaluated, number, source_of
from spikeward.rules.outcomes import NOT_EVALUATED, PASS, WARN, Beside, Check, Estimate
from spikeward.rules.rounding import figure
from spikeward.rules.rulebook import Limits
from spikeward.rules.solve.robust import theil_sen
from spikeward.rules.solve.solved import Solved
from spikeward.rules.solve.straightness import Straightness, straightness
from spikeward.rules.words import counted, freedom, unit_words

ROBUST = "line by medians"


def straightness_of(subject: Subject) -> Straightness:
    """The tests of one line, with its own weights."""
    points = fitted_points(subject)
    x, y, w = (np.array(column).reshape(-1, 1) for column in zip(*((p.x, p.y, p.weight) for p in points), strict=True))
    return straightness(x, y, w)


def lack_of_fit(subject: Subject, limits: Limits) -> Check:
    """The means of replicate preparations about the line, against the scatter of the preparations of one level.

    F = (SS of lack of fit / (levels - 2)) / (SS of pure error / (vessels - levels)), Danzer and Currie, Pure Appl.
    Chem. 70 (1998) 993.
    """
    if why := no_straight_line(subject):
        return not_evaluated("lack_of_fit", why)
    points = fitted_points(subject)
    additions = len({point.x for point in points})
    if len(points) == additions:
        return not_evaluated("lack_of_fit", "no level was prepared twice", "Prepare levels in replicate")
    if additions < 3:
        return not_evaluated("lack_of_fit", "two levels always lie on a line", "Measure three or more levels")
    found = straightness_of(subject)
    f, p = found.lack_of_fit.item(), found.lack_p.item()
    if math.isnan(f):
        return not_evaluated("lack_of_fit", "the scatter of the preparations cannot be calculated with")
    warn_p = number(limits, "warn_p")
    told = "" if warn_p is None else f"warns below p {figure(warn_p)}"
    broken = warn_p is not None and p < warn_p
    sentence = (
        f"The levels lie {'further' if broken else 'no further'} off the line than replicate preparations scatter: "
        f"F is {figure(f) if math.isfinite(f) else 'beyond all bounds'}, p {figure(p, 2)}, with "
        f"{found.lack_dof.item():.0f} and {freedom(int(found.pure_dof.item()))}"
    )
    remedy = "Look for curvature, or for a wrong addition at one level; measure the series again"
    verdict = WARN if broken else PASS if told else NOT_EVALUATED
    return Check(
        "lack_of_fit", verdict, f"{sentence} ({told})." if told else f"{sentence}.",
        f if math.isfinite(f) else None, "1", told, source_of(limits, "warn_p", "lack_of_fit"),
        remedy if broken else "",
    )  # fmt: skip


def by_medians(solved: Solved) -> float | None:
    """The content of the test solution by the line of Theil and Sen; None where it has none."""
    points = [point for point in solved.points if not point.excluded]
    if not points:
        return None
    x, y = (np.array(column).reshape(-1, 1) for column in zip(*((p.x, p.y) for p in points), strict=True))
    content: float = theil_sen(x, y, np.ones_like(x)).content.item()
    return content if math.isfinite(content) else None


def robust(subject: Subject, limits: Limits) -> Check:
    """How far the content moves if the line is drawn by medians, which one bad vessel does not move; never instead."""
    if why := no_straight_line(subject):
        return not_evaluated("robust", why)
    needed, count = int(number(limits, "needs_vessels") or 5), len(fitted_points(subject))
    if count < needed:
        return not_evaluated(
            "robust", f"medians of {counted(count, 'vessel')} tell nothing", f"{needed} or more vessels"
        )
    if why := near_zero(subject):
        return not_evaluated("robust", why)
    other, content = by_medians(subject.solved), subject.solved.content
    if other is None or content is None:
        return not_evaluated("robust", "the line by medians has no slope")
    share = abs(other / content.content - 1.0)
    unit = unit_words(content.unit)
    sentence = f"A line by medians gives {figure(other)} {unit} in the test solution, {near_limits(share, limits)} off"
    remedy = "Look for one vessel that pulls the line; the fitted line stays the result"
    return graded("robust", share, limits, sentence, remedy, show=as_percent)


def robust_beside(solved: Solved, needed: int = 5) -> Beside | None:
    """The content by medians, for comparison; None below ``needed`` vessels or without a straight line."""
    count = sum(not point.excluded for point in solved.points)
    if solved.content is None or solved.slope is None or solved.prepared.response != "linear" or count < needed:
        return None
    found = by_medians(solved)
    if found is None or len({point.block for point in solved.points}) > 1:
        return None
    estimate = Estimate(
        found, solved.prepared.unit, coverage=solved.content.coverage, reason="medians come without an uncertainty"
    )
    told = f"{figure(found)} {unit_words(estimate.unit)}"
    return Beside(ROBUST, estimate, f"A line by medians (Theil and Sen) gives {told} in the test solution.")
