"""The words for people cannot lie: rule files in them are loaded, commands are run, links and keys exist."""

from __future__ import annotations

import re
import shlex
import tomllib
from pathlib import Path

import pytest

from spikeward.daemon.cli import build_parser, main
from spikeward.daemon.decisions import read_decisions
from spikeward.daemon.names import series_stem
from spikeward.daemon.rule_file.load import load_rules
from spikeward.daemon.survey import DEEPEST, MOST
from spikeward.rules.outcomes import PASS
from spikeward.rules.records import ROLES, SeriesKey

HOUSE = Path(__file__).resolve().parents[1]
GUIDE = HOUSE / "daemon" / "guide"
PAGES = sorted([*GUIDE.glob("*.md"), *(HOUSE / "daemon" / "service").glob("*.md"), *HOUSE.glob("*.md")])
OURS = [page for page in PAGES if page.name != "reference.md"]
GO_ON_UNTIL_STOPPED = {"watch", "demo"}  # tried by tests of their own

# What a fragment in the guide is set into: its sections replace those of this rule file.
BASE = r"""
watch: {folder: inbox}
readers:
  readings:
    files: "*.csv"
    columns: {solution: Solution, analyte: Element, signal: Signal, unit: Unit, measured_at: Measured}
names:
  - {role: process_blank, match: '(?P<batch>N\d+)_PB(?P<sample>\d+)_A(?P<level>\d+)'}
  - {role: background, match: '(?P<batch>N\d+)_BLK(?P<sample>\d+)'}
  - {role: bracket, match: '(?P<batch>N\d+)_BR(?P<sample>\d+)'}
  - {role: reference, match: '(?P<batch>N\d+)_REF-(?P<sample>[A-Z0-9-]+)_A(?P<level>\d+)'}
  - {role: sample, match: '(?P<batch>N\d+)_(?P<sample>\d+)_A(?P<level>\d+)'}
standards:
  Cd-10: {analyte: Cd, content: 10 mg/L}
bench:
  files: "*bench*.csv"
  key: {batch: Batch, sample: Sample}
  columns: {mass: Mass, dry_matter: DM}
preparations:
  - for: {role: process_blank}
    design: flasks
    aliquot: 10 mL
    final: 25 mL
    additions: {levels: {0: 0 mL, 1: 0.25 mL, 2: 0.5 mL, 3: 0.75 mL}}
    sample: {digest: 50 mL}
  - design: flasks
    aliquot: 10 mL
    final: 25 mL
    additions: {levels: {0: 0 mL, 1: 0.25 mL, 2: 0.5 mL, 3: 0.75 mL}}
    sample: {mass: bench, digest: 50 mL, dry_matter: bench}
    report_in: mg/kg
"""


def blocks(page: Path, language: str) -> list[str]:
    return re.findall(rf"^```{language}\n(.*?)^```$", page.read_text(encoding="utf-8"), re.DOTALL | re.MULTILINE)


def sections(text: str) -> dict[str, str]:
    """The top-level sections of a rule file as text, by key."""
    found: dict[str, str] = {}
    for part in re.split(r"^(?=[a-z_]+:)", text, flags=re.MULTILINE):
        if part.strip():
            found[part.split(":", 1)[0]] = part
    return found


def snippets() -> list[tuple[str, str]]:
    return [(f"{page.name}-{number}", text) for page in OURS for number, text in enumerate(blocks(page, "yaml"), 1)]


def base_of(name: str) -> str:
    """The rule file that a page's fragments are set into: its own first one where that is complete."""
    own = blocks(GUIDE / name, "yaml") if (GUIDE / name).exists() else []
    return own[0] if own and {"watch", "standards", "preparations"} <= set(sections(own[0])) else BASE


def is_decisions(text: str) -> bool:
    return text.startswith("- {")


def without_conflicts(base: str, fragment: str) -> str:
    """Fragments that bring their own names need no roles of the base, and the other way about."""
    parts = {**sections(base), **sections(fragment)}
    if "names" in sections(fragment):
        parts.pop("bench", None)
        parts["preparations"] = re.sub(r"    sample: .*\n|    report_in: .*\n", "", sections(base)["preparations"])
    return "".join(parts.values())


