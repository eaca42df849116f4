"""The house: three floors, arrows that point down, small modules, and a package list that matches the tree."""

from __future__ import annotations

import ast
import subprocess
import tomllib
from pathlib import Path

import pytest

HOUSE = Path(__file__).resolve().parents[1]
FLOORS = ("rules", "parsers", "daemon")
MODULES = sorted(path for floor in FLOORS for path in (HOUSE / floor).rglob("*.py"))
AT_THE_ROOT = {
    "README.md", "DEVELOPERS.md", "pyproject.toml", "config.example.yaml", "LICENSE", "CHANGELOG.md", *FLOORS, "tests",
}  # fmt: skip

# rules/ may import these and nothing else from outside: no clock, disk, environment, network or randomness.
PURE = {
    "__future__", "collections", "dataclasses", "datetime", "decimal", "enum", "fractions", "functools", "hashlib",
    "itertools", "json", "math", "operator", "re", "typing", "unicodedata", "numpy", "re2", "scipy", "spikeward",
    "difflib", "string", "fnmatch", "bisect",
}  # fmt: skip
IMPURE_CALLS = {"open", "input", "print", "exec", "eval", "__import__", "now", "today", "utcnow", "getenv"}


def imports(path: Path) -> set[str]:
    found = set()
    for node in ast.walk(ast.parse(path.read_text())):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}: relative import"
            found.add(node.module or "")
    return found


def breaches(floor: str, imported: set[str]) -> set[str]:
    above = {"rules": ("parsers", "daemon"), "parsers": ("daemon",), "daemon": ()}[floor]
    return {name for name in imported for other in above if name.startswith(f"spikeward.{other}")}


@pytest.mark.parametrize("path", MODULES, ids=lambda path: str(path.relative_to(HOUSE)))
def test_arrows_point_down(path: Path):
    floor = path.relative_to(HOUSE).parts[0]
    assert not breaches(floor, imports(path))


def test_an_upward_arrow_would_be_seen():
    assert breaches("rules", {"spikeward.parsers.delimited"}) == {"spikeward.parsers.delimited"}
    assert breaches("parsers", {"spikeward.daemon.cli"}) == {"spikeward.daemon.cli"}


def test_no_circle():
    graph = {}
    for path in MODULES:
        parts = path.relative_to(HOUSE).with_suffix("").parts
        name = ".".join(("spikeward", *(parts[:-1] if parts[-1] == "__init__" else parts)))
        graph[name] = imports(path)
    known = set(graph)

    def visit(name: str, way: tuple[str, ...]) -> None:
        assert name not in way, " -> ".join((*way[way.index(name) :], name))
        if name not in done:
            for other in graph[name] & known:
                visit(other, (*way, name))
            done.add(name)

    done: set[str] = set()
    for name in sorted(graph):
        visit(name, ())


@pytest.mark.parametrize(
    "path", [path for path in MODULES if path.is_relative_to(HOUSE / "rules")], ids=lambda path: path.name
)
def test_rules_touch_no_clock_disk_environment_or_network(path: Path):
    assert {name.split(".")[0] for name in imports(path)} <= PURE
    for node in ast.walk(ast.parse(path.read_text())):
        if isinstance(node, ast.Call):
            called = node.func.id if isinstance(node.func, ast.Name) else getattr(node.func, "attr", "")
            assert called not in IMPURE_CALLS, f"{path.name}:{node.lineno} calls {called}"


@pytest.mark.parametrize("path", MODULES, ids=lambda path: str(path.relative_to(HOUSE)))
def test_a_file_is_one_idea(path: Path):
    assert len(path.read_text().splitlines()) <= 400


def test_packages_are_all_listed():
    listed = set(tomllib.loads((HOUSE / "pyproject.toml").read_text())["tool"]["setuptools"]["packages"])
    present = {
        ".".join(("spikeward", *path.relative_to(HOUSE).parts))
        for floor in FLOORS
        for path in [HOUSE / floor, *(HOUSE / floor).rglob("*")]
        if path.is_dir() and path.name != "__pycache__" and any(child.is_file() for child in path.iterdir())
    }
    assert listed == present


def test_the_root_holds_what_was_planned():
    tracked = subprocess.run(["git", "ls-files"], cwd=HOUSE, capture_output=True, text=True, check=False).stdout.split(
        "\n"
    )
    names = {name.split("/")[0] for name in tracked if name and not name.startswith(".")}
    if not names:
        pytest.skip("not a git checkout: the list of files is not known")
    assert names <= AT_THE_ROOT
