"""`sweep` on small folders, through the command line: rules edited after a closing, names mended, files taken away."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from spikeward.daemon import solving
from spikeward.daemon.cli import main
from spikeward.rules.evaluate import evaluate

RULES = r"""
watch: {folder: inbox, settle: 0 s}
readers: {readings: {files: "*.csv", decimal: point, columns: {solution: Solution, signal: Signal}, unit: A}}
names:
  - {role: sample, match: '(?P<batch>N\d+)_(?P<sample>\d+)_A(?P<level>\d+)'}
standards: {Cd-10: {analyte: Cd, content: 10 mg/L}}
preparations:
  design: flasks
  aliquot: 10 mL
  final: 25 mL
  additions: {levels: {0: 0 mL, 1: 0.25 mL, 2: 0.5 mL, 3: 0.75 mL}}
  sample: {mass: 0.5 g, digest: 50 mL}
  report_in: mg/kg
"""
EXPORT = "Solution,Signal\nN1_07_A0,0.1012\nN1_07_A1,0.2007\nN1_07_A2,0.3031\nN1_07_A3,0.4019\n"


class Home:
    def __init__(self, path: Path) -> None:
        self.path = path
        self.inbox = path / "inbox"
        self.inbox.mkdir()
        self.rules = path / "rules.yaml"
        self.rules.write_text(RULES)
        (self.inbox / "run.csv").write_text(EXPORT)

    def edit(self, old: str, new: str) -> None:
        text = self.rules.read_text()
        assert old in text
        self.rules.write_text(text.replace(old, new))

    def sweep(self, *options: str) -> int:
        return main(["sweep", str(self.rules), *options])

    def ours(self) -> list[str]:
        return sorted(path.name for path in self.inbox.iterdir() if path.suffix not in (".csv",))

    def content(self, stem: str = "N1_07") -> float:
        result = json.loads((self.inbox / f"{stem}.result.json").read_text())
        return result["results"][0]["in_sample"]["content"]


@pytest.fixture
def home(tmp_path: Path) -> Home:
    return Home(tmp_path)


def test_a_first_sweep_and_its_exit_code(home: Home, capsys: pytest.CaptureFixture[str]):
    assert home.sweep() == 0
    assert home.ours() == ["N1.board.html", "N1_07.pass.flag", "N1_07.result.json", "N1_07.summary.html"]
    assert "batch N1: 1 pass (closed)" in capsys.readouterr().out


def test_a_rule_mended_after_the_closing_changes_nothing_until_it_is_asked_for(
    home: Home, capsys: pytest.CaptureFixture[str]
):
    home.sweep()
    before = home.content()
    home.edit("digest: 50 mL", "digest: 100 mL")
    home.sweep()
    assert home.content() == before
    assert f"spikeward sweep {home.rules} --again" in capsys.readouterr().out
    home.sweep("--again")
    assert home.content() == pytest.approx(2 * before, rel=1e-11)
    assert "--again" not in capsys.readouterr().out
    kept = sorted((home.path / ".spikeward" / "rules").iterdir())
    assert len(kept) == 2
    assert {"50 mL" in text.read_text() for text in kept} == {True, False}


def test_a_batch_name_that_is_misspelt_is_a_sentence(home: Home, capsys: pytest.CaptureFixture[str]):
    home.sweep()
    assert home.sweep("--again", "NOPE") == 2
    assert "no closed batch is called so; closed are: N1" in capsys.readouterr().err


def test_a_series_that_is_named_anew_leaves_no_flag_behind(home: Home):
    home.sweep()
    home.edit(r"(?P<sample>\d+)", r"0(?P<sample>\d)")
    home.sweep("--again")
    assert home.ours() == [
        "N1.board.html", "N1_07.result.json.kept-1", "N1_07.summary.html.kept-1", "N1_7.pass.flag", "N1_7.result.json",
        "N1_7.summary.html",
    ]  # fmt: skip


def test_a_batch_without_a_series_does_not_close(home: Home):
    home.edit(r"_A(?P<level>", r"_B(?P<level>")
    home.edit("names:", "names:\n  - {role: background, match: '(?P<batch>N\\d+)_BLK'}")
    home.edit("preparations:", "blanks: {background: {subtract: signal}}\npreparations:")
    (home.inbox / "blank.csv").write_text("Solution,Signal\nN1_BLK,0.001\n")
    assert home.sweep("--close") == 1
    home.edit(r"_B(?P<level>", r"_A(?P<level>")
    assert home.sweep("--close") == 0
    assert "N1_07.pass.flag" in home.ours()


def test_the_board_of_a_folder_goes_when_it_has_nothing_left_to_say(home: Home):
    home.edit("decimal: point", "decimal: comma")
    assert home.sweep() == 1
    assert home.ours() == ["folder.board.html", "run.csv.unread.flag"]
    home.edit("decimal: comma", "decimal: point")
    assert home.sweep() == 0
    assert home.ours() == ["N1.board.html", "N1_07.pass.flag", "N1_07.result.json", "N1_07.summary.html"]


def test_deleting_raw_data_retracts_nothing(home: Home, capsys: pytest.CaptureFixture[str]):
    (home.inbox / "late.csv").write_text("Solution,Signal\nN1_08_A0,0.1\nN1_08_A1,0.2\nN1_08_A2,0.3\nN1_08_A3,0.41\n")
    home.sweep()
    flag = (home.inbox / "N1_07.pass.flag").read_bytes()
    (home.inbox / "run.csv").unlink()
    assert home.sweep() in (0, 1)
    assert (home.inbox / "N1_07.pass.flag").read_bytes() == flag


def test_what_a_person_deletes_comes_back_and_what_a_person_edits_is_kept_aside(home: Home):
    home.sweep()
    flag, summary = home.inbox / "N1_07.pass.flag", home.inbox / "N1_07.summary.html"
    wanted = flag.read_bytes()
    flag.unlink()
    summary.write_text("my notes")
    home.sweep()
    assert flag.read_bytes() == wanted
    assert (home.inbox / "N1_07.summary.html.kept-1").read_text() == "my notes"
    assert "my notes" not in summary.read_text()


@pytest.mark.parametrize(
    "arguments",
    [["sweep"], ["sweep", "--clos"], ["watch"], ["vet", "a", "b"], ["explain", "a"], ["demo"], ["nonsense"], []],
)
def test_wrong_arguments_are_a_usage_sentence(arguments: list[str], capsys: pytest.CaptureFixture[str]):
    with pytest.raises(SystemExit) as ended:
        main(arguments)
    assert ended.value.code == 2
    assert "usage:" in capsys.readouterr().err


@pytest.mark.parametrize("command", ["sweep", "watch", "vet"])
def test_a_rule_file_that_is_not_there(command: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]):
    assert main([command, str(tmp_path / "none.yaml")]) == 2
    assert "there is no such rule file" in capsys.readouterr().err


def test_explain_names_the_series_that_there_are(home: Home, capsys: pytest.CaptureFixture[str]):
    assert main(["explain", str(home.rules), "N9_99"]) == 2
    assert "the series are: N1_07" in capsys.readouterr().err
    assert main(["explain", str(home.rules), str(home.inbox / "run.csv")]) == 0
    assert "'N1_07_A3' is role sample, batch N1, sample 07, level 3" in capsys.readouterr().out
    assert main(["explain", str(home.rules), "N1_07"]) == 0
    assert home.ours() == []  # it looks only


def test_decisions_that_are_refused_are_told_once(home: Home, capsys: pytest.CaptureFixture[str]):
    (home.inbox / "decisions.yaml").write_text("- {exclude: N1_07_A3, by: N. Invented, why: flask was cracked}\n")
    assert home.sweep() == 1
    told = [line for line in capsys.readouterr().out.splitlines() if "decision" in line]
    assert len(told) == 1
    assert told[0].startswith("decision: decisions.yaml: ")
    assert "'on' is missing" in told[0]


def test_a_ledger_that_is_gone_is_told(home: Home, capsys: pytest.CaptureFixture[str]):
    assert home.sweep("--close") == 0
    assert "ledger" not in capsys.readouterr().err
    (home.path / ".spikeward" / "ledger.jsonl").unlink()
    home.sweep()
    assert "closings, adopted decisions and the history of revisions are lost" in capsys.readouterr().err
    home.sweep()
    assert "ledger" not in capsys.readouterr().err


def test_a_batch_on_which_the_calculation_breaks_leaves_the_others_be(
    home: Home, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
):
    """A defect of the program must not stop a night: other batches are published, and the board says which broke."""
    (home.inbox / "other.csv").write_text(EXPORT.replace("N1_", "N2_"))

    def breaks(batches, rules, earlier=None):
        if any(batch.key.batch == "N2" for batch in batches):
            raise ZeroDivisionError("invented")
        return evaluate(batches, rules, earlier)

    monkeypatch.setattr(solving, "evaluate", breaks)
    assert home.sweep() == 1
    assert "N1_07.pass.flag" in home.ours()
    assert not any(name.startswith("N2_07") for name in home.ours())
    told = capsys.readouterr()
    assert "the calculation broke on this batch (ZeroDivisionError: invented)" in told.out + told.err
    monkeypatch.undo()
    assert home.sweep() == 0
    assert {"N1_07.pass.flag", "N2_07.pass.flag"} <= set(home.ours())
