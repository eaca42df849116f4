"""Every example of the guide's pages on designs, corrections and precision: what is written comes out as it is told.

An example is a rule file (its sections replace those of the page's first one), the files of the folder, and lines of
the flags that a sweep leaves. The truth is the invented content that the page tells before it; the result of each
example is compared with it, so that a page cannot repeat a wrong number of the program.
"""

from __future__ import annotations

import json
import re
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pytest

from spikeward.daemon.cli import main

GUIDE = Path(__file__).resolve().parents[2] / "daemon" / "guide"
PAGES = {"designs": 21, "corrections": 12, "precision": 6}  # and how many examples each holds: none may vanish unseen
WITHOUT_INTERVAL = 0.02  # how near to the truth a content without an interval must be; the invented noise is below 1 %

_FENCE = re.compile(r"^```(\w+)\n(.*?)^```$", re.DOTALL | re.MULTILINE)
_TRUTH = re.compile(r"made\s+from\s+([\d.]+)(?:\s+and\s+([\d.]+))?\s+(ug/L|mg/L|mg/kg)", re.IGNORECASE)


@dataclass
class Example:
    """One example; ``flags`` gives the lines that the page shows of each flag, ``quotes`` what the summaries say."""

    name: str
    rules: str
    files: dict[str, str] = field(default_factory=dict)
    flags: dict[str, list[str]] = field(default_factory=dict)
    quotes: list[str] = field(default_factory=list)
    truth: list[float] = field(default_factory=list)
    unit: str = ""


def sections(text: str) -> dict[str, str]:
    """The top-level sections of a rule file as text, by key."""
    parts = re.split(r"^(?=[a-z_]+:)", text, flags=re.MULTILINE)
    return {part.split(":", 1)[0]: part for part in parts if part.strip()}


def pieces(text: str) -> list[tuple[str, str]]:
    """A text as prose (of no language) and fenced blocks, in their order."""
    parts = _FENCE.split(text)
    found = [("", parts[0])]
    for place in range(1, len(parts), 3):
        found += [(parts[place], parts[place + 1]), ("", parts[place + 2])]
    return found


def of_page(page: str) -> list[Example]:
    """The examples of one page, those that come to a result."""
    text = (GUIDE / f"{page}.md").read_text(encoding="utf-8")
    base = sections(next(body for language, body in pieces(text) if language == "yaml"))
    found: list[Example] = []
    for heading, chapter in re.findall(r"^## (.*?)\n(.*?)(?=^## |\Z)", text, re.DOTALL | re.MULTILINE):
        prose, told = "", ""
        for language, body in pieces(chapter):
            if language == "":
                prose, told = body, told + body
                if found and found[-1].flags:
                    found[-1].quotes += re.findall(r"^> (.*)$", body, re.MULTILINE)
            elif language == "yaml":
                found.append(Example(f"{page}: {heading}", "".join({**base, **sections(body)}.values())))
            elif language == "csv":
                named = re.findall(r"`inbox/(\w+\.csv)`", prose)
                found[-1].files[named[-1] if named else "run.csv"] = body
            elif language == "text":
                _shown(found[-1], prose, told, body)
    return [example for example in found if example.flags]


def _shown(example: Example, prose: str, told: str, body: str) -> None:
    example.flags[re.findall(r"`(\S+\.flag)` says:", prose)[-1]] = body.splitlines()
    *_, (first, second, unit) = _TRUTH.findall(told)
    example.truth, example.unit = [float(each) for each in (first, second) if each], unit


EXAMPLES = [example for page in PAGES for example in of_page(page)]


@pytest.fixture(scope="module", params=EXAMPLES, ids=lambda example: example.name)
def swept(request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory) -> tuple[Example, Path]:
    """An example and its folder after `sweep --close`; the settling time is left out, for nothing is written."""
    example: Example = request.param
    home = tmp_path_factory.mktemp("guide")
    (home / "inbox").mkdir()
    rules = example.rules.replace("watch: {folder: inbox}", "watch: {folder: inbox, settle: 0 s}")
    (home / "rules.yaml").write_text(rules, encoding="utf-8")
    for name, text in example.files.items():
        (home / "inbox" / name).write_text(text, encoding="utf-8")
    assert main(["sweep", str(home / "rules.yaml"), "--close"]) in (0, 1)
    return example, home / "inbox"


def results(inbox: Path, flag: str) -> dict[str, Any]:
    stem = flag.removesuffix(".flag").rpartition(".")[0]
    found: dict[str, Any] = json.loads((inbox / f"{stem}.result.json").read_text(encoding="utf-8"))
    return found


