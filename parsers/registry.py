"""Which reader goes by which name: the built-in ones, and those that installed packages bring along."""

from __future__ import annotations

from functools import lru_cache
from importlib.metadata import entry_points

from spikeward.parsers.delimited import READER as DELIMITED
from spikeward.parsers.reader import Reader
from spikeward.rules.records import Unreadable

GROUP = "spikeward.readers"

_BUILT_IN: dict[str, Reader] = {"delimited": DELIMITED}


def formats() -> tuple[str, ...]:
    """The names of all readers that are installed, without loading any of them."""
    return tuple(sorted({*_BUILT_IN, *(each.name for each in entry_points(group=GROUP))}))


def origin(name: str) -> str:
    """The package and version that a reader comes with; empty for a built-in one."""
    if name in _BUILT_IN:
        return ""
    found = sorted(entry_points(group=GROUP, name=name), key=lambda each: each.value)
    return f"{found[0].dist.name} {found[0].dist.version}" if found and found[0].dist else ""


@lru_cache(maxsize=64)
def reader_for(name: str) -> Reader:
    """The reader of a format; a built-in name cannot be taken over by a package.

    Raises
    ------
    Unreadable : no reader goes by this name, or its package cannot be loaded
    """
    if name in _BUILT_IN:
        return _BUILT_IN[name]
    found = sorted(entry_points(group=GROUP, name=name), key=lambda each: each.value)
    if not found:
        raise Unreadable(f"no reader is called '{name}'; installed are {', '.join(formats())}")
    try:
        loaded: Reader = found[0].load()
    except (Exception, SystemExit) as error:  # a package may fail in any way while it is loaded
        raise Unreadable(f"the reader '{name}' cannot be loaded ({type(error).__name__}); repair its package") from None
    if not callable(getattr(loaded, "read", None)):
        raise Unreadable(f"the reader '{name}' has no function read; repair its package")
    return loaded
