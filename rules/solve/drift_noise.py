"""What the scatter of brackets brings into a content that was corrected for drift.

A bracket that happens to read high tilts all vessels together, so their scatter about the line does not show it. Each
visit counts as one vessel: u²(C0) = sum (dC0/df)² u²(f) over the visits that the correction rests on (JCGM 100:2008,
5.1.2).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import replace

from spikeward.rules.solve.common import known, with_interval
from spikeward.rules.solve.drift import Drift, Sensitivity
from spikeward.rules.solve.job import Job
from spikeward.rules.solve.solved import Solved
from spikeward.rules.uncertainty.interval import Component, FitPart

_STEP = 2.0**-16  # relative; the content is smooth in the sensitivities

Solver = Callable[[Sequence[Job]], Sequence[Solved]]


def with_drift_noise(
    jobs: Sequence[Job], solved: Sequence[Solved], solver: Solver, coverage: float
) -> tuple[Solved, ...]:
    """The same lines, those whose drift was corrected with the scatter of the brackets in their interval.

    Parameters
    ----------
    jobs, solved : of the same length, in the same order
    solver : solves lines again, with a sensitivity that was moved a little
    coverage : of the intervals
    """
    moved: list[tuple[int, Sensitivity, Job]] = []
    for place, (job, one) in enumerate(zip(jobs, solved, strict=True)):
        drift = job.corrections.drift
        if drift is not None and one.drifted and one.fit_uncertainty is not None:
            moved += [(place, visit, other) for visit, other in _moved(job, drift)]
    effects: dict[int, list[float]] = {}
    for (place, visit, _), other in zip(moved, solver([job for _, _, job in moved]), strict=True):
        effects.setdefault(place, []).append(_effect(solved[place], visit, other, jobs[place]))
    return tuple(_widened(one, effects.get(place, []), coverage) for place, one in enumerate(solved))


def _moved(job: Job, drift: Drift) -> list[tuple[Sensitivity, Job]]:
    readings = [reading for vessel in job.line.vessels if not vessel.excluded for reading in vessel.readings]
    found = []
    for place in drift.used(readings):
        visit = drift.sensitivities[place]
        if visit.value is not None:
            other = drift.with_value(place, visit.value * (1.0 + _STEP))
            found.append((visit, replace(job, corrections=replace(job.corrections, drift=other))))
    return found


def _effect(solved: Solved, visit: Sensitivity, moved: Solved, job: Job) -> float:
    """The standard uncertainty that one visit brings, in the content of the test solution; not finite if unknown."""
    noise = _noise_of(solved, visit, job)
    if noise is None or visit.value is None or solved.content is None or moved.content is None:
        return math.nan
    step = visit.value * (1.0 + _STEP) - visit.value
    return abs(moved.content.content - solved.content.content) / step * noise if step > 0.0 else math.nan


def _noise_of(solved: Solved, visit: Sensitivity, job: Job) -> float | None:
    """The standard deviation of one visit, as that of one vessel of the series, in the unit of the sensitivity."""
    noise = job.scatter.noise
    if noise is not None:
        background = solved.background.mean if solved.background is not None else 0.0
        signal = (visit.value or 0.0) / visit.scale + background
        return visit.scale * math.hypot(noise.floor, noise.relative * signal)
    if job.scatter.kind == "pooled":
        fitted = [abs(point.fitted / point.factor) for point in solved.points if point.fitted is not None]
        return job.scatter.relative * max(fitted, default=0.0)
    return solved.residual_sd


def _widened(solved: Solved, effects: Sequence[float], coverage: float) -> Solved:
    u = known(math.hypot(*effects)) if effects else None
    if u is None or solved.content is None or solved.fit_uncertainty is None or solved.fit_half_widths is None:
        return solved
    dof = solved.scatter_degrees_of_freedom
    part = FitPart(solved.content.content, solved.fit_uncertainty, solved.fit_half_widths, dof)
    wider = replace(solved, drift=(Component(u, dof, of_scatter=True),))
    return with_interval(wider, part, coverage, solved.content.reason)
