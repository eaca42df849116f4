"""What the lines of a ledger may say: known events have all that is later asked of them, events of other kinds pass."""

from __future__ import annotations

import json
import re
from collections.abc import Callable, Mapping
from typing import Any

DIGEST = re.compile(r"[0-9a-f]{8,64}")


def read_line(line: bytes) -> list[dict[str, Any]] | None:
    """The events of one line: one, or a list of those of one call. None where the line is no such thing."""
    try:
        found = json.loads(line)
    except (ValueError, RecursionError):
        return None
    events = found if isinstance(found, list) else [found]
    return events if events and all(isinstance(each, dict) and each for each in events) else None


def what_is_wrong(event: Mapping[str, Any]) -> str:
    """In a few words, what keeps an event from being used; empty where nothing does."""
    kind = event.get("event")
    if not isinstance(kind, str):
        return "it does not say what happened ('event')"
    wrong = [name for name, fits in _SHAPES.get(kind, {}).items() if name not in event or not fits(event[name])]
    return f"'{wrong[0]}' of its event '{kind}' is missing or is not what it must be" if wrong else ""


def _text(value: object) -> bool:
    return isinstance(value, str)


def _texts(count: int | None = None) -> Callable[[object], bool]:
    return lambda value: isinstance(value, list) and count in (None, len(value)) and all(map(_text, value))


def _digest(value: object) -> bool:
    return isinstance(value, str) and DIGEST.fullmatch(value) is not None


def _number(value: object) -> bool:
    return type(value) is int and value > 0


_batch, _series = _texts(3), _texts(5)


def _every_series(value: object) -> bool:
    return isinstance(value, list) and all(map(_series, value))


_SHAPES: Mapping[str, Mapping[str, Callable[[object], bool]]] = {
    "closing": {"batch": _batch, "rules_digest": _digest, "calculation_version": _text, "series": _every_series},
    "lapse": {"series": _series, "readings": _text},
    "decisions": {"root": _text, "path": _text, "digest": _text, "text": _text},
    "revision": {
        "series": _series,
        "number": _number,
        "at": _text,
        "verdict": _text,
        "inputs_digest": _text,
        "result": _text,
        "why": _text,
        "changed": _texts(),
    },
}
