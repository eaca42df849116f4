"""Every key of the example misspelt, every value of a wrong kind: place, key path, remedy, and never a traceback."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from spikeward.daemon.rule_file.load import load_rules
from spikeward.daemon.rule_file.problems import CODES, Problem, lines_of
from spikeward.daemon.rule_file.yaml_text import Node, compose
from spikeward.rules.schema import RULE_FILE
from spikeward.rules.schema_kinds import Scalar
from spikeward.rules.schema_shapes import Block, Field, Limits, ListOf, MapOf, Shape

EXAMPLE = (Path(__file__).resolve().parents[2] / "config.example.yaml").read_text(encoding="utf-8")


def parts(node: Node, shape: Shape, path: str = "") -> Iterator[tuple[str, Node, Shape, Node | None, bool]]:
    """Every value of a file: (path, node, shape, its key, whether the key is one of the schema's)."""
    if isinstance(shape, Block) and node.kind == "map":
        fields = {field.name: field.shape for field in shape.fields}
        for key, value in node.entries:
            where = f"{path}.{key.text}".lstrip(".")
            inner = fields.get(key.text) or (shape.others.item if shape.others else None)
            assert inner is not None, where
            yield where, value, inner, key, key.text in fields
            yield from parts(value, inner, where)
    elif isinstance(shape, MapOf) and node.kind == "map":
        for key, value in node.entries:
            yield f"{path}.{key.text}", value, shape.item, key, bool(shape.keys)
            yield from parts(value, shape.item, f"{path}.{key.text}")
    elif isinstance(shape, ListOf) and node.kind == "list":
        for number, item in enumerate(node.items):
            yield f"{path}[{number}]", item, shape.item, None, False
            yield from parts(item, shape.item, f"{path}[{number}]")
    elif isinstance(shape, ListOf) and shape.single:
        yield from parts(node, shape.item, f"{path}[0]")


def example_root() -> Node:
    root, problems = compose(EXAMPLE, "rules.yaml")
    assert root is not None
    assert not problems
    return root


ALL = list(parts(example_root(), RULE_FILE))
KEYS = [(path, key) for path, _, _, key, of_schema in ALL if key is not None and of_schema]


def misspelt(name: str) -> list[str]:
    """Slips of the hand: a letter left out, doubled, two exchanged, a capital."""
    middle = len(name) // 2
    slips = [
        name[:middle] + name[middle + 1 :] if len(name) > 2 else "",
        name[: middle + 1] + name[middle:],
        name[: middle - 1] + name[middle] + name[middle - 1] + name[middle + 1 :] if middle else "",
        name.capitalize() if len(name) > 1 else "",
    ]
    return [slip for slip in dict.fromkeys(slips) if slip and slip != name]


def put(text: str, node: Node, length: int, replacement: str) -> str:
    lines = text.split("\n")
    line = lines[node.line - 1]
    lines[node.line - 1] = line[: node.column - 1] + replacement + line[node.column - 1 + length :]
    return "\n".join(lines)


def test_the_example_holds_every_key_of_the_schema():
    """Shown, or commented out; so what is generated below reaches all of them."""

    def names(shape: Shape) -> Iterator[str]:
        if isinstance(shape, (ListOf, MapOf)):
            yield from names(shape.item)
        elif isinstance(shape, Block):
            for field in shape.fields:
                yield field.name
                yield from names(field.shape)
            if shape.others is not None:
                yield from names(shape.others)

    for name in names(RULE_FILE):
        assert f"{name}:" in EXAMPLE, name
    assert len(KEYS) > 60


@pytest.mark.parametrize(("path", "key"), KEYS, ids=[path for path, _ in KEYS])
def test_a_misspelt_key_is_named_with_what_was_meant(path: str, key: Node):
    for slip in misspelt(key.text):
        rules, problems = load_rules(put(EXAMPLE, key, len(key.text), slip), "rules.yaml")
        here = [problem for problem in problems if (problem.line, problem.column) == (key.line, key.column)]
        assert rules is None, slip
        assert here, f"{slip}: {[problem.line_text() for problem in problems]}"
        wanted = f"did you mean {key.text}?"
        assert any(problem.hint == wanted for problem in here), (slip, here)
        assert here[0].path.endswith(slip), here[0].path
        # The factor k of a reference, misspelt, is first read as an analyte, whose content needs a unit.
        assert [problem for problem in problems if problem not in here] == [] or key.text == "k", slip


def rendered(node: Node) -> str:
    """A tree as flow text in which plain texts stay plain."""
    if node.kind == "map":
        return "{" + ", ".join(f"{rendered(key)}: {rendered(value)}" for key, value in node.entries) + "}"
    if node.kind == "list":
        return "[" + ", ".join(rendered(item) for item in node.items) + "]"
    return node.text if node.plain else "'" + node.text.replace("'", "''") + "'"


def with_value(path: str, written: str) -> str:
    """The example with the value at a path written otherwise, one top-level key a line."""
    root = example_root()
    node = next(node for where, node, *_ in parts(root, RULE_FILE) if where == path)
    node.kind, node.text, node.plain = "scalar", written, True
    return "".join(f"{key.text}: {rendered(value)}\n" for key, value in root.entries)


def wrong_values(shape: Shape, node: Node) -> Iterator[tuple[str, str]]:
    """Texts of a wrong kind for a shape, each with the code of its problem (or empty: any)."""
    if isinstance(shape, Scalar):
        yield from (("[a, b]", "R011"), ("{a: b}", "R011"))
        if not shape.may_be_empty:
            yield "''", "R013"
        if shape.wrong:
            yield f"'{shape.wrong}'", shape.code
    elif isinstance(shape, ListOf):
        yield "", "R013"
        if not isinstance(shape.item, Scalar):
            yield "zzz", "R011"
            yield "[zzz]", "R011"
        else:
            yield "[[a]]", "R011"
    elif isinstance(shape, MapOf):
        yield from (("", "R013"), ("zzz", "R011"))
        if not shape.listed:
            yield "[a, b]", "R011"
    elif isinstance(shape, Block):
        yield from (("", "R013"), ("[zzz]", "R011"))
        if not shape.short:
            yield "zzz", "R011"
    else:
        yield from (("", "R011"), ("zzz", "R011"), ("[1]", "R011"), ("{zzz: 1}", "R012"), ("{warn_above: [1]}", ""))


VALUES = [(path, shape, node) for path, node, shape, *_ in ALL]


@pytest.mark.parametrize(("path", "shape", "node"), VALUES, ids=[path for path, *_ in VALUES])
def test_a_value_of_a_wrong_kind_is_named_with_its_place(path: str, shape: Shape, node: Node):
    for written, code in wrong_values(shape, node):
        if not written and path.endswith("]"):
            continue  # between brackets an entry without a value is no entry
        text = with_value(path, written)
        rules, problems = load_rules(text, "rules.yaml")
        assert rules is None, (path, written)
        told = [problem for problem in problems if problem.path.startswith(path)]
        assert told, (path, written, [problem.line_text() for problem in problems])
        assert not code or code in {problem.code for problem in told}, (path, written, told)
        placed(text, path, told)
        for problem in problems:
            assert problem.found
            assert problem.expected or problem.hint, problem


def placed(text: str, path: str, told: list[Problem]) -> None:
    """Every problem stands in the line of its top-level key, and one at or after the place of the value."""
    key = path.partition(".")[0].partition("[")[0]
    line = next(number for number, line in enumerate(text.split("\n"), start=1) if line.startswith(f"{key}:"))
    assert {problem.line for problem in told} == {line}
    assert all(problem.column > len(key) + 1 for problem in told)


def hidden_fields(shape: Shape) -> Iterator[Field]:
    if isinstance(shape, (ListOf, MapOf)):
        yield from hidden_fields(shape.item)
    elif isinstance(shape, Block):
        for field in () if shape.short else shape.fields:
            if field.hidden:
                yield field
            yield from hidden_fields(field.shape)


@pytest.mark.parametrize("field", list(hidden_fields(RULE_FILE)), ids=lambda field: field.name)
def test_what_the_example_comments_out_can_be_read(field: Field):
    """Uncommented, a key may contradict another one; that it is known and readable is what counts."""
    line = next(line for line in EXAMPLE.split("\n") if line.strip().startswith(f"# {field.name}: "))
    _, problems = load_rules(EXAMPLE.replace(line, line.replace("# ", "", 1)), "rules.yaml")
    assert {problem.code for problem in problems} <= {"R010", "R030", "R031"}, problems


def test_no_limits_shape_is_left_out():
    assert any(isinstance(shape, Limits) for _, _, shape, *_ in ALL)


@settings(max_examples=150, deadline=None)
@given(st.data())
def test_a_damaged_example_never_raises(data: st.DataObject):
    at = data.draw(st.integers(0, len(EXAMPLE) - 1))
    cut = data.draw(st.integers(0, 12))
    put_in = data.draw(st.text(st.sampled_from("aZ09 \n\t:,-[]{}'\"#&*!%|>?@é\\()<P"), max_size=6))
    text = EXAMPLE[:at] + put_in + EXAMPLE[at + cut :]
    rules, problems = load_rules(text, "rules.yaml")
    assert (rules is None) == any(problem.severity == "error" for problem in problems)
    for problem in problems:
        assert problem.code in CODES
        assert 1 <= problem.line <= len(lines_of(text)) + 1
        assert problem.block_text(text)
