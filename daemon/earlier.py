"""The result that stands beside the data from earlier, if it is one of ours: a person may have put anything there."""

from __future__ import annotations

import json
import math
from collections.abc import Iterable
from typing import Any

_TEXT, _NUMBER = "text", "number"
_READING = {"path": _TEXT, "text": _TEXT, "digest": _TEXT}
_SERIES = {"root": _TEXT, "folder": _TEXT, "batch": _TEXT, "role": _TEXT, "sample": _TEXT}
_ESTIMATE = {"content": _NUMBER, "unit": _TEXT, "expanded_uncertainty": _NUMBER}


def earlier_result(data: bytes) -> dict[str, Any] | None:
    """A result as this program writes it; None where the bytes are anything else."""
    try:
        found = json.loads(data)
        json.dumps(found, ensure_ascii=False).encode()  # what cannot be shown on a page was not written by us
    except (ValueError, RecursionError):
        return None
    return found if _is_result(found) else None


def _is_result(found: object) -> bool:
    return (
        _has(found, {"verdict": _TEXT, "rules_digest": _TEXT, "calculation_version": _TEXT})
        and _has(_part(found, "series"), _SERIES)
        and all(_is_reading(each) for each in _list(found, "context"))
        and all(_is_reading(each) for vessel in _list(found, "vessels") for each in _list(vessel, "readings"))
        and all(_is_line(each) for each in _list(found, "results"))
    )


def _is_reading(found: object) -> bool:
    return _has(found, _READING) and isinstance(_part(found, "row"), int)


def _is_line(found: object) -> bool:
    if not _has(found, {"analyte": _TEXT, "line": _TEXT, **_ESTIMATE}):
        return False
    in_sample = _part(found, "in_sample")
    return in_sample is None or _has(in_sample, {"basis": _TEXT, **_ESTIMATE})


def _list(found: object, name: str) -> Iterable[object]:
    """A list of the document; something that no check accepts where it is none."""
    part = _part(found, name)
    return part if isinstance(part, list) else [None]


def _part(found: object, name: str) -> object:
    return found.get(name) if isinstance(found, dict) else None


def _has(found: object, fields: dict[str, str]) -> bool:
    """Whether these fields are there with values of their kind; a number may be null."""
    if not isinstance(found, dict) or not fields.keys() <= found.keys():
        return False
    return all(
        isinstance(found[name], str) if kind == _TEXT else _is_number(found[name]) for name, kind in fields.items()
    )


def _is_number(value: object) -> bool:
    if isinstance(value, int) and not isinstance(value, bool):
        return abs(value) < 10**300  # beyond what a float holds
    return value is None or (isinstance(value, float) and math.isfinite(value))
