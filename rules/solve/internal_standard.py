"""The internal standard: the ratio of two signals, and by what it is multiplied to lie on the line of additions.

With R = (S - B) / S_internal and the internal standard's content c in the vessel, R is in proportion to
(C0 V0 + Cs v) / (V c). So y = k (C0 + x) is R where it stood in the test solution (V c follows V0), R n / V0 where the
amount n went into each vessel (V c = n), and R V / V0 where c is the same in all.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

from spikeward.rules.naming import level_order
from spikeward.rules.prepared import PreparedVessel
from spikeward.rules.records import Reading
from spikeward.rules.solve.vessel_signal import counts_of, mean_of, place_of, unusable, vessel_name, vessel_signal

IN_SAMPLE, PER_VESSEL, AT_CONSTANT_CONTENT = "in_sample", "per_vessel", "at_constant_content"

ENTERED = {
    IN_SAMPLE: "stood in the test solution before the aliquots were taken, so that its dilution cancels",
    PER_VESSEL: "went as an amount into each vessel",
    AT_CONSTANT_CONTENT: "has the same content in all final solutions",
}
"""Where an internal standard can come in, as the end of a sentence."""

NOT_PAIRED = "the readings of the internal standard cannot be paired with those of the analyte: their mean was used"


def factor_of(vessel: PreparedVessel, entered: str) -> float:
    """What the signal of a vessel is multiplied by, y over signal; without an internal standard V over V0."""
    if entered == IN_SAMPLE:
        return 1.0
    if entered == PER_VESSEL:
        return vessel.internal_amount / vessel.aliquot
    return vessel.final / vessel.aliquot


def scale_of(vessels: Sequence[PreparedVessel], entered: str) -> float:
    """What every factor is multiplied by, so that y is the ratio in the first vessel and no ratio times an amount."""
    usable = [one for one in vessels if one.aliquot > 0.0 and one.internal_amount > 0.0]
    if entered != PER_VESSEL or not usable:
        return 1.0
    first = min(usable, key=lambda one: (level_order(one.level), level_order(one.vessel), one.block))
    return first.aliquot / first.internal_amount


def partners(readings: Sequence[Reading], internal: Sequence[Reading]) -> tuple[Reading, ...] | None:
    """The reading of the internal standard that belongs to each reading of the analyte, or None where that is not told.

    They belong together by the numbers of their repetition, by their row (an export with a column for each analyte), or
    by their time.
    """
    for key in _KEYS:
        found = {key(reading): reading for reading in internal}
        wanted = [key(reading) for reading in readings]
        if len(found) == len(internal) and len(set(wanted)) == len(wanted) and set(wanted) == set(found):
            return tuple(found[each] for each in wanted)
    return None


_KEYS: tuple[Callable[[Reading], tuple[object, ...]], ...] = (
    lambda reading: (reading.solution, reading.injection, reading.reading),
    lambda reading: (reading.path, reading.row),
    lambda reading: (reading.solution, reading.when),
)


def divisors(readings: Sequence[Reading], internal: Sequence[Reading]) -> tuple[tuple[float, ...], bool]:
    """The signal of the internal standard for each reading, and whether readings were paired.

    Parameters
    ----------
    readings, internal : of one vessel, all of them measured, at least one each
    """
    found = partners(readings, internal)
    if found is not None:
        return tuple(vessel_signal([reading]).mean for reading in found), True
    mean = vessel_signal(internal).mean
    return (mean,) * len(readings), False


def internal_problem(vessel: PreparedVessel, name: str, divided: bool) -> str:
    """Why the signals of a vessel cannot be held against its internal standard, or an empty text.

    Parameters
    ----------
    divided : the signals are divided here, not by the export
    """
    where = vessel_name(vessel.level, vessel.vessel, vessel.block)
    if not vessel.internal_amount > 0.0:
        return f"{where} has no amount of the internal standard {name}: correct what went into the vessel"
    if not divided:
        return ""
    if not vessel.internal:
        return f"{where} has no reading of the internal standard {name}: export it, or exclude the vessel by a decision"
    reading = unusable(vessel.internal)
    if reading is not None:
        told = f"{where} has no usable signal of the internal standard {name} ({place_of(reading)})"
        return f"{told}: export it again, or exclude the vessel by a decision"
    low = next((each for each in vessel.internal if not (each.signal or 0.0) > 0.0), None)
    if low is not None:
        told = f"{where} has a signal of the internal standard {name} that is not above zero ({place_of(low)})"
        return f"{told}: look whether it was added, or exclude the vessel by a decision"
    return ""


def ratio_of_means(readings: Sequence[Reading], internal: Sequence[Reading]) -> float:
    """The mean of 1 / S_internal over the readings of an analyte; all of them measured and above zero."""
    found, _ = divisors(readings, internal)
    return mean_of([1.0 / each for each in found], counts_of(readings))
