"""The door: valid files become rules, defaults hold, the digest tells decisions apart, and nothing else."""

from __future__ import annotations

from decimal import Decimal
from pathlib import Path

import pytest

from spikeward.daemon.rule_file.checks import FROM_RULE_FILE, PackBroken, read_pack, shipped_packs
from spikeward.daemon.rule_file.effective import effective
from spikeward.daemon.rule_file.load import load_file, load_rules
from spikeward.daemon.rule_file.reference import example_text, reference_text
from spikeward.rules.checks.registry import REGISTRY
from spikeward.rules.quantities import Quantity
from spikeward.rules.records import Layout
from spikeward.rules.rulebook import Rulebook, SampleRule, SeriesRule, Watch

HOUSE = Path(__file__).resolve().parents[2]
EXAMPLE = (HOUSE / "config.example.yaml").read_text(encoding="utf-8")

FIRST = r"""
watch: {folder: inbox}
readers:
  readings:
    columns: {solution: Solution, signal: Signal, unit: Unit}
names:
  - {role: sample, match: '(?P<batch>[A-Z]+\d+)_(?P<sample>\d+)_A(?P<level>\d)'}
standards:
  Cd-10: {analyte: Cd, content: 10 mg/L}
preparations:
  design: flasks
  aliquot: 10 mL
  final: 25 mL
  additions: {levels: {0: 0 mL, 1: 0.25 mL, 2: 0.5 mL, 3: 0.75 mL}}
"""


def rules_of(text: str) -> Rulebook:
    rules, problems = load_rules(text, "rules.yaml")
    assert problems == ()
    assert rules is not None
    return rules


def mL(value: str) -> Quantity:
    return Quantity(Decimal(value), "mL")


def test_the_example_has_no_problem():
    rules = rules_of(EXAMPLE)
    assert rules.station == "Estuary bench"
    assert [rule.role for rule in rules.names] == ["process_blank", "background", "reference", "bracket", "sample"]
    assert rules.series.closes_with == ("bracket", "process_blank", "reference")


def test_the_example_and_the_page_are_those_of_the_schema():
    remedy = "run python -m spikeward.daemon.rule_file.reference"
    assert example_text() == EXAMPLE, remedy
    page = (HOUSE / "daemon" / "guide" / "reference.md").read_text(encoding="utf-8")
    assert reference_text() == page, remedy


def test_the_example_fits_a_page():
    assert max(map(len, EXAMPLE.split("\n"))) <= 120


def test_a_first_rule_file_is_short_and_enough():
    assert len(FIRST.strip().split("\n")) <= 20
    rules = rules_of(FIRST)
    assert rules.watches == (Watch("inbox", ("readings",)),)
    columns = {"solution": "Solution", "signal": "Signal", "unit": "Unit"}
    assert rules.layouts == {"readings": Layout("readings", columns=columns)}
    assert rules.series == SeriesRule()
    (preparation,) = rules.preparations
    (addition,) = preparation.additions
    assert addition.standard == "Cd-10"
    assert preparation.aliquot == {"": mL("10")}
    assert addition.levels == {"0": mL("0"), "1": mL("0.25"), "2": mL("0.5"), "3": mL("0.75")}
    assert addition.deliveries == "total"
    assert preparation.line == 11
    assert set(rules.checks) >= {"levels", "response", "residual"}
    assert rules.coverage == 0.95


def test_successive_deliveries_add_up_unless_said_otherwise():
    successive = FIRST.replace("flasks", "successive").replace("  final: 25 mL\n", "")
    assert rules_of(successive).preparations[0].additions[0].deliveries == "each"
    told = successive.replace("additions: {", "additions: {deliveries: total, ")
    assert rules_of(told).preparations[0].additions[0].deliveries == "total"


def test_levels_are_compared_as_numbers():
    text = FIRST.replace("1: 0.25 mL", "01: 0.25 mL").replace(
        "aliquot: 10 mL", "aliquot: {volume: 10 mL, levels: {03: 9 mL}}"
    )
    (preparation,) = rules_of(text).preparations
    assert preparation.levels == {"0", "1", "2", "3"}
    assert preparation.aliquot == {"": mL("10"), "3": mL("9")}


