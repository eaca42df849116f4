"""Times: by declaration, in UTC; two meanings, a missing zone or an hour that is not unique are refused."""

from datetime import UTC, datetime, timedelta

import pytest
from hypothesis import given
from hypothesis import strategies as st

from spikeward.parsers.dates import Moments
from spikeward.rules.records import Unreadable


@pytest.mark.parametrize(
    ("text", "utc"),
    [
        ("2026-03-04T21:15:07Z", "2026-03-04T21:15:07Z"),
        ("2026-03-04 21:15:07", "2026-03-04T20:15:07Z"),
        ("2026-03-04  21:15", "2026-03-04T20:15:00Z"),
        ("2026-07-04T21:15:07", "2026-07-04T19:15:07Z"),
        ("20260304T211507", "2026-03-04T20:15:07Z"),
        ("2026-03-04T21:15:07+05:30", "2026-03-04T15:45:07Z"),
        ("2026-03-04T21:15:07 +0530", "2026-03-04T15:45:07Z"),
        ("2026-03-04T21:15:07,25-02", "2026-03-04T23:15:07Z"),
        ("2026-03-04T21:15:07.999999z", "2026-03-04T21:15:07Z"),
        ("2026-03-04", "2026-03-03T23:00:00Z"),
        ("1970-01-01T00:00:00Z", "1970-01-01T00:00:00Z"),
    ],
)
def test_iso_8601_without_patterns(text: str, utc: str):
    assert Moments("Europe/Berlin").utc(text) == utc


@pytest.mark.parametrize(
    "text",
    ["12.5", "10", "May", "4.3.2026 12:00", "2026-13-01", "2026-02-29", "2026-03-04 25:00", "2026-W10-3", "٢٠٢٦-03-04"],
)
def test_other_texts_are_no_iso_8601(text: str):
    with pytest.raises(Unreadable, match="is not a time"):
        Moments("UTC").utc(text)


def test_declared_patterns_are_tried_in_order():
    moments = Moments("Europe/Lisbon", ("%d.%m.%Y %H:%M:%S", "%d.%m.%Y %H:%M"))
    assert moments.utc("04.03.2026 21:15:07") == "2026-03-04T21:15:07Z"
    assert moments.utc("4.3.2026 21:15") == "2026-03-04T21:15:00Z"
    with pytest.raises(Unreadable, match=r"'2026-03-04 21:15' is not a time of the form %d.%m.%Y %H:%M:%S or"):
        moments.utc("2026-03-04 21:15")


def test_a_text_that_fits_two_patterns_with_two_meanings_is_refused():
    moments = Moments("UTC", ("%d/%m/%Y", "%m/%d/%Y"))
    with pytest.raises(Unreadable, match="fits '%d/%m/%Y' and '%m/%d/%Y' with different meanings"):
        moments.utc("03/04/2026")
    assert moments.utc("25/04/2026") == "2026-04-25T00:00:00Z"
    assert moments.utc("04/04/2026") == "2026-04-04T00:00:00Z"


def test_a_zone_in_the_text_goes_before_the_declared_one():
    assert Moments("Europe/Berlin", ("%Y-%m-%d %H:%M %z",)).utc("2026-03-04 12:00 +0000") == "2026-03-04T12:00:00Z"


@pytest.mark.parametrize(
    ("zone", "text", "says"),
    [
        ("Europe/Berlin", "2026-10-25 02:30:00", "occurs twice in Europe/Berlin"),
        ("Europe/Berlin", "2026-03-29 02:30:00", "does not occur in Europe/Berlin"),
        ("Australia/Lord_Howe", "2026-04-05 01:45:00", "occurs twice"),  # a clock that is set back by half an hour
        ("", "2026-03-04 12:00:00", "names no time zone; declare time_zone"),
        ("UTC", "1969-12-31 23:59:59", "before 1970"),
        ("UTC", "0001-01-01 00:00:00", "before 1970"),
        ("Asia/Tokyo", "0001-01-01 00:00:00", "outside the calendar"),
        ("Pacific/Pago_Pago", "9999-12-31 23:59:59", "outside the calendar"),
    ],
)
def test_what_is_no_single_moment_is_refused(zone: str, text: str, says: str):
    with pytest.raises(Unreadable, match=says):
        Moments(zone).utc(text)


def test_an_hour_that_occurs_twice_is_clear_with_its_zone():
    assert Moments("Europe/Berlin").utc("2026-10-25 02:30:00+02:00") == "2026-10-25T00:30:00Z"
    assert Moments("Europe/Berlin").utc("2026-10-25 02:30:00+01:00") == "2026-10-25T01:30:00Z"


@pytest.mark.parametrize("zone", ["Mars/Olympus", "../etc/passwd", "Europe", "\0"])
def test_an_unknown_zone_is_refused(zone: str):
    with pytest.raises(Unreadable, match="is not a time zone"):
        Moments(zone)


def test_a_zone_by_letters_would_depend_on_this_computer():
    with pytest.raises(Unreadable, match="asks for a zone by its letters"):
        Moments("UTC", ("%Y-%m-%d %H:%M %Z",)).utc("2026-03-04 12:00 UTC")


MOMENTS = st.datetimes(datetime(1970, 1, 2), datetime(2199, 1, 1), timezones=st.just(UTC))


@given(MOMENTS, st.integers(-23, 23))
def test_a_moment_is_the_same_from_every_zone_and_sorts_as_text(moment: datetime, hours: int):
    there = (moment + timedelta(hours=hours)).replace(tzinfo=None)
    text = f"{there.isoformat()}{'-' if hours < 0 else '+'}{abs(hours):02d}:00"
    assert Moments().utc(text) == f"{moment.replace(tzinfo=None, microsecond=0).isoformat()}Z"


@given(st.text(max_size=30), st.sampled_from([(), ("%d.%m.%Y",), ("%c", "%j %y"), ("%", "%Q")]))
def test_any_text_is_a_time_or_refused(text: str, patterns: tuple[str, ...]):
    try:
        found = Moments("Europe/Berlin", patterns).utc(text)
    except Unreadable:
        return
    assert found.endswith("Z")
