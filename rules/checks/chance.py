"""Whether two contents differ by more than chance: the rule that comparisons within a batch share."""

from __future__ import annotations

import math
from collections.abc import Sequence

from spikeward.rules.checks.line import covers_zero
from spikeward.rules.outcomes import NOT_EVALUATED, SEVERITY, Check, Estimate
from spikeward.rules.rounding import figure
from spikeward.rules.solve.common import background_component
from spikeward.rules.solve.solved import Solved
from spikeward.rules.uncertainty.fieller import t_quantile
from spikeward.rules.uncertainty.interval import Component, effective_degrees_of_freedom
from spikeward.rules.words import unit_words


def allowed(parts: Sequence[Component], p: float) -> float | None:
    """The largest difference that chance allows: t(ν_eff) times the combined standard uncertainty, two-sided at ``p``.

    With few degrees of freedom a plain factor of 2 or 3 would accuse sound pairs (Welch and Satterthwaite, JCGM
    100:2008, G.4.1).

    Returns
    -------
    None where an uncertainty has no degree of freedom, or all are zero
    """
    if not parts or any(part.degrees_of_freedom <= 0 for part in parts):
        return None
    u = math.hypot(*(part.standard_uncertainty for part in parts))
    return t_quantile(effective_degrees_of_freedom(parts), 1.0 - p) * u if u > 0.0 else None


def of_fit(solved: Solved, factor: float = 1.0) -> list[Component]:
    """The uncertainty of the fit alone, times a factor; empty where the scatter is not known."""
    u, freedom = solved.fit_uncertainty, scatter_freedom(solved)
    return [Component(u * factor, freedom)] if u is not None and freedom > 0 else []


def of_background(solved: Solved) -> list[Component]:
    """What the background of this line brings to its content; another line has a background of its own."""
    return background_component(solved.background, solved.background_effect or 0.0)


def scatter_freedom(solved: Solved) -> float:
    """The degrees of freedom of the scatter that the uncertainty of a fit is made of."""
    return solved.scatter_degrees_of_freedom or solved.degrees_of_freedom


def in_sample_pair(one: Solved, other: Solved) -> tuple[Estimate, Estimate] | None:
    """Two contents on one basis: of the sample, or of the test solution where neither has a way back to the sample."""
    if one.in_sample is not None and other.in_sample is not None:
        pair, backs = (one.in_sample, other.in_sample), (one.prepared.way_back, other.prepared.way_back)
        bases = {back.basis for back in backs if back is not None}
        return pair if pair[0].unit == pair[1].unit and len(bases) == 1 else None
    if one.content is None or other.content is None:
        return None
    if one.prepared.way_back is not None or other.prepared.way_back is not None:
        return None
    return (one.content, other.content) if one.content.unit == other.content.unit else None


def factor_of(solved: Solved) -> float:
    """From the test solution to what is compared: the preparation factor where there is one."""
    back = solved.prepared.way_back
    return back.factor if back is not None and solved.in_sample is not None else 1.0


def near_zero_of(estimate: Estimate) -> bool:
    """Whether a share of this content would mean nothing."""
    return estimate.content <= 0.0 or covers_zero(estimate)


def amount_words(value: float, estimate: Estimate) -> str:
    """A content as a comparison tells it."""
    return f"{figure(value)} {unit_words(estimate.unit)}".rstrip()


def gravest(checks: Sequence[Check]) -> Check:
    """The check that speaks for several: the worst of those that were judged, else one that says why not.

    Parameters
    ----------
    checks : at least one
    """
    judged = [check for check in checks if check.verdict != NOT_EVALUATED]
    return max(judged or checks, key=lambda one: (SEVERITY[one.verdict], abs(one.observed or 0.0), one.sentence))
