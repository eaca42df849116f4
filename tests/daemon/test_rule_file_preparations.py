"""Designs, electrodes, internal standards, spikes and units of a rule file: what is read, and what is refused."""

from __future__ import annotations

from decimal import Decimal

import pytest

from spikeward.daemon.rule_file.effective import effective
from spikeward.daemon.rule_file.load import load_rules
from spikeward.rules.quantities import Quantity
from spikeward.rules.quantities import parse_quantity as q
from spikeward.rules.rulebook import Addition, Electrode, InternalStandard, Preparation, Rulebook, SampleRule, Spike

HEAD = r"""
watch: {folder: inbox}
bench: {files: "*bench*.csv", key: [sample, level], columns: {mass: Mass, moisture: Water, spike: Spike}}
readers: {readings: {columns: {solution: Solution, analyte: El, signal: Signal, unit: Unit}}}
names: [{role: sample, match: '(?P<sample>\d+)_A(?P<level>\d)'}]
standards:
  Mix: {contents: {Cd: 10 mg/L, Pb: 50 mg/L}}
  Dense: {analyte: Cd, content: 10 mg/L, density: 1.02 g/mL}
  Molar: {analyte: NO3-N, content: 1 mmol/L}
preparations:
"""
FLASKS = "design: flasks, aliquot: 10 mL, final: 25 mL"
LEVELS = "additions: {standard: Mix, levels: {1: 0.25 mL, 2: 0.5 mL}}"
LOG = f"response: log, design: successive, aliquot: 50 mL, {LEVELS}"


def text_of(preparation: str, more: str = "") -> str:
    return f"{HEAD}  - {{{preparation}}}\n{more}"


def rules_of(preparation: str, more: str = "") -> Rulebook:
    rules, problems = load_rules(text_of(preparation, more), "rules.yaml")
    assert problems == ()
    assert rules is not None
    return rules


def read(preparation: str, more: str = "") -> Preparation:
    return rules_of(preparation, more).preparations[0]


