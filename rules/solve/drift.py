"""Drift: the sensitivity against time by the visits to a bracketing solution, and readings brought back to the first.

Each reading is divided by the sensitivity at its own time, interpolated as a straight line between the brackets on both
sides, relative to the first bracket of the batch. The background comes off first, of vessels and of brackets.
"""

from __future__ import annotations

import math
from bisect import bisect_right
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import UTC, datetime

from spikeward.rules.prepared import PreparedLine
from spikeward.rules.records import Reading
from spikeward.rules.series import one_sequence
from spikeward.rules.solve.internal_standard import partners
from spikeward.rules.solve.solved import Background
from spikeward.rules.solve.vessel_signal import counts_of, mean_of, unusable, vessel_signal
from spikeward.rules.words import line_words

LineKey = tuple[str, str]  # analyte, line


@dataclass(frozen=True, slots=True)
class Bracket:
    """One visit to the bracketing solution: its readings on one line, read without another solution between them.

    ``sensitivity`` is the mean signal, background off, in the instrument's unit; None where a reading has no number.
    ``first`` and ``last`` are acquisition sort keys as ``Reading.when``.
    """

    first: tuple[str, int]
    last: tuple[str, int]
    solution: str
    sensitivity: float | None
    readings: tuple[Reading, ...]


@dataclass(frozen=True, slots=True)
class Sensitivity:
    """The sensitivity at one visit, None where it is not known, and by how much it falls per unit of background.

    ``position`` is in seconds from the first visit, or in places of the declared order. ``scale`` is the sensitivity
    per signal, 1 without an internal standard.
    """

    position: float
    value: float | None
    per_background: float
    solution: str
    scale: float = 1.0


@dataclass(frozen=True, slots=True)
class Drift:
    """The sensitivity through a batch for one line, in the order of the visits.

    ``start`` is the time of the first reading of a bracket; empty where the declared order stands for time. With
    ``problem``, the end of a sentence, nothing can be corrected by it.
    """

    sensitivities: tuple[Sensitivity, ...] = ()
    start: str = ""
    problem: str = ""

    def why_not(self, readings: Sequence[Reading]) -> str:
        """Why some readings cannot be corrected, as the end of a sentence, or an empty text."""
        if self.problem:
            return self.problem
        places = [self._position(reading) for reading in readings]
        first, last = self.sensitivities[0], self.sensitivities[-1]
        outside = [
            reading for reading, place in zip(readings, places, strict=True)
            if not first.position <= place <= last.position
        ]  # fmt: skip
        if outside:
            side = "before" if self._position(outside[0]) < first.position else "after"
            return f"no bracket was measured {side} {outside[0].solution}"
        for one in (first, *(each for place in places for each in self._around(place))):
            if one.value is None or not one.value > 0.0:
                return f"the bracket {one.solution} has no signal above zero that can be used"
        return ""

    def at(self, reading: Reading) -> tuple[float, float]:
        """The sensitivity at a reading over that at the first visit, and by what share it rises per background.

        For readings of which ``why_not`` finds nothing.
        """
        place = self._position(reading)
        before, after = self._around(place)
        step = after.position - before.position
        share = (place - before.position) / step if step > 0.0 else 0.5
        first = self.sensitivities[0]
        value = _between(before.value or math.nan, after.value or math.nan, share)
        effect = _between(before.per_background, after.per_background, share)
        start = first.value or math.nan
        return value / start, first.per_background / start - effect / value

    def used(self, readings: Sequence[Reading]) -> tuple[int, ...]:
        """Which visits the correction of some readings rests on: those around each, and the first."""
        found = {0}
        last = len(self.sensitivities) - 1
        for reading in readings:
            after = self._after(self._position(reading))
            found |= {max(after - 1, 0), min(after, last)}
        return tuple(sorted(found))

    def with_value(self, place: int, value: float) -> Drift:
        """The same with another sensitivity at one visit."""
        visits = list(self.sensitivities)
        visits[place] = replace(visits[place], value=value)
        return replace(self, sensitivities=tuple(visits))

    def _after(self, place: float) -> int:
        return bisect_right([one.position for one in self.sensitivities], place)

    def _around(self, place: float) -> tuple[Sensitivity, Sensitivity]:
        after = self._after(place)
        last = len(self.sensitivities) - 1
        return self.sensitivities[max(after - 1, 0)], self.sensitivities[min(after, last)]

    def _position(self, reading: Reading) -> float:
        return _position(reading, self.start)


def visits(
    readings: Sequence[Reading], backgrounds: Mapping[LineKey, Background]
) -> tuple[dict[LineKey, tuple[Bracket, ...]], frozenset[LineKey]]:
    """The visits to the bracketing solution, line by line, in acquisition order.

    Readings of one line that follow each other without another solution between them are one visit, unless their names
    give them another sample or vessel.

    Parameters
    ----------
    readings : of every role of one batch, in force

    Returns
    -------
    the visits by (analyte, line), and the lines on which the brackets themselves cannot be put in order. Other readings
    that cannot be placed beside them are passed over: each series answers for its own
    """
    by_line: dict[LineKey, list[Reading]] = {}
    for reading in readings:
        by_line.setdefault((reading.analyte, reading.line), []).append(reading)
    found: dict[LineKey, tuple[Bracket, ...]] = {}
    untimed: set[LineKey] = set()
    for line, of_line in by_line.items():
        marks = [reading for reading in of_line if reading.series.role == "bracket"]
        if not one_sequence(marks):
            untimed.add(line)
            continue
        placed = [reading for reading in of_line if marks and one_sequence([*marks[:1], reading])]
        ordered = sorted(placed, key=lambda r: (r.when, r.series, r.solution, r.reading, r.path, r.row))
        runs: list[list[Reading]] = []
        fresh = True
        for reading in ordered:
            if reading.series.role != "bracket":
                fresh = True
            elif fresh or _named(reading) != _named(runs[-1][-1]):
                runs.append([reading])
                fresh = False
            else:
                runs[-1].append(reading)
        found[line] = tuple(_bracket(run, backgrounds.get(line)) for run in runs)
    return found, frozenset(untimed)


