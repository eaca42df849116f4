"""How vessels were made: volumes, sources and their precedence, contradictions, and the way back to the sample."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest

from spikeward.rules.in_force import in_force
from spikeward.rules.preparation import prepare
from spikeward.rules.quantities import Quantity
from spikeward.rules.quantities import parse_quantity as q
from spikeward.rules.records import BenchEntry, Decision, Reading, SeriesKey
from spikeward.rules.rulebook import Addition, BlankRule, Preparation, Rulebook, SampleRule, SeriesRule, Standard

STANDARDS = {"Mix": "10 mg/L", "Old": "5 mg/L"}
KEY = SeriesKey("inbox", "", "N1", "sample", "7")
FLASKS = Preparation(
    applies={}, design="flasks", aliquot={"": q("10 mL")}, final={"": q("25 mL")},
    additions=(Addition("Mix", {"0": q("0 mL"), "1": q("250 uL"), "2": q("0.5 mL")}, "total"),),
)  # fmt: skip
SUCCESSIVE = replace(
    FLASKS, design="successive", final={}, additions=(replace(FLASKS.additions[0], deliveries="each"),)
)


def adding(levels: dict[str, Quantity], rule: Preparation = FLASKS, **changes: Any) -> Preparation:
    """A preparation with other levels of its one addition."""
    return replace(rule, additions=(replace(rule.additions[0], levels=levels),), **changes)


def book(preparation: Preparation) -> Rulebook:
    return Rulebook(
        station="bench", language="en", state=".spikeward", watches=(), layouts={}, bench=None, names=(),
        series=SeriesRule(), standards={name: Standard(name, {"Mn": q(text)}) for name, text in STANDARDS.items()},
        preparations=(preparation,), blanks=BlankRule(), brackets={}, references={}, tops={}, checks={}, coverage=0.95,
        decisions="decisions.yaml", digest="d",
    )  # fmt: skip


def reading(level: str, *values: tuple[str, str, str], vessel: str = "") -> Reading:
    return Reading(
        series=KEY, level=level, vessel=vessel, injection="", reading="",
        solution=f"N1_7_A{level}{vessel}",
        analyte="Mn", line="", unit="A", signal=0.1, text="0.1", qualifier="", readings=1, sd=None, measured_at="",
        processed_at="", order=None, values=values, already=(), path=f"v{level}{vessel}.csv", row=2,
        digest=level + vessel,
    )  # fmt: skip


def line(preparation: Preparation, readings: list[Reading], bench: tuple[BenchEntry, ...] = (), decisions=()):
    (batch,) = in_force(readings, book(preparation))
    batch = replace(batch, bench=bench, decisions=decisions)
    (prepared,) = prepare(batch.members[KEY], batch, book(preparation))
    return prepared


def entry(*values: tuple[str, str], level: str = "", row: int = 2) -> BenchEntry:
    return BenchEntry("", "N1", "7", level, values, "bench.csv", row, "x")


def volumes(prepared) -> list[tuple[float, float, float]]:
    return [(vessel.aliquot, vessel.addition, vessel.final) for vessel in prepared.vessels]


THREE = [reading("0"), reading("1"), reading("2")]


def test_flasks_are_made_up_to_one_volume():
    prepared = line(FLASKS, THREE)
    assert volumes(prepared) == [(10.0, 0.0, 25.0), (10.0, 0.25, 25.0), (10.0, 0.5, 25.0)]
    assert [vessel.added for vessel in prepared.vessels] == [0.0, 2.5, 5.0]
    assert prepared.unit == "mg/L"
    assert prepared.problems == prepared.missing == ()


def test_successive_deliveries_add_up_in_amount_and_in_volume():
    assert volumes(line(SUCCESSIVE, THREE)) == [(10.0, 0.0, 10.0), (10.0, 0.25, 10.25), (10.0, 0.75, 10.75)]


LETTERS = {"A": q("0 mL"), "B": q("0.5 mL")}


def test_the_level_without_addition_is_the_undiluted_one_whatever_its_name():
    single = adding(LETTERS, design="single", level_0="undiluted")
    assert volumes(line(single, [reading("A"), reading("B")])) == [(10.0, 0.0, 10.0), (10.0, 0.5, 25.0)]
    swapped = adding({"A": q("0.5 mL"), "B": q("0 mL")}, single)
    assert volumes(line(swapped, [reading("A"), reading("B")])) == [(10.0, 0.5, 25.0), (10.0, 0.0, 10.0)]


def test_a_level_named_0_needs_no_declaration():
    single = adding({"1": q("0.5 mL")}, design="single", level_0="undiluted")
    assert volumes(line(single, [reading("0"), reading("1")])) == [(10.0, 0.0, 10.0), (10.0, 0.5, 25.0)]


def test_successive_totals_are_taken_as_said():
    successive = replace(FLASKS, design="successive", final={})
    assert volumes(line(successive, THREE))[2] == (10.0, 0.5, 10.5)


def test_a_level_that_was_not_measured_was_still_delivered():
    assert volumes(line(SUCCESSIVE, [reading("0"), reading("2")]))[1] == (10.0, 0.75, 10.75)


def successive_by_column(*levels: str, additions: dict[str, Quantity] | None = None):
    successive = SUCCESSIVE if additions is None else adding(additions, SUCCESSIVE)
    values = {level: () if level == "0" else (("addition", "0.5 mL", "column"),) for level in levels}
    return line(successive, [reading(level, *values[level]) for level in levels])


def test_a_delivery_that_nobody_tells_is_in_every_later_vessel():
    two = successive_by_column("0", "1", "3", "4", additions={"0": q("0 mL"), "1": q("0.5 mL")})
    assert two.missing == ("the addition of level 2 (every later vessel holds it)",)
    assert [vessel.level for vessel in two.vessels] == ["0", "1"]
    assert successive_by_column("0", "1", "2", "3").missing == ()
    # names that count in steps, and a list of the rule file that is complete
    assert successive_by_column("0", "10", "20", "30", additions={}).missing == ()
    assert successive_by_column("0", "10", "30", additions={}).missing != ()
    listed = {level: q("0.5 mL") for level in ("0", "1", "4")}
    assert successive_by_column("0", "1", "4", additions=listed).missing == ()


def test_a_final_volume_that_was_read_goes_before_the_sum_of_the_parts():
    readings = [reading(level, ("final", "50 mL", "column")) for level in ("0", "1", "2")]
    assert [final for _, _, final in volumes(line(SUCCESSIVE, readings))] == [50.0, 50.0, 50.0]
    short = line(SUCCESSIVE, [reading("0"), reading("1", ("final", "9 mL", "column")), reading("2")])
    assert any("do not fit into the final volume" in problem for problem in short.problems)
    contracted = line(SUCCESSIVE, [reading("0"), reading("1", ("final", "10.2 mL", "column")), reading("2")])
    assert contracted.problems == ()


def test_the_unspiked_reading_of_the_undiluted_solution():
    undiluted = replace(FLASKS, level_0="undiluted")
    assert volumes(line(undiluted, THREE))[0] == (10.0, 0.0, 10.0)


def test_diluent_enters_every_vessel():
    successive = replace(SUCCESSIVE, diluent=q("50 mL"))
    assert volumes(line(successive, THREE))[1] == (10.0, 0.25, 60.25)


def test_unequal_aliquots():
    unequal = replace(FLASKS, aliquot={"0": q("10 mL"), "1": q("9.5 mL"), "2": q("9 mL")})
    assert [aliquot for aliquot, _, _ in volumes(line(unequal, THREE))] == [10.0, 9.5, 9.0]


def test_what_is_written_for_this_solution_goes_before_the_rule_file():
    readings = [
        reading("0"),
        reading("1", ("addition", "0.3 mL", "column")),
        reading("2", ("addition", "600 uL", "name")),
    ]
    assert [addition for _, addition, _ in volumes(line(FLASKS, readings))] == [0.0, 0.3, 0.6]


def test_equal_amounts_in_other_units_do_not_contradict():
    readings = [reading("0"), reading("1", ("addition", "0.3 mL", "column"), ("addition", "300 uL", "name"))]
    prepared = line(FLASKS, readings, bench=(entry(("addition", "0.30 mL"), level="1"),))
    assert prepared.problems == ()
    assert prepared.vessels[1].addition == 0.3


def test_two_sources_that_disagree_fail_the_series_and_are_both_named():
    readings = [reading("0"), reading("1", ("addition", "0.3 mL", "column")), reading("2")]
    prepared = line(FLASKS, readings, bench=(entry(("addition", "0.25 mL"), level="1"),))
    (problem,) = prepared.problems
    assert "v1.csv row 2" in problem
    assert "bench.csv row 2" in problem


def test_volumes_that_do_not_fit_the_flask_are_a_problem():
    prepared = line(replace(FLASKS, final={"": q("10.2 mL")}), THREE)
    assert any("do not fit into the final volume" in problem for problem in prepared.problems)


def test_an_unknown_level_names_where_to_declare_it():
    prepared = line(FLASKS, [*THREE, reading("5")])
    assert any("no addition is known for level 5" in problem for problem in prepared.problems)


def test_a_mass_that_the_bench_still_owes_makes_the_series_wait():
    mud = replace(FLASKS, sample=SampleRule(mass="bench", digest=q("50 mL")), report_in="mg/kg")
    waiting = line(mud, THREE)
    assert waiting.missing == ("mass of 7 from the bench file",)
    assert waiting.way_back is None
    come = line(mud, THREE, bench=(entry(("mass", "0.5 g")),))
    assert come.missing == ()
    # 1 mg/L in 50 mL is 0.05 mg; in 0.5 g that is 100 mg/kg: exact arithmetic.
    assert come.way_back is not None
    assert come.way_back.factor == 100.0


def test_dry_matter_and_dilution_enter_the_factor():
    mud = replace(
        FLASKS, report_in="mg/kg",
        sample=SampleRule(mass=q("0.5 g"), digest=q("50 mL"), dry_matter=q("80 %"), dilution=(q("5"),)),
    )  # fmt: skip
    back = line(mud, THREE).way_back
    # 100 mg/kg per mg/L, times 5 for the dilution, over 0.8: exact arithmetic.
    assert back is not None
    assert back.factor == 625.0
    assert back.basis == "dry matter"


def test_a_report_unit_that_the_sample_cannot_reach_is_a_problem():
    water = replace(FLASKS, report_in="mg/kg", sample=SampleRule(dilution=(q("2"),)))
    (problem,) = line(water, THREE).problems
    assert problem == (
        "report_in asks for mg/kg, a mass per mass, but from a standard in mg/L the sample block leads to a mass per "
        "volume (it gives neither mass nor digest); report in a unit such as mg/L, give mass and digest for a content "
        "per mass or give the density of the sample"
    )


def test_a_unit_that_fits_the_standard_but_not_the_sample_is_told_by_its_kind():
    mud = replace(FLASKS, report_in="mg/L", sample=SampleRule(mass=q("0.5 g"), digest=q("50 mL")))
    (problem,) = line(mud, THREE).problems
    assert problem.startswith("report_in asks for mg/L, a mass per volume, but from a standard in mg/L the sample ")
    assert "leads to a mass per mass (it gives mass and digest); report in a unit such as mg/kg" in problem


@pytest.mark.parametrize("mass", ["0 g", "-1 g"])
def test_a_mass_that_cannot_be_is_a_problem(mass: str):
    mud = replace(FLASKS, sample=SampleRule(mass=q(mass), digest=q("50 mL")), report_in="mg/kg")
    assert any("which cannot be" in problem for problem in line(mud, THREE).problems)


def test_an_excluded_vessel_stays_visible_with_who_when_and_why():
    decision = Decision("exclude", "N1_7_A1", "N. Invented", "2026-03-02", "flask cracked", 1)
    prepared = line(FLASKS, THREE, decisions=(decision,))
    assert prepared.vessels[1].excluded == "N. Invented, 2026-03-02: flask cracked"
    assert len(prepared.vessels) == 3


def test_a_standard_of_another_name_comes_from_a_column():
    readings = [reading(level, ("standard", "Old", "column")) for level in "012"]
    prepared = line(FLASKS, readings)
    assert prepared.standard == "Old"
    assert prepared.vessels[2].added == 2.5


def test_series_without_a_preparation_say_so():
    prepared = line(replace(FLASKS, applies={"batch": "X.*"}), THREE)
    assert "no preparation in the rule file applies" in prepared.problems[0]


def test_a_bench_entry_of_a_sample_does_not_reach_the_process_blank_of_the_same_number():
    blank = SeriesKey("inbox", "", "N1", "process_blank", "7")
    readings = [replace(each, series=blank) for each in THREE]
    diluted = replace(FLASKS, sample=SampleRule(dilution=(q("2"),)))
    for rule, factor in ((diluted, 2.0), (replace(diluted, sample=SampleRule(dilution=("bench",))), 10.0)):
        (batch,) = in_force(readings, book(rule))
        batch = replace(batch, bench=(entry(("dilution", "1 + 9")),))
        (prepared,) = prepare(batch.members[blank], batch, book(rule))
        assert prepared.way_back is not None
        assert prepared.way_back.factor == factor
