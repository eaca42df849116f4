"""`vet` through the command line: what lies in the watched folders is read, and what is wrong there is said."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from spikeward.daemon.cli import main

RULES = r"""
watch: {folder: inbox, settle: 0 s}
readers: {readings: {files: "*.csv", decimal: point, columns: {solution: Solution, signal: Signal}, unit: A}}
bench: {files: "*.bench", key: {sample: Sample}, columns: {mass: Mass}}
names:
  - {role: sample, match: '(?P<batch>N\d+)_(?P<sample>\d+)_?(?P<level>[A-Z]|\d+)'}
standards: {Cd-10: {analyte: Cd, content: 10 mg/L}}
preparations:
  design: flasks
  aliquot: 10 mL
  final: 25 mL
  additions: {levels: {0: 0 mL, 1: 0.25 mL, 2: 0.5 mL, 3: 0.75 mL}}
"""
EXPORT = "Solution,Signal\nN1_07_0,0.1012\nN1_07_1,0.2007\nN1_07_2,0.3031\nN1_07_3,0.4019\n"
REPEATED = "Solution,Wdh,Signal\nN1_07_0,1,0.101\nN1_07_0,2,0.102\nN1_07_1,1,0.201\nN1_07_1,2,0.203\n"


class Bench:
    def __init__(self, path: Path, capsys: pytest.CaptureFixture[str]) -> None:
        self.inbox = path / "inbox"
        self.inbox.mkdir()
        self.rules = path / "rules.yaml"
        self.rules.write_text(RULES)
        self._capsys = capsys

    def put(self, name: str, text: str) -> None:
        (self.inbox / name).write_text(text)

    def edit(self, old: str, new: str) -> None:
        text = self.rules.read_text()
        assert old in text
        self.rules.write_text(text.replace(old, new))

    def run(self, *options: str, command: str = "vet") -> tuple[int, list[str]]:
        code = main([command, str(self.rules), *options])
        return code, self._capsys.readouterr().out.splitlines()


@pytest.fixture
def bench(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> Bench:
    return Bench(tmp_path, capsys)


def test_no_file_yet_is_no_fault(bench: Bench):
    code, lines = bench.run()
    assert code == 0
    assert lines[-1] == f"{bench.rules}: usable."


def test_the_last_line_counts_what_could_be_read(bench: Bench):
    bench.put("run.csv", EXPORT)
    code, lines = bench.run()
    assert (code, lines[-1]) == (0, f"{bench.rules}: usable; 1 file in inbox could be read.")
    bench.put("bad.csv", "Probe,Ext\nX,1\n")
    code, lines = bench.run()
    assert (code, lines[-1]) == (0, f"{bench.rules}: usable; 1 of 2 files in inbox could not be read.")
    assert any(line.startswith("  bad.csv: no row holds the headings 'Solution', 'Signal'") for line in lines)
    names, defaults = "  'N1_07_0': sample: batch N1, sample 07, level 0", "In force, with every default:"
    assert lines.index(names) < lines.index(defaults) < len(lines) - 1


def test_it_is_no_success_when_no_export_can_be_read(bench: Bench):
    for number in range(8):
        bench.put(f"run{number}.csv", "Probe,Ext\nX,1\n")
    bench.put("masses.bench", "Sample,Mass\n07,0.5 g\n")
    code, lines = bench.run("--short")
    assert (code, lines[-1]) == (1, f"{bench.rules}: usable; 8 of 9 files in inbox could not be read.")
    assert len(lines) == 9
    assert lines[0].startswith("inbox/run0.csv: ")


def test_an_export_without_its_end_marker_is_not_finished(bench: Bench):
    bench.edit("decimal: point, ", "decimal: point, end_marker: End, ")
    bench.put("run.csv", EXPORT)
    code, lines = bench.run("--short")
    assert code == 1
    assert lines[0] == "inbox/run.csv: it is not finished: the last line does not begin with 'End' yet"


def test_bench_files_and_decisions_are_looked_at(bench: Bench):
    bench.put("run.csv", EXPORT)
    bench.put("masses.bench", "Sample,Mass\n07,heavy\n")
    bench.put("decisions.yaml", "- {exclude: N1_07_3, on: 2030-03-02, why: cracked}\n")
    code, lines = bench.run("--short")
    assert (code, lines[-1]) == (0, f"{bench.rules}: usable; 2 of 3 files in inbox could not be read.")
    assert lines[:-1] == [
        "inbox/decisions.yaml:1: 'by' is missing; a decision says who (by), when (on) and why",
        "inbox/masses.bench: row 2, column Mass: 'heavy' is not a number; correct it, or declare the word under "
        "not_detected or over_range",
    ]
    (bench.inbox / "decisions.yaml").write_bytes(b"- \xff\n")
    assert "inbox/decisions.yaml: it is not UTF-8; save it as UTF-8" in bench.run("--short")[1]


def test_rows_that_nothing_tells_apart_are_warned_of(bench: Bench):
    bench.put("run.csv", REPEATED)
    code, lines = bench.run("--short")
    assert (code, lines[-1]) == (0, f"{bench.rules}: usable, 1 warning; 1 file in inbox could be read.")
    assert lines[0] == (
        "inbox/run.csv: warning: 'N1_07_0' stands 2 times (rows 2 and 3), and 1 more such solution, and nothing tells "
        "these readings apart; if they are repeated readings, say same_name: reading under series, or declare the "
        "column of their number as reading: under columns"
    )


@pytest.mark.parametrize("old_and_new", [("signal: Signal", "signal: Signal, reading: Wdh"),
                                         ("names:", "series: {same_name: reading}\nnames:")])  # fmt: skip
def test_repeated_rows_are_averaged_by_either_way(bench: Bench, old_and_new: tuple[str, str]):
    bench.put("run.csv", REPEATED + "N1_07_2,1,0.301\nN1_07_3,1,0.402\n")
    bench.edit(*old_and_new)
    assert bench.run("--short") == (0, [f"{bench.rules}: usable; 1 file in inbox could be read."])
    bench.run(command="sweep")
    points = json.loads((bench.inbox / "N1_07.result.json").read_text())["results"][0]["points"]
    assert [(point["readings"], point["signal"]) for point in points][:2] == [(2, 0.1015), (2, 0.202)]


def test_letters_may_name_the_levels_of_a_single_addition(bench: Bench):
    bench.edit("design: flasks", "design: single\n  level_0: undiluted")
    bench.edit("{0: 0 mL, 1: 0.25 mL, 2: 0.5 mL, 3: 0.75 mL}", "{A: 0.5 mL, B: 0 mL}")
    bench.put("run.csv", "Solution,Signal\nN1_07A,0.300\nN1_07B,0.250\n")
    assert bench.run("--short")[0] == 0
    bench.run(command="sweep")
    result = (bench.inbox / "N1_07.result.json").read_text()
    # B, read as it is: 0.250 = b c. A: 0.300 = b (10 c + 0.5 mL x 10 mg/L) / 25 mL, so c = 0.25 * 5 / 5.
    assert '"content": 0.25' in result
