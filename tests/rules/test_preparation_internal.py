"""Internal standards: their readings beside those of each vessel, and how much of them went in."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

from spikeward.rules.preparation import prepare
from spikeward.rules.prepared import PreparedLine
from spikeward.rules.quantities import parse_quantity as q
from spikeward.rules.records import Batch, Decision, Members, Reading, SeriesKey
from spikeward.rules.rulebook import (
    Addition,
    BlankRule,
    Electrode,
    InternalStandard,
    Preparation,
    Rulebook,
    SeriesRule,
    Standard,
)

KEY = SeriesKey("inbox", "", "N1", "sample", "7")
RHODIUM = InternalStandard({"Cd": "Rh"}, "per_vessel")
FLASKS = Preparation(
    applies={}, design="flasks", aliquot={"": q("10 mL")}, final={"": q("25 mL")},
    additions=(Addition("Mix", {"1": q("0.25 mL")}, "total"),), internal_standard=RHODIUM,
)  # fmt: skip


def reading(level: str, analyte: str = "Cd", **changes: Any) -> Reading:
    found = Reading(
        series=KEY, level=level, vessel="", injection="", reading="", solution=f"N1_7_A{level}", analyte=analyte,
        line="", unit="cps", signal=0.1, text="0.1", qualifier="", readings=1, sd=None, measured_at="", processed_at="",
        order=None, values=(), already=(), path=f"v{level}.csv", row=2, digest=f"{analyte}{level}",
    )  # fmt: skip
    return replace(found, **changes)


def lines(
    readings: Sequence[Reading], preparation: Preparation = FLASKS, decisions: Sequence[Decision] = ()
) -> tuple[PreparedLine, ...]:
    rules = Rulebook(
        station="", language="en", state="", watches=(), layouts={}, bench=None, names=(), series=SeriesRule(),
        standards={"Mix": Standard("Mix", {"Cd": q("10 mg/L"), "Pb": q("10 mg/L")})}, preparations=(preparation,),
        blanks=BlankRule(), brackets={}, references={}, tops={}, checks={}, coverage=0.95, decisions="", digest="",
    )  # fmt: skip
    members = Members(KEY, tuple(readings))
    return prepare(members, Batch(KEY.batch_key, {KEY: members}, decisions=tuple(decisions)), rules)


BOTH = [reading(level, analyte) for level in "01" for analyte in ("Cd", "Rh")]


def test_an_internal_standard_stands_beside_its_vessel_and_is_no_line():
    (line,) = lines(BOTH)
    assert (line.analyte, line.internal, line.entered, line.problems) == ("Cd", "Rh", "per_vessel", ())
    assert [[each.analyte for each in vessel.internal] for vessel in line.vessels] == [["Rh"], ["Rh"]]
    assert [each.level for vessel in line.vessels for each in vessel.internal] == ["0", "1"]
    assert {vessel.internal_amount for vessel in line.vessels} == {1.0}


def test_an_analyte_without_internal_standard_is_solved_without_it():
    cadmium, lead = lines([*BOTH, *(reading(level, "Pb") for level in "01")])
    assert (cadmium.internal, lead.internal, lead.entered) == ("Rh", "", "")
    assert all(vessel.internal == () for vessel in lead.vessels)


def test_vessels_and_runs_have_readings_of_their_own():
    places = [("0", "a", "1"), ("0", "b", "1"), ("0", "a", "2"), ("1", "a", "1")]
    readings = [
        reading(level, analyte, vessel=vessel, block=block, digest=f"{analyte}{level}{vessel}{block}")
        for level, vessel, block in places
        for analyte in ("Cd", "Rh")
    ]
    (line,) = lines(readings)
    assert [(each.level, each.vessel, each.block) for each in line.vessels] == sorted(places)
    for vessel in line.vessels:
        (one,) = vessel.internal
        assert (one.level, one.vessel, one.block) == (vessel.level, vessel.vessel, vessel.block)


def test_a_vessel_without_a_reading_of_it_waits_for_it_unless_it_is_excluded():
    """The elements of one solution may come in one file each."""
    (line,) = lines(BOTH[:3])
    assert line.problems == ()
    assert line.missing == ("the reading of the internal standard Rh at level 1",)
    out = Decision("exclude", "N1_7_A1", "N. Invented", "2031-01-01", "no signal", 1)
    (line,) = lines(BOTH[:3], decisions=[out])
    assert (line.problems, line.missing) == ((), ())


def test_of_several_lines_one_must_be_named():
    two = [*BOTH, *(reading(level, "Rh", line="369.2", digest=f"b{level}") for level in "01")]
    (line,) = lines(two)
    assert line.problems[0] == (
        "the internal standard Rh was read at Rh and Rh 369.2; name the one that is meant, with its line, under "
        "internal_standard: for"
    )
    named = replace(FLASKS, internal_standard=replace(RHODIUM, names={"Cd": "Rh 369.2"}))
    (line,) = lines(two, named)
    assert line.problems == ()
    assert {each.line for vessel in line.vessels for each in vessel.internal} == {"369.2"}


def test_amounts_in_each_vessel_are_told_or_declared_and_come_in_one_unit():
    declared = replace(FLASKS, internal_standard=replace(RHODIUM, amount=q("100 uL")))
    told = [
        replace(each, values=(("internal_standard", "0.2 mL", "column"),)) if each.level == "1" else each
        for each in BOTH
    ]
    (line,) = lines(told, declared)
    assert line.problems == ()
    nought, one = (vessel.internal_amount for vessel in line.vessels)
    assert one / nought == 2.0
    (line,) = lines(told)
    assert line.problems == ("no amount of the internal standard is known for level 0; give it for every level",)
    mixed = [
        replace(each, values=(("internal_standard", "0.2 mL" if each.level == "1" else "0.1 g", "column"),))
        for each in BOTH
    ]
    assert (
        "amounts of the internal standard are mass and volume; give all in one kind of unit" in lines(mixed)[0].problems
    )


def test_what_the_instrument_has_divided_already_needs_no_reading_of_it():
    (line,) = lines([reading(level, already=("internal_standard",)) for level in "01"])
    assert (line.internal, line.entered, line.problems) == ("Rh", "per_vessel", ())
    assert all(vessel.internal == () for vessel in line.vessels)
    half = [replace(each, already=("internal_standard",)) if each.level == "1" else each for each in BOTH]
    assert any("some exports of this series say that the internal" in each for each in lines(half)[0].problems)


def test_signals_of_it_in_two_units_are_a_problem():
    mixed = [replace(each, unit="A") if (each.analyte, each.level) == ("Rh", "1") else each for each in BOTH]
    assert "signals of Rh come in A and cps; export one series in one unit" in lines(mixed)[0].problems


def test_an_electrode_goes_with_its_line():
    electrode = Electrode(-1, 22.0, -58.6, 0.3)
    (line,) = lines(BOTH[::2], replace(FLASKS, internal_standard=None, response="log", electrode=electrode))
    assert (line.response, line.electrode, line.entered) == ("log", electrode, "")
