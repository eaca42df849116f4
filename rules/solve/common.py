"""What every model shares between fit and result: the bare line, and the interval with all that is common."""

from __future__ import annotations

import math
from collections.abc import Sequence
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
        no_number=" ".join(line.problems) or transformed.problem or job.scatter.problem,
        background=transformed.background,
        reagent=transformed.reagent,
        blank_note=transformed.blank_note,
        preparation=back.words if back is not None else "",
        notes=transformed.notes,
        scatter=job.scatter,
        corrected=transformed.corrected,
        not_drifted=transformed.not_drifted,
    )


def known(value: float | None) -> float | None:
    """A number, or None where it is not finite."""
    return value if value is not None and math.isfinite(value) else None


def with_interval(
    drawn: Solved, part: FitPart, coverage: float, reason: str, further: Sequence[Component] = ()
) -> Solved:
    """The content, in the test solution and in the sample, with what the fit says and everything that is common.

    Parameters
    ----------
    drawn : with the effects of background and reagents on the content
    part : what the fit alone says, in the content of the test solution
    reason : what the uncertainty does not hold, or empty
    further : what else is common to all vessels, in the content of the test solution
    """
    line, back = drawn.prepared, drawn.prepared.way_back
    content, nu = printed(part, [*rest_of(drawn, 1.0), *further], line.unit, coverage, reason)
    in_sample = None
    if back is not None:
        scaled = [replace(one, standard_uncertainty=one.standard_uncertainty * back.factor) for one in further]
        rest = [*rest_of(drawn, back.factor), *scaled, *recovery_component(part.content * back.factor, back)]
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
    background = background_component(drawn.background, (drawn.background_effect or 0.0) * factor)
    return [*background, *reagent_component(drawn.reagent, (drawn.reagent_effect or 0.0) * factor)]


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
