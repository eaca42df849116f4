"""External calibration, for comparison only: what plain standards of the same run say beside the additions.

It never gives a result: a matrix that suppresses the signal is why standard is added to the sample itself.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from spikeward.rules.outcomes import Beside, Estimate, Point
from spikeward.rules.prepared import PreparedLine
from spikeward.rules.quantities import UNITS, Quantity, parse_quantity
from spikeward.rules.records import Reading
from spikeward.rules.rounding import figure, percent, rounded
from spikeward.rules.rulebook import Rulebook
from spikeward.rules.solve.internal_standard import AT_CONSTANT_CONTENT, divisors
from spikeward.rules.solve.line import fit_lines
from spikeward.rules.solve.solved import Background, Solved
from spikeward.rules.solve.vessel_signal import counts_of, mean_of, place_of, unusable, vessel_signal, why_unusable
from spikeward.rules.uncertainty.fieller import g_value, t_quantile
from spikeward.rules.words import counted, line_words, listed, unit_words

CalibrationKey = tuple[str, str, str]  # analyte, line, internal standard or empty

BESIDE = "external calibration"

_PER_OTHER = {"L": "kg", "mL": "g", "kg": "L", "g": "mL"}  # with mL and g, 1 mg/L and 1 mg/kg are the same number


@dataclass(frozen=True, slots=True)
class Calibration:
    """The straight line signal = intercept + slope x content through the vessels of plain standards.

    ``slope`` is in signal per ``unit``, contents being those in the vessel as it was measured; ``covariance`` is that
    of intercept and slope; ``sxx`` is the sum of squares of the contents about ``x_mean``, ``highest`` the highest of
    them. ``net``: a background is off the signals, here or by the export. With ``problem``, the end of a sentence,
    there is no line.
    """

    readings: tuple[Reading, ...]
    slope: float = 0.0
    slope_uncertainty: float = 0.0
    intercept: float = 0.0
    covariance: float = 0.0
    residual_sd: float = 0.0
    degrees_of_freedom: int = 0
    vessels: int = 0
    x_mean: float = 0.0
    sxx: float = 0.0
    highest: float = 0.0
    unit: str = ""
    signal_unit: str = ""
    net: bool = False
    note: str = ""
    problem: str = ""


def calibrations(
    readings: Sequence[Reading], backgrounds: Mapping[tuple[str, str], Background], rules: Rulebook
) -> dict[CalibrationKey, Calibration]:
    """The calibration of every line that has readings of role ``calibration``.

    Parameters
    ----------
    readings : of every role of one batch, in force
    backgrounds : by analyte and line, where the rules subtract one

    Returns
    -------
    by analyte, line and internal standard: once for the plain signals, and once more for each internal standard that
    the rules give the analyte at a constant content
    """
    standards = [reading for reading in readings if reading.series.role == "calibration"]
    by_line: dict[tuple[str, str], list[Reading]] = {}
    for reading in standards:
        by_line.setdefault((reading.analyte, reading.line), []).append(reading)
    found: dict[CalibrationKey, Calibration] = {}
    for (analyte, line), of_line in by_line.items():
        background = backgrounds.get((analyte, line))
        for internal in ("", *_internal_standards(analyte, rules)):
            beside_it = [reading for reading in standards if internal and _is(reading, internal)]
            if beside_it or not internal:
                found[analyte, line, internal] = calibration_of(of_line, rules.calibration, background, beside_it)
    return found


def _is(reading: Reading, internal: str) -> bool:
    """A rule names an internal standard by its analyte, or with the line that is meant."""
    return internal in (reading.analyte, f"{reading.analyte} {reading.line}", line_words(reading.analyte, reading.line))


def _internal_standards(analyte: str, rules: Rulebook) -> tuple[str, ...]:
    names = [
        one.internal_standard.names[analyte]
        for one in rules.preparations
        if one.internal_standard is not None
        and one.internal_standard.entered == AT_CONSTANT_CONTENT
        and analyte in one.internal_standard.names
    ]
    return tuple(dict.fromkeys(names))


def calibration_of(
    readings: Sequence[Reading],
    contents: Mapping[str, Mapping[str, Quantity]],
    background: Background | None = None,
    internal: Sequence[Reading] = (),
) -> Calibration:
    """Fit the plain standards of one line of one batch.

    Parameters
    ----------
    readings : of role ``calibration``, of one analyte on one line, at least one
    contents : solution's sample name -> analyte -> content; where it says nothing the quantity ``content`` of the
        reading counts
    background : taken off every signal that the export has not freed of it; it moves the intercept only
    internal : readings of the internal standard in the same solutions; the signal is then the ratio to it
    """
    kept = tuple(sorted(readings, key=lambda r: (r.when, r.solution, r.vessel, r.reading, r.path, r.row)))
    refused = _unfit(kept, background)
    if refused:
        return Calibration(kept, problem=refused)
    off = background.mean if background is not None and not any("blank" in r.already for r in kept) else 0.0
    try:
        points, left_out = _points(kept, contents, off, internal)
    except ValueError as error:
        return Calibration(kept, problem=str(error))
    if not points:
        return Calibration(kept, problem=left_out[0])
    net = background is not None or any("blank" in r.already for r in kept)
    return _fitted(kept, points, "; ".join(left_out), net, bool(internal))


def _unfit(readings: Sequence[Reading], background: Background | None) -> str:
    units = sorted({reading.unit or "no unit" for reading in readings})
    if len(units) > 1:
        return f"the calibration comes in {listed(units)}: export it in one unit"
    if len({"blank" in reading.already for reading in readings}) > 1:
        return "the export had the blank taken off some calibration solutions only: export all of them in the same way"
    if background is not None and background.problem:
        return background.problem
    if background is not None and background.unit != readings[0].unit:
        return "the background and the calibration come in different units: export both in the same unit"
    return ""


def _points(
    readings: Sequence[Reading],
    contents: Mapping[str, Mapping[str, Quantity]],
    background: float,
    internal: Sequence[Reading],
) -> tuple[list[tuple[Quantity, float]], list[str]]:
    """Content and signal of every vessel, and why some were left out.

    Raises
    ------
    ValueError : a content cannot be read, or the solutions' contents are of different kinds
    """
    vessels: dict[tuple[str, str], list[Reading]] = {}
    for reading in readings:
        named = bool(reading.series.sample or reading.vessel)
        place = (reading.series.sample, reading.vessel) if named else ("", reading.solution)
        vessels.setdefault(place, []).append(reading)
    points: list[tuple[Quantity, float]] = []
    left_out: list[str] = []
    for place in sorted(vessels):
        of_vessel = vessels[place]
        first = of_vessel[0]
        content = _content(first, contents)
        bad = unusable(of_vessel)
        if content is None:
            name = first.series.sample or first.solution
            left_out.append(
                f"no content of {first.analyte} is known for calibration solution {name}: declare it under calibration"
            )
        elif bad is not None:
            told = f"calibration solution {bad.solution} ({place_of(bad)}) {why_unusable(bad).partition(':')[0]}"
            left_out.append(f"{told} and was left out")
        else:
            signal = _signal(of_vessel, background, internal)
            if signal is None:
                left_out.append(f"calibration solution {first.solution} has no internal standard and was left out")
            else:
                points.append((content, signal))
    if len({content.dimension for content, _ in points}) > 1:
        raise ValueError("the contents of the calibration solutions are of different kinds: give all in one unit")
    return points, left_out


def _content(reading: Reading, contents: Mapping[str, Mapping[str, Quantity]]) -> Quantity | None:
    declared = contents.get(reading.series.sample) or contents.get(reading.solution)
    if declared is not None and reading.analyte in declared:
        return declared[reading.analyte]
    told = [text for meaning, text, _ in reading.values if meaning == "content"]
    try:
        return parse_quantity(told[0]) if told else None
    except ValueError as error:
        raise ValueError(f"the content of calibration solution {reading.solution}: {error}") from None


def _signal(of_vessel: Sequence[Reading], background: float, internal: Sequence[Reading]) -> float | None:
    """The mean signal of one vessel, the background off, over the internal standard where there is one."""
    if not internal:
        return vessel_signal(of_vessel).mean - background
    solutions = {reading.solution for reading in of_vessel}
    same = [reading for reading in internal if reading.solution in solutions]
    if not same or unusable(same) is not None or not all((reading.signal or 0.0) > 0.0 for reading in same):
        return None
    scales = [1.0 / each for each in divisors(of_vessel, same)[0]]
    return vessel_signal(of_vessel, scales).mean - background * mean_of(scales, counts_of(of_vessel))


def _fitted(
    readings: tuple[Reading, ...], points: Sequence[tuple[Quantity, float]], note: str, net: bool, ratio: bool
) -> Calibration:
    unit = points[0][0].unit
    pairs = sorted((content.to(unit), signal) for content, signal in points)
    if len(pairs) < 3 or len({x for x, _ in pairs}) < 2:
        few = f"{counted(len(pairs), 'calibration solution')}, a line with its scatter needs three of two contents"
        return Calibration(readings, note=note, problem="; ".join(part for part in (few, note) if part))
    x, y = (np.array(column).reshape(-1, 1) for column in zip(*pairs, strict=True))
    fit = fit_lines(x, y, np.ones_like(x), np.ones_like(x)).of(0)
    if not math.isfinite(fit.slope) or not fit.slope > 0.0 or fit.flat:
        return Calibration(readings, note=note, problem="the signals of the calibration do not rise with the content")
    dof = len(pairs) - 2
    if not g_value(t_quantile(dof, 0.95), fit.slope, fit.slope_uncertainty) < 1.0:
        return Calibration(readings, note=note, problem="the slope of the calibration does not differ from zero")
    return Calibration(
        readings, fit.slope, fit.slope_uncertainty, fit.intercept, fit.covariance, fit.residual_sd, dof, len(pairs),
        fit.x_mean, fit.sxx, pairs[-1][0], unit, "" if ratio else readings[0].unit, net, note,
    )  # fmt: skip


def unit_in_vessel(line: PreparedLine) -> str:
    """The unit of contents in the vessel that goes with the slope of a line, or an empty text where there is none."""
    if line.aliquot_unit == line.final_unit:
        return line.unit
    kind, _, per = line.unit.partition("/")
    other = f"{kind}/{_PER_OTHER.get(per, '')}"
    return other if other in UNITS else ""


def per_unit_of(line: PreparedLine, calibration: Calibration) -> float | None:
    """How many of the calibration's units make one of content in the vessel; None where they are of other kinds."""
    unit = unit_in_vessel(line)
    if not unit or UNITS[unit][0] != UNITS[calibration.unit][0]:
        return None
    return float(UNITS[unit][1] / UNITS[calibration.unit][1])


