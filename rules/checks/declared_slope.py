"""A declared electrode slope against the one that the vessels show: a wrong one shifts the content without a trace."""

from __future__ import annotations

import math

from scipy import special

from spikeward.rules.checks.electrode import parameter
from spikeward.rules.checks.subject import Subject, not_evaluated, number, source_of
from spikeward.rules.outcomes import PASS, WARN, Check
from spikeward.rules.rounding import figure, percent
from spikeward.rules.rulebook import Limits
from spikeward.rules.solve.bent import SLOPE_BY_VESSELS

_NAME = "declared_slope"


def declared_slope(subject: Subject, limits: Limits) -> Check:
    """Student's t of the difference: |S - S_vessels| / sqrt(u² + u_vessels²), vessels - 3 degrees of freedom.

    A plot by Gran stays straight with a wrong slope, so no other check sees it.
    """
    electrode = subject.solved.prepared.electrode
    if subject.solved.prepared.response != "log" or electrode is None or electrode.slope is None:
        return not_evaluated(_NAME, "no slope of an electrode was declared")
    by_vessels = parameter(subject, SLOPE_BY_VESSELS)
    if by_vessels is None or by_vessels.standard_uncertainty is None:
        return not_evaluated(_NAME, "these vessels do not show the slope themselves", "Four or more vessels")
    noisy = subject.solved.scatter.kind == "declared"
    dof = math.inf if noisy else sum(not point.excluded for point in subject.solved.points) - 3
    u = math.hypot(by_vessels.standard_uncertainty, electrode.uncertainty or 0.0)
    distance = abs(by_vessels.value - electrode.slope) / u
    p = number(limits, "warn_p")
    told = (
        f"The declared slope is {figure(electrode.slope)} mV per decade; "
        f"these vessels show {figure(by_vessels.value)}, "
        f"known to {figure(by_vessels.standard_uncertainty, 2)}"
    )
    if p is None:
        return not_evaluated(_NAME, f"the rules ask for no limit; {told[0].lower()}{told[1:]}")
    critical = -float(special.ndtri(p / 2.0) if math.isinf(dof) else special.stdtrit(dof, p / 2.0))
    limit = f"{figure(critical)} standard uncertainties at {percent(p)}"
    sentence = f"{told}: {figure(distance)} standard uncertainties apart (warns above {figure(critical)})."
    verdict = WARN if distance > critical else PASS
    remedy = "Leave the slope out, so that it is fitted, or measure it again in two standards"
    return Check(
        _NAME, verdict, sentence, distance, "1", f"warns above {limit}", source_of(limits, "warn_p", _NAME),
        remedy if verdict == WARN else "",
    )  # fmt: skip
