"""``SERIES.result.json``: the contract that other programs build on. Its schema is ``schema/result.schema.json``."""

from __future__ import annotations

import json
from collections.abc import Mapping
from typing import Any

from spikeward.daemon.pages.cautions import CAUTIONS
from spikeward.daemon.pages.numbers import twelve_digits
from spikeward.daemon.pages.text import encodable
from spikeward.rules.outcomes import Beside, Check, Estimate, Outcome, Parameter, Point, Result, VesselReport
from spikeward.rules.records import MEASURED, Reading, SeriesKey

_encode = json.JSONEncoder(ensure_ascii=False, allow_nan=False).encode
FORMAT = "spikeward result 2"
"""Raised when a program that reads the old form could misread the new one."""


def render_result(outcome: Outcome) -> bytes:
    """One series as JSON: UTF-8, fields in a fixed order, numbers to 12 significant digits, a line feed at the end.

    A number that is not known or not finite is ``null``.
    """
    document = {
        "format": FORMAT,
        "series": series_fields(outcome.key),
        "verdict": outcome.verdict,
        "so_far": outcome.so_far,
        "final": outcome.final,
        "waiting_for": list(outcome.waiting_for),
        "sentence": outcome.sentence,
        "design": outcome.design,
        "inputs_digest": outcome.inputs_digest,
        "rules_digest": outcome.rules_digest,
        "calculation_version": outcome.calculation_version,
        "results": [_result(result) for result in outcome.results],
        "checks": [_check(check) for check in outcome.checks],
        "vessels": [_vessel(vessel) for vessel in outcome.vessels],
        "context": [_context(reading) for reading in outcome.context],
        "notes": list(outcome.notes),
        "cautions": list(CAUTIONS),
    }
    rows = ",\n".join(f'"{name}": {_row(_plain(value))}' for name, value in document.items())
    return f"{{\n{rows}\n}}\n".encode()


def _row(value: object) -> str:
    """A field on one line, a list of objects with one of them a line: easy to follow and fast to write."""
    if isinstance(value, list) and value and isinstance(value[0], dict):
        return "[\n" + ",\n".join(_encode(item) for item in value) + "\n]"
    return _encode(value)


def series_fields(key: SeriesKey) -> dict[str, str]:
    """The parts of a series' key."""
    return {"root": key.root, "folder": key.folder, "batch": key.batch, "role": key.role, "sample": key.sample}


def _plain(value: object) -> object:
    """The document with every number rounded and every text encodable."""
    if isinstance(value, str):
        return encodable(value)
    if isinstance(value, float):
        return twelve_digits(value)
    if isinstance(value, Mapping):
        return {name: _plain(part) for name, part in value.items()}
    if isinstance(value, list):
        return [_plain(part) for part in value]
    return value


def _result(result: Result) -> dict[str, Any]:
    content = _estimate(result.content, result.content_unit)
    in_sample = None
    if result.in_sample is not None:
        in_sample = {**_estimate(result.in_sample, result.in_sample.unit), "basis": result.basis}
    return {
        "analyte": result.analyte,
        "line": result.line,
        "verdict": result.verdict,
        "sentence": result.sentence,
        "no_number": result.no_number,
        **content,
        "in_sample": in_sample,
        "slope": result.slope,
        "slope_uncertainty": result.slope_uncertainty,
        "intercept": result.intercept,
        "intercept_uncertainty": result.intercept_uncertainty,
        "residual_sd": result.residual_sd,
        "correlation": result.correlation,
        "degrees_of_freedom": result.degrees_of_freedom,
        "signal_unit": result.signal_unit,
        "background": result.background,
        "background_unit": result.background_unit,
        "blank": result.blank,
        "preparation": result.preparation,
        "reported_line": result.reported_line,
        "response": result.response,
        "precision": result.precision,
        "parameters": [_parameter(parameter) for parameter in result.parameters],
        "beside": [_beside(other) for other in result.beside],
        "corrected": list(result.corrected),
        "cannot_tell": list(result.cannot_tell),
        "points": [_point(point) for point in result.points],
        "checks": [_check(check) for check in result.checks],
        "budget": [],
    }


def _estimate(estimate: Estimate | None, unit: str) -> dict[str, Any]:
    known = estimate or Estimate(float("nan"), unit)
    return {
        "content": known.content,
        "unit": known.unit,
        "standard_uncertainty": known.standard_uncertainty,
        "expanded_uncertainty": known.expanded_uncertainty,
        "coverage_factor": known.coverage_factor,
        "effective_degrees_of_freedom": known.effective_degrees_of_freedom,
        "interval": None if known.interval is None else list(known.interval),
        "coverage": None if estimate is None else known.coverage,
        "uncertainty_reason": known.reason,
    }


def _parameter(parameter: Parameter) -> dict[str, Any]:
    return {
        "name": parameter.name,
        "value": parameter.value,
        "unit": parameter.unit,
        "standard_uncertainty": parameter.standard_uncertainty,
        "uncertainty_reason": parameter.reason if parameter.standard_uncertainty is None else "",
    }


def _beside(other: Beside) -> dict[str, Any]:
    return {"name": other.name, "sentence": other.sentence, **_estimate(other.estimate, other.estimate.unit)}


def _point(point: Point) -> dict[str, Any]:
    return {
        "level": point.level,
        "vessel": point.vessel,
        "x": point.x,
        "y": point.y,
        "fitted": point.fitted,
        "signal": point.signal,
        "readings": point.readings,
        "sd": point.sd,
        "matrix_share": point.matrix_share,
        "factor": point.factor,
        "weight": point.weight,
        "run": point.block,
        "excluded": point.excluded,
    }


def _check(check: Check) -> dict[str, Any]:
    return {
        "name": check.name,
        "verdict": check.verdict,
        "sentence": check.sentence,
        "observed": check.observed,
        "unit": check.unit,
        "limit": check.limit,
        "source": check.source,
        "remedy": check.remedy,
    }


def _vessel(vessel: VesselReport) -> dict[str, Any]:
    return {
        "level": vessel.level,
        "vessel": vessel.vessel,
        "run": vessel.block,
        "aliquot": vessel.aliquot,
        "aliquot_unit": vessel.aliquot_unit,
        "addition": vessel.addition,
        "addition_unit": vessel.addition_unit,
        "final": vessel.final,
        "final_unit": vessel.final_unit,
        "standard": vessel.standard,
        "excluded": vessel.excluded,
        "readings": [_reading(reading) for reading in vessel.readings],
    }


def _context(reading: Reading) -> dict[str, Any]:
    return {"role": reading.series.role, "sample": reading.series.sample, "level": reading.level, **_reading(reading)}


def _reading(reading: Reading) -> dict[str, Any]:
    return {
        "solution": reading.solution,
        "vessel": reading.vessel,
        "injection": reading.injection,
        "reading": reading.reading,
        "run": reading.block,
        "analyte": reading.analyte,
        "line": reading.line,
        "signal": reading.signal,
        "unit": reading.unit,
        "text": reading.text,
        "qualifier": "measured" if reading.qualifier == MEASURED else reading.qualifier,
        "readings": reading.readings,
        "sd": reading.sd,
        "measured_at": reading.measured_at,
        "processed_at": reading.processed_at,
        "order": reading.order,
        "already": list(reading.already),
        "path": reading.path,
        "row": reading.row,
        "digest": reading.digest,
    }
