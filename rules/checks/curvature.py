"""Curvature: whether a parabola describes the points better than the straight line, and what it would change."""

from __future__ import annotations

import math

from spikeward.rules.checks.line import fitted_points, no_straight_line
from spikeward.rules.checks.straight import straightness_of
from spikeward.rules.checks.subject import Subject, not_evaluated, number, source_of
from spikeward.rules.outcomes import FAIL, PASS, WARN, Check
from spikeward.rules.rounding import figure, percent, percent_apart
from spikeward.rules.rulebook import Limits
from spikeward.rules.solve.straightness import Straightness
from spikeward.rules.words import counted, freedom

_ROUGH = 1.02  # shares of test solution that differ more bend a curve in other ways than a parabola


def curvature(subject: Subject, limits: Limits) -> Check:
    """Mandel's F test for curvature, and how far a parabola would move the content.

    Mandel: ISO 8466-1. Curvature belongs to the content in the vessel, S = k c + q c². Where the share of test solution
    differs between vessels the test on the corrected points still holds, as they lie on a straight line if there is no
    curvature, but what the parabola would change is then a rough figure only.
    """
    if why := no_straight_line(subject):
        return not_evaluated("curvature", why)
    points = fitted_points(subject)
    needed = int(number(limits, "needs_vessels") or 4)
    left = subject.solved.degrees_of_freedom
    if len(points) < needed:
        return not_evaluated(
            "curvature", f"{counted(len(points), 'vessel')} leave {freedom(left)}, too few to show curvature",
            f"{needed} or more vessels give it power",
        )  # fmt: skip
    found = straightness_of(subject)
    if math.isnan(found.mandel.item()):
        return not_evaluated("curvature", "fewer than three different additions cannot show a curve", "More levels")
    if found.exact.item():
        return Check("curvature", PASS, "The points lie on the straight line to the last digit.", 0.0, "1")
    shares = [point.matrix_share for point in points]
    return _judged(found, limits, left - 1, rough=max(shares) > _ROUGH * min(shares))


def _judged(found: Straightness, limits: Limits, left: int, rough: bool) -> Check:
    warn_p, far = number(limits, "warn_p"), number(limits, "fail_change")
    f, p, by_line, by_parabola = (
        each.item() for each in (found.mandel, found.mandel_p, found.by_line, found.by_parabola)
    )
    change = abs(by_parabola / by_line - 1) if math.isfinite(by_parabola) and by_line else None
    significant = warn_p is not None and p < warn_p
    verdict = PASS
    if significant:
        verdict = FAIL if far is not None and (change is None or change > far) else WARN
    moved = "a parabola never reaches zero signal"
    if change is not None:
        moved = f"a parabola moves the content {percent_apart(change, [] if far is None else [far])}"
        moved += ", a rough figure as the volumes differ" if rough else ""
    told = f"warns below p {figure(warn_p)}" if warn_p is not None else ""
    if far is not None:
        told += f"; fails if the content then moves more than {percent(far)}"
    name = "Curvature is significant" if significant else "Curvature is not significant"
    sentence = f"{name}: Mandel's F is {figure(f) if math.isfinite(f) else 'beyond all bounds'}"
    sentence += f", p {figure(p, 2)}, with {freedom(left)} left; {moved} ({told})."
    return Check(
        "curvature", verdict, sentence, f if math.isfinite(f) else None, "1", told,
        source_of(limits, "fail_change" if verdict == FAIL else "warn_p", "curvature"),
        "" if verdict == PASS else "Dilute the test solution, or use smaller additions, and measure the series again",
    )  # fmt: skip
