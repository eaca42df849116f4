"""From the test solution to the sample: every factor by hand, the words that tell it, and what a spike brought."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import pytest

from spikeward.rules.preparation import prepare
from spikeward.rules.prepared import PreparedLine, WayBack
from spikeward.rules.quantities import parse_quantity as q
from spikeward.rules.records import Batch, BenchEntry, Members, Reading, SeriesKey
from spikeward.rules.rulebook import (
    Addition,
    BlankRule,
    Preparation,
    Rulebook,
    SampleRule,
    SeriesRule,
    Spike,
    Standard,
)

STANDARDS = (
    Standard("Mix", {"Cd": q("10 mg/L")}, density=q("1.02 g/mL")),
    Standard("Molar", {"Cd": q("1 mmol/L")}),
    Standard("Lead", {"Pb": q("10 mg/L")}),
)
FLASKS = Preparation(
    applies={}, design="flasks", aliquot={"": q("10 mL")}, final={"": q("25 mL")},
    additions=(Addition("Mix", {"1": q("0.25 mL")}, "total"),),
)  # fmt: skip
# Standard atomic weight of cadmium (IUPAC).
CADMIUM = {"Cd": q("112.414 g/mol")}


def line(
    preparation: Preparation,
    *values: tuple[str, str, str],
    bench: Sequence[tuple[str, str]] = (),
    role: str = "sample",
    **changes: Any,
) -> PreparedLine:
    rules = Rulebook(
        station="", language="en", state="", watches=(), layouts={}, bench=None, names=(), series=SeriesRule(),
        standards={each.name: each for each in STANDARDS}, preparations=(preparation,), blanks=BlankRule(),
        brackets={}, references={}, tops={}, checks={}, coverage=0.95, decisions="", digest="",
    )  # fmt: skip
    key = SeriesKey("inbox", "", "N1", role, "7")
    readings = tuple(
        Reading(
            series=key,
            level=level,
            vessel="",
            injection="",
            reading="",
            solution=f"N1_7_A{level}",
            analyte="Cd",
            line="",
            unit="A",
            signal=0.1,
            text="0.1",
            qualifier="",
            readings=1,
            sd=None,
            measured_at="",
            processed_at="",
            order=None,
            values=values,
            already=(),
            path=f"v{level}.csv",
            row=2,
            digest=level,
        )  # fmt: skip
        for level in "01"
    )
    entries = (BenchEntry("", "N1", "7", "", tuple(bench), "bench.csv", 2, "x"),) if bench else ()
    members = Members(key, readings)
    batch = Batch(key.batch_key, {key: members}, entries)
    (found,) = prepare(members, batch, replace(rules, **changes))
    return found


def back(sample: SampleRule | None, *values: tuple[str, str, str], **changes: Any) -> WayBack:
    """The way back of flasks with another sample, or with other keys of the preparation."""
    own = {name: changes.pop(name) for name in list(changes) if name in Preparation.__dataclass_fields__}
    found = line(replace(FLASKS, sample=sample, **own), *values, **changes)
    assert found.problems == found.missing == ()
    assert found.way_back is not None
    return found.way_back


MUD = SampleRule(mass=q("0.5 g"), digest=q("50 mL"))


def test_dilutions_in_sequence_multiply():
    found = back(replace(MUD, dilution=(q("5"), q("10"))), report_in="mg/kg")
    # 1 mg/L in 50 mL is 0.05 mg, in 0.5 g 100 mg/kg, times 50
    assert (found.factor, found.dilution, found.digest_ml, found.mass_g) == (5000.0, 50.0, 2500.0, 0.5)
    assert found.words == "0.5 g made up to 50 mL; diluted by a factor 5, then 10"


def test_a_dilution_in_the_sequence_may_come_from_elsewhere():
    told = ("dilution", "1 + 3", "name")
    assert back(replace(MUD, dilution=(q("5"), "name")), told).factor == 2000.0
    both = replace(MUD, dilution=("bench", "name", q("2")))
    assert back(both, told, bench=[("dilution", "10")]).factor == 100.0 * 10 * 4 * 2
    owed = line(replace(FLASKS, sample=both), told)
    assert owed.missing == ("dilution of 7 from the bench file",)
    assert owed.way_back is None


def test_a_dilution_that_is_told_goes_before_one_of_the_rule_file_but_not_before_several():
    told = ("dilution", "1 + 3", "name")
    assert back(replace(MUD, dilution=(q("5"),)), told).factor == 400.0
    (problem,) = line(replace(FLASKS, sample=replace(MUD, dilution=(q("5"), q("2")))), told).problems
    assert problem.startswith("a dilution of 4 is given for 7 and the rule file has 2 in sequence")


@pytest.mark.parametrize("share", [{"dry_matter": q("80 %")}, {"moisture": q("20 %")}, {"moisture": q("0.2")}])
def test_dry_matter_is_what_is_left_of_the_moisture(share: dict[str, Any]):
    found = back(replace(MUD, **share))
    assert (found.factor, found.basis, found.mass_g, found.unit) == (125.0, "dry matter", 0.4, "mg/kg")
    assert found.words == "0.5 g made up to 50 mL; dry matter 80 %"


@pytest.mark.parametrize("share", [{"moisture": q("100 %")}, {"moisture": q("-1 %")}, {"dry_matter": q("0 %")}])
def test_shares_that_cannot_be(share: dict[str, Any]):
    assert any("which cannot be" in each for each in line(replace(FLASKS, sample=replace(MUD, **share))).problems)


def test_a_liquid_sample_by_volume_and_by_mass():
    liquid = SampleRule(volume=q("5 mL"), digest=q("50 mL"))
    assert (back(liquid).factor, back(liquid).unit, back(liquid).volume_ml) == (10.0, "mg/L", 5.0)
    assert back(liquid).words == "5 mL made up to 50 mL"
    dense = back(replace(liquid, density=q("1.25 g/mL")), report_in="mg/kg")
    # 10 mg/L of sample in 1.25 kg
    assert dense.factor == 8.0
    assert dense.words == "5 mL made up to 50 mL; density of the sample 1.25 g/mL"
    weighed = back(SampleRule(mass=q("5 g"), digest=q("50 mL"), density=q("1.25 g/mL")), report_in="mg/L")
    assert weighed.factor == 12.5


def test_a_test_solution_that_was_weighed():
    weighed = {"aliquot": {"": q("10 g")}, "final": {"": q("25 g")}, "density": None}
    assert back(SampleRule(), **weighed).unit == "mg/kg"
    by_volume = {**weighed, "density": q("1.1 g/mL")}
    # mg/kg of a solution of 1.1 kg/L
    found = back(SampleRule(dilution=(q("2"),)), **by_volume, report_in="mg/L")
    assert found.factor == 2.2
    assert found.words == "diluted by a factor 2; density of the test solution 1.1 g/mL"
    # 1 mg/kg is 1.1 mg/L, in 50 mL of digest 0.055 mg, in 0.5 g 110 mg/kg
    assert back(MUD, **by_volume).factor == 110.0
    (problem,) = line(replace(FLASKS, sample=MUD, **weighed)).problems
    assert problem == (
        "the digest is a volume and the test solution has its content per mass; give the density of the test solution"
    )
    on_the_balance = back(SampleRule(mass=q("0.5 g"), digest="bench"), bench=[("digest", "52 g")], **weighed)
    # 1 mg/kg in 52 g is 0.052 mg, in 0.5 g 104 mg/kg
    assert (on_the_balance.factor, on_the_balance.digest_ml) == (104.0, None)


def test_water_by_volume_reported_per_mass():
    for found in (
        back(SampleRule(density=q("1.25 g/mL")), report_in="mg/kg"),
        back(SampleRule(), report_in="mg/kg", density=q("1.25 g/mL")),
    ):
        assert found.factor == 0.8


def test_mass_and_amount_of_substance():
    found = back(SampleRule(), report_in="nmol/L", molar_masses={"Cd": q("100 g/mol")})
    assert (found.factor, found.words) == (10000.0, "molar mass 100 g/mol")
    molar = replace(FLASKS, additions=(Addition("Molar", {"1": q("0.25 mL")}, "total"),), sample=MUD, report_in="mg/kg")
    there = line(molar, molar_masses=CADMIUM).way_back
    # 1 mmol/L is 112.414 mg/L, and mud is 100 mg/kg per mg/L
    assert there is not None
    assert there.factor == 11241.4
    (problem,) = line(molar).problems
    assert problem.endswith("report in a unit such as mmol/kg or give the molar mass of the analyte under molar_masses")
    assert line(replace(molar, report_in="")).way_back.unit == "mmol/kg"  # type: ignore[union-attr]


def test_a_declared_recovery_divides_and_is_told():
    found = back(MUD, recovery=(0.8, 0.02))
    assert (found.factor, found.relative_uncertainty) == (125.0, 0.025)
    assert found.words.endswith("divided by the declared recovery 0.8 (standard uncertainty 0.02)")


def test_what_was_done_is_told_in_its_order():
    found = back(
        replace(MUD, dilution=(q("5"),), moisture=q("20 %"), density=q("1.25 g/mL")), recovery=(0.8, 0.02),
        report_in="mmol/L", molar_masses={"Cd": q("100 g/mol")},
    )  # fmt: skip
    assert found.words == (
        "0.5 g made up to 50 mL; diluted by a factor 5; dry matter 80 %; density of the sample 1.25 g/mL; "
        "molar mass 100 g/mol; divided by the declared recovery 0.8 (standard uncertainty 0.02)"
    )
    # 100 mg/kg x 5 / 0.8 dry x 1.25 kg/L / 100 g/mol / 0.8
    assert found.factor == 9.765625


def test_a_unit_that_nothing_leads_to_says_which_key_would():
    (problem,) = line(
        replace(FLASKS, sample=SampleRule(volume=q("5 mL"), digest=q("50 mL")), report_in="ug/g")
    ).problems
    assert problem == (
        "report_in asks for µg/g, a mass per mass, but from a standard in mg/L the sample block leads to a mass per "
        "volume (it gives volume and digest); report in a unit such as mg/L, give mass and digest for a content per "
        "mass or give the density of the sample"
    )


SPIKED = replace(FLASKS, sample=MUD, spike=Spike("Mix", q("0.1 mL"), "before digestion"))


def test_what_a_spike_brought_over_the_sample_is_the_rise_that_it_should_make():
    found = line(SPIKED, role="spiked_sample")
    # 0.1 mL of 10 mg/L are 1 ug; in 0.5 g that is 2 mg/kg
    assert found.spiked_amount == 1.0
    assert (found.spiked_when, found.way_back and found.spiked_amount / (found.way_back.mass_g or 0)) == (
        "before digestion", 2.0,
    )  # fmt: skip
    dry = line(replace(SPIKED, sample=replace(MUD, moisture=q("20 %")), report_in="ug/kg"), role="spiked_sample")
    assert (dry.spiked_amount, dry.way_back and dry.way_back.mass_g) == (1000.0, 0.4)
    assert line(SPIKED).spiked_amount is None
    assert line(SPIKED).spiked_when == ""


def test_a_spike_by_mass_from_the_bench_and_into_a_liquid():
    by_mass = replace(SPIKED, spike=Spike("Mix", "bench", "after digestion"))
    weighed = line(by_mass, role="spiked_sample", bench=[("spike", "102 mg")])
    assert weighed.spiked_amount == 1.0  # 0.102 g of 1.02 g/mL are 0.1 mL
    assert line(by_mass, role="spiked_sample").missing == ("spike of 7 from the bench file",)
    liquid = line(replace(SPIKED, sample=SampleRule(volume=q("20 mL"), digest=q("50 mL"))), role="spiked_sample")
    # 1 ug in 20 mL raises by 0.05 mg/L
    assert liquid.way_back is not None
    assert (liquid.spiked_amount, liquid.way_back.volume_ml) == (1.0, 20.0)
    per_mass = line(
        replace(SPIKED, sample=SampleRule(volume=q("20 mL"), digest=q("50 mL"), density=q("1.25 g/mL")),
                report_in="mg/kg"), role="spiked_sample",
    )  # fmt: skip
    assert per_mass.spiked_amount == 0.8


def test_a_spike_of_another_analyte_or_without_a_mass_says_nothing():
    other = replace(SPIKED, spike=Spike("Lead", q("0.1 mL"), "before digestion"))
    assert line(other, role="spiked_sample").spiked_amount is None
    water = replace(SPIKED, sample=SampleRule())
    assert line(water, role="spiked_sample").spiked_amount is None
    assert line(water, role="spiked_sample").problems == ()


def test_a_rerun_says_of_what():
    assert line(FLASKS).rerun_of == ""
    assert line(FLASKS, ("rerun_of", "05", "name")).rerun_of == "05"
    (problem,) = line(FLASKS, ("rerun_of", "05", "name"), ("rerun_of", "06", "name")).problems
    assert problem == "the vessels say that this is a rerun of 05 and 06; a series is a rerun of one sample only"


def test_a_mass_that_two_vessels_tell_differently_is_a_problem():
    told = [("mass", "0.5 g", "column"), ("mass", "510 mg", "name")]
    (problem,) = line(replace(FLASKS, sample=replace(MUD, mass="bench")), *told).problems
    assert problem.startswith("mass is given as 0.5 g from v0.csv row 2 and 0.51 g from the name N1_7_A0")
