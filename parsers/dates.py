"""Dates and times by ISO 8601 or by declared patterns, as UTC. What could be two moments is refused."""

from __future__ import annotations

import re
from collections.abc import Sequence
from datetime import UTC, datetime
from functools import lru_cache
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

from spikeward.rules.records import Unreadable

_ISO = re.compile(
    r"(\d{4}-?\d\d-?\d\d)(?:[T ]+(\d\d(?::?\d\d(?::?\d\d(?:[.,]\d+)?)?)?) ?([Zz]|[+-]\d\d(?::?\d\d)?)?)?", re.ASCII
)
_OTHER_DIGITS = re.compile(r"[^\D0-9]")
_EARLIEST = datetime(1970, 1, 1, tzinfo=UTC)
_LONGEST = 60  # characters of a time


class Moments:
    """How the times of one instrument are read.

    ``time_zone`` is the zone of times that name none; ``patterns`` are those of ``strptime``, none for ISO 8601.
    """

    def __init__(self, time_zone: str = "", patterns: Sequence[str] = ()) -> None:
        self._zone = _zone(time_zone) if time_zone else None
        self._patterns = tuple(patterns)
        self.utc = lru_cache(maxsize=4096)(self._utc)

    def _utc(self, text: str) -> str:
        """A time as ISO 8601 text in UTC, to the second, such as ``2026-03-04T21:15:07Z``.

        Raises
        ------
        Unreadable : the text is no time in the declared form, could be two different ones, or has no zone
        """
        if len(text) > _LONGEST or _OTHER_DIGITS.search(text):
            raise Unreadable(f"'{text[:_LONGEST]}' is not a time; correct the cell")
        meanings: dict[str, str] = {}
        for pattern in self._patterns or ("",):
            read = _by_pattern(text, pattern) if pattern else _iso(text)
            if read is not None:
                meanings.setdefault(_in_utc(self._with_zone(read, text), text), pattern)
        if len(meanings) > 1:
            told = " and ".join(f"'{pattern}'" for pattern in meanings.values())
            raise Unreadable(f"'{text}' fits {told} with different meanings; declare only the one that is meant")
        if not meanings:
            wanted = " or ".join(self._patterns) or "year-month-day hour:minute:second"
            raise Unreadable(f"'{text}' is not a time of the form {wanted}; declare its form under date_patterns")
        return next(iter(meanings))

    def _with_zone(self, read: datetime, text: str) -> datetime:
        if read.tzinfo is not None:
            return read
        if self._zone is None:
            raise Unreadable(f"'{text}' names no time zone; declare time_zone for this reader")
        local = read.replace(tzinfo=self._zone)
        try:
            if local.utcoffset() == local.replace(fold=1).utcoffset():
                return local
            exists = local.astimezone(UTC).astimezone(self._zone).replace(tzinfo=None) == read
        except OverflowError:
            raise _out_of_range(text) from None
        told = "occurs twice" if exists else "does not occur"
        raise Unreadable(
            f"'{text}' {told} in {self._zone.key}, where the clock was changed; let the instrument write times with "
            "their zone, or in UTC"
        )


@lru_cache(maxsize=64)
def _zone(name: str) -> ZoneInfo:
    try:
        return ZoneInfo(name)
    except (ZoneInfoNotFoundError, ValueError, OSError):
        raise Unreadable(f"time_zone: '{name}' is not a time zone; write a name such as Europe/Lisbon") from None


def _iso(text: str) -> datetime | None:
    found = _ISO.fullmatch(text)
    if found is None:
        return None
    date, time, zone = found.groups(default="")
    try:
        return datetime.fromisoformat(f"{date} {time}{zone.upper()}" if time else date)
    except ValueError:
        return None


def _by_pattern(text: str, pattern: str) -> datetime | None:
    if "%Z" in pattern:
        # What letters mean would depend on the zone of this computer.
        raise Unreadable(f"date_patterns: '{pattern}' asks for a zone by its letters; use %z, or declare time_zone")
    try:
        return datetime.strptime(text, pattern)
    except (ValueError, OverflowError, re.error):
        return None


def _in_utc(moment: datetime, text: str) -> str:
    try:
        utc = moment.astimezone(UTC).replace(microsecond=0)
    except OverflowError:
        raise _out_of_range(text) from None
    if utc < _EARLIEST:
        raise Unreadable(f"'{text}' lies before 1970; set the clock of the instrument, and export again")
    return f"{utc.replace(tzinfo=None).isoformat()}Z"


def _out_of_range(text: str) -> Unreadable:
    return Unreadable(f"'{text}' lies outside the calendar; set the clock of the instrument, and export again")
