"""The text of a rule file: what YAML offers and this program refuses, each with its place, and what stays text."""

from __future__ import annotations

import time

import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from spikeward.daemon.rule_file.load import load_rules
from spikeward.daemon.rule_file.problems import CODES, lines_of
from spikeward.daemon.rule_file.yaml_text import LARGEST, Node, compose


def only_value(text: str) -> Node:
    root, problems = compose(text, "rules.yaml")
    assert root is not None
    assert not problems
    return root.entries[0][1]


@pytest.mark.parametrize(
    ("text", "code", "line", "column", "says"),
    [
        ("a: !!str b\n", "R003", 1, 4, "a tag"),
        ("a: !python/object:os.system x\n", "R003", 1, 4, "a tag"),
        ("a: ! b\n", "R003", 1, 4, "a tag"),
        ("a: &x [1]\nb: *x\n", "R003", 1, 4, "an anchor"),
        ("a: 1\nb: *x\n", "R003", 2, 4, "an alias"),
        ("a: 1\n<<: {b: 2}\n", "R003", 2, 1, "a merge key"),
        ("a: 1\n---\nb: 2\n", "R003", 2, 1, "a second document"),
        ("a: 1\n\tb: 2\n", "R004", 2, 1, "a tab"),
        ("a:\n  b: 1\n \tc: 2\n", "R004", 3, 2, "a tab"),
        ("a: b\tc\n", "R004", 1, 4, "a tab"),
        ("[" * 21 + "]" * 21, "R002", 1, 21, "nested"),
        ("[" * 5000, "R001", 1, 1001, "nested"),
        ("? [a]\n: b\n", "R011", 1, 3, "a list as a key"),
        ("a: 1\nb: c: d\n", "R001", 2, 5, "second ':'"),
        ("a: [1, 2\n", "R001", 1, 4, "not closed"),
        ("a: 'x\nb: 1\n", "R001", 1, 4, "not closed"),
        ('a: "^(\\d+)$"\n', "R001", 1, 7, "single quotes"),
        ("a: {s}_{l}.csv\n", "R001", 1, 7, "single quotes"),
        ("a: @x\n", "R001", 1, 4, "single quotes"),
        ("- a\nb: 1\n", "R001", 2, 1, "'- '"),
        (" a: 1\nb: 2\n", "R001", 2, 1, "line all keys up"),
        ("a: \x01\n", "R001", 1, 4, "U+0001"),
        ("é: \ud800\n", "R001", 1, 4, "U+D800"),
    ],
)  # fmt: skip
def test_refused_with_its_place(text: str, code: str, line: int, column: int, says: str):
    root, problems = compose(text, "rules.yaml")
    assert root is None
    (problem,) = problems
    assert (problem.code, problem.line, problem.column) == (code, line, column)
    assert says in problem.sentence
    assert problem.hint


def test_a_bomb_of_anchors_costs_nothing():
    bomb = "a0: &a0 [x, x]\n" + "".join(f"a{n}: &a{n} [{', '.join([f'*a{n - 1}'] * 9)}]\n" for n in range(1, 30))
    began = time.process_time()
    root, problems = compose(bomb, "rules.yaml")
    assert root is None
    assert problems[0].code == "R003"
    assert time.process_time() - began < 1


def test_a_large_file_is_refused_before_it_is_parsed():
    began = time.process_time()
    root, problems = compose("a: 'b'\n" * (50 * LARGEST // 7), "rules.yaml")
    assert root is None
    assert "larger than 1 MiB" in problems[0].sentence
    assert time.process_time() - began < 2


def test_a_duplicate_key_names_both_lines():
    _, problems = compose("a: 1\nb: {c: 1, d: 2, c: 3}\na: 2\n", "rules.yaml")
    assert [(p.code, p.line, p.column) for p in problems] == [("R005", 2, 17), ("R005", 3, 1)]
    assert "line 2 already" in problems[0].sentence
    assert "line 1 already" in problems[1].sentence


# What a general loader makes of these is another value; here each stays the text that a person wrote.
@pytest.mark.parametrize(
    "text",
    ["no", "on", "NO", "1e-3", "1e3", "012", "0123", "12:30", "3.10", "1_000", "1,5", "2024-01-02", "NaN", "+INF",
     "12E5", "NA", "null", "~", "0x1F", "yes", "1-2", ".5"],
)  # fmt: skip
def test_values_stay_text(text: str):
    value = only_value(f"a: {text}\n")
    assert (value.kind, value.text) == ("scalar", text)


def test_a_comment_begins_after_a_blank():
    assert only_value("a: Pb #1\n").text == "Pb"
    assert only_value("a: 'Pb #1'\n").text == "Pb #1"
    assert only_value("a: Pb#1\n").text == "Pb#1"


def test_places_count_characters():
    root, _ = compose("µ: {Größe: 'x'}\n", "rules.yaml")
    assert root is not None
    inner = root.entries[0][1]
    assert (inner.line, inner.column) == (1, 4)
    assert (inner.entries[0][1].line, inner.entries[0][1].column) == (1, 12)


def test_a_caret_stands_below_the_place():
    text = "a: 1\nb: {c: 1, c: 2}\n"
    _, problems = compose(text, "rules.yaml")
    place, line, caret = problems[0].block_text(text).split("\n")
    assert place.startswith("rules.yaml:2:11: b.c: R005 ")
    assert line[caret.index("^") :].startswith("c: 2}")


def test_a_caret_in_a_long_line():
    text = "a: {" + "x" * 300 + ": 1, b: 2, b: 3}\n"
    _, problems = compose(text, "rules.yaml")
    _, line, caret = problems[0].block_text(text).split("\n")
    assert len(line) < 130
    assert line[caret.index("^") :].startswith("b: 3}")


def test_what_does_not_print_is_escaped():
    _, problems = load_rules('"sta\\ntion\\u202e": x\n', "ru\nles.yaml")
    assert problems
    assert all(problem.line_text().isprintable() for problem in problems)


@given(st.text())
@example("")
@example("\ufeff")
@example("a: |\n  b")
@example("\x85a: b\u2028c: d")
def test_any_text_is_read_or_refused(text: str):
    rules, problems = load_rules(text, "rules.yaml")
    assert rules is None
    assert problems
    for problem in problems:
        assert problem.code in CODES
        assert 1 <= problem.line <= len(lines_of(text)) + 1
        assert problem.line_text().isprintable()
        assert problem.block_text(text)
