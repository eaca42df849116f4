"""The slope of the additions against that of plain standards: how much the matrix takes from the signal."""

from __future__ import annotations

import math

from scipy import special

from spikeward.rules.checks.chance import scatter_freedom
from spikeward.rules.checks.subject import Subject, as_percent, graded, near_limits, not_evaluated, number
from spikeward.rules.outcomes import NOT_EVALUATED, PASS, WARN, Check
from spikeward.rules.rounding import figure, percent
from spikeward.rules.rulebook import Limits
from spikeward.rules.solve.calibration import Calibration, per_unit_of, why_not_comparable
from spikeward.rules.uncertainty.interval import Component, effective_degrees_of_freedom

_NAME = "slope_ratio"


def calibration_for(subject: Subject) -> Calibration | None:
    """The plain standards that go with a line: of its ratios, where an internal standard is at a constant content."""
    prepared = subject.solved.prepared
    internal = prepared.internal if prepared.entered == "at_constant_content" else ""
    return subject.context.calibrations.get((*subject.line_key, internal))


def slopes_differ(b1: float, u1: float, nu1: float, b2: float, u2: float, nu2: float) -> tuple[float, float]:
    """Welch's test of two slopes: t = (b1 - b2) / sqrt(u1² + u2²), and the probability of more by chance, two-sided.

    Degrees of freedom by Welch and Satterthwaite (JCGM 100:2008, G.4.1); D. T. Harvey, Modern Analytical Chemistry,
    2000, compares slopes of additions and standards so.

    Parameters
    ----------
    b1, u1, nu1 : slope, its standard uncertainty above zero, degrees of freedom; the same of the other
    """
    t = (b1 - b2) / math.hypot(u1, u2)
    freedom = effective_degrees_of_freedom([Component(u1, nu1), Component(u2, nu2)])
    tail = special.ndtr(-abs(t)) if math.isinf(freedom) else special.stdtr(freedom, -abs(t))
    return t, 2.0 * float(tail)


def slope_ratio(subject: Subject, limits: Limits) -> Check:
    """Slope of the additions over slope of the calibration, both in signal per content in the vessel.

    It tells the matrix effect, 100 (ratio - 1) in per cent, and never fails a series: a matrix that suppresses the
    signal is why standard is added to the sample.
    """
    calibration, solved = calibration_for(subject), subject.solved
    if calibration is None:
        return not_evaluated(
            _NAME, "no plain calibration was measured in this batch", "Measure plain standards in the same run"
        )
    if why := why_not_comparable(solved, calibration):
        return not_evaluated(_NAME, why.rstrip("."), "Look at the solutions of role calibration")
    scale = per_unit_of(solved.prepared, calibration)
    if solved.slope is None or scale is None:
        return not_evaluated(_NAME, "there is no line")
    plain_slope, plain_u = calibration.slope * scale, calibration.slope_uncertainty * scale
    ratio = solved.slope / plain_slope
    effect = ratio - 1.0
    told = f"The slope of the additions is {near_limits(ratio, limits, 3)} of that of plain calibration: the matrix "
    told += f"{'lowers' if effect < 0.0 else 'raises'} the response by {percent(abs(effect))}"
    u, freedom = solved.slope_uncertainty, scatter_freedom(solved)
    if u is not None and freedom > 0 and math.hypot(u, plain_u) > 0.0:
        t, p = slopes_differ(solved.slope, u, freedom, plain_slope, plain_u, calibration.degrees_of_freedom)
        chance = number(limits, "chance_p") or 0.01
        less = f"{'more' if p < chance else 'no more'} than chance"
        told += f", {less} (t {figure(t)}, p {figure(p, 2)})"
    if subject.context.rules.drift == "correct":
        told += ", the drift being corrected in the additions alone"
    check = graded(_NAME, ratio, limits, told, _remedy(ratio, limits), show=as_percent)
    if check.verdict in (PASS, NOT_EVALUATED):
        return check
    return Check(
        _NAME, WARN, check.sentence, check.observed, check.unit, check.limit, check.source, check.remedy
    )


def _remedy(ratio: float, limits: Limits) -> str:
    deep = number(limits, "dilute_below")
    if deep is not None and ratio < deep:
        return "Dilute the test solution: so strong a suppression is seldom the same in every vessel"
    return "The additions correct it; dilute the test solution, or match the matrix, to make it smaller"
