"""The daemon's log: one line per event, for people and for programs alike."""

from __future__ import annotations

import json
import re
import threading
from collections.abc import Callable
from typing import TextIO

from spikeward.daemon.names import shown

Value = str | int | float | bool | None

_PLAIN = re.compile(r"[^\s\"=\\]+")


class Log:
    """Writes ``time level event key=value …``, or JSON lines.

    Parameters
    ----------
    stream : where lines go; one that was closed (a terminal that is gone) stops nobody
    clock : the time of day as ISO 8601 text with its zone
    as_json : write each event as one JSON object
    """

    def __init__(self, stream: TextIO, clock: Callable[[], str], as_json: bool = False) -> None:
        self._stream = stream
        self._clock = clock
        self._as_json = as_json
        self._lock = threading.Lock()

    def info(self, event: str, **values: Value) -> None:
        """Something happened as it should."""
        self._write("info", event, values)

    def warning(self, event: str, **values: Value) -> None:
        """Something needs a person's look, soon or later."""
        self._write("warning", event, values)

    def error(self, event: str, **values: Value) -> None:
        """Something does not work."""
        self._write("error", event, values)

    def _write(self, level: str, event: str, values: dict[str, Value]) -> None:
        time = self._clock()
        if self._as_json:
            line = json.dumps({"time": time, "level": level, "event": event, **values}, separators=(",", ":"))
        else:
            line = " ".join([time, level, _text(event), *(f"{key}={_text(value)}" for key, value in values.items())])
        with self._lock:
            try:
                self._stream.write(line + "\n")
                self._stream.flush()
            except (OSError, ValueError):
                return


def _text(value: Value) -> str:
    """A value that stays on its line and ends where it ends; what does not print is escaped."""
    if isinstance(value, bool) or value is None:
        return {True: "yes", False: "no", None: "-"}[value]
    if not isinstance(value, str):
        return str(value)
    if value != "-" and _PLAIN.fullmatch(value) and value.isprintable():
        return value
    return '"' + shown(value).replace('"', '\\"') + '"'
