"""Electrodes: whether the slope is near what theory says, and whether every addition moved the potential enough."""

from __future__ import annotations

from dataclasses import replace

from spikeward.rules.checks.chance import scatter_freedom
from spikeward.rules.checks.line import fitted_points
from spikeward.rules.checks.subject import (
    Subject,
    as_percent,
    graded,
    near_limits,
    not_evaluated,
    plain,
    span_of,
)
from spikeward.rules.outcomes import FAIL, WARN, Check, Parameter, Point
from spikeward.rules.rounding import figure, percent
from spikeward.rules.rulebook import Limits
from spikeward.rules.solve.vessel_signal import mean_of, vessel_name
from spikeward.rules.uncertainty.fieller import t_quantile

SLOPE, EFFICIENCY = "electrode slope", "slope efficiency"


def parameter(subject: Subject, name: str) -> Parameter | None:
    """A fitted or derived number of the model, by its name."""
    return next((one for one in subject.solved.parameters if one.name == name), None)


def electrode_slope(subject: Subject, limits: Limits) -> Check:
    """The slope over that of theory, 2.303 RT/zF; it only warns where its interval reaches within the outer limits."""
    name, electrode = "electrode_slope", subject.solved.prepared.electrode
    if subject.solved.prepared.response != "log" or electrode is None:
        return not_evaluated(name, "the response is no electrode's")
    efficiency, slope = parameter(subject, EFFICIENCY), parameter(subject, SLOPE)
    if efficiency is None or slope is None:
        return not_evaluated(name, "no slope was found")
    size = 0.01 if efficiency.unit == "%" else 1.0
    share, u = efficiency.value * size, (efficiency.standard_uncertainty or 0.0) * size
    freedom = scatter_freedom(subject.solved)
    half = t_quantile(freedom, subject.context.rules.coverage) * u if u > 0.0 and freedom > 0 else 0.0
    spread = f" ± {percent(half)}" if half else ""
    declared = electrode.slope is not None and electrode.uncertainty is None
    sentence = (
        f"The {'declared ' if declared else ''}slope is {figure(slope.value)} {slope.unit or 'mV per decade'}, "
        f"{near_limits(share, limits, 3)}{spread} of what theory says"
    )
    remedy = "Look at the electrode, its filling and the temperature; check its slope in two standards"
    if declared:
        remedy = "Correct the declared slope, its sign or the charge; measure the slope in two standards"
    check = graded(name, share, limits, sentence, remedy, show=as_percent)
    outer = span_of(limits, "fail_outside")
    if check.verdict == FAIL and outer is not None and outer[0] - half <= share <= outer[1] + half and half:
        told = f"{check.sentence[:-1]}; these vessels know it too poorly to fail it."
        return replace(check, verdict=WARN, sentence=told)
    return check


def steps_of(points: tuple[Point, ...]) -> list[tuple[str, float]]:
    """By how much each addition moved the potential, in mV, with the vessel after it; less than zero against the whole.

    Vessels of equal addition count as one, with their mean.
    """
    by_x: dict[float, list[Point]] = {}
    for point in points:
        by_x.setdefault(point.x, []).append(point)
    ordered = [by_x[x] for x in sorted(by_x)]
    means = [mean_of([point.signal for point in group], [1] * len(group)) for group in ordered]
    way = 1.0 if means[-1:] >= means[:1] else -1.0
    return [
        (vessel_name(group[0].level, ""), way * (after - before))
        for group, before, after in zip(ordered[1:], means, means[1:], strict=False)
    ]


def potential_steps(subject: Subject, limits: Limits) -> Check:
    """The step of each addition in mV, for a singly charged ion; for others the limits are divided by the charge."""
    name, electrode = "potential_steps", subject.solved.prepared.electrode
    if subject.solved.prepared.response != "log" or electrode is None:
        return not_evaluated(name, "the response is no electrode's")
    steps = steps_of(fitted_points(subject))
    if not steps:
        return not_evaluated(name, "fewer than two different additions were measured", "Measure more levels")
    charge = abs(electrode.charge) or 1
    asked = _divided(limits, charge)
    bounds = span_of(asked, "warn_outside")
    where, worst = min(steps, key=lambda step: (step[1], step[0]))
    if bounds is not None and worst < -bounds[0]:
        sentence = f"The addition of {where} moves the potential back by {figure(-worst)} mV, against the others."
        remedy = "Look for swapped levels or a drifting electrode; measure it again"
        return plain(name, FAIL, sentence, remedy, "theory")
    where, worst = max(steps, key=lambda step: (_off(step[1], bounds), step[0]))
    sizes = [size for _, size in steps]
    sentence = f"The addition of {where} moves the potential by {figure(worst)} mV"
    if len(steps) > 1:
        sentence += f"; all of them move it by {figure(min(sizes))} to {figure(max(sizes))} mV"
    low = bounds is not None and worst < bounds[0]
    remedy = "Repeat with larger additions" if low else "Repeat with smaller additions, or with more test solution"
    return graded(name, worst, asked, sentence, remedy, unit="mV")


def _divided(limits: Limits, charge: int) -> Limits:
    bounds = span_of(limits, "warn_outside")
    if bounds is None or charge == 1:
        return limits
    return replace(limits, values={**limits.values, "warn_outside": (bounds[0] / charge, bounds[1] / charge)})


def _off(step: float, bounds: tuple[float, float] | None) -> float:
    """How far a step is outside of its limits, in mV; negative within."""
    return -step if bounds is None else max(bounds[0] - step, step - bounds[1])
