"""The one interval that is printed: Fieller's on the fit, widened by everything that the scatter does not show."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from scipy.special import ndtri

from spikeward.rules.outcomes import Estimate
from spikeward.rules.uncertainty.fieller import t_quantile


@dataclass(frozen=True, slots=True)
class Component:
    """One standard uncertainty, in the unit of the content that it belongs to, with its degrees of freedom.

    They are infinite where it was declared. ``of_scatter``: it was made of the same estimate of scatter as the fit, so
    that the two know no more of it together than each alone.
    """

    standard_uncertainty: float
    degrees_of_freedom: float
    of_scatter: bool = False


@dataclass(frozen=True, slots=True)
class FitPart:
    """What the fit alone says: content, standard uncertainty, the halves of Fieller's interval, all in one unit."""

    content: float
    standard_uncertainty: float
    halves: tuple[float, float]
    degrees_of_freedom: float

    def times(self, factor: float) -> FitPart:
        """The same after a preparation factor, which is positive."""
        lower, upper = self.halves
        return FitPart(
            self.content * factor,
            self.standard_uncertainty * factor,
            (lower * factor, upper * factor),
            self.degrees_of_freedom,
        )


def coverage_factor(degrees_of_freedom: float, coverage: float) -> float:
    """Student's factor, and the normal one where the degrees of freedom are infinite."""
    if math.isinf(degrees_of_freedom):
        return float(ndtri(0.5 + coverage / 2.0))
    return t_quantile(int(degrees_of_freedom), coverage)


def effective_degrees_of_freedom(components: Sequence[Component]) -> float:
    """Welch and Satterthwaite, cut to a whole number (JCGM 100:2008, G.4.1).

    Returns
    -------
    at least 1, and 1 where an uncertainty is not finite; infinite where all components are declared; components without
    uncertainty do not count, and if none has any the smallest number stands
    """
    if not all(math.isfinite(c.standard_uncertainty) for c in components):
        return 1
    largest = max(c.standard_uncertainty for c in components)
    if largest == 0.0:
        return max(1, min(c.degrees_of_freedom for c in components))
    # relative to the largest, so that fourth powers stay within range
    ratios = [c.standard_uncertainty / largest for c in components]
    squares = [q * q for q in ratios]
    total = math.fsum(squares)
    below = math.fsum(q * q / c.degrees_of_freedom for q, c in zip(squares, components, strict=True) if q > 0.0)
    if below == 0.0:
        return math.inf
    # a sum that is whole but for rounding must not lose one
    return max(1, math.floor(total * total / below * (1.0 + 2.0**-40)))


def printed(fit: FitPart, rest: Sequence[Component], unit: str, coverage: float, reason: str) -> tuple[Estimate, float]:
    """Combine the fit with what is common to all vessels.

    Each half of the fit's interval is combined in quadrature with t(ν_eff) times the standard uncertainty of the rest;
    U is half of the whole length and k = U/u.

    Parameters
    ----------
    fit : of the line, after the preparation factor where ``unit`` asks for it
    rest : further components in ``unit``, such as background and process blank
    coverage : such as 0.95
    reason : what the uncertainty does not hold, or empty

    Returns
    -------
    the estimate and its effective degrees of freedom
    """
    of_scatter = math.hypot(fit.standard_uncertainty, *(c.standard_uncertainty for c in rest if c.of_scatter))
    others = [component for component in rest if not component.of_scatter]
    nu = effective_degrees_of_freedom([Component(of_scatter, fit.degrees_of_freedom), *others])
    t = coverage_factor(nu, coverage)
    u_rest = math.hypot(*(c.standard_uncertainty for c in rest))
    u = math.hypot(fit.standard_uncertainty, u_rest)
    lower, upper = (math.hypot(half, t * u_rest) for half in fit.halves)
    expanded = 0.5 * (lower + upper)
    return (
        Estimate(
            content=fit.content,
            unit=unit,
            standard_uncertainty=u,
            expanded_uncertainty=expanded,
            coverage_factor=expanded / u if u > 0.0 else t,
            interval=(fit.content - lower, fit.content + upper),
            coverage=coverage,
            reason=reason,
            effective_degrees_of_freedom=None if math.isinf(nu) else int(nu),
        ),
        nu,
    )


def is_finite(estimate: Estimate | None) -> bool:
    """Whether every number of an estimate is within the range of numbers; so is an estimate that is not there."""
    if estimate is None:
        return True
    known = (estimate.standard_uncertainty, estimate.expanded_uncertainty, *(estimate.interval or ()))
    return all(math.isfinite(value) for value in (estimate.content, *known) if value is not None)