def sentences(value: Any) -> set[str]:
    """Every text anywhere in a result."""
    if isinstance(value, str):
        return {value}
    inner = value.values() if isinstance(value, dict) else value if isinstance(value, list) else ()
    return {text for each in inner for text in sentences(each)}


@pytest.mark.parametrize("page", PAGES)
def test_no_example_of_a_page_is_passed_over(page: str):
    assert len(of_page(page)) == PAGES[page]
    text = (GUIDE / f"{page}.md").read_text(encoding="utf-8")
    assert sum(len(each.flags) for each in of_page(page)) == len(re.findall(r"says:$", text, re.MULTILINE))
    assert sum(len(each.files) for each in of_page(page)) == text.count("```csv")


def test_what_the_page_prints_is_what_comes_out(swept: tuple[Example, Path]):
    example, inbox = swept
    for name, lines in example.flags.items():
        assert (inbox / name).exists(), sorted(path.name for path in inbox.glob("*.flag"))
        real = (inbox / name).read_text(encoding="utf-8").splitlines()
        assert [line for line in lines if line not in real] == []
        assert [line for line in real if line.startswith(("result:", "not_reported:", "reason:"))] == lines


def test_what_comes_out_is_what_it_was_made_from(swept: tuple[Example, Path]):
    example, inbox = swept
    counted = [each for each in results(inbox, next(iter(example.flags)))["results"] if each["reported_line"]]
    assert len(counted) == len(example.truth)
    for result, truth in zip(counted, example.truth, strict=True):
        reported = result["in_sample"] or result
        assert reported["unit"] == example.unit
        wide = reported["expanded_uncertainty"]
        assert abs(reported["content"] - truth) <= (WITHOUT_INTERVAL * truth if wide is None else wide)


def test_what_the_page_quotes_is_said_in_the_result(swept: tuple[Example, Path]):
    example, inbox = swept
    said = set().union(*(sentences(results(inbox, name)) for name in example.flags))
    assert [quote for quote in example.quotes if quote not in said] == []


def example(name: str) -> Example:
    return next(each for each in EXAMPLES if each.name == name)


def flag_of(home: Path, rules: str, files: dict[str, str], *options: str) -> str:
    """The one flag of a sweep over some files."""
    (home / "inbox").mkdir()
    (home / "rules.yaml").write_text(rules.replace("{folder: inbox}", "{folder: inbox, settle: 0 s}"), encoding="utf-8")
    for name, text in files.items():
        (home / "inbox" / name).write_text(text, encoding="utf-8")
    assert main(["sweep", str(home / "rules.yaml"), *options]) == 1
    (flag,) = (home / "inbox").glob("*.flag")
    return f"{flag.name}\n{flag.read_text(encoding='utf-8')}"


def test_a_weighed_series_waits_for_its_bench_file(tmp_path: Path):
    weighed = example("designs: Weighed")
    told = flag_of(tmp_path, weighed.rules, {"run.csv": weighed.files["run.csv"]})
    assert told.startswith("N1_11.waiting.flag")
    for lacking in ("aliquot of 11, level 0", "addition of 11, level 3"):
        assert f"missing: {lacking}, from the bench file" in told


@pytest.mark.parametrize("design", ["weighed", "flasks"])
def test_a_vessel_whose_filling_was_not_entered_is_not_taken_as_it_was_mixed(tmp_path: Path, design: str):
    weighed = example("designs: Weighed")
    rules = weighed.rules.replace("design: weighed", f"design: {design}")
    bench = weighed.files["bench.csv"].replace(",24.97 g\n", ",\n")
    assert bench != weighed.files["bench.csv"]
    told = flag_of(tmp_path, rules, {**weighed.files, "bench.csv": bench})
    assert told.startswith("N1_11.waiting.flag")
    assert "missing: final of 11, level 3, from the bench file" in told


def test_lines_that_overlap_do_not_claim_a_declared_noise(tmp_path: Path):
    overlap = example("corrections: One known interferent")
    noise = "precision: {from: declared, noise: {Cu: {floor: 0.1, unit: A}}}\n"
    inbox = tmp_path / "inbox"
    inbox.mkdir()
    (tmp_path / "rules.yaml").write_text(
        overlap.rules.replace("{folder: inbox}", "{folder: inbox, settle: 0 s}") + noise
    )
    (inbox / "run.csv").write_text(overlap.files["run.csv"], encoding="utf-8")
    main(["sweep", str(tmp_path / "rules.yaml"), "--close"])
    (result,) = results(inbox, "N1_40.pass.flag")["results"]
    assert result["precision"] == "its own scatter, because lines that overlap are solved with no other"
    assert "declared" not in result["sentence"]


def test_the_examples_quote_what_the_program_says():
    assert sum(len(example.quotes) for example in EXAMPLES) > 12
