"""From readings to points: a vessel's mean signal, corrected, and scaled for volumes.

With S - B = k (C0 V0 + Cs v) / V the points x = Cs v / V0 and y = (S - B) V / V0 lie on y = k (C0 + x), whatever was
diluted how far. The background comes off before the volumes: afterwards it would be scaled with them. An amount that
reagents bring into every vessel counts with the additions. Where there is an internal standard the signal is the ratio
of the two, and where it entered decides by what that is multiplied. A logarithmic response stays as it was read.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import NamedTuple

from spikeward.rules.naming import level_order
from spikeward.rules.outcomes import Point
from spikeward.rules.prepared import PreparedLine, PreparedVessel
from spikeward.rules.records import MEASURED, NOT_DETECTED, Reading
from spikeward.rules.rounding import figure
from spikeward.rules.rulebook import Censored
from spikeward.rules.solve.corrections import Corrections, corrected
from spikeward.rules.solve.drift import Drift
from spikeward.rules.solve.internal_standard import (
    NOT_PAIRED,
    divisors,
    factor_of,
    internal_problem,
    scale_of,
)
from spikeward.rules.solve.solved import Background, Reagent
from spikeward.rules.solve.vessel_signal import (
    counts_of,
    mean_of,
    place_of,
    unusable,
    vessel_name,
    vessel_signal,
    why_unusable,
)
from spikeward.rules.words import line_words


class Row(NamedTuple):
    """One vessel that is fitted: y = signal x factor at x.

    ``signal`` is the mean of its readings, corrected; the ratio where there is an internal standard. ``factor`` is
    dy/dsignal. ``weight`` is 1 for the largest of the line. ``block`` counts the runs of the series from 0. ``share``
    is aliquot over final volume. ``shift`` is by how much y falls when the background rises by one, ``per_amount``
    by how much x rises with the amount in the vessel, ``per_signal`` by how much y rises with the signal as it was
    read.
    """

    x: float
    y: float
    factor: float
    signal: float
    weight: float
    block: int
    share: float
    readings: int
    shift: float
    per_amount: float
    per_signal: float


@dataclass(frozen=True, slots=True)
class Transformed:
    """One line ready for the fit: the points of all vessels that have a signal, and ``rows`` of those that are fitted.

    ``background`` and ``reagent`` are what was subtracted. ``corrected`` says what was done and what was not;
    ``not_drifted`` why the drift was not corrected although the rules ask for it, as the end of a sentence; ``drifted``
    that it was. ``ratio``: signals are ratios to an internal standard.
    """

    points: tuple[Point, ...]
    rows: tuple[Row, ...]
    background: Background | None
    problem: str = ""
    notes: tuple[str, ...] = ()
    blank_note: str = ""
    corrected: tuple[str, ...] = ()
    reagent: Reagent | None = None
    not_drifted: str = ""
    drifted: bool = False
    ratio: bool = False


@dataclass(frozen=True, slots=True)
class _Way:
    """How the readings of a line become signals; ``divided``: by the internal standard."""

    background: float
    drift: Drift | None
    divided: bool
    entered: str
    amount: float  # of reagents in each vessel
    potential: bool  # the response is logarithmic
    scale: float  # of every factor


def weights_of(rows: Sequence[Row]) -> tuple[float, ...]:
    """The weights of the rows of one line; one of zero where volumes are too far apart to be calculated with."""
    return tuple(row.weight for row in rows)


def transform(line: PreparedLine, corrections: Corrections) -> Transformed:
    """The points of one line, with everything corrected that the rules ask for and the export has not done already.

    Parameters
    ----------
    line : the vessels as they were prepared
    corrections : in the units of this line
    """
    exported, problem = _exported(line)
    background, blank_note, refused = _background(line, corrections.background, exported)
    problem = problem or refused or _unknown_entry(line, exported)
    vessels, notes, refused = _measured(line, corrections.censored, "internal_standard" not in exported)
    problem = problem or refused or (corrections.reagent.problem if corrections.reagent is not None else "")
    drift, not_drifted = _drift(line, corrections.drift, exported, vessels)
    reagent = _counted(corrections.reagent)
    way = _way(line, exported, background, drift, reagent)
    made = [_point_and_row(vessel, way, _blocks(vessels)) for vessel in vessels]
    rows = [row for vessel, (_, row) in zip(vessels, made, strict=True) if not vessel.excluded]
    if way.divided and not all(divisors(vessel.readings, vessel.internal)[1] for vessel in vessels):
        notes = (*notes, NOT_PAIRED)
    return Transformed(
        points=tuple(point for point, _ in made),
        rows=_weighted(rows, corrections.weights),
        background=background,
        problem=problem,
        notes=(*((background.note,) if background is not None and background.note else ()), *notes),
        blank_note=blank_note,
        corrected=corrected(line, exported, background, corrections.reagent, drift, not_drifted),
        reagent=reagent,
        not_drifted=not_drifted,
        drifted=drift is not None,
        ratio=way.divided,
    )


def _counted(reagent: Reagent | None) -> Reagent | None:
    """The reagents' amount, if it is known and there is one."""
    if reagent is None or reagent.problem:
        return None
    return reagent if reagent.amount or reagent.standard_uncertainty else None