@pytest.mark.parametrize(("name", "text"), snippets(), ids=[name for name, _ in snippets()])
def test_a_rule_file_in_the_guide_is_right(name, text):
    if is_decisions(text):
        decisions, wrong = read_decisions(text, "decisions.yaml")
        assert not wrong
        assert decisions
        return
    base = base_of(name.rpartition("-")[0])
    if {"watch", "standards"} <= set(sections(text)):
        whole = text
    elif base is BASE:
        whole = without_conflicts(base, text)
    else:
        whole = "".join({**sections(base), **sections(text)}.values())
    rules, problems = load_rules(whole, "rules.yaml")
    assert not [problem.line_text() for problem in problems], whole
    assert rules is not None


def test_a_wrong_snippet_would_be_seen():
    assert load_rules(without_conflicts(BASE, "series: {lapse_after: 90 min}\n"), "rules.yaml")[0] is None


def test_the_first_rule_file_is_short():
    first = blocks(GUIDE / "first-steps.md", "yaml")[0]
    assert len(first.splitlines()) <= 20


def commands() -> list[tuple[str, str]]:
    return [
        (page.name, line[2:])
        for page in OURS
        for block in blocks(page, "console")
        for line in block.splitlines()
        if line.startswith("$ spikeward ")
    ]


def test_every_command_in_the_text_can_be_given():
    """Also those inside sentences, such as `spikeward sweep CONFIG --close`."""
    told = {
        found
        for page in OURS
        for found in re.findall(r"`spikeward ([a-z]+(?: [^`\n]*)?)`", page.read_text(encoding="utf-8"))
    }
    assert len(told) > 8
    for each in told:
        arguments = [word for word in shlex.split(re.sub(r"\[[^]]*\]+", "", each)) if word != "|"]
        if len(arguments) > 1:
            build_parser().parse_args([word.replace("N", "60") if word == "N" else word for word in arguments])


def test_first_steps_can_be_taken(tmp_path, monkeypatch, capsys):
    page = GUIDE / "first-steps.md"
    (tmp_path / "inbox").mkdir()
    (tmp_path / "rules.yaml").write_text(blocks(page, "yaml")[0], encoding="utf-8")
    (tmp_path / "inbox" / "run.csv").write_text(blocks(page, "csv")[0], encoding="utf-8")
    monkeypatch.chdir(tmp_path)
    ran = []
    for name, line in commands():
        arguments = shlex.split(line)[1:]
        if name != page.name or arguments[0] in GO_ON_UNTIL_STOPPED:
            continue
        assert main(arguments) == 0, (line, capsys.readouterr())
        ran.append(arguments[0])
    assert ran == ["vet", "vet", "sweep", "explain"]
    present = {path.name for path in (tmp_path / "inbox").iterdir()}
    promised = set(re.findall(r"`(N1[\w.]+\.(?:html|json|csv|flag))`", page.read_text(encoding="utf-8")))
    assert len(promised) == 5
    assert promised <= present


def test_the_example_of_a_flag_reads_like_one(tmp_path, monkeypatch, capsys):
    """Every key of the example stands in a real flag, in that order."""
    steps = GUIDE / "first-steps.md"
    (tmp_path / "inbox").mkdir()
    (tmp_path / "rules.yaml").write_text(blocks(steps, "yaml")[0], encoding="utf-8")
    lines = blocks(steps, "csv")[0].splitlines()
    (tmp_path / "inbox" / "run.csv").write_text("\n".join(lines[:-1]) + "\n", encoding="utf-8")
    monkeypatch.chdir(tmp_path)
    assert main(["sweep", "rules.yaml"]) == 1
    real = [line.split(":")[0] for line in (tmp_path / "inbox" / "N1_07.waiting.flag").read_text().splitlines()]
    told = [line.split(":")[0] for line in blocks(GUIDE / "flags.md", "text")[0].splitlines()]
    assert list(dict.fromkeys(key for key in real if key in told)) == told


def test_the_number_in_the_example_of_a_flag_is_that_of_first_steps(tmp_path, monkeypatch, capsys):
    steps, example = GUIDE / "first-steps.md", blocks(GUIDE / "flags.md", "text")[0]
    (tmp_path / "inbox").mkdir()
    bracket = "  - {role: bracket, match: '(?P<batch>N\\d+)_BR(?P<sample>\\d+)'}\nseries: {closes_with: [bracket]}\n"
    rules = blocks(steps, "yaml")[0].replace("standards:\n", f"{bracket}standards:\n")
    (tmp_path / "rules.yaml").write_text(rules, encoding="utf-8")
    (tmp_path / "inbox" / "run.csv").write_text(blocks(steps, "csv")[0], encoding="utf-8")
    monkeypatch.chdir(tmp_path)
    assert main(["sweep", "rules.yaml"]) == 1
    real = (tmp_path / "inbox" / "N1_07.waiting.flag").read_text(encoding="utf-8").splitlines()
    told = [line for line in example.splitlines() if not line.endswith("…")]
    assert any(line.startswith("result: waiting, Cd, ") for line in told)
    assert [line for line in told if line not in real] == []