def why_not_comparable(solved: Solved, calibration: Calibration) -> str:
    """Why slopes of additions and calibration are not of one kind, or an empty text."""
    line = solved.prepared
    if calibration.problem:
        return calibration.problem
    if line.response != "linear":
        return "only a straight line has a slope to compare"
    if line.internal and line.entered != AT_CONSTANT_CONTENT:
        return "the internal standard came in with the sample, so that signals and plain standards are not of one kind"
    if not line.internal and calibration.signal_unit != line.signal_unit:
        units = (unit or "no unit" for unit in (calibration.signal_unit, line.signal_unit))
        return f"signals of calibration and additions come in {' and '.join(units)}"
    if per_unit_of(line, calibration) is None:
        told = unit_words(unit_in_vessel(line) or line.unit)
        return f"the calibration is in {unit_words(calibration.unit)} and the vessels are in {told}"
    return ""


def beside(solved: Solved, calibration: Calibration, coverage: float) -> Beside | None:
    """The content of the test solution that plain calibration would have given, from the vessels without addition.

    c = (S - a)/b times final over aliquot, the mean of such vessels. With equal volumes the standard uncertainty is
    (s/b) sqrt(1/m + 1/n + (S - Sbar)²/(b² Sxx)), the interval that of Student's t (Miller and Miller, Statistics and
    Chemometrics for Analytical Chemistry, chapter 5). Unlike the content by additions it knows nothing of the matrix.

    Parameters
    ----------
    coverage : of the interval, such as 0.95

    Returns
    -------
    in the unit of the test solution; None where there is nothing to compare
    """
    bare = {(v.level, v.vessel, v.block) for v in solved.prepared.vessels if v.added == 0.0}
    points = [p for p in solved.points if not p.excluded and (p.level, p.vessel, p.block) in bare]
    if not points or why_not_comparable(solved, calibration) or calibration.net != _is_net(solved):
        return None
    scale = per_unit_of(solved.prepared, calibration)
    if scale is None:
        return None
    content, u = (value / scale for value in _inverse(points, calibration))
    t = t_quantile(calibration.degrees_of_freedom, coverage)
    estimate = Estimate(
        content, solved.prepared.unit, u, t * u, t, (content - t * u, content + t * u), coverage,
        effective_degrees_of_freedom=calibration.degrees_of_freedom,
    )  # fmt: skip
    return Beside(BESIDE, estimate, _sentence(solved, calibration, estimate, points))