@pytest.mark.parametrize(
    ("preparation", "path", "code", "says"),
    [
        # responses
        (LOG, "response", "R010", "add electrode"),
        (f"{LOG}, electrode: {{charge: -1, slope: 58 mV}}", "electrode.slope", "R031", "sign of the charge"),
        (f"{LOG}, electrode: {{charge: 2, slope: -29 mV}}", "electrode.slope", "R031", "sign of the charge"),
        (f"{LOG}, electrode: {{charge: 2, uncertainty: 1 mV}}", "electrode.uncertainty", "R010", "add slope"),
        (
            "response: log, design: single, aliquot: 50 mL, additions: {standard: Mix, levels: {1: 1 mL}}, "
            "electrode: {charge: 1}",
            "electrode",
            "R010",
            "no slope can be fitted",
        ),
        (f"{FLASKS}, {LEVELS}, electrode: {{charge: 1}}", "electrode", "R031", "say response: log"),
        (f"{FLASKS}, {LEVELS}, response: curve", "response", "R031", "needs 4 levels, and 3 are declared"),
        (
            f"{LOG}, electrode: {{charge: 1}}, internal_standard: {{for: {{Cd: Rh}}, entered: in_sample}}",
            "internal_standard",
            "R031",
            "no internal standard",
        ),
        # masses and volumes
        (f"design: weighed, aliquot: 10 mL, final: 25 mL, {LEVELS}", "", "R031", "no mass is given"),
        (
            "design: weighed, aliquot: 10 g, additions: {standard: Mix, levels: {1: 0.25 g}}",
            "additions[0].levels.1",
            "R010",
            "a mass of Mix, whose content is per volume",
        ),
        (
            "design: weighed, aliquot: 10 g, final: 10.1 g, additions: {standard: Dense, levels: {1: 0.25 mL}}",
            "final",
            "R031",
            "10.255 g, the final mass 10.1 g",
        ),
        (
            f"design: flasks, final: 25 mL, aliquot: {{volume: 10 mL, mass: 10 g}}, {LEVELS}",
            "aliquot",
            "R031",
            "a volume and a mass for every level",
        ),
        # additions
        (
            f"{FLASKS}, for: {{analyte: Cd}}, additions: {{standard: Mix, amounts: {{1: 2 ug}}}}",
            "additions[0].amounts",
            "R031",
            "standard stands beside them",
        ),
        (
            f"{FLASKS}, for: {{analyte: Cd}}, additions: {{amounts: {{1: 2 ug}}, levels: {{1: 1 mL}}}}",
            "additions[0].amounts",
            "R031",
            "levels stands beside them",
        ),
        (
            f"{FLASKS}, additions: {{amounts: {{1: 2 ug}}}}",
            "additions[0].amounts",
            "R031",
            "this preparation is for several",
        ),
        (f"{FLASKS}, additions: [{{levels: {{1: 1 mL}}}}]", "additions[0].standard", "R010", "Mix, Dense or Molar"),
        (FLASKS, "additions", "R010", "add levels"),
        # the sample
        (
            f"design: flasks, spiked: sample, {LEVELS}, sample: {{digest: 50 mL, mass: bench}}, aliquot: 10 mL",
            "aliquot",
            "R031",
            "delete aliquot",
        ),
        (
            f"design: flasks, spiked: sample, {LEVELS}, sample: {{digest: 50 mL, mass: bench}}, final: 10 mL",
            "final",
            "R031",
            "delete final",
        ),
        (f"design: flasks, spiked: sample, {LEVELS}", "spiked", "R010", "the mass of sample and the digest"),
        (
            f"{FLASKS}, {LEVELS}, sample: {{mass: 1 g, digest: 50 mL, dry_matter: 80 %, moisture: bench}}",
            "sample.moisture",
            "R031",
            "say the same thing",
        ),
        (f"{FLASKS}, {LEVELS}, sample: {{moisture: bench}}", "sample.moisture", "R031", "needs the mass of the sample"),
        (f"{FLASKS}, {LEVELS}, sample: {{dilution: [2, bench]}}", "sample.dilution[1]", "R030", "columns under bench"),
        # reports
        (
            f"{FLASKS}, {LEVELS}, report_in: mmol/L",
            "report_in",
            "R015",
            "the molar mass of Cd and Pb under molar_masses",
        ),
        (f"{FLASKS}, {LEVELS}, report_in: mg/kg", "report_in", "R015", "for a content per mass, or density"),
        (
            f"design: weighed, aliquot: 10 g, final: 25 g, {LEVELS}, report_in: mg/L",
            "report_in",
            "R015",
            "give density",
        ),
        (f"{FLASKS}, {LEVELS}, recovery: {{factor: 94, uncertainty: 3}}", "recovery.factor", "R031", "write 0.94"),
        # spikes
        (
            f"{FLASKS}, {LEVELS}, sample: {{mass: 1 g, digest: 50 mL}}, spike: {{standard: Mx, delivered: bench}}",
            "spike.standard",
            "R030",
            "did you mean Mix?",
        ),
        (
            f"{FLASKS}, {LEVELS}, sample: {{mass: 1 g, digest: 50 mL}}, spike: {{standard: Mix, delivered: name}}",
            "spike.delivered",
            "R030",
            "(?P<spike>…)",
        ),
        (f"{FLASKS}, {LEVELS}, spike: {{standard: Mix, delivered: bench}}", "spike", "R010", "the mass or the volume"),
        # internal standards
        (
            f"{FLASKS}, {LEVELS}, internal_standard: {{for: {{Cu: Rh}}, entered: in_sample}}",
            "internal_standard.for.Cu",
            "R030",
            "no standard holds 'Cu'",
        ),
        (
            f"{FLASKS}, {LEVELS}, internal_standard: {{for: {{Cd: Pb}}, entered: in_sample}}",
            "internal_standard.for.Cd",
            "R031",
            "rises with the additions",
        ),
        (
            f"{FLASKS}, {LEVELS}, internal_standard: {{for: {{Cd: Rh}}, entered: in_sample, amount: 1 mL}}",
            "internal_standard.amount",
            "R031",
            "say entered: per_vessel",
        ),
    ],
)
def test_refused_with_its_place_and_remedy(preparation: str, path: str, code: str, says: str):
    rules, problems = load_rules(text_of(preparation), "rules.yaml")
    assert rules is None
    (problem,) = [each for each in problems if each.severity == "error"]
    assert (problem.path, problem.code) == (f"preparations[0].{path}".rstrip("."), code), problem
    assert says in problem.sentence
    assert problem.hint or problem.expected


