"""Readers by the name of their format, found through the entry-point group ``spikeward.readers``."""

from __future__ import annotations

from functools import lru_cache
from importlib.metadata import entry_points

from spikeward.parsers.delimited import READER as DELIMITED
from spikeward.parsers.reader import Reader
from spikeward.rules.records import Unreadable

GROUP = "spikeward.readers"
_BUILT_IN = {DELIMITED.name: DELIMITED}


@lru_cache(maxsize=32)
def reader_for(format_name: str) -> Reader:
    """The reader of a format.

    Raises
    ------
    Unreadable : nothing installed reads it
    """
    if format_name in _BUILT_IN:
        return _BUILT_IN[format_name]
    for point in entry_points(group=GROUP):
        if point.name == format_name:
            reader: Reader = point.load()
            return reader
    known = ", ".join(sorted({*_BUILT_IN, *(point.name for point in entry_points(group=GROUP))}))
    raise Unreadable(f"no reader for the format '{format_name}' is installed; correct 'format' (known: {known})")
