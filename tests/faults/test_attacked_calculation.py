"""A hostile night through a real process: sentences and verdicts; no traceback, no warning, no number that is none."""

from __future__ import annotations

import json
import os
import re
import subprocess
import sys
from importlib.resources import files
from pathlib import Path

import jsonschema
import pytest
from processes import Station

from spikeward.daemon.rule_file.load import load_rules

HEAD = "Solution,Element,Line,Run,Signal,Measured\n"
RULES = r"""station: Made-up bench
watch: {folder: inbox, settle: 1 s, events: poll}
readers:
  counts:
    files: "*.csv"
    columns: {solution: Solution, analyte: Element, line: Line, block: Run, signal: Signal, measured_at: Measured}
    unit: cps
    time_zone: Europe/Berlin
    not_detected: ["<LOD"]
    over_range: [OVER]
names:
  - {role: background, match: '(?P<batch>N\d+)_BG(?P<sample>\d+)'}
  - {role: bracket, match: '(?P<batch>N\d+)_BR(?P<sample>\d+)'}
  - {role: calibration, match: '(?P<batch>N\d+)_S(?P<sample>\d+)'}
  - {role: reagent_blank, match: '(?P<batch>N\d+)_RB(?P<sample>\d+)_A(?P<level>\d+)'}
  - {role: duplicate, match: '(?P<batch>N\d+)_D(?P<sample>\d+)_A(?P<level>\d+)'}
  - {role: spiked_sample, match: '(?P<batch>N\d+)_X(?P<sample>\d+)_A(?P<level>\d+)'}
  - {role: sample, match: '(?P<batch>N\d+)_(?P<sample>\d+)of(?P<rerun_of>\d+)_A(?P<level>\d+)'}
  - {role: sample, match: '(?P<batch>N\d+)_(?P<sample>\d+)_A(?P<level>\d+)'}
standards:
  Mix: {contents: {Cd: 10 mg/L}}
preparations:
  - design: flasks
    aliquot: 5 mL
    final: 25 mL
    additions: {levels: {0: 0 mL, 1: 0.25 mL, 2: 0.5 mL, 3: 0.75 mL}}
    internal_standard: {for: {Cd: Rh}, entered: at_constant_content}
    sample: {mass: 1 g, digest: 50 mL}
    spike: {standard: Mix, delivered: 5 mL, added: before digestion}
    report_in: mg/kg
brackets: {contents: {Cd: 0.2 mg/L}, drift: correct}
blanks: {background: {subtract: signal}, reagent: {subtract: amount}}
calibration: {contents: {0: {Cd: 1 mg/L}, 1: {Cd: 1 mg/L}, 2: {Cd: 1 mg/L}}}
range: {Cd: {top: 4000, unit: cps}}
"""
PRECISION = {
    "own": "",
    "pooled": "precision: pooled\n",
    "declared": "precision: {from: declared, noise: {Cd: {floor: 1e-300, relative: 1 %, unit: cps}}}\n",
}
ODD = ("0", "-0", "4.9e-324", "1e-320", "1e-154", "-5", "1e154", "1e308", "-1e308", "<LOD", "OVER", "")
HOSTILE = ("<script>alert(1)</script>", "\u202egnp.exe", "=cmd|' /C calc'!A0", "a\nb", "x" * 255, "1,5")
NO_NUMBER = re.compile(r"(?<![A-Za-z_.])(nan|inf|infinity|NaN|Infinity)(?![A-Za-z_])")


class Export:
    """One file a batch; every reading may be turned into something odd."""

    def __init__(self, batch: str, odd: str, every: int, hostile: str) -> None:
        self._batch, self._odd, self._every, self._name = batch, odd, every, hostile.replace('"', '""')
        self._rows: list[str] = []

    def read(self, solution: str, signal: float, run: str = "1") -> None:
        """The analyte at one line, and its internal standard, a minute after what came before."""
        at = len(self._rows)
        for element, value in (("Cd", f"{signal:.6g}"), ("Rh", "500")):
            text = self._odd if self._every and (len(self._rows) + 1) % self._every == 0 else value
            self._rows.append(
                f'{self._batch}_{solution},{element},"{self._name}","{run}{self._name}",{text},'
                f"2031-03-02T{18 + at // 60:02d}:{at % 60:02d}:00\n"
            )

    def series(self, name: str, content: float, runs: bool = False) -> None:
        """Four levels; the upper two in another run, if asked."""
        for level in range(4):
            run = "2" if runs and level > 1 else "1"
            self.read(f"{name}_A{level}", 1000.0 * content + 500.0 * level + (-1.0) ** level, run)

    def content(self) -> bytes:
        """The file."""
        return (HEAD + "".join(self._rows)).encode()