def test_a_standard_must_be_named_where_additions_come_from_elsewhere():
    text = text_of("design: flasks, aliquot: 10 mL, final: 25 mL").replace("spike: Spike", "addition: Added")
    rules, problems = load_rules(text, "rules.yaml")
    assert rules is None
    assert [(each.path, each.code) for each in problems] == [("preparations[0].additions", "R010")]
    assert problems[0].hint == "add additions: {standard: Mix}"


def test_several_standards_in_one_series():
    both = "[{standard: Mix, levels: {1: 0.1 mL, 01: 0.2 mL}}, {standard: Dense, deliveries: each, levels: {1: 1 g}}]"
    rules, problems = load_rules(text_of(f"{FLASKS}, additions: {both}"), "rules.yaml")
    assert rules is None
    assert [each.path for each in problems] == ["preparations[0].additions[0].levels.01"]
    found = read(f"{FLASKS}, additions: {both.replace(', 01: 0.2 mL', '')}")
    assert found.additions == (
        Addition("Mix", {"1": q("0.1 mL")}, "total"),
        Addition("Dense", {"1": q("1 g")}, "each"),
    )
    assert found.levels == {"1"}


def test_amounts_of_the_analyte_itself():
    found = read(f"{FLASKS}, for: {{analyte: Cd}}, additions: {{amounts: {{1: 2.5 ug, 2: 5 nmol}}}}")
    assert found.additions == (Addition("", {"1": q("2.5 ug"), "2": q("5 nmol")}, "total"),)


def test_masses_of_vessels_and_levels_of_their_own():
    found = read(f"design: weighed, aliquot: {{mass: 10 g, levels: {{2: 9.5 g}}}}, final: {{mass: 25 g}}, {LEVELS}")
    assert found.aliquot == {"": q("10 g"), "2": q("9.5 g")}
    assert found.final == {"": q("25 g")}


def test_an_electrode_is_read_in_its_own_units():
    told = "electrode: {charge: -1, slope: -0.0586 V, uncertainty: 300 uV, temperature: 22 °C}"
    assert read(f"{LOG}, {told}").electrode == Electrode(-1, 22.0, -58.6, 0.3)
    assert read(f"{LOG}, electrode: {{charge: 2}}").electrode == Electrode(2)


def test_the_way_back_with_every_key():
    found = read(
        f"{FLASKS}, {LEVELS}, density: 1.1 kg/L, diluent: 5 mL, recovery: {{factor: 0.94, uncertainty: 0.03}}, "
        "sample: {mass: bench, digest: 50 mL, moisture: bench, dilution: [1 + 4, 10]}, "
        "internal_standard: {for: {Cd: Rh}, entered: per_vessel, amount: 100 uL}, "
        "spike: {standard: Dense, delivered: bench, added: after digestion}"
    )
    assert found.sample == SampleRule(mass="bench", digest=q("50 mL"), moisture="bench", dilution=(q("5"), q("10")))
    assert found.recovery == (0.94, 0.03)
    assert found.density == Quantity(Decimal("1.1"), "g/mL")
    assert found.internal_standard == InternalStandard({"Cd": "Rh"}, "per_vessel", q("100 uL"))
    assert found.spike == Spike("Dense", "bench", "after digestion")


