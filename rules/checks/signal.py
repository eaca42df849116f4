"""Checks of the signals themselves, before any line is drawn."""

from __future__ import annotations

import math

from spikeward.rules.checks.subject import (
    Subject,
    as_percent,
    capital,
    graded,
    near_limits,
    not_evaluated,
    not_straight,
    number,
    plain,
)
from spikeward.rules.outcomes import FAIL, PASS, Check
from spikeward.rules.prepared import PreparedVessel
from spikeward.rules.records import OVER_RANGE, Reading
from spikeward.rules.rounding import figure
from spikeward.rules.rulebook import Limits, Top
from spikeward.rules.solve.vessel_signal import VesselSignal, unusable, vessel_name, vessel_signal
from spikeward.rules.words import freedom


def units(subject: Subject, limits: Limits) -> Check:
    """Whether all signals of the line come in one unit."""
    found = sorted({reading.unit for reading in subject.readings})
    if len(found) > 1:
        told = " and ".join(unit or "no unit" for unit in found)
        return plain(
            "units", FAIL, f"The signals of {subject.name} come in {told}.", "Export the whole series in one unit"
        )
    if not found or not found[0]:
        return not_evaluated("units", "the export does not say the unit of its signals", "Declare the unit column")
    return plain("units", PASS, f"All signals of {subject.name} are in {found[0]}.")


def linear_top(subject: Subject, limits: Limits) -> Check:
    """The largest signal as it was read, background still in it, against the end of the straight line."""
    remedy = "Dilute the test solution and measure the series again"
    if subject.solved.prepared.response == "log":
        return not_evaluated("linear_top", f"{not_straight(subject)}, and no potential is its end")
    for vessel, reading in _read(subject):
        if reading.qualifier == OVER_RANGE:
            sentence = f"{capital(vessel)} is over range ({reading.solution}, {reading.path} row {reading.row})."
            return plain("linear_top", FAIL, sentence, remedy, "the instrument's own limit")
    top = _top(subject)
    largest = max((r.signal for _, r in _read(subject) if r.signal is not None), default=None)
    if top is None or largest is None:
        why = "no linear top is declared for this line" if top is None else "there is no signal"
        return not_evaluated("linear_top", why, "Declare it under range", largest, subject.solved.prepared.signal_unit)
    unit = subject.solved.prepared.signal_unit
    if unit and unit != top.unit:
        sentence = f"The linear top of {subject.name} is in {top.unit or 'no unit'}, the signals are in {unit}."
        return plain("linear_top", FAIL, sentence, "Declare the top in the unit of the export, under range")
    where = next(vessel for vessel, r in _read(subject) if r.signal == largest)
    placed = f"{capital(where)} reads {figure(largest)} {top.unit}"
    share = near_limits(largest / top.signal, limits, 3)
    sentence = f"{placed}, {share} of the linear top {figure(top.signal)} {top.unit}"
    if any("blank" in reading.already for reading in subject.readings):
        sentence += ", after the export had taken its blank off"
    return graded("linear_top", largest / top.signal, limits, sentence, remedy, show=as_percent)


def precision(subject: Subject, limits: Limits) -> Check:
    """The relative standard deviation of repeated readings of one vessel, pooled over the vessels.

    Pooled as sum (n-1) s² / sum (n-1); each s is relative to its vessel's signal without the background, or to
    ``floor`` times the largest such signal where that is more, so that the noise of a signal near zero does not decide.
    """
    if subject.solved.prepared.response == "log":
        return not_evaluated("precision", "potentials have no zero of their own, and a share of them means nothing")
    vessels = [vessel for vessel in _usable(subject) if vessel.sd is not None and vessel.readings > 1]
    if not vessels:
        return not_evaluated(
            "precision", "no vessel was read more than once, nor does the export give standard deviations",
            "Read each vessel twice or more",
        )  # fmt: skip
    background = subject.solved.background
    off = background.mean if background is not None and not background.problem else 0.0
    floor = (number(limits, "floor") or 0.0) * max(abs(vessel.mean - off) for vessel in _usable(subject))
    scaled = [((vessel.sd or 0.0) / size if size else 0.0, vessel.readings - 1)
              for vessel in vessels for size in [max(abs(vessel.mean - off), floor)]]  # fmt: skip
    within = sum(n for _, n in scaled)
    pooled = math.sqrt(math.fsum(n * s * s for s, n in scaled) / within)
    sentence = f"Readings of one vessel repeat to {near_limits(pooled, limits)} ({freedom(within)})"
    return graded(
        "precision", pooled, limits, sentence, "Look at the nebuliser, the furnace or the contacts; read again",
        show=as_percent,
    )  # fmt: skip


def _usable(subject: Subject) -> list[VesselSignal]:
    return [
        vessel_signal(vessel.readings)
        for vessel in subject.solved.prepared.vessels
        if not vessel.excluded and vessel.readings and unusable(vessel.readings) is None
    ]


def _read(subject: Subject) -> list[tuple[str, Reading]]:
    kept: list[PreparedVessel] = [vessel for vessel in subject.solved.prepared.vessels if not vessel.excluded]
    return [(vessel_name(each.level, each.vessel, each.block), reading) for each in kept for reading in each.readings]


def _top(subject: Subject) -> Top | None:
    tops = subject.context.rules.tops
    return tops.get(subject.solved.prepared.line) or tops.get(subject.solved.prepared.analyte)