def night(batch: str, odd: str, every: int, hostile: str) -> bytes:
    export = Export(batch, odd, every, hostile)
    export.read("BR1", 1000.0)
    for number in range(3):
        export.read(f"S{number}", 2500.0 * number)
    export.read("BG1", 10.0)
    export.read("BG2", 11.0)
    export.series("RB1", 0.01)
    export.series("1", 1.0)
    export.series("2", 1.2, runs=True)
    export.series("3of4", 0.5)
    export.series("4of3", 0.9)
    export.read("BR2", 1010.0)
    export.series("D1", 1.02)
    export.series("X2", 2.2)
    export.read("BR3", 1020.0)
    return export.content()


@pytest.mark.parametrize("precision", PRECISION)
def test_a_hostile_night(tmp_path: Path, precision: str) -> None:
    station = Station(tmp_path / "home", RULES + PRECISION[precision])
    for number, odd in enumerate(ODD):
        every = (1, 3, 7)[(number + list(PRECISION).index(precision)) % 3]
        station.put(f"N{number}.csv", night(f"N{number}", odd, every, HOSTILE[number % len(HOSTILE)]))
    station.put("N1000.csv", night("N1000", "", 0, ""))
    done = subprocess.run(
        [sys.executable, "-W", "error::RuntimeWarning", "-m", "spikeward.daemon.cli", "sweep", "rules.yaml", "--close"],
        cwd=station.home, env=dict(os.environ), capture_output=True, text=True, timeout=240, check=False,
    )  # fmt: skip
    assert done.returncode == 1, done.stderr[-2000:]
    assert "Traceback" not in done.stdout + done.stderr
    assert "Warning" not in done.stdout + done.stderr
    results = sorted(station.out.rglob("*.result.json"))
    assert len(results) == 7 * (len(ODD) + 1)
    for path in results:
        holds_together(path)
    for path in [*station.out.rglob("*.flag"), *station.out.rglob("*.results.csv"), *station.out.rglob("*.html")]:
        assert NO_NUMBER.search(_shown(path)) is None, path.name
    good = json.loads((station.out / "N1000_1.result.json").read_text())
    assert good["verdict"] == "pass"


SCHEMA = jsonschema.Draft202012Validator(
    json.loads((files("spikeward.daemon.schema") / "result.schema.json").read_text(encoding="utf-8"))
)


def holds_together(path: Path) -> None:
    """By the schema, without anything that is no number, and no pass without a number."""
    found = json.loads(path.read_text(encoding="utf-8"), parse_constant=pytest.fail)
    SCHEMA.validate(found)
    for result in found["results"]:
        if result["content"] is None:
            assert result["no_number"]
            assert result["verdict"] != "pass", path.name
        else:
            assert result["unit"]
            assert result["expanded_uncertainty"] is not None or result["uncertainty_reason"]
    assert found["results"] or found["verdict"] != "pass"


def _shown(path: Path) -> str:
    text = path.read_text(encoding="utf-8")
    return re.sub(r"<[^>]+>", " ", re.sub(r"(?s)<style.*?</style>", "", text)) if path.suffix == ".html" else text


@pytest.mark.parametrize(
    ("overlap", "told"),
    [
        ("{method: h_point, analytes: [Cd], at: [Cd 1]}", "h_point takes one analyte and two lines"),
        ("{method: h_point, analytes: [Cd], at: [Cd 1, Cd 2, Cd 3]}", "h_point takes one analyte and two lines"),
        ("{method: generalised, analytes: [Cd], at: []}", "generalised takes as many lines as analytes"),
        ("{method: generalised, analytes: [], at: [Cd 1]}", "stands there twice, or none does"),
        ("{method: generalised, analytes: [Cd], at: [Cd 1, Cd 1]}", "stands there twice, or none does"),
        ("{method: generalised, analytes: [Cd, Zz], at: [Cd 1, Zz 1]}", "no standard holds 'Zz'"),
        ("{method: h_point, analytes: [Cd], at: [Cd 1, Pb 2]}", "'Pb 2' is no line of Cd"),
    ],
)
def test_an_overlap_that_cannot_be_solved_is_refused_with_its_place(overlap: str, told: str) -> None:
    rules, problems = load_rules(f"{RULES}overlap: [{overlap}]\n", "rules.yaml")
    assert rules is None
    found = [problem for problem in problems if told in problem.found]
    assert found
    assert all(problem.path.startswith("overlap[0]") and problem.line > 1 for problem in found)


def test_an_overlap_that_goes_together() -> None:
    for overlap in ("h_point, analytes: [Cd], at: [Cd 1, Cd 2]", "generalised, analytes: [Cd], at: [Cd 1, Cd 2, Cd 3]"):
        _, problems = load_rules(f"{RULES}overlap: [{{method: {overlap}}}]\n", "rules.yaml")
        assert [problem for problem in problems if "overlap" in problem.path] == []
