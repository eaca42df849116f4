"""The rule file: its text in, the rules and every problem out."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path

from spikeward.daemon.rule_file.build import build
from spikeward.daemon.rule_file.checks import checks_of, shipped_packs
from spikeward.daemon.rule_file.digest import digest_of
from spikeward.daemon.rule_file.meaning import check_meaning
from spikeward.daemon.rule_file.problems import ERROR, Problem
from spikeward.daemon.rule_file.walk import TooMany, Walker
from spikeward.daemon.rule_file.yaml_text import LARGEST, compose
from spikeward.rules.rulebook import Rulebook
from spikeward.rules.schema import RULE_FILE

Loaded = tuple[Rulebook | None, tuple[Problem, ...]]


def load_rules(text: str, file_name: str, packs: Mapping[str, str] | None = None) -> Loaded:
    """Read a rule file.

    Parameters
    ----------
    file_name : as problems name it
    packs : texts of rule packs by name; None for those that are shipped

    Returns
    -------
    the rules, or None where there is an error; and all problems in the order of the file, warnings included
    """
    root, syntax = compose(text, file_name)
    if root is None:
        return None, syntax or (
            Problem("R010", file_name, 1, 1, "", "the rule file is empty", hint="begin with watch:"),
        )
    walker = Walker(file_name, RULE_FILE)
    checks, value = {}, None
    try:
        value = walker.walk(root, RULE_FILE, "")
        if value is not None:
            checks = checks_of(value["checks"] or {}, walker, shipped_packs() if packs is None else packs)
            check_meaning(value, walker)
    except TooMany:
        value = None
    problems = tuple(sorted((*syntax, *walker.problems), key=lambda problem: (problem.line, problem.column)))
    if value is None or any(problem.severity == ERROR for problem in problems):
        return None, problems
    rules = build(value, checks, walker)
    return replace(rules, digest=digest_of(rules)), problems


def load_file(path: str | Path) -> Loaded:
    """Read a rule file from its place.

    Raises
    ------
    OSError : the file cannot be opened
    """
    place = Path(path)
    with place.open("rb") as file:
        data = file.read(LARGEST + 1)
    try:
        text = data.decode("utf-8")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        column = error.start - (data.rfind(b"\n", 0, error.start) + 1) + 1
        found = f"byte {error.start + 1} is not UTF-8"
        return None, (Problem("R002", place.name, line, column, "", found, hint="save the rule file as UTF-8"),)
    return load_rules(text, place.name)
