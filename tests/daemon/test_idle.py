"""Quiet time: counted by the monotonic clock, carried over restarts, stopped while a share is away."""

from __future__ import annotations

from spikeward.daemon.idle import Idle
from spikeward.rules.records import BatchKey, SeriesKey

BATCH = BatchKey("inbox", "", "N1")
SERIES = SeriesKey("inbox", "", "N1", "sample", "7")


def test_quiet_is_counted_from_the_last_arrival():
    idle = Idle(100.0, {})
    idle.arrived([BATCH, SERIES])
    idle.go_on(130.0)
    idle.arrived([BATCH])
    idle.go_on(150.0)
    assert (idle.of(BATCH), idle.of(SERIES)) == (20.0, 50.0)


def test_what_never_arrived_is_not_quiet():
    idle = Idle(0.0, {})
    idle.go_on(1e6)
    assert idle.of(SERIES) == 0.0


def test_a_share_that_is_away_stops_the_count():
    idle = Idle(0.0, {})
    idle.arrived([SERIES])
    idle.go_on(10.0)
    idle.go_on(1000.0, counting=False)
    idle.go_on(1005.0)
    assert idle.of(SERIES) == 15.0


def test_a_clock_that_goes_back_takes_nothing_away():
    idle = Idle(50.0, {})
    idle.arrived([SERIES])
    idle.go_on(60.0)
    idle.go_on(40.0)
    assert idle.of(SERIES) == 10.0


def test_a_restart_goes_on_with_the_count_and_not_with_the_time_between():
    before = Idle(0.0, {})
    before.arrived([BATCH, SERIES])
    before.go_on(30.0)
    after = Idle(9000.0, before.seconds())
    after.arrived([BATCH, SERIES])  # what lay there is read again
    after.go_on(9010.0)
    assert (after.of(BATCH), after.of(SERIES)) == (40.0, 40.0)
    after.arrived([SERIES])  # something new
    assert after.of(SERIES) == 0.0
