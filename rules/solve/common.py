"""What every model shares between fit and result: the bare line, and the interval with all that is common."""

from __future__ import annotations

import math
from dataclasses import replace

from spikeward.rules.outcomes import Estimate
from spikeward.rules.prepared import WayBack
from spikeward.rules.solve.job import Job
from spikeward.rules.solve.solved import Background, Reagent, Solved
from spikeward.rules.solve.transform import Transformed
from spikeward.rules.solve.verdict import OUT_OF_RANGE
from spikeward.rules.uncertainty.interval import Component, FitPart, is_finite, printed


def bare(job: Job, transformed: Transformed) -> Solved:
    """A line before its fit; with ``no_number`` where there cannot be one."""
    line, back = job.line, job.line.way_back
    return Solved(
        prepared=line,
        points=transformed.points,
        degrees_of_freedom=max(len(transformed.rows) - 2, 0),
        no_number="; ".join(line.problems) or transformed.problem or job.scatter.problem,
        background=transformed.background,
        reagent=transformed.reagent,
        blank_note=transformed.blank_note,
        preparation=back.words if back is not None else "",
        notes=transformed.notes,
        scatter=job.scatter,
        corrected=transformed.corrected,
        not_drifted=transformed.not_drifted,
        drifted=transformed.drifted,
        ratio=transformed.ratio,
    )


def known(value: float | None) -> float | None:
    """A number, or None where it is not finite."""
    return value if value is not None and math.isfinite(value) else None


def with_interval(drawn: Solved, part: FitPart, coverage: float, reason: str) -> Solved:
    """The content, in the test solution and in the sample, with what the fit says and everything that is common.

    Parameters
    ----------
    drawn : with the effects of background and reagents on the content
    part : what the fit alone says, in the content of the test solution
    reason : what the uncertainty does not hold, or empty
    """
    line, back = drawn.prepared, drawn.prepared.way_back
    content, nu = printed(part, rest_of(drawn, 1.0), line.unit, coverage, reason)
    in_sample = None
    if back is not None:
        rest = [*rest_of(drawn, back.factor), *recovery_component(part.content * back.factor, back)]
        in_sample, nu = printed(part.times(back.factor), rest, back.unit, coverage, reason)
    number = replace(
        drawn,
        content=content,
        in_sample=in_sample,
        fit_uncertainty=part.standard_uncertainty,
        fit_half_widths=part.halves,
        effective_degrees_of_freedom=nu,
    )
    return number if is_finite(content) and is_finite(in_sample) else replace(drawn, no_number=OUT_OF_RANGE)


def without_uncertainty(drawn: Solved, content: float, coverage: float, reason: str) -> Solved:
    """The content alone, with the reason why its uncertainty is not known."""
    line, back = drawn.prepared, drawn.prepared.way_back
    in_sample = Estimate(content * back.factor, back.unit, coverage=coverage, reason=reason) if back else None
    number = replace(
        drawn, content=Estimate(content, line.unit, coverage=coverage, reason=reason), in_sample=in_sample
    )
    finite = is_finite(number.content) and is_finite(in_sample)
    return number if finite else replace(drawn, no_number=OUT_OF_RANGE)


def rest_of(drawn: Solved, factor: float) -> list[Component]:
    """What is common to all vessels and does not show in their scatter, after a preparation factor."""
    rest = background_component(drawn.background, background_effect_of(drawn) * factor)
    for background, effect in drawn.other_backgrounds:
        rest += background_component(background, effect * factor)
    rest += reagent_component(drawn.reagent, (drawn.reagent_effect or 0.0) * factor)
    return rest + drift_components(drawn, factor)


def background_effect_of(solved: Solved) -> float:
    """How the content changes with the background, through its own signals and through those of its reagent blanks.

    One background is off both, so its error enters once (correlated inputs, JCGM 100:2008, 5.2).
    """
    through_reagent = solved.reagent.background_effect if solved.reagent is not None else 0.0
    return (solved.background_effect or 0.0) + (solved.reagent_effect or 0.0) * through_reagent


def drift_components(solved: Solved, factor: float) -> list[Component]:
    """What the scatter of brackets brings in, after a preparation factor."""
    return [replace(one, standard_uncertainty=one.standard_uncertainty * factor) for one in solved.drift]


def with_drift(solved: Solved) -> float:
    """The standard uncertainty of a blank's content by its fit and by the brackets that corrected its drift."""
    return math.hypot(solved.fit_uncertainty or 0.0, *(one.standard_uncertainty for one in solved.drift))


def background_component(background: Background | None, effect: float) -> list[Component]:
    """The uncertainty of the background's mean in the content; none where it was not subtracted or is not known.

    Parameters
    ----------
    effect : change of the content per unit of signal
    """
    if background is None or background.standard_uncertainty is None or background.degrees_of_freedom < 1:
        return []
    return [Component(abs(effect) * background.standard_uncertainty, background.degrees_of_freedom)]


def reagent_component(reagent: Reagent | None, effect: float) -> list[Component]:
    """The uncertainty of the reagent amount in the content; ``effect`` is its change per unit of amount."""
    if reagent is None or reagent.standard_uncertainty is None or not reagent.degrees_of_freedom > 0:
        return []
    return [Component(abs(effect) * reagent.standard_uncertainty, reagent.degrees_of_freedom)]


def recovery_component(content: float, back: WayBack) -> list[Component]:
    """The uncertainty of a declared recovery that results were divided by."""
    return [Component(abs(content) * back.relative_uncertainty, math.inf)] if back.relative_uncertainty else []