@pytest.mark.parametrize("page", PAGES, ids=lambda page: page.name)
def test_links_lead_somewhere(page):
    for target in re.findall(r"\]\(([^)#]+)(?:#[^)]*)?\)", page.read_text(encoding="utf-8")):
        assert "://" not in target
        assert (page.parent / target).exists(), target


@pytest.mark.parametrize("page", OURS, ids=lambda page: page.name)
def test_links_to_a_heading_find_it(page):
    text = page.read_text(encoding="utf-8")
    for target, anchor in re.findall(r"\]\(([^)#]*)#([^)]+)\)", text):
        there = (page.parent / target).read_text(encoding="utf-8") if target else text
        headings = re.findall(r"^#+ (.*)$", there, re.MULTILINE)
        assert anchor in {re.sub(r"[^\w -]", "", heading).lower().replace(" ", "-") for heading in headings}


def test_developers_are_told_of_every_dependency_and_of_no_file_that_is_gone():
    text = (HOUSE / "DEVELOPERS.md").read_text(encoding="utf-8")
    project = tomllib.loads((HOUSE / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    every = (*project["dependencies"], *project["optional-dependencies"]["test"])
    needed = {re.split(r"[>=<]", each)[0] for each in every}
    told = text.split("## Dependencies")[1].split("## ")[0]
    assert {each for each in needed if not re.search(rf"\b{re.escape(each)}\b", told, re.IGNORECASE)} == set()
    paths = re.findall(r"(?:rules|parsers|daemon|tests)/[a-z_/]+\.(?:py|yaml)", text)
    assert len(paths) > 10
    assert [path for path in paths if not (HOUSE / path).exists()] == []


def test_the_readme_states_the_job_first():
    title, job, *_ = (HOUSE / "README.md").read_text(encoding="utf-8").split("\n\n")
    assert title == "# spikeward"
    assert len(job.splitlines()) == 1
    assert job.startswith("`spikeward` is")
    cautions = (HOUSE / "README.md").read_text(encoding="utf-8")
    for word in ("qualified analyst", "accredited methods come first", "safety data sheets", "never altered"):
        assert word in cautions


def test_roles_names_and_limits_are_told_as_they_are():
    naming = (GUIDE / "naming.md").read_text(encoding="utf-8")
    assert all(f"`{role}`" in naming for role in ROLES)
    flags = (GUIDE / "flags.md").read_text(encoding="utf-8")
    for role, sample in (("sample", "7/2"), ("reference", "MUD-1"), ("process_blank", "1")):
        stem = series_stem(SeriesKey("inbox", "", "N1", role, sample))
        assert f"`{stem.removeprefix('N1_') if role == 'sample' else stem}`" in flags
    limits = (GUIDE / "administrator.md").read_text(encoding="utf-8")
    assert f"| {DEEPEST} |" in limits
    assert f"| {MOST:,} |" in limits


def test_the_example_script_waits_for_the_word_in_the_flag(tmp_path):
    import subprocess

    script = blocks(GUIDE / "flags.md", "sh")[0].replace("sleep 10", "exit 7")
    inbox = tmp_path / "inbox"
    inbox.mkdir()

    def ends_with() -> int:
        return subprocess.run(["sh", "-c", script], cwd=tmp_path, capture_output=True, check=False).returncode

    assert ends_with() == 7  # no flag yet: it would look again
    (inbox / "N1_07.waiting.flag").write_text("verdict: waiting\nso_far: pass\n")
    assert ends_with() == 7
    (inbox / "N1_07.waiting.flag").write_text(f"verdict: {PASS}\nso_far: pass\n")  # content first, the name follows
    assert ends_with() == 0
    (inbox / "N1_07.waiting.flag").rename(inbox / "N1_07.fail.flag")
    (inbox / "N1_07.fail.flag").write_text("verdict: fail\n")
    assert ends_with() == 1
