"""Which readings count: identity by natural key, whatever the order, copies or rewrites."""

from __future__ import annotations

import random
from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from spikeward.rules.in_force import State, in_force
from spikeward.rules.naming import Namer, Source, name
from spikeward.rules.records import BatchKey, Decision, Entry, Layout, Reading, SeriesKey, Table
from spikeward.rules.rulebook import BlankRule, NameRule, Rulebook, SeriesRule

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


def test_a_vessel_in_two_runs_is_no_contradiction():
    runs = [reading(0.2, "a.csv", block="1"), reading(0.3, "b.csv", block="2")]
    members = only(runs)
    assert members.conflicts == ()
    assert [one.block for one in members.readings] == ["1", "2"]
    (conflict,) = only([replace(one, block="1") for one in runs]).conflicts
    assert "a.csv row 2" in conflict


@pytest.mark.parametrize(
    ("solution", "column", "block"),
    [("7_A1_run02", "", "2"), ("7_A1", "02", "2"), ("7_A1", "late", "late"), ("7_A1_run3", "9", "3"), ("7_A1", "", "")],
)
def test_the_run_comes_from_the_name_or_from_its_column(solution: str, column: str, block: str):
    rule = NameRule("sample", "solution", r"(?P<sample>\d+)_A(?P<level>\d+)(_run(?P<block>\d+))?")
    values = (("block", column), ("reading", "4"), ("mass", "1 g"))[0 if column else 1 :]
    entry = Entry(2, solution, "Mn", "", "A", 0.2, "0.2", values=values)
    (found,) = name(Table((entry,)), Source("", "a.csv", "", Layout("x")), Namer([rule]), book()).readings
    assert (found.block, found.reading) == (block, "4")
    assert found.values == (("mass", "1 g", "column"),)


def test_runs_stand_in_the_order_of_their_numbers():
    runs = [reading(0.1, level=level, block=block) for level in ("0", "1") for block in ("10", "9", "b", "")]
    found = [(one.level, one.block) for one in only(random.Random(4).sample(runs, len(runs))).readings]
    assert found == [(level, block) for level in ("0", "1") for block in ("9", "10", "", "b")]


def test_every_vessel_of_one_run_is_not_every_vessel():
    runs = [
        reading(0.1 * level + 0.001 * row, "run.csv", row, level=str(level), solution=f"N1_7_A{level}_{block}",
                block=block)
        for row, (level, block) in enumerate([(n, block) for n in range(6) for block in ("1", "2")], 2)
    ]
    twice = [*runs, *(replace(one, row=one.row + 100, signal=9.0) for one in runs if one.block == "1")]
    (conflict,) = only(twice).conflicts
    assert conflict.startswith("N1_7_A0_1, N1_7_A1_1, N1_7_A2_1 and 3 more stand 2 times each in run.csv")


def test_equal_files_of_two_runs_are_named():
    """The same bytes under the names of two runs: somebody may have copied the wrong file."""
    runs = [reading(0.2, f"{block}.csv", block=block, file_digest="same") for block in ("1", "2")]
    assert "1.csv and 2.csv have equal content under names that mean different vessels" in only(runs).warnings[0]


def test_two_files_that_disagree_fail_and_are_both_named():
    members = only([reading(0.2, "a.csv"), reading(0.3, "b.csv")])
    (conflict,) = members.conflicts
    assert "a.csv row 2" in conflict
    assert "b.csv row 2" in conflict
    assert "prefer" in conflict


def replicates(times: bool, vessels: int = 4, analytes: tuple[str, ...] = ("Mn",), **changes: object) -> list[Reading]:
    """Every vessel three times in one file, row by row; with ``times`` each row has its own minute."""
    rows = [(level, analyte, n) for level in range(vessels) for analyte in analytes for n in range(3)]
    return [
        reading(
            0.1 * level + 0.001 * n, "run.csv", row, level=str(level), solution=f"N1_07_A{level}", analyte=analyte,
            measured_at=f"2026-03-01T20:{row:02d}:00Z" if times else "", **changes,
        )
        for row, (level, analyte, n) in enumerate(rows, 2)
    ]  # fmt: skip


