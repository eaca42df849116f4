"""What a rule file says of signals against itself: reagents, drift, vessels below detection, precision."""

from __future__ import annotations

import pytest

from spikeward.daemon.rule_file.load import load_rules
from spikeward.daemon.rule_file.problems import ERROR, Problem

SMALL = r"""
watch: {folder: inbox}
readers:
  icp: {columns: {solution: Name, analyte: El, signal: cps, measured_at: When}, unit: cps}
names:
  - {role: bracket, match: 'BR(?P<sample>\d+)'}
  - {role: sample, match: '(?P<sample>\d+)_(?P<level>\d+)'}
standards: {Mix: {contents: {Cd: 10 mg/L, Pb: 50 mg/L}}}
preparations:
  - {design: flasks, aliquot: 10 mL, final: 25 mL, additions: {levels: {0: 0 mL, 1: 0.25 mL, 2: 0.5 mL}}}
"""
OWN = r"  - {role: reagent_blank, match: 'RB(?P<sample>\d+)_(?P<level>\d+)'}" + "\nstandards:"


def problems_of(more: str, *edits: tuple[str, str]) -> tuple[Problem, ...]:
    text = SMALL + more
    for old, new in edits:
        assert old in text, old
        text = text.replace(old, new)
    return load_rules(text, "rules.yaml")[1]


def reagent(amounts: str = "") -> str:
    return f"blanks: {{reagent: {{subtract: amount{', amounts: {' + amounts + '}' if amounts else ''}}}}}\n"


BOTH = "Cd: 0.5 ng, Pb: {amount: 2 ng, uncertainty: 0.1 ng}"


@pytest.mark.parametrize(
    ("more", "edits"),
    [
        (reagent(BOTH), []),
        (reagent("Cd: 0.5 ng"), [("standards:", OWN)]),
        (reagent(), [("standards:", OWN)]),
        (reagent("Cd: 3 nmol, Pb: 1 ng") + "molar_masses: {Cd: 112.414 g/mol}\n", []),
        ("brackets: {contents: {Cd: 20 ug/L}, drift: correct}\n", []),
        ("brackets: {contents: {Cd: 20 ug/L}, drift: correct}\n", [("measured_at: When", "order: No")]),
        ("below_detection: leave out\n", []),
        ("below_detection: {use: substitute, signals: {Cd: {signal: 12, unit: cps}}}\n", []),
        ("precision: pooled\n", []),
        ("precision: {from: declared, noise: {Cd: {floor: 8, relative: 1 %, unit: cps}}}\n", []),
        (
            "precision: {from: declared, noise: {Cd 214: {floor: 8, unit: cps}}}\n",
            [("signal: cps, ", "signal: cps, line: Line, ")],
        ),
    ],
)
def test_what_goes_together(more, edits):
    assert problems_of(more, *edits) == ()


@pytest.mark.parametrize(
    ("more", "edits", "code", "path", "says"),
    [
        (reagent("Cd: 0.5 ng, Pbb: 1 ng"), [], "R030", "blanks.reagent.amounts.Pbb", "did you mean Pb?"),
        (reagent("Cd: 3 nmol, Pb: 1 ng"), [], "R015", "blanks.reagent.amounts.Cd", "molar_masses: {Cd:"),
        (
            reagent("Cd: {amount: 3 ng, uncertainty: 1 nmol}, Pb: 1 ng"),
            [],
            "R015",
            "blanks.reagent.amounts.Cd.uncertainty",
            "give both in one unit",
        ),
        (reagent(), [], "R030", "blanks.reagent", "nothing says what the reagents hold of Cd or Pb"),
        (reagent("Cd: 1 ng"), [], "R030", "blanks.reagent", "nothing says what the reagents hold of Pb"),
        (
            "brackets: {contents: {Cd: 20 ug/L}, drift: correct}\n",
            [(", measured_at: When", "")],
            "R010",
            "brackets.drift",
            "reads neither times nor an order",
        ),
        ("below_detection: substitute\n", [], "R010", "below_detection", "add signals:"),
        (
            "below_detection: {use: leave out, signals: {Cd: {signal: 12, unit: cps}}}\n",
            [],
            "R031",
            "below_detection.signals",
            "say use: substitute",
        ),
        (
            "below_detection: {use: substitute, signals: {Pbb: {signal: 12, unit: cps}}}\n",
            [],
            "R030",
            "below_detection.signals.Pbb",
            "did you mean Pb?",
        ),
        ("precision: declared\n", [], "R010", "precision", "add noise:"),
        (
            "precision: {from: own, noise: {Cd: {floor: 8, unit: cps}}}\n",
            [],
            "R031",
            "precision.noise",
            "say from: declared",
        ),
        (
            "precision: {from: declared, noise: {Cd 214: {floor: 8, unit: cps}}}\n",
            [],
            "R030",
            "precision.noise.Cd 214",
            "no line of a reader",
        ),
    ],
)
def test_what_contradicts_itself(more, edits, code, path, says):
    (problem,) = problems_of(more, *edits)
    assert (problem.code, problem.path, problem.severity) == (code, path, ERROR)
    assert says in problem.line_text()


@pytest.mark.parametrize(
    ("more", "edits", "path"),
    [
        (reagent(BOTH), [("standards:", OWN)], "blanks.reagent"),
        (
            "brackets: {contents: {Cd: 20 ug/L}, drift: correct}\n",
            [("unit: cps}\nnames", "unit: cps, already: drift}\nnames")],
            "brackets.drift",
        ),
    ],
)
def test_what_is_declared_and_not_used_is_a_warning(more, edits, path):
    (problem,) = problems_of(more, *edits)
    assert (problem.code, problem.path, problem.severity) == ("R041", path, "warning")


def test_a_wide_reader_names_its_lines():
    wide = "wide: {Cd 214 (cps): {analyte: Cd, line: Cd 214}, Pb (cps): Pb}, "
    edits = [("columns: {solution: Name, analyte: El, signal: cps, measured_at: When}, ",
              "columns: {solution: Name, measured_at: When}, " + wide)]  # fmt: skip
    noise = "precision: {{from: declared, noise: {{{}: {{floor: 8, unit: cps}}}}}}\n"
    assert problems_of(noise.format("Cd 214"), *edits) == ()
    (problem,) = problems_of(noise.format("Cd 215"), *edits)
    assert "did you mean Cd 214?" in problem.line_text()