def test_a_density_or_a_molar_mass_makes_a_unit_of_the_report_possible():
    assert read(f"{FLASKS}, {LEVELS}, density: 1.02 g/mL, report_in: mg/kg").report_in == "mg/kg"
    assert read(f"{FLASKS}, {LEVELS}, sample: {{density: 1.02 g/mL}}, report_in: mg/kg").report_in == "mg/kg"
    masses = "molar_masses: {Cd: 112.414 g/mol, Pb: 207.2 g/mol}\n"
    assert read(f"{FLASKS}, {LEVELS}, report_in: umol/L", masses).report_in == "umol/L"
    only = read(f"{FLASKS}, for: {{analyte: Cd}}, {LEVELS}, report_in: umol/L", "molar_masses: {Cd: 112.414 g/mol}\n")
    assert only.report_in == "umol/L"
    rules, (problem,) = load_rules(
        text_of(f"{FLASKS}, {LEVELS}, report_in: umol/L", "molar_masses: {Cd: 112.414 g/mol}\n"), "rules.yaml"
    )
    assert rules is None
    assert "give the molar mass of Pb under molar_masses" in problem.sentence


def test_ppm_means_what_the_file_says_that_it_means():
    text = text_of(f"{FLASKS}, {LEVELS}, report_in: ppb").replace("10 mg/L", "10 ppm").replace("50 mg/L", "50.5 ppm")
    rules, problems = load_rules(text, "rules.yaml")
    assert rules is None
    assert {problem.code for problem in problems} == {"R015"}
    assert any("mg/L or mg/kg" in problem.sentence for problem in problems)
    rules, problems = load_rules(f"{text}units: {{ppm: mg/L, ppb: ug/L}}\n", "rules.yaml")
    assert problems == ()
    assert rules is not None
    assert dict(rules.standards["Mix"].contents) == {"Cd": q("10 mg/L"), "Pb": q("50.5 mg/L")}
    assert rules.preparations[0].report_in == "ug/L"


@pytest.mark.parametrize("unit", ["mL", "g/L", "mmol/L", "mg/g"])
def test_ppm_means_a_millionth(unit: str):
    rules, problems = load_rules(text_of(f"{FLASKS}, {LEVELS}", f"units: {{ppm: {unit}}}\n"), "rules.yaml")
    assert rules is None
    assert [(each.path, each.code, each.expected) for each in problems] == [("units.ppm", "R015", "mg/L or mg/kg")]


def test_vet_shows_everything_that_was_declared():
    shown = effective(
        rules_of(
            f"{LOG}, electrode: {{charge: -1, slope: -58.6 mV}}, density: 1.1 g/mL, diluent: 50 mL, "
            "recovery: {factor: 0.94, uncertainty: 0.03}, sample: {mass: bench, digest: 50 mL, dilution: [1 + 4, 10]}, "
            "spike: {standard: Dense, delivered: bench}",
            "molar_masses: {Cd: 112.414 g/mol}\n",
        )
    )
    for line in (
        "molar_masses: {Cd: 112.414 g/mol}",
        "    density: 1.02 g/mL",
        "    response: log",
        "    spiked: test solution  # default",
        "        deliveries: each  # default",
        "      charge: -1",
        "      temperature: 25 Cel  # default",
        "      slope: -58.6 mV",
        "      uncertainty: none  # default",
        "    density: 1.1 g/mL",
        "    diluent: 50 mL",
        "    sample: {mass: bench, digest: 50 mL, dilution: [5, 10]}",
        "    recovery: {factor: 0.94, uncertainty: 0.03}",
        "    spike: {standard: Dense, delivered: bench, added: before digestion}",
    ):
        assert f"\n{line}\n" in shown, line