def _way(
    line: PreparedLine,
    exported: frozenset[str],
    background: Background | None,
    drift: Drift | None,
    reagent: Reagent | None,
) -> _Way:
    potential = line.response == "log"
    return _Way(
        background=background.mean if background is not None and not background.problem else 0.0,
        drift=drift,
        divided=bool(line.entered) and "internal_standard" not in exported and not potential,
        entered="" if potential else line.entered,
        amount=reagent.amount if reagent is not None else 0.0,
        potential=potential,
        scale=scale_of(line.vessels, line.entered),
    )


_EXPORTED = {"blank": "the blank was taken off", "internal_standard": "the internal standard was applied",
             "drift": "the drift was corrected"}  # fmt: skip


def _exported(line: PreparedLine) -> tuple[frozenset[str], str]:
    """What the exports of a line say that they have corrected already, and a sentence where they differ in it."""
    readings = [reading for vessel in line.vessels if not vessel.excluded for reading in vessel.readings]
    problem, found = "", set()
    for what, words in _EXPORTED.items():
        says = {what in reading.already for reading in readings}
        if True in says:
            found.add(what)
        if len(says) > 1:
            problem = problem or (
                f"some exports of this series say that {words} already and others do not: export all vessels in the "
                "same way"
            )
    return frozenset(found), problem


def _background(
    line: PreparedLine, background: Background | None, exported: frozenset[str]
) -> tuple[Background | None, str, str]:
    """The background that comes off, a note where the export did it, and why it cannot be subtracted."""
    if background is None or line.response == "log":
        return None, "", ""
    if "blank" in exported:
        return None, "the export had the blank taken off already, so no background was subtracted", ""
    if background.problem:
        return background, "", background.problem
    if background.unit != line.signal_unit:
        return background, "", (
            f"the background is in {background.unit or 'no unit'} and the signals are in "
            f"{line.signal_unit or 'no unit'}: it cannot be subtracted; export both in the same unit"
        )
    divided = any("internal_standard" in reading.already for reading in background.readings)
    if background.readings and divided != ("internal_standard" in exported):
        return background, "", (
            "the export applied the internal standard only to one of series and background: export both in the same way"
        )
    return background, "", ""


def _unknown_entry(line: PreparedLine, exported: frozenset[str]) -> str:
    """An export with its internal standard applied, of vessels in which it matters where that came in."""
    if line.entered or "internal_standard" not in exported or line.response == "log":
        return ""
    made = {(vessel.aliquot, vessel.final) for vessel in line.vessels if not vessel.excluded}
    if len(made) < 2:
        return ""
    return (
        "the export says that the internal standard was applied already, and the volumes of the vessels differ: say "
        "under preparations: internal_standard where it entered"
    )


def _measured(
    line: PreparedLine, censored: Censored, needs_internal: bool
) -> tuple[list[PreparedVessel], tuple[str, ...], str]:
    """The vessels that have a signal, censored readings replaced as the rules say, with notes and the first problem."""
    found, notes, problem = [], [], ""
    for vessel in line.vessels:
        name = vessel_name(vessel.level, vessel.vessel, vessel.block)
        low = [reading for reading in vessel.readings if reading.qualifier == NOT_DETECTED]
        if low and censored.use == "leave out" and not vessel.excluded:
            notes.append(f"{name} was not detected ({place_of(low[0])}) and was left out of the line, as the rules say")
            continue
        refused = ""
        if low and censored.use == "substitute":
            vessel, told, refused = _substituted(vessel, low, line, censored)
            notes += [f"{name} {told}"] if told else []
        refused = refused or _vessel_problem(vessel, line, needs_internal)
        if not refused:
            found.append(vessel)
        elif not vessel.excluded:
            problem = problem or refused
    return found, tuple(notes), problem


def _substituted(
    vessel: PreparedVessel, low: Sequence[Reading], line: PreparedLine, censored: Censored
) -> tuple[PreparedVessel, str, str]:
    """The vessel with the declared signal for each reading that was not detected."""
    declared = censored.signals.get(line.line) or censored.signals.get(line.analyte)
    if declared is None:
        told = f"no signal is declared for {line_words(line.analyte, line.line)} under below_detection"
        return vessel, "", f"{told}, and {place_of(low[0])} was not detected: add it under signals"
    if declared.unit != line.signal_unit:
        return vessel, "", (
            f"the signal under below_detection is in {declared.unit or 'no unit'} and the signals are in "
            f"{line.signal_unit or 'no unit'}: declare it in the unit of the export"
        )
    readings = tuple(
        replace(one, signal=declared.signal, qualifier=MEASURED, sd=None) if one in low else one
        for one in vessel.readings
    )
    stands = f"{figure(declared.signal)} {declared.unit} stands for it, as the rules say"
    told = f"was not detected ({place_of(low[0])}): {stands}"
    return replace(vessel, readings=readings), told, ""


