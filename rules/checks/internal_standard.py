"""The internal standard: whether its own signal in every vessel is still that of the brackets."""

from __future__ import annotations

from spikeward.rules.checks.subject import (
    Subject,
    as_percent,
    capital,
    graded,
    near_limits,
    not_evaluated,
)
from spikeward.rules.outcomes import SEVERITY, Check
from spikeward.rules.prepared import PreparedVessel
from spikeward.rules.records import Reading
from spikeward.rules.rulebook import Limits
from spikeward.rules.solve.internal_standard import IN_SAMPLE, PER_VESSEL
from spikeward.rules.solve.vessel_signal import unusable, vessel_name, vessel_signal

_NAME = "internal_standard"


def internal_standard(subject: Subject, limits: Limits) -> Check:
    """The signal of the internal standard in each vessel over its mean in the brackets of the batch.

    The worst vessel counts. Where the internal standard went as an amount into each vessel, what different final
    volumes and amounts make of it is taken out, as against the first vessel. Signals are as they were read.
    """
    line = subject.solved.prepared
    vessels = [vessel for vessel in line.vessels if not vessel.excluded]
    if not line.entered:
        return not_evaluated(_NAME, "the rules declare no internal standard for this line")
    if any("internal_standard" in reading.already for reading in subject.readings):
        return not_evaluated(
            _NAME, "the export applied the internal standard already and does not show its signal",
            "Export the signals themselves",
        )  # fmt: skip
    if line.entered == IN_SAMPLE:
        why = "it stood in the test solution, so that a bracket holds no content of it to compare with"
        return not_evaluated(_NAME, why, "Add the internal standard on line, or to every vessel and bracket")
    known = [vessel for vessel in vessels if vessel.internal and unusable(vessel.internal) is None]
    if not known or len(known) < len(vessels):
        return not_evaluated(_NAME, f"not every vessel has a signal of {line.internal}")
    marks = _brackets(subject, known[0].internal[0])
    if not marks:
        why = f"no bracket shows the signal of {line.internal}"
        return not_evaluated(_NAME, why, "Measure the internal standard in the brackets too")
    height = vessel_signal(marks).mean
    if not height > 0.0:
        return not_evaluated(_NAME, f"the signal of {line.internal} in the brackets is not above zero")
    found = [(_recovery(vessel, known[0], line.entered, height), vessel) for vessel in known]
    lowest, highest = min(found, key=lambda one: one[0]), max(found, key=lambda one: one[0])
    low, high = (_graded(*one, line.internal, limits) for one in (lowest, highest))
    if SEVERITY[low.verdict] != SEVERITY[high.verdict]:
        return max(low, high, key=lambda check: SEVERITY[check.verdict])
    return low if abs(lowest[0] - 1.0) >= abs(highest[0] - 1.0) else high


def _brackets(subject: Subject, internal: Reading) -> list[Reading]:
    """The readings of the internal standard in the brackets, in the unit of the vessels."""
    every = subject.context.brackets.get((internal.analyte, internal.line), ())
    readings = [reading for one in every for reading in one.readings if reading.unit == internal.unit]
    return [reading for reading in readings if unusable([reading]) is None]


def _recovery(vessel: PreparedVessel, first: PreparedVessel, entered: str, height: float) -> float:
    made = 1.0
    if entered == PER_VESSEL:
        made = (vessel.internal_amount / vessel.final) / (first.internal_amount / first.final)
    return vessel_signal(vessel.internal).mean / made / height


def _graded(recovery: float, vessel: PreparedVessel, name: str, limits: Limits) -> Check:
    where = capital(vessel_name(vessel.level, vessel.vessel, vessel.block))
    told = f"{where} shows {near_limits(recovery, limits, 3)} of the signal of {name} in the brackets"
    remedy = f"Look whether {name} was added to this vessel and what suppresses it; dilute, and measure again"
    return graded(_NAME, recovery, limits, told, remedy, show=as_percent)