def _is_net(solved: Solved) -> bool:
    return solved.net_by_export or (solved.background is not None and not solved.background.problem)


def _inverse(points: Sequence[Point], line: Calibration) -> tuple[float, float]:
    """Content of the test solution and its standard uncertainty, in the calibration's unit."""
    m = len(points)
    factors = [1.0 / point.matrix_share for point in points]
    above = [point.signal - line.intercept - line.slope * line.x_mean for point in points]
    ones = [1] * m
    shift = mean_of([f * d for f, d in zip(factors, above, strict=True)], ones) / line.slope
    factor = mean_of(factors, ones)
    u = (line.residual_sd / line.slope) * math.hypot(
        math.hypot(*factors) / m, factor / math.sqrt(line.vessels), shift / math.sqrt(line.sxx)
    )
    return shift + factor * line.x_mean, u


def _sentence(solved: Solved, line: Calibration, estimate: Estimate, points: Sequence[Point]) -> str:
    value, spread = rounded(estimate.content, estimate.expanded_uncertainty or 0.0)
    told = f"Plain calibration would have given {value} ± {spread} {unit_words(estimate.unit)} in the test solution"
    own = solved.content.content if solved.content is not None else 0.0
    if own > 0.0:
        less = estimate.content / own - 1.0
        told += f", {percent(abs(less))} {'less' if less < 0.0 else 'more'} than the additions"
    told += f" ({percent(estimate.coverage, 3)}, {counted(line.vessels, 'calibration vessel')})"
    if max((point.signal - line.intercept) / line.slope for point in points) > line.highest:
        told += f"; it lies above the highest calibration solution, {figure(line.highest)} {unit_words(line.unit)}"
    return f"{told}. It knows nothing of the matrix and is for comparison only."
