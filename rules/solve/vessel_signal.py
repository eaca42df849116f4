"""The signal of one vessel: the mean of its readings, and what a reading is that holds no number."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from spikeward.rules.records import FAULTY, MEASURED, MISSING, NOT_DETECTED, OVER_RANGE, Reading

_UNUSABLE = {
    NOT_DETECTED: "was not detected: that is a bound, not zero; say under below_detection what stands for it, or "
    "exclude the vessel by a decision",
    OVER_RANGE: "is over range: dilute the test solution and measure again, or exclude the vessel by a decision",
    MISSING: "has no signal: export it again, or exclude the vessel by a decision",
    FAULTY: "does not hold a number: export it again, or exclude the vessel by a decision",
}


@dataclass(frozen=True, slots=True)
class VesselSignal:
    """The mean of a vessel's readings, each exported mean counting as its number of readings.

    ``sd`` is of single readings and None where the export does not tell it.
    """

    mean: float
    readings: int
    sd: float | None


def vessel_signal(readings: Sequence[Reading], scales: Sequence[float] | None = None) -> VesselSignal:
    """Mean of measured readings, and the standard deviation of single readings.

    Parameters
    ----------
    readings : of one vessel, all of them measured, at least one
    scales : what each reading is multiplied by; as it was read where it is None
    """
    factors = [1.0] * len(readings) if scales is None else scales
    signals = [_number(r) * factor for r, factor in zip(readings, factors, strict=True)]
    counts = counts_of(readings)
    total = int(math.fsum(counts))
    mean = mean_of(signals, counts)
    if any(n > 1 and r.sd is None for n, r in zip(counts, readings, strict=True)) or total < 2:
        return VesselSignal(mean, total, None)
    known = [(n, r.sd * factor) for n, r, factor in zip(counts, readings, factors, strict=True) if r.sd is not None]
    within = [math.sqrt(n - 1) * sd for n, sd in known]
    between = [math.sqrt(n) * (s - mean) for n, s in zip(counts, signals, strict=True)]
    return VesselSignal(mean, total, math.hypot(*within, *between) / math.sqrt(total - 1))


def counts_of(readings: Sequence[Reading]) -> list[int]:
    """How many single readings each is a mean of."""
    return [max(reading.readings, 1) for reading in readings]


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


def vessel_name(level: str, vessel: str, block: str = "") -> str:
    """A vessel as sentences name it."""
    named = f"level {level}, vessel {vessel}" if vessel else f"level {level}"
    return f"{named}, run {block}" if block else named


def _number(reading: Reading) -> float:
    if reading.signal is None:
        raise ValueError(f"{place_of(reading)} has no measured signal")
    return reading.signal
