"""YAML as rule files use it: maps, lists and texts with their places. A value stays text until a key says what it is.

Tags, anchors, aliases, merge keys, tabs, duplicate keys and further documents are refused, each with its place, so that
what a person reads in the file is what the file means.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from typing import Any

import yaml

from spikeward.daemon.rule_file.problems import MOST_PROBLEMS, Problem, lines_of

LARGEST = 1 << 20  # bytes
DEEPEST = 20

SCALAR, LIST, MAP = "scalar", "list", "map"

KINDS = {SCALAR: "a single value", LIST: "a list", MAP: "a map"}
"""What a node is, in a sentence."""

# What the parser says -> what it means for a person.
_TOLD = (
    ("unknown escape", "a backslash inside double quotes", "put patterns in single quotes, such as '(?P<sample>\\d+)'"),
    ("mapping values are not allowed", "a second ':' in one value, or a line that is indented too far",
     "put the value in single quotes, or line the key up with its neighbours"),
    ("cannot start any token", "a value that begins with a character that YAML keeps for itself",
     "put the value in single quotes"),
    ("did not find expected ',' or", "a bracket or brace that is not closed, or a missing comma",
     "close it, and separate the entries with commas"),
    ("unexpected end of stream", "a quote that is not closed", "close the quote"),
    ("did not find expected key", "something that does not belong to the key before it",
     "put a value with braces, brackets or quotes inside single quotes, or correct the indentation"),
    ("expected '-' indicator", "a key between the entries of a list", "begin it with '- ', or correct the indentation"),
    ("could not find expected ':'", "a line without ':'", "write 'key: value'"),
    ("<document start>", "a line that is indented less than the first one", "line all keys up on the left"),
    ("nesting depth", "lists or maps nested too deeply", "take some brackets away"),
)  # fmt: skip


@dataclass(slots=True)
class Node:
    """A map, a list or a text, with the place where it begins (counted from 1).

    ``plain`` is true for a text without quotes; an empty plain text is a value that was left out.
    """

    kind: str
    line: int
    column: int
    text: str = ""
    plain: bool = True
    items: list[Node] = field(default_factory=list)
    entries: list[tuple[Node, Node]] = field(default_factory=list)

    def pairs(self) -> Iterator[tuple[str, Node]]:
        """The keys of a map with their values, in the order of the file."""
        for key, value in self.entries:
            yield key.text, value


class _Refused(Exception):
    """The first thing that stops reading."""

    def __init__(self, problem: Problem) -> None:
        super().__init__(problem.found)
        self.problem = problem


def compose(text: str, file_name: str) -> tuple[Node | None, tuple[Problem, ...]]:
    """Read a text.

    Returns
    -------
    its root, or None where it is empty or cannot be read; and everything that is wrong with it as YAML
    """
    try:
        _check_text(text, file_name)
        builder = _Builder(file_name)
        for event in yaml.parse(text, Loader=yaml.CSafeLoader):
            builder.take(event)
    except _Refused as refused:
        return None, (refused.problem,)
    except yaml.MarkedYAMLError as error:
        return None, (_syntax(error, file_name),)
    except yaml.YAMLError as error:
        position = getattr(error, "position", 0) or 0
        return None, (_unprintable(text, position, file_name),)
    return builder.root, tuple(builder.problems)


def _check_text(text: str, file_name: str) -> None:
    try:
        size = len(text.encode("utf-8"))
    except UnicodeEncodeError as error:
        raise _Refused(_unprintable(text, error.start, file_name)) from None
    if size > LARGEST:
        raise _Refused(
            Problem("R002", file_name, 1, 1, "", f"the file is larger than {LARGEST >> 20} MiB", hint="shorten it")
        )
    for number, line in enumerate(lines_of(text), start=1):
        blanks = line[: len(line) - len(line.lstrip())]
        if "\t" in blanks and line.strip():
            column = blanks.index("\t") + 1
            raise _Refused(
                Problem("R004", file_name, number, column, "", "a tab before a key", hint="indent with spaces")
            )


def _unprintable(text: str, position: int, file_name: str) -> Problem:
    before = lines_of(text[:position])
    line, column = len(before), len(before[-1]) + 1
    code = ord(text[position]) if position < len(text) else 0
    return Problem(
        "R001", file_name, line, column, "", f"a character that does not print (U+{code:04X})", hint="delete it"
    )


def _syntax(error: yaml.MarkedYAMLError, file_name: str) -> Problem:
    told = error.problem or "it cannot be read"
    # A quote or bracket that is not closed is found where the file ends; its beginning is what a person looks for.
    opened = "end of stream" in told or "expected ',' or" in told
    mark: Any = (error.context_mark if opened else None) or error.problem_mark or error.context_mark
    line, column = (mark.line + 1, mark.column + 1) if mark else (1, 1)
    for part, found, hint in _TOLD:
        if part in told:
            return Problem("R001", file_name, line, column, "", found, hint=hint)
    return Problem("R001", file_name, line, column, "", f"this is not YAML ({told})", hint="correct the line")


class _Builder:
    """Builds nodes from the parser's events, and refuses what rule files do not use."""

    def __init__(self, file_name: str) -> None:
        self.root: Node | None = None
        self.problems: list[Problem] = []
        self._file = file_name
        self._open: list[Node] = []
        self._keys: list[Node | None] = []  # of each open node: the key that waits for its value
        self._seen: list[dict[str, int]] = []  # of each open node: its keys and their lines
        self._documents = 0

    def take(self, event: Any) -> None:
        """Take the next event of the parser."""
        if isinstance(event, yaml.DocumentStartEvent):
            self._documents += 1
            if self._documents > 1:
                self._refuse(event, "R003", "a second document", "delete the line '---' and what follows")
        elif isinstance(event, yaml.AliasEvent):
            self._refuse(event, "R003", f"an alias (*{event.anchor})", "write the value out, or put it in quotes")
        elif isinstance(event, yaml.ScalarEvent):
            self._check(event)
            plain = not event.style
            if plain and "\t" in event.value:
                self._refuse(event, "R004", "a tab inside a value", 'use spaces, or write "\\t" in double quotes')
            self._add(self._node(SCALAR, event, event.value, plain))
        elif isinstance(event, (yaml.MappingStartEvent, yaml.SequenceStartEvent)):
            self._check(event)
            self._enter(self._node(MAP if isinstance(event, yaml.MappingStartEvent) else LIST, event))
        elif isinstance(event, (yaml.MappingEndEvent, yaml.SequenceEndEvent)):
            self._comma(self._open.pop())
            self._keys.pop()
            self._seen.pop()

    def _node(self, kind: str, event: Any, text: str = "", plain: bool = True) -> Node:
        mark = event.start_mark
        return Node(kind, mark.line + 1, mark.column + 1, text, plain)

    def _check(self, event: Any) -> None:
        if event.tag is not None:
            self._refuse(event, "R003", f"a tag ({event.tag})", "delete it, or put the value in quotes")
        if event.anchor is not None:
            self._refuse(event, "R003", f"an anchor (&{event.anchor})", "delete it, or put the value in quotes")

    def _refuse(self, event: Any, code: str, found: str, hint: str) -> None:
        mark = event.start_mark
        raise _Refused(Problem(code, self._file, mark.line + 1, mark.column + 1, "", found, hint=hint))

    def _enter(self, node: Node) -> None:
        self._add(node)
        if len(self._open) == DEEPEST:
            found = f"lists and maps nested more than {DEEPEST} deep"
            raise _Refused(
                Problem("R002", self._file, node.line, node.column, "", found, hint="take some brackets away")
            )
        self._open.append(node)
        self._keys.append(None)
        self._seen.append({})

    def _add(self, node: Node) -> None:
        if not self._open:
            self.root = node
            return
        parent = self._open[-1]
        if parent.kind == LIST:
            parent.items.append(node)
            return
        key = self._keys[-1]
        if key is None:
            self._keys[-1] = self._key(node)
            return
        self._keys[-1] = None
        if key.text not in self._seen[-1]:
            self._seen[-1][key.text] = key.line
            parent.entries.append((key, node))
            return
        found = f"the key '{key.text}' stands in line {self._seen[-1][key.text]} already"
        path = self._path_of(self._open[:-1], key)
        self._note(Problem("R005", self._file, key.line, key.column, path, found, hint="delete one of the two"))

    def _path_of(self, around: Sequence[Node], key: Node) -> str:
        """The path of a key whose map is the newest part of the nodes around it."""
        parts = [f"[{len(node.items) - 1}]" if node.kind == LIST else f".{node.entries[-1][0].text}" for node in around]
        return "".join((*parts, f".{key.text}")).lstrip(".")

    def _note(self, problem: Problem) -> None:
        if len(self.problems) < MOST_PROBLEMS:
            self.problems.append(problem)

    def _comma(self, node: Node) -> None:
        """Between braces a comma in a number begins a new key: {Cd: 10,02 mg/L} is Cd: 10 and an empty '02 mg/L'."""
        kept: list[tuple[Node, Node]] = []
        for key, value in node.entries:
            empty = value.kind == SCALAR and value.plain and not value.text
            if empty and key.text[:1].isdigit() and kept and kept[-1][1].text[-1:].isdigit():
                number = kept[-1][1]
                found = f"a comma in the number '{number.text},{key.text}'"
                place = (self._file, number.line, number.column, self._path_of(self._open, kept[-1][0]))
                self._note(Problem("R014", *place, found, hint="write the decimal sign as a point"))
                number.text = f"{number.text}.{key.text}"
            else:
                kept.append((key, value))
        node.entries = kept

    def _key(self, key: Node) -> Node:
        place = (self._file, key.line, key.column, "")
        if key.kind != SCALAR:
            raise _Refused(Problem("R011", *place, f"{KINDS[key.kind]} as a key", hint="put the key in single quotes"))
        if key.text == "<<" and key.plain:
            raise _Refused(Problem("R003", *place, "a merge key (<<)", hint="write the keys out"))
        return key
