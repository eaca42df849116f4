"""From readings to points: a vessel's mean signal, the background off it, and the correction for volumes.

With S - B = k (C0 V0 + Cs v) / V the points x = Cs v / V0 and y = (S - B) V / V0 lie on y = k (C0 + x), whatever was
diluted how far. The background comes off before the volumes: afterwards it would be scaled with them.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from spikeward.rules.outcomes import Point
from spikeward.rules.prepared import PreparedLine, PreparedVessel
from spikeward.rules.records import FAULTY, MEASURED, MISSING, NOT_DETECTED, OVER_RANGE, Reading
from spikeward.rules.solve.solved import Background

_UNUSABLE = {
    NOT_DETECTED: "was not detected: that is a bound, not zero; enter a signal for it, or exclude the vessel by a "
    "decision",
    OVER_RANGE: "is over range: dilute the test solution and measure again, or exclude the vessel by a decision",
    MISSING: "has no signal: export it again, or exclude the vessel by a decision",
    FAULTY: "does not hold a number: export it again, or exclude the vessel by a decision",
}


@dataclass(frozen=True, slots=True)
class VesselSignal:
    """The mean of a vessel's readings, each exported mean counting as its number of readings, before any correction.

    ``sd`` is of single readings and None where the export does not tell it.
    """

    mean: float
    readings: int
    sd: float | None


@dataclass(frozen=True, slots=True)
class Transformed:
    """One line ready for the fit: the points of all vessels, and ``rows`` of those that are fitted.

    A row is (x, y, shift, signal): ``shift`` is V/V0, by which y falls when the background rises by one and by which
    the noise of the signal is larger in y.
    """

    points: tuple[Point, ...]
    rows: tuple[tuple[float, float, float, float], ...]
    background: Background | None
    problem: str = ""
    notes: tuple[str, ...] = ()
    blank_note: str = ""


def weights_of(rows: Sequence[tuple[float, float, float, float]]) -> tuple[float, ...]:
    """The weights of the rows of one line, the largest of them 1.

    The noise of signals is taken as constant, so u(y) = u(S) V / V0 and w is in proportion to (V0 / V)²: equal weights
    wherever every vessel holds the same share of test solution. (Weights by the inverse variance: Miller and Miller,
    Statistics and Chemometrics for Analytical Chemistry, chapter 5.)

    Returns
    -------
    a weight of zero where volumes are too far apart to be calculated with
    """
    least = min((row[2] for row in rows), default=1.0)
    ratios = [least / row[2] if row[2] > 0.0 else 0.0 for row in rows]
    return tuple(ratio * ratio for ratio in ratios)


def vessel_signal(readings: Sequence[Reading]) -> VesselSignal:
    """Mean of measured readings, and the standard deviation of single readings.

    Parameters
    ----------
    readings : of one vessel, all of them measured, at least one
    """
    signals = [_number(r) for r in readings]
    counts = [max(r.readings, 1) for r in readings]
    total = int(math.fsum(counts))
    mean = mean_of(signals, counts)
    if any(n > 1 and r.sd is None for n, r in zip(counts, readings, strict=True)) or total < 2:
        return VesselSignal(mean, total, None)
    within = [math.sqrt(n - 1) * r.sd for n, r in zip(counts, readings, strict=True) if r.sd is not None]
    between = [math.sqrt(n) * (s - mean) for n, s in zip(counts, signals, strict=True)]
    return VesselSignal(mean, total, math.hypot(*within, *between) / math.sqrt(total - 1))


def mean_of(values: Sequence[float], counts: Sequence[int]) -> float:
    """The mean of values, each counting so many times; its digits do not depend on their order.

    Returns
    -------
    not finite where the values are too large to be added up
    """
    # around the smallest, so that equal values give exactly their value
    smallest = min(values)
    try:
        return smallest + math.fsum(n * (v - smallest) for n, v in zip(counts, values, strict=True)) / math.fsum(counts)
    except OverflowError:
        return math.inf


def unusable(readings: Sequence[Reading]) -> Reading | None:
    """The first reading that is not a measured number, or None."""
    for reading in readings:
        if reading.qualifier != MEASURED or reading.signal is None or not math.isfinite(reading.signal):
            return reading
    return None


def why_unusable(reading: Reading) -> str:
    """What a reading without a number is, and what to do, as the end of a sentence."""
    return _UNUSABLE.get(reading.qualifier, _UNUSABLE[FAULTY])


def place_of(reading: Reading) -> str:
    """Where a reading stands, for a sentence."""
    return f"{reading.path}, row {reading.row}"


def transform(line: PreparedLine, background: Background | None) -> Transformed:
    """The points of one line, with the background off where the export has not taken it off already.

    Parameters
    ----------
    line : the vessels as they were prepared
    background : in the unit of the line's signals, or None where none is subtracted
    """
    problem, blank_note = "", ""
    already = {"blank" in r.already for vessel in line.vessels if not vessel.excluded for r in vessel.readings}
    if already == {True, False}:
        problem = (
            "some exports of this series say that the blank was taken off already and others do not: "
            "export all vessels in the same way"
        )
    if background is not None and True in already:
        blank_note = "the export had the blank taken off already, so no background was subtracted"
        background = None
    if background is not None:
        problem = problem or _background_problem(line, background)
    points, rows = [], []
    for vessel in line.vessels:
        refused = _vessel_problem(vessel)
        if refused:
            problem = problem or ("" if vessel.excluded else refused)
            continue
        point = _point(vessel, 0.0 if background is None or background.problem else background.mean)
        points.append(point)
        if not vessel.excluded:
            shift = vessel.final_ml / vessel.aliquot_ml
            rows.append((point.x, point.y, shift, point.signal))
    # the order of vessels must not reach the last digit of the fit
    notes = (background.note,) if background is not None and background.note else ()
    return Transformed(tuple(points), tuple(sorted(rows)), background, problem, notes, blank_note)


def _background_problem(line: PreparedLine, background: Background) -> str:
    if background.problem:
        return background.problem
    if background.unit != line.signal_unit:
        return (
            f"the background is in {background.unit or 'no unit'} and the signals are in "
            f"{line.signal_unit or 'no unit'}: it cannot be subtracted; export both in the same unit"
        )
    return ""


def _vessel_problem(vessel: PreparedVessel) -> str:
    name = vessel_name(vessel.level, vessel.vessel)
    if not vessel.readings:
        return f"{name} has no reading: export it, or exclude it by a decision"
    reading = unusable(vessel.readings)
    if reading is not None:
        return f"{name} ({place_of(reading)}) {why_unusable(reading)}"
    if not (vessel.aliquot_ml > 0 and vessel.final_ml > 0):
        return f"{name} has an aliquot of {vessel.aliquot_ml:g} mL in {vessel.final_ml:g} mL: both must be above zero"
    return ""


def vessel_name(level: str, vessel: str) -> str:
    """A vessel as sentences name it."""
    return f"level {level}, vessel {vessel}" if vessel else f"level {level}"


def _point(vessel: PreparedVessel, background: float) -> Point:
    mean = vessel_signal(vessel.readings)
    signal = mean.mean - background
    return Point(
        level=vessel.level,
        vessel=vessel.vessel,
        x=vessel.added / vessel.aliquot_ml,
        y=signal * (vessel.final_ml / vessel.aliquot_ml),
        fitted=None,
        signal=signal,
        readings=mean.readings,
        sd=mean.sd,
        matrix_share=vessel.aliquot_ml / vessel.final_ml,
        excluded=vessel.excluded,
    )


def _number(reading: Reading) -> float:
    if reading.signal is None:
        raise ValueError(f"{place_of(reading)} has no measured signal")
    return reading.signal