def test_a_report_in_another_unit_needs_no_sample():
    assert rules_of(FIRST).preparations[0].sample is None
    (preparation,) = rules_of(FIRST + "  report_in: ug/L\n").preparations
    assert preparation.sample == SampleRule()
    assert preparation.report_in == "ug/L"
    rules, problems = load_rules(FIRST + "  report_in: mg/kg\n", "rules.yaml")
    assert rules is None
    assert [problem.code for problem in problems] == ["R015"]


def test_names_stay_as_they_are_written():
    text = FIRST.replace("Cd-10:", "012:").replace("analyte: Cd", "analyte: no")
    rules = rules_of(text)
    assert dict(rules.standards["012"].contents) == {"no": Quantity(Decimal(10), "mg/L")}


def test_references_state_a_standard_uncertainty():
    rules = rules_of(EXAMPLE)
    assert rules.references["MUD-1"]["Cd"].standard_uncertainty == pytest.approx(0.16 / 2)
    assert rules.references["MUD-2"]["Cd"].standard_uncertainty == pytest.approx(0.71 * 0.05 / 2)
    assert rules.references["MUD-2"]["Pb"].standard_uncertainty is None
    in_ug = EXAMPLE.replace("uncertainty: 0.16 mg/kg", "uncertainty: 160 ug/kg")
    assert rules_of(in_ug).references["MUD-1"]["Cd"].standard_uncertainty == pytest.approx(0.08)


def test_limits_of_the_rule_file_replace_those_of_the_pack():
    checks = rules_of(EXAMPLE).checks
    assert checks["correlation"].values == {"fail_below": 0.995}
    assert checks["correlation"].sources == {"fail_below": FROM_RULE_FILE}
    assert checks["expanded_uncertainty"].values["warn_above"] == 0.2
    assert checks["expanded_uncertainty"].sources["fails_from_vessels"].startswith("theory")
    assert checks["reference"].values["fail_outside"] == (0.8, 1.2)


def test_a_check_can_be_left_out_and_a_limit_taken_away():
    text = FIRST + "checks: {curvature: off, residual: {fail_above: none}, span: {warn_outside: none}}\n"
    checks = rules_of(text).checks
    assert "curvature" not in checks
    assert checks["residual"].values["fail_above"] is None
    assert checks["residual"].values["warn_above"] == 0.05
    assert checks["span"].values["warn_outside"] is None


def test_the_shipped_packs_name_checks_that_exist_and_a_source_for_every_limit():
    assert "general" in shipped_packs()
    for name, text in shipped_packs().items():
        pack = read_pack(text, name)
        assert set(pack) <= set(REGISTRY)
        assert all(limit.source for limits in pack.values() for limit in limits.values())


@pytest.mark.parametrize(
    "text",
    ["", "levels: {warn_below: 4}", "levels: {warn_below: {value: 4}}", "levels: {warn_below: {value: x, source: y}}"],
)
def test_a_broken_pack_is_refused_with_its_place(text: str):
    with pytest.raises(PackBroken, match="mine"):
        read_pack(text, "mine")
    rules, problems = load_rules(FIRST + "checks: {use: pack:mine}\n", "rules.yaml", {"mine": text})
    assert rules is None
    assert problems[0].code == "R030"


def test_the_digest_covers_decisions_and_nothing_else():
    digest = rules_of(EXAMPLE).digest
    same = [
        EXAMPLE.replace("\nseries:", "\n# a comment\n\nseries:"),
        EXAMPLE.replace("state: .spikeward", "state: elsewhere"),
        EXAMPLE.replace("folder: inbox", "folder: other"),
        EXAMPLE.replace("settle: 2 s", "settle: 9 s"),
        EXAMPLE.replace("output: beside", "output: results"),
        EXAMPLE.replace("lapses_after: 90 min", "lapses_after: 1.5 h"),
        EXAMPLE.replace("{Cd: 20 ug/L, Pb: 100 ug/L}", "{Pb: 100 µg/L, Cd: 20 μg/L}"),
        "\n".join(reversed(EXAMPLE.split("\n\n"))),
    ]
    assert {rules_of(text).digest for text in same} == {digest}
    other = [
        ("Estuary bench", "Other bench"),
        ("10.02 mg/L", "10.03 mg/L"),
        ("aliquot: 10 mL", "aliquot: 9 mL"),
        ("coverage: 95 %", "coverage: 99 %"),
        ("fail_below: 0.995", "fail_below: 0.99"),
        ("readings: 2 ", "readings: 1 "),
        ("top: 0.80", "top: 0.81"),
        ("Cd: 20 ug/L", "Cd: 21 ug/L"),
        ("uncertainty: 0.16", "uncertainty: 0.17"),
        ("signal: Signal", "signal: Absorbance"),
        ("decisions: decisions.yaml", "decisions: mine.yaml"),
        ("mass: Mass", "mass: Weight"),
        ("lot: EB-24-017", "lot: EB-24-018"),
    ]
    digests = {rules_of(EXAMPLE.replace(*each, 1)).digest for each in other}
    assert len(digests) == len(other)
    assert digest not in digests


