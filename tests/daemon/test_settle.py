"""A file counts as written after two equal looks a settling time apart. Time is passed in."""

from __future__ import annotations

from hypothesis import given
from hypothesis import strategies as st

from spikeward.daemon.settle import Settling, Stamp

SMALL, GROWN = Stamp(10, 5, 1), Stamp(20, 6, 1)


def test_one_look_is_never_enough() -> None:
    assert not Settling(2.0).look("a", SMALL, 1000.0)


def test_pieces_with_short_pauses_settle_after_the_last() -> None:
    settling: Settling[str] = Settling(2.0)
    for moment in range(5):
        assert not settling.look("a", Stamp(10 * moment + 1, moment, 1), float(moment))
    assert not settling.look("a", Stamp(41, 4, 1), 5.9)
    assert settling.look("a", Stamp(41, 4, 1), 6.0)


def test_size_time_and_inode_each_begin_the_waiting_anew() -> None:
    for other in (Stamp(11, 5, 1), Stamp(10, 6, 1), Stamp(10, 5, 2)):
        settling: Settling[str] = Settling(2.0)
        settling.look("a", SMALL, 0.0)
        assert not settling.look("a", other, 2.0)
        assert not settling.look("a", other, 3.9)
        assert settling.look("a", other, 4.0)


def test_an_empty_file_never_settles() -> None:
    settling: Settling[str] = Settling(2.0)
    assert not any(settling.look("a", Stamp(0, 5, 1), float(now)) for now in range(0, 10_000, 100))
    assert settling.due_in() is None


def test_times_of_files_mean_nothing_by_themselves() -> None:
    for mtime_ns in (0, -1, 4_102_444_800_000_000_000):
        settling: Settling[str] = Settling(2.0)
        settling.look("a", Stamp(1, mtime_ns, 1), 0.0)
        assert settling.look("a", Stamp(1, mtime_ns, 1), 2.0)


def test_waiting_is_carried_over_a_restart_and_the_time_between_does_not_count() -> None:
    before: Settling[str] = Settling(10.0)
    before.look("a", SMALL, 0.0)
    before.look("a", SMALL, 6.0)
    after = Settling(10.0, before.waiting())
    assert not after.look("a", SMALL, 1_000_000.0)
    assert not after.look("a", SMALL, 1_000_003.9)
    assert after.look("a", SMALL, 1_000_004.0)


def test_a_file_that_changed_over_a_restart_begins_anew() -> None:
    before: Settling[str] = Settling(10.0)
    before.look("a", SMALL, 0.0)
    before.look("a", SMALL, 9.0)
    after = Settling(10.0, before.waiting())
    assert not after.look("a", GROWN, 0.0)
    assert not after.look("a", GROWN, 9.9)


def test_a_clock_that_steps_back_makes_it_later_only() -> None:
    settling: Settling[str] = Settling(2.0)
    settling.look("a", SMALL, 100.0)
    assert not settling.look("a", SMALL, 50.0)
    assert settling.look("a", SMALL, 52.0)


def test_files_that_are_gone_are_forgotten() -> None:
    settling: Settling[str] = Settling(2.0)
    for place in "abc":
        settling.look(place, SMALL, 0.0)
    settling.forget("a")
    settling.keep_only({"b"})
    assert [each.place for each in settling.waiting()] == ["b"]
    assert not settling.look("c", SMALL, 2.0)


def test_due_in_names_the_next_moment_worth_a_look() -> None:
    settling: Settling[str] = Settling(2.0)
    assert settling.due_in() is None
    settling.look("a", SMALL, 0.0)
    settling.look("b", SMALL, 1.5)
    settling.look("a", SMALL, 1.5)
    assert settling.due_in() == 0.5


@given(
    st.lists(st.tuples(st.sampled_from([SMALL, GROWN]), st.floats(0, 3), st.booleans()), min_size=1, max_size=30),
    st.floats(0.5, 5),
)
def test_settled_means_equal_looks_over_the_settling_time_whatever_restarts(
    looks: list[tuple[Stamp, float, bool]], quiet: float
) -> None:
    """A model that remembers every look: equal for the settling time, the time between restarts left out."""
    settling: Settling[str] = Settling(quiet)
    now, same_for, last, fresh = 0.0, 0.0, None, True
    for stamp, pause, restart in looks:
        if restart:
            settling, fresh = Settling(quiet, settling.waiting()), True
        now += pause
        same_for = 0.0 if stamp != last else same_for + (0.0 if fresh else pause)
        last, fresh = stamp, False
        settled = settling.look("a", stamp, now)
        if abs(same_for - quiet) > 1e-6:
            assert settled == (same_for > quiet)
