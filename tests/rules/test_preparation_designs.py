"""Designs by hand: what every vessel held, in exact decimals, and how much analyte that was.

Every table was computed on paper from the definitions: amount = content x delivered, mass = volume x density.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from spikeward.rules.in_force import in_force
from spikeward.rules.preparation import prepare
from spikeward.rules.prepared import PreparedLine
from spikeward.rules.quantities import Quantity
from spikeward.rules.quantities import parse_quantity as q
from spikeward.rules.records import BenchEntry, Reading, SeriesKey
from spikeward.rules.rulebook import (
    Addition,
    BlankRule,
    Overlap,
    Preparation,
    Rulebook,
    SampleRule,
    SeriesRule,
    Standard,
)

KEY = SeriesKey("inbox", "", "N1", "sample", "7")
STANDARDS = (
    Standard("A", {"Cd": q("20 mg/L")}, density=q("1.05 g/mL"), expires="2031-03-31"),
    Standard("B", {"As": q("20 mg/L"), "Cd": q("1 mg/L")}, expires="2030-01-31"),
    Standard("Kg", {"Cd": q("20 mg/kg")}, density=q("1.05 g/mL")),
    Standard("Bare", {"Cd": q("20 mg/L")}),
    Standard("Molar", {"Cd": q("1 mmol/L")}),
)
Told = Mapping[str, Sequence[tuple[str, str, str]]]


def levels(*texts: str) -> dict[str, Quantity]:
    return {str(number): q(text) for number, text in enumerate(texts)}


def rule(design: str, *additions: Addition, **changes: Any) -> Preparation:
    found = Preparation(applies={}, design=design, aliquot={"": q("10 mL")}, final={}, additions=additions)
    return replace(found, **changes)


def book(preparation: Preparation, **changes: Any) -> Rulebook:
    found = Rulebook(
        station="", language="en", state="", watches=(), layouts={}, bench=None, names=(), series=SeriesRule(),
        standards={each.name: each for each in STANDARDS}, preparations=(preparation,), blanks=BlankRule(),
        brackets={}, references={}, tops={}, checks={}, coverage=0.95, decisions="", digest="",
    )  # fmt: skip
    return replace(found, **changes)


def reading(level: str, values: Sequence[tuple[str, str, str]] = (), **changes: Any) -> Reading:
    found = Reading(
        series=KEY, level=level, vessel="", injection="", reading="", solution=f"N1_7_A{level}", analyte="Cd", line="",
        unit="A", signal=0.1, text="0.1", qualifier="", readings=1, sd=None, measured_at="", processed_at="",
        order=None, values=tuple(values), already=(), path=f"v{level}.csv", row=2, digest=level,
    )  # fmt: skip
    return replace(found, **changes)


def lines(rules: Rulebook, readings: Sequence[Reading], bench: Sequence[BenchEntry] = ()) -> tuple[PreparedLine, ...]:
    (batch,) = in_force(readings, rules)
    batch = replace(batch, bench=tuple(bench))
    return prepare(batch.members[KEY], batch, rules)


def prepared(preparation: Preparation, measured: str = "012", told: Told | None = None, **more: Any) -> PreparedLine:
    readings = [reading(level, (told or {}).get(level, ())) for level in measured]
    bench = more.pop("bench", ())
    (line,) = lines(book(preparation, **more), readings, bench)
    return line


def table(line: PreparedLine) -> list[tuple[float, float, float, float]]:
    assert line.problems == line.missing == ()
    return [(each.aliquot, each.addition, each.final, each.added) for each in line.vessels]


def units(line: PreparedLine) -> tuple[str, str, str, str]:
    return line.unit, line.aliquot_unit, line.addition_unit, line.final_unit


def at_level(level: str, *values: tuple[str, str], row: int = 2) -> BenchEntry:
    return BenchEntry("", "N1", "7", level, values, "bench.csv", row, level)


BY_MASS = rule(
    "weighed", Addition("A", levels("0 g", "0.21 g", "0.42 g"), "total"),
    aliquot=levels("10.0123 g", "9.9871 g", "10.005 g"), final=levels("25 g", "25.01 g", "24.99 g"),
)  # fmt: skip


def test_everything_by_mass_with_a_standard_per_volume():
    line = prepared(BY_MASS)
    # 0.21 g of 1.05 g/mL are 0.2 mL; of 20 mg/L that is 4 ug, and mg/kg x g is ug
    assert table(line) == [(10.0123, 0.0, 25.0, 0.0), (9.9871, 0.21, 25.01, 4.0), (10.005, 0.42, 24.99, 8.0)]
    assert units(line) == ("mg/kg", "g", "g", "g")
    assert line.expires == "2031-03-31"


def test_a_standard_per_mass_that_is_weighed_needs_no_density():
    line = prepared(replace(BY_MASS, additions=(Addition("Kg", levels("0 g", "0.21 g", "420 mg"), "total"),)))
    assert [added for *_, added in table(line)] == [0.0, 4.2, 8.4]
    assert units(line) == ("mg/kg", "g", "g", "g")


def test_a_volume_of_standard_into_a_weighed_aliquot():
    line = prepared(replace(BY_MASS, additions=(Addition("Kg", levels("0 mL", "0.2 mL", "0.4 mL"), "total"),)))
    assert [each[1:] for each in table(line)] == [(0.0, 25.0, 0.0), (0.2, 25.01, 4.2), (0.4, 24.99, 8.4)]
    assert units(line) == ("mg/kg", "g", "mL", "g")


def test_a_weighed_vessel_without_a_final_mass_is_the_sum_of_its_parts():
    mixed = replace(BY_MASS, aliquot={"": q("10 g")}, final={}, diluent=q("5 g"))
    assert [final for _, _, final, _ in table(prepared(mixed))] == [15.0, 15.21, 15.42]
    by_volume = replace(mixed, additions=(Addition("A", levels("0 mL", "0.2 mL", "0.4 mL"), "total"),))
    assert table(prepared(by_volume)) == [(10.0, 0.0, 15.0, 0.0), (10.0, 0.2, 15.21, 4.0), (10.0, 0.4, 15.42, 8.0)]


def test_masses_of_standard_into_a_volume_of_test_solution():
    line = prepared(rule("weighed", Addition("A", levels("0 g", "0.21 g", "0.42 g"), "total"), final={"": q("25 mL")}))
    assert table(line) == [(10.0, 0.0, 25.0, 0.0), (10.0, 0.21, 25.0, 4.0), (10.0, 0.42, 25.0, 8.0)]
    assert units(line) == ("mg/L", "mL", "g", "mL")
    as_mixed = prepared(rule("weighed", Addition("A", levels("0 g", "0.21 g", "0.42 g"), "total")))
    assert [final for _, _, final, _ in table(as_mixed)] == [10.0, 10.2, 10.4]


def test_a_density_that_is_needed_and_not_there_is_one_sentence():
    bare = prepared(replace(BY_MASS, additions=(Addition("Bare", levels("0 g", "0.21 g", "0.42 g"), "total"),)))
    assert bare.problems == (
        "Bare was delivered by mass and has its content per volume; add the density of Bare under standards",
    )
    mixed = prepared(
        rule("weighed", Addition("Bare", levels("0 mL", "0.2 mL"), "total"), aliquot={"": q("10 g")}), "01"
    )
    assert mixed.problems == (
        "level 1: the vessel holds a mass of test solution and 0.2 mL of standard, and no final mass is given; add the "
        "density of Bare under standards",
    )
    diluted = prepared(rule("flasks", Addition("A", levels("0 mL", "1 mL"), "total"), diluent=q("5 g")), "01")
    assert [problem for problem in diluted.problems if "the diluent is a mass and the aliquot a volume" in problem]


def test_masses_from_bench_column_and_name():
    weighed = replace(BY_MASS, aliquot={}, final={}, additions=(Addition("A", {}, "total"),))
    told = {
        "0": [("final", "25 g", "column")],
        "1": [("final", "25010 mg", "column"), ("addition", "210 mg", "name")],
        "2": [("final", "24.99 g", "column"), ("addition", "0.42 g", "name")],
    }
    bench = [at_level(level, ("aliquot", f"10.{level} g")) for level in "012"]
    line = prepared(weighed, told=told, bench=bench)
    assert table(line) == [(10.0, 0.0, 25.0, 0.0), (10.1, 0.21, 25.01, 4.0), (10.2, 0.42, 24.99, 8.0)]


def test_volumes_and_masses_in_one_place_are_a_problem():
    both = prepared(replace(BY_MASS, aliquot=levels("10 g", "10 mL", "10 g")))
    assert any(
        "aliquots are given by volume and by mass (level 0 10 g and level 1 10 mL)" in each for each in both.problems
    )
    told = {"1": [("aliquot", "0.5", "column")]}
    wrong = prepared(BY_MASS, told=told)
    assert "aliquot of level 1: 0.5 is a fraction, not a volume or mass; correct its unit" in wrong.problems


def test_a_quantity_below_zero_is_a_problem():
    line = prepared(BY_MASS, told={"1": [("addition", "-0.3 g", "column")]})
    assert line.problems == ("addition of level 1: -0.3 g is below zero, which cannot be; correct it",)


def test_what_does_not_fit_is_told_where_it_can_be_compared():
    flasks = rule("flasks", Addition("A", levels("0 g", "0.21 g"), "total"), final={"": q("10.1 mL")})
    (problem,) = prepared(flasks, "01").problems
    assert problem == (
        "level 1: aliquot and additions (10.2 mL) do not fit into the final volume (10.1 mL); correct the volumes"
    )
    by_mass = replace(flasks, final={"": q("10.1 g")})
    assert prepared(by_mass, "01").problems == ()  # nothing says what 10 mL of test solution weigh
    (heavy,) = prepared(replace(by_mass, density=q("1.2 g/mL"), additions=()), "0").problems
    assert "(12 g) do not fit into the final mass (10.1 g); correct the masses" in heavy
    # weighing may lose a little
    assert prepared(replace(by_mass, design="weighed", density=q("1 g/mL")), "01").problems == ()


def test_an_undiluted_level_0_beside_weighed_vessels_takes_the_density():
    undiluted = rule(
        "weighed", Addition("A", levels("0 g", "0.21 g"), "total"), final={"1": q("25 g")}, level_0="undiluted"
    )
    (problem,) = prepared(undiluted, "01").problems
    assert problem == (
        "level 0: its aliquot is a volume and the vessels are told by mass; add density, that of the test solution, to "
        "the preparation"
    )
    line = prepared(replace(undiluted, density=q("1.02 g/mL")), "01")
    assert table(line) == [(10.0, 0.0, 10.2, 0.0), (10.0, 0.21, 25.0, 4.0)]


TWO = (Addition("A", {"1": q("0.1 mL"), "2": q("0.1 mL")}, "total"), Addition("B", {"2": q("0.2 mL")}, "total"))


def test_two_standards_in_one_series():
    line = prepared(rule("flasks", *TWO))
    assert table(line) == [(10.0, 0.0, 10.0, 0.0), (10.0, 0.1, 10.1, 2.0), (10.0, pytest.approx(0.3), 10.3, 2.2)]
    assert line.standard == "A, B"
    assert line.expires == "2030-01-31"  # of the one that expires first


def test_two_standards_in_succession():
    each = (Addition("A", {"1": q("0.1 mL"), "2": q("0.1 mL")}, "each"), Addition("B", {"3": q("0.2 mL")}, "each"))
    line = prepared(rule("successive", *each), "0123")
    assert [(addition, final, added) for _, addition, final, added in table(line)] == [
        (0.0, 10.0, 0.0), (0.1, 10.1, 2.0), (0.2, 10.2, 4.0), (0.4, 10.4, 4.2),
    ]  # fmt: skip


def test_one_level_in_two_additions_adds_up():
    twice = (Addition("A", {"1": q("0.1 mL")}, "total"), Addition("A", {"1": q("0.2 mL")}, "total"))
    assert table(prepared(rule("flasks", *twice), "01"))[1] == (10.0, pytest.approx(0.3), 10.3, 6.0)


def test_further_analytes_of_the_same_standards_where_lines_overlap():
    overlap = (Overlap("generalised", ("Cd", "As"), ("Cd 228.8", "As 228.8")),)
    assert [each.others for each in prepared(rule("flasks", *TWO), overlap=overlap).vessels] == [
        (("As", 0.0),), (("As", 0.0),), (("As", 4.0),),
    ]  # fmt: skip
    assert prepared(rule("flasks", *TWO)).vessels[2].others == ()
    readings = [reading(level, analyte=analyte) for level in "012" for analyte in ("As", "Cd")]
    arsenic, cadmium = lines(book(rule("flasks", *TWO), overlap=overlap), readings)
    assert [each.added for each in arsenic.vessels] == [0.0, 0.0, 4.0]
    assert [each.others for each in arsenic.vessels] == [(("Cd", each.added),) for each in cadmium.vessels]


def test_a_standard_without_the_analyte_is_a_problem_only_where_no_other_holds_it():
    readings = [reading(level, analyte=analyte) for level in "012" for analyte in ("As", "Pb")]
    arsenic, lead = lines(book(rule("flasks", *TWO)), readings)
    assert arsenic.problems == ()
    assert lead.problems == ("standards A and B do not hold Pb; add its content under standards",)


def test_a_standard_that_is_named_for_a_level():
    one = rule("flasks", Addition("A", levels("0 mL", "0.1 mL", "0.1 mL"), "total"))
    line = prepared(one, told={"2": [("standard", "B", "column")]})
    assert [added for *_, added in table(line)] == [0.0, 2.0, 0.1]
    assert line.standard == "A, B"
    (problem, *_) = prepared(one, told={"2": [("standard", "Zz", "column")]}).problems
    assert problem == "standard Zz is not under standards in the rule file; add it there"
    # of two additions the one of that standard is meant
    told = {"2": [("standard", "B", "column"), ("addition", "0.5 mL", "column")]}
    assert table(prepared(rule("flasks", *TWO), told=told))[2] == (10.0, 0.6, 10.6, 2.5)


def test_an_addition_that_may_be_one_of_two_is_not_guessed():
    (problem,) = prepared(rule("flasks", *TWO), told={"2": [("addition", "0.5 mL", "column")]}).problems
    assert problem.startswith("level 2: an addition of 0.5 mL is given and the rule file has several additions")


def test_amounts_of_the_analyte_itself():
    amounts = rule("flasks", Addition("", {"1": q("2.5 ug"), "2": q("10 nmol")}, "total"))
    # 112.414 g/mol, standard atomic weight of cadmium (IUPAC); ug/L x mL is ng
    line = prepared(amounts, molar_masses={"Cd": q("112.414 g/mol")})
    assert table(line) == [(10.0, 0.0, 10.0, 0.0), (10.0, 0.0, 10.0, 2500.0), (10.0, 0.0, 10.0, 1124.14)]
    assert (line.unit, line.standard) == ("ug/L", "")
    (problem,) = prepared(amounts).problems
    assert problem == "Cd is added as mass and as amount of substance; give its molar mass under molar_masses"
    per_mass = prepared(replace(amounts, aliquot={"": q("10 g")}), "01")
    assert (per_mass.unit, per_mass.vessels[1].added) == ("ug/kg", 2500.0)
    made_up = prepared(replace(amounts, final={"": q("25 mL")}), "01")
    assert [final for _, _, final, _ in table(made_up)] == [25.0, 25.0]


def test_amounts_that_a_column_tells():
    amounts = rule("flasks", Addition("", {}, "total"))
    line = prepared(amounts, "01", told={"1": [("addition", "2.5 ug", "column")]})
    assert (line.unit, line.vessels[1].added) == ("mg/L", 2.5)


IN_SAMPLE = rule(
    "flasks", Addition("A", levels("0 mL", "0.25 mL"), "total"), aliquot={}, spiked="sample",
    sample=SampleRule(mass="bench", digest=q("50 mL"), dry_matter=q("80 %"), dilution=(q("5"),)),
)  # fmt: skip


def test_a_sample_that_was_spiked_before_its_preparation():
    bench = [at_level("0", ("mass", "501.2 mg")), at_level("1", ("mass", "0.4988 g"), row=3)]
    line = prepared(IN_SAMPLE, "01", bench=bench)
    # 0.25 mL of 20 mg/L are 5 ug, and mg/kg x g is ug; 50 mL diluted 1 + 4 are read as 250 mL
    assert table(line) == [(0.5012, 0.0, 250.0, 0.0), (0.4988, 0.25, 250.0, 5.0)]
    assert units(line) == ("mg/kg", "g", "mL", "mL")
    back = line.way_back
    assert back is not None
    assert (back.factor, back.unit, back.basis) == (1.25, "mg/kg", "dry matter")
    assert "digest" not in " ".join(line.cannot_tell)
    owed = prepared(IN_SAMPLE, "01", bench=bench[:1])
    assert owed.missing == ("mass of 7, level 1, from the bench file",)
    assert [vessel.level for vessel in owed.vessels] == ["0"]


def test_digests_of_their_own_volume_and_a_liquid_sample():
    liquid = replace(IN_SAMPLE, sample=SampleRule(volume=q("20 mL"), digest="column"))
    told = {"0": [("digest", "50 mL", "column")], "1": [("digest", "51 mL", "column")]}
    line = prepared(liquid, "01", told=told)
    assert table(line) == [(20.0, 0.0, 50.0, 0.0), (20.0, 0.25, 51.0, 5.0)]
    assert (line.unit, line.way_back and line.way_back.factor) == ("mg/L", 1.0)


def test_runs_of_one_series_are_vessels_of_their_own():
    flasks = rule("flasks", Addition("A", levels("0 mL", "0.1 mL"), "total"))
    readings = [reading(level, block=block, digest=level + block) for block in ("2", "10", "1") for level in "01"]
    (line,) = lines(book(flasks), readings)
    assert [(each.level, each.block) for each in line.vessels] == [
        ("0", "1"), ("0", "2"), ("0", "10"), ("1", "1"), ("1", "2"), ("1", "10"),
    ]  # fmt: skip


def test_what_no_line_of_a_design_can_show():
    flasks = rule("flasks", Addition("A", levels("0 mL", "0.1 mL", "0.2 mL"), "total"), final={"": q("25 mL")})
    told = prepared(flasks).cannot_tell
    assert len(told) == 2
    assert "a constant shift of the signal is not corrected" in told[0]
    assert "losses before that" in told[1]
    digest = replace(flasks, sample=SampleRule(mass=q("1 g"), digest=q("50 mL")), recovery=(0.94, 0.03))
    assert "added after the digestion" in prepared(digest).cannot_tell[1]
    assert "is declared; this series does not show it" in prepared(digest).cannot_tell[2]
    single = rule(
        "single", Addition("A", levels("0 mL", "0.1 mL"), "total"), level_0="undiluted", final={"": q("20 mL")}
    )
    straight, scatter, _, undiluted, _ = prepared(single, "01").cannot_tell
    assert straight == "Two levels do not show whether the response is a straight line."
    assert "no scatter of their own" in scatter
    assert undiluted.startswith("Level 0 was read undiluted")
    unequal = replace(flasks, aliquot=levels("10 mL", "9.5 mL", "9 mL"))
    assert any(each.startswith("The vessels hold unequal shares") for each in prepared(unequal).cannot_tell)
    successive = replace(flasks, design="successive", final={})
    assert any(each.startswith("All levels are one vessel") for each in prepared(successive).cannot_tell)
    electrode = replace(flasks, response="log")
    assert not any("constant shift" in each for each in prepared(electrode).cannot_tell)


def test_a_blank_holds_no_sample_whose_losses_could_matter():
    blank = replace(KEY, role="process_blank")
    flasks = rule("flasks", Addition("A", levels("0 mL", "0.1 mL"), "total"))
    rules = book(flasks)
    (batch,) = in_force([reading(level, series=blank) for level in "01"], rules)
    (line,) = prepare(batch.members[blank], batch, rules)
    assert not any("losses" in each for each in line.cannot_tell)


DELIVERED = st.lists(st.integers(1, 999), min_size=1, max_size=6)


@given(DELIVERED)
def test_deliveries_and_their_totals_are_two_ways_to_say_one_thing(steps: list[int]):
    measured = [str(level) for level in range(len(steps) + 1)]
    each = {str(number + 1): q(f"{step} uL") for number, step in enumerate(steps)}
    total = {str(number + 1): q(f"{sum(steps[: number + 1])} uL") for number in range(len(steps))}
    one = prepared(rule("successive", Addition("A", each, "each")), "".join(measured))
    other = prepared(rule("successive", Addition("A", total, "total")), "".join(measured))
    assert table(one) == table(other)


@given(DELIVERED)
def test_no_digit_depends_on_the_unit_in_which_it_was_written(steps: list[int]):
    measured = "".join(str(level) for level in range(len(steps)))
    in_ul = levels(*(f"{step} uL" for step in steps))
    in_ml = levels(*(f"{step / 1000:.3f} mL" for step in steps))
    one, other = (prepared(rule("flasks", Addition("A", each, "total")), measured) for each in (in_ul, in_ml))
    assert table(one) == table(other)