def _named(reading: Reading) -> tuple[str, str]:
    return reading.series.sample, reading.vessel


def drift_of(
    line: PreparedLine,
    brackets: Mapping[LineKey, Sequence[Bracket]],
    untimed: frozenset[LineKey],
    background: Background | None,
) -> Drift:
    """The sensitivity for one line; with an internal standard that of the ratio.

    Parameters
    ----------
    brackets, untimed : of the batch, as ``visits`` gives them
    background : of the line, as it is subtracted from its vessels
    """
    every = brackets.get((line.analyte, line.line), ())
    series = [reading for vessel in line.vessels if not vessel.excluded for reading in vessel.readings]
    marks = [reading for one in every for reading in one.readings]
    refused = _refused(line, series, marks, (line.analyte, line.line) in untimed)
    if refused:
        return Drift(problem=refused)
    divided = line.entered and not _says("internal_standard", marks)
    internal = _internal_of(line, brackets, marks) if divided else {}
    if divided and not internal:
        told = f"not every reading of the brackets of {line_words(line.analyte, line.line)} has one of the internal "
        return Drift(problem=f"{told}standard {line.internal} beside it")
    if _says("blank", marks) or (background is not None and background.problem):
        background = None
    timed = all(reading.measured_at for reading in [*series, *marks])
    start = marks[0].measured_at if timed else ""
    return Drift(tuple(_sensitivity(one, start, background, internal) for one in every), start)


def _refused(line: PreparedLine, series: Sequence[Reading], marks: Sequence[Reading], untimed: bool) -> str:
    if untimed or not one_sequence([*series, *marks]):
        return (
            "without acquisition times, or an order within one file, series and brackets cannot be placed beside each "
            "other"
        )
    if not marks:
        return f"no bracket of {line_words(line.analyte, line.line)} was measured"
    if _says("drift", marks):
        return f"the export says that the drift of the bracket {marks[0].solution} was corrected already"
    if _says("internal_standard", marks) != _says("internal_standard", series):
        return "the internal standard is off only one of series and brackets: export both in the same way"
    if _says("blank", marks) != _says("blank", series):
        return "the blank is off only one of series and brackets: export both in the same way"
    units = {reading.unit for reading in marks}
    if units != {line.signal_unit}:
        told = " and ".join(unit or "no unit" for unit in sorted(units))
        return f"the brackets are in {told} and the signals in {line.signal_unit or 'no unit'}: export both in one unit"
    return ""


def _says(what: str, readings: Sequence[Reading]) -> bool:
    return any(what in reading.already for reading in readings)


def _internal_of(
    line: PreparedLine, brackets: Mapping[LineKey, Sequence[Bracket]], marks: Sequence[Reading]
) -> dict[Reading, Reading]:
    """The reading of the internal standard for each reading of a bracket; nothing where they cannot all be paired."""
    lines = {(reading.analyte, reading.line) for vessel in line.vessels for reading in vessel.internal}
    others = [reading for each in sorted(lines) for one in brackets.get(each, ()) for reading in one.readings]
    found = partners(marks, others)
    return dict(zip(marks, found, strict=True)) if found is not None else {}


def _sensitivity(
    one: Bracket, start: str, background: Background | None, internal: Mapping[Reading, Reading]
) -> Sensitivity:
    counts = counts_of(one.readings)
    position = mean_of([_position(reading, start) for reading in one.readings], counts)
    below = [internal[reading] for reading in one.readings] if internal else []
    if unusable([*one.readings, *below]) is not None or any(not (each.signal or 0.0) > 0.0 for each in below):
        return Sensitivity(position, None, 0.0, one.solution)
    scales = [1.0 / (each.signal or math.nan) for each in below] or [1.0] * len(counts)
    scale = mean_of(scales, counts)
    mean = vessel_signal(one.readings, scales).mean
    if background is None:
        return Sensitivity(position, mean, 0.0, one.solution, scale)
    return Sensitivity(position, mean - background.mean * scale, scale, one.solution, scale)


def _position(reading: Reading, start: str) -> float:
    if not start:
        return float(-1 if reading.order is None else reading.order)
    return (_moment(reading.measured_at) - _moment(start)).total_seconds()


def _moment(text: str) -> datetime:
    moment = datetime.fromisoformat(text)
    return moment if moment.tzinfo is not None else moment.replace(tzinfo=UTC)


def _between(before: float, after: float, share: float) -> float:
    return before + share * (after - before)


def _bracket(run: Sequence[Reading], background: Background | None) -> Bracket:
    sensitivity = None
    if unusable(run) is None and len({reading.unit for reading in run}) == 1:
        sensitivity = vessel_signal(run).mean
        if background is not None and not background.problem and not any("blank" in r.already for r in run):
            sensitivity = sensitivity - background.mean if background.unit == run[0].unit else None
    return Bracket(run[0].when, run[-1].when, run[0].solution, sensitivity, tuple(run))