def test_the_digest_follows_the_pack():
    text = shipped_packs()["general"]
    edited = text.replace("value: 0.05", "value: 0.06")
    one, _ = load_rules(FIRST, "rules.yaml", {"general": text})
    other, _ = load_rules(FIRST, "rules.yaml", {"general": edited})
    assert one is not None
    assert other is not None
    assert one.digest == rules_of(FIRST).digest != other.digest


def test_everything_in_force_is_shown_with_its_defaults_marked():
    shown = effective(rules_of(EXAMPLE)).split("\n")
    assert "  lapses_after: 90 min  # default" in shown
    assert "    readings: 2" in shown
    assert "    fail_below: 0.995" in shown
    assert any(line.startswith("    fail_above: 1  # theory") for line in shown)
    first = effective(rules_of(FIRST)).split("\n")
    assert "    levels: those of the preparation  # default" in first
    for name in REGISTRY:
        if name in rules_of(FIRST).checks:
            assert any(line.startswith(f"  {name}:") for line in first), name


def test_every_default_of_a_reader_is_the_records_own():
    """Two places say what a reader is when nothing is said: the schema and the record."""
    layout = rules_of(FIRST).layouts["readings"]
    for key in Layout.__dataclass_fields__:
        if key not in ("name", "columns"):
            assert getattr(layout, key) == getattr(Layout("x"), key), key


def test_a_file_is_read_from_its_place(tmp_path: Path):
    place = tmp_path / "rules.yaml"
    place.write_bytes(b"\xef\xbb\xbf" + FIRST.replace("\n", "\r\n").encode())
    rules, problems = load_file(place)
    assert problems == ()
    assert rules is not None
    assert rules.digest == rules_of(FIRST).digest


def test_a_file_that_is_not_utf_8_says_where(tmp_path: Path):
    place = tmp_path / "rules.yaml"
    place.write_bytes("station: bench\n# Säure\n".encode("cp1252"))
    rules, problems = load_file(place)
    assert rules is None
    assert problems[0].line_text() == ("rules.yaml:2:4: R002 byte 19 is not UTF-8; save the rule file as UTF-8")


def test_a_file_of_50_mb_is_not_read_whole(tmp_path: Path):
    place = tmp_path / "rules.yaml"
    with place.open("wb") as file:
        file.truncate(50 << 20)
    rules, problems = load_file(place)
    assert rules is None
    assert "larger than 1 MiB" in problems[0].sentence


def test_an_empty_file_says_how_to_begin():
    for text in ("", "# only a comment\n"):
        rules, problems = load_rules(text, "rules.yaml")
        assert rules is None
        assert problems[0].line_text() == "rules.yaml:1:1: R010 the rule file is empty; begin with watch:"


def test_all_problems_are_told_together():
    text = FIRST.replace("10 mg/L", "10 ppm").replace("flasks", "flask").replace("signal: ", "sgnal: ")
    rules, problems = load_rules(text + "serie: {lapsed: maybe}\n", "rules.yaml")
    assert rules is None
    assert [(p.code, p.line) for p in problems] == [("R012", 5), ("R015", 9), ("R016", 11), ("R012", 15), ("R016", 15)]


def test_a_flood_of_problems_is_cut():
    text = "".join(f"zzz{n}: 1\n" for n in range(5000))
    rules, problems = load_rules(text, "rules.yaml")
    assert rules is None
    assert len(problems) == 100
