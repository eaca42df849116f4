"""Times of measurement: ISO 8601 or declared patterns, always with a zone, written in UTC."""

from __future__ import annotations

from datetime import UTC, datetime, tzinfo
from functools import lru_cache
from zoneinfo import ZoneInfo

from spikeward.rules.records import Unreadable


def utc(text: str, patterns: tuple[str, ...], zone: str, row: int, column: str) -> str:
    """A time as ``2026-03-04T21:15:07Z``; fractions of a second stay.

    Parameters
    ----------
    patterns : of ``strptime``, tried in order; none means ISO 8601
    zone : of the instrument's clock (a name of the IANA table), where the text has no zone

    Raises
    ------
    Unreadable : no pattern fits, two give different times, the zone is not known, or the hour occurs twice or never
    """
    found = {moment for moment in (_parsed(text, pattern) for pattern in patterns or ("",)) if moment is not None}
    if not found:
        told = " or ".join(patterns) if patterns else "a date such as 2026-03-04T21:15:07"
        raise Unreadable(f"'{text}' is not {told}; declare 'dates' of the reader", row, column)
    if len(found) > 1:
        raise Unreadable(f"'{text}' fits two patterns and means two times; keep one of them", row, column)
    moment = found.pop()
    if moment.tzinfo is None:
        moment = moment.replace(tzinfo=_zone(zone, text, row, column))
        _refuse_odd_hour(moment, zone, text, row, column)
    if moment.year < 1970:
        raise Unreadable(f"'{text}' lies before 1970; set the instrument's clock", row, column)
    return moment.astimezone(UTC).isoformat().removesuffix("+00:00") + "Z"


def _parsed(text: str, pattern: str) -> datetime | None:
    try:
        return datetime.strptime(text, pattern) if pattern else datetime.fromisoformat(text)
    except (ValueError, OverflowError):
        return None


@lru_cache(maxsize=16)
def _known_zone(name: str) -> tzinfo | None:
    try:
        return ZoneInfo(name)
    except (KeyError, ValueError, OSError):
        return None


def _zone(name: str, text: str, row: int, column: str) -> tzinfo:
    if not name:
        raise Unreadable(f"'{text}' has no zone; declare 'time_zone' of the reader", row, column)
    zone = _known_zone(name)
    if zone is None:
        raise Unreadable(f"the time zone '{name}' is not known; name one such as Europe/Lisbon", row, column)
    return zone


def _refuse_odd_hour(moment: datetime, zone: str, text: str, row: int, column: str) -> None:
    """At the changes of summer time an hour occurs twice, or never."""
    first, second = moment.replace(fold=0), moment.replace(fold=1)
    if first.utcoffset() == second.utcoffset():
        return
    back = first.astimezone(UTC).astimezone(first.tzinfo)
    what = "occurs twice" if back.replace(tzinfo=None) == first.replace(tzinfo=None) else "does not exist"
    raise Unreadable(
        f"'{text}' {what} in {zone} (change of summer time); let the instrument write the zone, or UTC", row, column
    )
