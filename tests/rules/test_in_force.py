"""Which readings count: identity by natural key, whatever the order, copies or rewrites."""

from __future__ import annotations

import random
from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from spikeward.rules.in_force import State, in_force
from spikeward.rules.records import BatchKey, Decision, Reading, SeriesKey
from spikeward.rules.rulebook import BlankRule, Rulebook, SeriesRule

KEY = SeriesKey("inbox", "", "N1", "sample", "7")


def book(same_name: str = "refuse") -> Rulebook:
    return Rulebook(
        station="bench", language="en", state=".spikeward", watches=(), layouts={}, bench=None, names=(),
        series=SeriesRule(same_name=same_name), standards={}, preparations=(), blanks=BlankRule(), brackets={},
        references={}, tops={}, checks={}, coverage=0.95, decisions="decisions.yaml", digest="d",
    )  # fmt: skip


def reading(signal: float, path: str = "a.csv", row: int = 2, **changes: object) -> Reading:
    made = Reading(
        series=KEY, level="1", vessel="", injection="", reading="", solution="N1_7_A1", analyte="Mn", line="", unit="A",
        signal=signal, text=str(signal), qualifier="", readings=1, sd=None, measured_at="2026-03-01T20:00:00Z",
        processed_at="", order=None, values=(), already=(), path=path, row=row, digest=f"{signal}", file_digest=path,
    )  # fmt: skip
    return replace(made, **changes)  # type: ignore[arg-type]


def only(readings: list[Reading], same_name: str = "refuse", decisions: tuple[Decision, ...] = ()):
    (batch,) = in_force(readings, book(same_name), {KEY.batch_key: State(decisions=decisions)})
    (members,) = batch.members.values()
    return members


def test_a_copy_counts_once_and_is_named():
    members = only([reading(0.2, "b.csv"), reading(0.2, "a.csv")])
    assert [r.path for r in members.readings] == ["a.csv"]
    assert members.conflicts == ()
    assert "b.csv row 2 repeats a.csv row 2" in members.notes[0]


def test_two_files_that_disagree_fail_and_are_both_named():
    members = only([reading(0.2, "a.csv"), reading(0.3, "b.csv")])
    (conflict,) = members.conflicts
    assert "a.csv row 2" in conflict
    assert "b.csv row 2" in conflict
    assert "prefer" in conflict


def test_a_later_processing_time_decides():
    early = reading(0.2, "a.csv", processed_at="2026-03-01T21:00:00Z")
    late = reading(0.3, "b.csv", processed_at="2026-03-01T22:00:00Z")
    members = only([late, early])
    assert [r.signal for r in members.readings] == [0.3]
    assert members.conflicts == ()
    assert "superseded" in members.notes[0]


def test_one_processing_time_missing_decides_nothing():
    early = reading(0.2, "a.csv")
    late = reading(0.3, "b.csv", processed_at="2026-03-01T22:00:00Z")
    assert only([late, early]).conflicts


def test_a_decision_prefers_one_file():
    decision = Decision("prefer", "b.csv", "N. Invented", "2026-03-02", "re-integrated", 3)
    members = only([reading(0.2, "a.csv"), reading(0.3, "b.csv")], decisions=(decision,))
    assert [r.signal for r in members.readings] == [0.3]
    assert members.conflicts == ()


@pytest.mark.parametrize(("same_name", "kept", "conflicts"), [("refuse", 2, 1), ("reading", 2, 0)])
def test_the_same_vessel_at_another_time(same_name: str, kept: int, conflicts: int):
    again = reading(0.21, row=3, measured_at="2026-03-01T20:05:00Z")
    members = only([reading(0.2), again], same_name)
    assert (len(members.readings), len(members.conflicts)) == (kept, conflicts)


def test_rows_without_a_time_are_repeated_readings_only_where_the_rules_say_so():
    rows = [reading(0.2, row=2, measured_at=""), reading(0.2, row=3, measured_at="")]
    assert len(only(rows, "reading").readings) == 2
    assert len(only(rows, "refuse").readings) == 1


def test_equal_files_under_names_of_different_vessels_all_count_with_a_warning():
    one = reading(0.2, "a.csv", file_digest="same")
    two = reading(0.2, "b.csv", level="2", file_digest="same")
    members = only([one, two])
    assert len(members.readings) == 2
    assert "a.csv and b.csv have equal content" in members.warnings[0]


def test_a_batch_knows_nothing_of_another_batch():
    other = SeriesKey("inbox", "", "N2", "sample", "7")
    batches = in_force([reading(0.2, file_digest="x"), reading(0.2, "b.csv", series=other, file_digest="x")], book())
    assert [batch.key for batch in batches] == [BatchKey("inbox", "", "N1"), BatchKey("inbox", "", "N2")]
    assert all(not members.warnings for batch in batches for members in batch.members.values())


@given(
    st.lists(
        st.tuples(st.sampled_from("012"), st.sampled_from([0.1, 0.2]), st.sampled_from(["a.csv", "b.csv", "c.csv"])),
        max_size=12,
    ),
    st.randoms(use_true_random=False),
)
def test_the_order_of_arrival_changes_nothing(cells: list[tuple[str, float, str]], rng: random.Random):
    readings = [reading(signal, path, row, level=level) for row, (level, signal, path) in enumerate(cells)]
    shuffled = list(readings)
    rng.shuffle(shuffled)
    assert in_force(readings, book()) == in_force(shuffled, book())


@given(
    st.lists(
        st.tuples(st.sampled_from("01"), st.sampled_from([0.1, 0.2]), st.sampled_from(["a.csv", "b.csv"])), max_size=8
    ),
    st.data(),
)
def test_memory_never_changes_the_answer(cells: list[tuple[str, float, str]], data: st.DataObject):
    readings = [reading(signal, path, row, level=level) for row, (level, signal, path) in enumerate(cells)]
    memory: dict = {}
    for _ in range(3):
        some = [each for each in readings if data.draw(st.booleans())]
        assert in_force(some, book(), memory=memory) == in_force(some, book())