def _vessel_problem(vessel: PreparedVessel, line: PreparedLine, needs_internal: bool) -> str:
    name = vessel_name(vessel.level, vessel.vessel, vessel.block)
    if not vessel.readings:
        return f"{name} has no reading: export it, or exclude it by a decision"
    reading = unusable(vessel.readings)
    if reading is not None:
        return f"{name} ({place_of(reading)}) {why_unusable(reading)}"
    if not (vessel.aliquot > 0 and vessel.final > 0):
        told = f"{name} has an aliquot of {vessel.aliquot:g} {line.aliquot_unit}"
        return f"{told} in {vessel.final:g} {line.final_unit}: both must be above zero"
    return internal_problem(vessel, line.internal, needs_internal) if line.entered and line.response != "log" else ""


def _drift(
    line: PreparedLine, drift: Drift | None, exported: frozenset[str], vessels: Sequence[PreparedVessel]
) -> tuple[Drift | None, str]:
    """The drift that is corrected, or the reason why it is not although the rules ask for it."""
    if drift is None:
        return None, ""
    if line.response == "log":
        return None, "a potential has no sensitivity that it could be divided by"
    if "drift" in exported:
        return None, "the export had it corrected already"
    refused = drift.why_not([reading for vessel in vessels if not vessel.excluded for reading in vessel.readings])
    return (None, refused) if refused else (drift, "")


def _blocks(vessels: Sequence[PreparedVessel]) -> dict[str, int]:
    """The runs of a series, counted from 0."""
    named = sorted({vessel.block for vessel in vessels if not vessel.excluded}, key=level_order)
    return {name: number for number, name in enumerate(named)}


def _point_and_row(vessel: PreparedVessel, way: _Way, blocks: Mapping[str, int]) -> tuple[Point, Row]:
    """One vessel on the line; its weight is still 1."""
    readings, counts = vessel.readings, counts_of(vessel.readings)
    below = divisors(readings, vessel.internal)[0] if way.divided else (1.0,) * len(readings)
    # an excluded vessel outside the brackets is shown as it was read
    drift = None if way.drift is not None and vessel.excluded and way.drift.why_not(readings) else way.drift
    drifts = [drift.at(reading) if drift is not None else (1.0, 0.0) for reading in readings]
    products = [one * relative for one, (relative, _) in zip(below, drifts, strict=True)]
    scales = [1.0 / each if each > 0.0 else math.inf for each in products]  # too small a signal is told after the fit
    mean = vessel_signal(readings, scales)
    scale = mean_of(scales, counts)
    signal = mean.mean - way.background * scale
    factor = 1.0 if way.potential else factor_of(vessel, way.entered) * way.scale
    # the background is in the sensitivities too: what it takes from them comes back
    tilts = [
        ((reading.signal or 0.0) - way.background) * each * tilt
        for reading, each, (_, tilt) in zip(readings, scales, drifts, strict=True)
    ]
    shift = scale + mean_of(tilts, counts)
    share = vessel.aliquot / vessel.final
    x, y = (vessel.added + way.amount) / vessel.aliquot, signal * factor
    sd = None if way.divided and any(count > 1 for count in counts) else mean.sd
    point = Point(
        level=vessel.level, vessel=vessel.vessel, x=x, y=y, fitted=None, signal=signal, readings=mean.readings, sd=sd,
        matrix_share=share, excluded=vessel.excluded, factor=factor, block=vessel.block,
    )  # fmt: skip
    block = blocks.get(vessel.block, 0)
    row = Row(
        x, y, factor, signal, 1.0, block, share, mean.readings, shift * factor, 1.0 / vessel.aliquot, scale * factor
    )
    return point, row


def _weighted(rows: Sequence[Row], how: str) -> tuple[Row, ...]:
    """The rows in an order of their own, since that of vessels must not reach the last digit, with their weights.

    The noise of signals is taken as constant, so u(y) = u(S) factor and w is in proportion to 1 over factor squared:
    equal weights wherever every vessel holds the same share of test solution. (Weights by the inverse variance: Miller
    and Miller, Statistics and Chemometrics for Analytical Chemistry, chapter 5.)
    """
    least = min((row.factor for row in rows), default=1.0)
    ratios = [1.0 if how == "equal" else least / row.factor if row.factor > 0.0 else 0.0 for row in rows]
    return tuple(sorted(row._replace(weight=ratio * ratio) for row, ratio in zip(rows, ratios, strict=True)))
