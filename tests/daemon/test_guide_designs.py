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

import pytest

from spikeward.daemon.cli import main

GUIDE = Path(__file__).resolve().parents[2] / "daemon" / "guide"
PAGES = ("designs", "corrections", "precision")
_BLOCK = re.compile(r"^```(\w+)\n(.*?)^```$", re.DOTALL | re.MULTILINE)
_TRUTH = re.compile(r"from ([\d.]+) (?:and ([\d.]+) )?(ug/L|mg/L|mg/kg)")
_DESIGNS_TOLD = 20  # examples that designs.md holds at least; one that no longer parses must not vanish unseen
_WITHOUT_INTERVAL = 0.02  # how near to the truth a content without an interval must be; the invented noise is below 1 %


@dataclass
class Example:
    """One example; ``flags`` gives the lines that the page shows of each flag, ``quotes`` what the summaries say."""

    name: str
    rules: str
    files: dict[str, str] = field(default_factory=dict)
    flags: dict[str, list[str]] = field(default_factory=dict)
    quotes: list[str] = field(default_factory=list)
    truth: list[float] = field(default_factory=list)


def sections(text: str) -> dict[str, str]:
    """The top-level sections of a rule file as text, by key."""
    parts = re.split(r"^(?=[a-z_]+:)", text, flags=re.MULTILINE)
    return {part.split(":", 1)[0]: part for part in parts if part.strip()}


def examples() -> list[Example]:
    return [example for page in PAGES for example in _of_page(page)]


def _of_page(page: str) -> list[Example]:
    text = (GUIDE / f"{page}.md").read_text(encoding="utf-8")
    base = sections(next(body for language, body in _BLOCK.findall(text) if language == "yaml"))
    found: list[Example] = []
    for heading, chapter in re.findall(r"^## (.*?)\n(.*?)(?=^## |\Z)", text, re.DOTALL | re.MULTILINE):
        told = ""
        for before, language, body in _pieces(chapter):
            told += before
            if language == "yaml":
                found.append(Example(f"{page}: {heading}", "".join({**base, **sections(body)}.values())))
            elif language == "csv":
                named = re.findall(r"`inbox/(\w+\.csv)`", before)
                found[-1].files[named[-1] if named else "run.csv"] = body
            elif language == "text":
                flag = re.findall(r"`(\S+\.flag)` says:", before)[-1]
                found[-1].flags[flag] = body.splitlines()
                found[-1].truth = found[-1].truth or _truth(told)
            if language == "" and found:
                found[-1].quotes += re.findall(r"^> (.*)$", before, re.MULTILINE)
            elif len(found) > 1 or found:
                _quotes_before(found, before, language)
    return [example for example in found if example.flags]