@pytest.mark.parametrize("times", [True, False])
@pytest.mark.parametrize("analytes", [("Mn",), ("Fe", "Mn")])
def test_repeated_rows_are_told_once_for_a_series(times: bool, analytes: tuple[str, ...]):
    (conflict,) = only(replicates(times, analytes=analytes)).conflicts
    named = "N1_07_A0, rows 2, 3 and 4" if len(analytes) == 1 else "N1_07_A0, Fe: rows 2, 3 and 4"
    assert conflict == (
        f"every vessel stands 3 times in run.csv (first: {named}); if these are repeated readings say same_name: "
        "reading under series, or give their number in a column or the name"
    )
    assert only(replicates(times, analytes=analytes), "reading").conflicts == ()


def test_some_repeated_vessels_are_named_and_many_are_counted():
    single = [reading(9.0, "run.csv", 900, level="99", solution="N1_07_A99")]
    (conflict,) = only(replicates(False, vessels=20) + single).conflicts
    assert conflict.startswith("N1_07_A0, N1_07_A1, N1_07_A2 and 17 more stand 3 times each in run.csv")
    (one,) = only(replicates(False, vessels=1) + single).conflicts
    assert one.startswith("N1_07_A0 stands 3 times in run.csv (rows 2, 3 and 4); if these are repeated readings")


def test_two_rows_of_one_time_ask_for_times_of_their_own():
    rows = [reading(0.2, row=2), reading(0.3, row=3)]
    (conflict,) = only(rows, "reading").conflicts
    assert conflict.endswith("; if these are repeated readings give each its own time, or its number in the name")


def test_files_that_disagree_about_a_whole_series_are_told_once():
    rows = [
        reading(signal + 0.1 * level, path, 2 + level, level=str(level), solution=f"N1_07_A{level}")
        for path, signal in (("a.csv", 0.1), ("b.csv", 0.2))
        for level in range(4)
    ]
    (conflict,) = only(rows).conflicts
    assert conflict.startswith("a.csv and b.csv disagree about every vessel (first: N1_07_A0, Mn: a.csv row 2 (0.1 A) ")
    assert conflict.endswith("; remove the wrong file, declare the column of the processing time, or say prefer in the "
                             "decisions file")  # fmt: skip


@pytest.mark.parametrize(
    ("changes", "first", "second"),
    [
        ({"sd": 0.001}, "0.2007 A, no SD", "0.2007 A, SD 0.001"),
        ({"readings": 3}, "0.2007 A, a single reading", "0.2007 A, mean of 3"),
        (
            {"values": (("mass", "0.5 g", "column"),)},
            "0.2007 A, no quantity beside it", "0.2007 A, mass 0.5 g from the column",
        ),
        ({"already": ("blank",)}, "0.2007 A, nothing taken off", "0.2007 A, blank taken off already"),
    ],
)  # fmt: skip
def test_equal_signals_that_disagree_say_in_what(changes: dict[str, object], first: str, second: str):
    (conflict,) = only([reading(0.2007, "a.csv"), reading(0.2007, "b.csv", **changes)]).conflicts
    assert f"a.csv row 2 ({first}) and b.csv row 2 ({second}) disagree about one reading" in conflict


def test_a_vessel_met_again_in_another_file_names_both():
    again = reading(0.21, "b.csv", 3, measured_at="2026-03-01T20:05:00Z")
    (conflict,) = only([reading(0.2), again]).conflicts
    assert "the same vessel is met again (a.csv row 2 and b.csv row 3)" in conflict
    assert conflict.endswith("say same_name: reading under series, else take the wrong file out")
    (other,) = only([reading(0.2), replace(again, solution="n1_7_a1")]).conflicts
    assert other.endswith("else exclude one in the decisions file")


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
