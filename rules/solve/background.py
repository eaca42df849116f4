"""The background: a constant signal of the detector, measured on solutions of the batch."""

from __future__ import annotations

import math
from collections.abc import Sequence

from spikeward.rules.records import NOT_DETECTED, OVER_RANGE, Reading
from spikeward.rules.solve.solved import Background
from spikeward.rules.solve.vessel_signal import VesselSignal, mean_of, place_of, unusable, vessel_signal


def background_of(readings: Sequence[Reading]) -> Background | None:
    """The mean background of a batch for one analyte on one line: the mean over vessels of their mean readings.

    A vessel is known by the sample and vessel that its name gives, and only where the naming rule gives neither by its
    solution's name: ``BLK1_r1`` and ``BLK1_r2`` are readings of one vessel, not two (type A evaluation of a mean, JCGM
    100:2008, 4.2.3: the observations must be independent). A reading below detection or over
    range makes the background unknown (leaving it out would shift the mean); one that is missing or faulty is left out.

    Parameters
    ----------
    readings : of one analyte on one line, in force

    Returns
    -------
    None where there are no readings; with ``problem`` set it must not be used
    """
    if not readings:
        return None
    unit = readings[0].unit
    for reading in readings:
        if reading.unit != unit:
            return _unknown(
                readings,
                f"the background is in {unit or 'no unit'} in one place and in {reading.unit or 'no unit'} in another "
                f"({place_of(reading)}): export it in one unit",
            )
        if "blank" in reading.already:
            return _unknown(
                readings,
                f"the export says that the blank was taken off the background {reading.solution} ({place_of(reading)}) "
                "already and it was not taken off this series: export all solutions in the same way",
            )
        if reading.qualifier in (NOT_DETECTED, OVER_RANGE):
            return _unknown(readings, f"the background {reading.solution} ({place_of(reading)}) {_censored(reading)}")
    kept = [reading for reading in readings if unusable([reading]) is None]
    left_out = [reading for reading in readings if unusable([reading]) is not None]
    if not kept:
        place = f"{left_out[0].solution} ({place_of(left_out[0])})"
        return _unknown(readings, f"no background reading holds a number, such as {place}: export them again")
    return _mean(readings, kept, left_out)


def _censored(reading: Reading) -> str:
    if reading.qualifier == NOT_DETECTED:
        return "was not detected: that is a bound, not zero; let the instrument export the signal itself"
    return "is over range: look for carry-over, and measure the background again"


def _unknown(readings: Sequence[Reading], problem: str) -> Background:
    return Background(0.0, None, 0, 0, tuple(readings), readings[0].unit, problem=problem)


def _mean(readings: Sequence[Reading], kept: Sequence[Reading], left_out: Sequence[Reading]) -> Background:
    vessels: dict[tuple[str, str], list[Reading]] = {}
    for reading in kept:
        named = bool(reading.series.sample or reading.vessel)
        place = (reading.series.sample, reading.vessel) if named else ("", reading.solution)
        vessels.setdefault(place, []).append(reading)
    means = [vessel_signal(vessel).mean for vessel in vessels.values()]
    n = len(means)
    notes = [f"the background {r.solution} ({place_of(r)}) holds no number and was left out" for r in left_out]
    u: float | None
    if n > 1:
        mean = mean_of(means, [1] * n)
        u, dof = _between(means, mean, [vessel_signal(vessel) for vessel in vessels.values()])
        if u is None:
            notes.append("the backgrounds agree to the last digit: how well they are known is not in the uncertainty")
    else:
        single = vessel_signal(kept)
        mean, dof = single.mean, single.readings - 1
        u = single.sd / math.sqrt(single.readings) if single.sd is not None else None
        notes.append(
            "the background was read once: how well it is known is not in the uncertainty"
            if u is None
            else "the background comes from one vessel: its uncertainty is that of repeated readings"
        )
    return Background(mean, u, dof if u is not None else 0, n, tuple(readings), kept[0].unit, note="; ".join(notes))


def _between(means: Sequence[float], mean: float, signals: Sequence[VesselSignal]) -> tuple[float | None, int]:
    """The standard uncertainty of the mean by the scatter between vessels, and never less than their readings say."""
    n = len(means)
    between = math.hypot(*(value - mean for value in means)) / math.sqrt((n - 1) * n)
    within = [(one.sd, one.readings) for one in signals if one.sd is not None]
    freedom = math.fsum(count - 1 for _, count in within)
    if freedom > 0.0 and len(within) == n:
        pooled = math.hypot(*(sd * math.sqrt(count - 1) for sd, count in within)) / math.sqrt(freedom)
        floor = pooled / math.sqrt(math.fsum(count for _, count in within))
        if floor > between:
            return floor, int(freedom)
    return (between, n - 1) if between > 0.0 else (None, 0)
