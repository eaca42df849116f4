"""A tree of texts held against the schema: values out, and every problem of shape with its place and a suggestion."""

from __future__ import annotations

import difflib
import re
from collections.abc import Iterable, Iterator, Mapping
from typing import Any

from spikeward.daemon.rule_file.problems import ERROR, MOST_PROBLEMS, Problem
from spikeward.daemon.rule_file.yaml_text import KINDS, LIST, MAP, SCALAR, Node
from spikeward.rules.quantities import in_plain_units, unit_code
from spikeward.rules.schema_kinds import Scalar, one_of
from spikeward.rules.schema_shapes import WITH_ITS_DEFAULTS, Block, Field, Limits, ListOf, MapOf, Shape, kind_of

LONGEST_LIST = 500  # what follows compares entries with each other
_LONGEST = 300  # characters of what was found
_LONGEST_WORD = 40  # beyond, no suggestion is looked for


class TooMany(Exception):
    """So many problems that more of them help nobody."""


def near(word: str, known: Iterable[str], cutoff: float = 0.6) -> str:
    """The known word that is nearest to what was written, or an empty text."""
    if len(word) > _LONGEST_WORD:
        return ""
    by_folded = {each.lower().replace("-", "_"): each for each in sorted(known, reverse=True)}
    found = difflib.get_close_matches(word.lower().replace("-", "_"), by_folded, n=1, cutoff=cutoff)
    return by_folded[found[0]] if found else ""


class Walker:
    """Walks one file. ``places`` and ``keys`` hold the node of every value and of its key by path."""

    def __init__(self, file_name: str, root: Block) -> None:
        self.file = file_name
        self.problems: list[Problem] = []
        self.places: dict[str, Node] = {}
        self.keys: dict[str, Node] = {}
        self._root = root
        self._meanings: dict[str, str] = {}  # of ppm, ppb and ppt

    def walk(self, node: Node, shape: Shape, path: str) -> Any:
        """The value of a node, or None where it is wrong; wrong entries of a list are None."""
        self.places[path] = node
        if not path:
            self._meanings = _meanings_of(node)
        if isinstance(shape, Limits):
            return node
        if node.kind == SCALAR and not node.text and (node.plain or not isinstance(shape, Scalar)):
            self.at_node(node, path, "R013", "there is no value", kind_of(shape), "give one, or delete the key")
            return None
        if isinstance(shape, Scalar):
            return self._scalar(node, shape, path)
        if isinstance(shape, ListOf):
            return self._list(node, shape, path)
        if isinstance(shape, MapOf):
            return self._map(node, shape, path)
        return self._block(node, shape, path)

    def _not_too_long(self, node: Node, length: int, path: str) -> None:
        if length > LONGEST_LIST:
            self.at_node(node, path, "R002", f"{length} entries", f"at most {LONGEST_LIST}", "shorten the list")
            raise TooMany

    def _scalar(self, node: Node, shape: Scalar, path: str) -> Any:
        if node.kind != SCALAR:
            hint = f"put it in single quotes if it begins with {'{' if node.kind == MAP else '['}"
            self.at_node(node, path, "R011", KINDS[node.kind], shape.expected, hint)
            return None
        if not node.text and not shape.may_be_empty:
            self.at_node(node, path, "R013", "the value is empty", shape.expected)
            return None
        try:
            return shape.convert(in_plain_units(node.text, self._meanings) if shape.code == "R015" else node.text)
        except ValueError as error:
            suggestion = near(node.text, shape.words)
            hint = f"did you mean {suggestion}?" if suggestion else ""
            self.at_node(node, path, shape.code, str(error), shape.expected, hint)
            return shape.convert(suggestion) if suggestion else None

    def _list(self, node: Node, shape: ListOf, path: str) -> list[Any] | None:
        if node.kind == LIST:
            self._not_too_long(node, len(node.items), path)
            return [self.walk(item, shape.item, f"{path}[{number}]") for number, item in enumerate(node.items)]
        if shape.single:
            return [self.walk(node, shape.item, f"{path}[0]")]
        self.at_node(node, path, "R011", KINDS[node.kind], "a list", "begin each entry with '- '")
        return [self.walk(node, shape.item, f"{path}[0]")] if node.kind == MAP else None

    def _map(self, node: Node, shape: MapOf, path: str) -> dict[str, Any] | None:
        if shape.listed and node.kind == LIST:
            node = Node(MAP, node.line, node.column, entries=[(item, item) for item in node.items])
        if node.kind != MAP:
            hint = f"write {shape.example or shape.keys[0] if shape.keys else shape.example or 'name'}: …"
            self.at_node(node, path, "R011", KINDS[node.kind], kind_of(shape), hint)
            return None
        self._not_too_long(node, len(node.entries), path)
        values: dict[str, Any] = {}
        for key, value in node.entries:
            name = key.text
            if shape.keys and name not in shape.keys:
                name = self._unknown(key, f"{path}.{name}", shape.keys, {key.text for key, _ in node.entries})
                if not name:
                    continue
            elif not name:
                self.at_node(key, path, "R013", "an empty key", shape.called)
                continue
            self.keys[f"{path}.{name}"] = key
            values[name] = self.walk(value, shape.item, f"{path}.{name}")
        return values

    def _block(self, node: Node, shape: Block, path: str) -> dict[str, Any] | None:
        if node.kind == SCALAR and shape.short:
            field = next(field for field in shape.fields if field.name == shape.short)
            return {**defaults(shape), shape.short: self.walk(node, field.shape, path)}
        if node.kind != MAP:
            self.at_node(node, path, "R011", KINDS[node.kind], kind_of(shape), "write key: value, one key a line")
            return None
        values = defaults(shape)
        given: set[str] = set()
        outer = len(self.problems)
        for field, key, value in self._entries(node, shape, path):
            where = f"{path}.{field.name}".lstrip(".")
            given.add(field.name)
            self.keys[where] = key
            values[field.name] = self.walk(value, field.shape, where)
        # A key that was told to stand one level deeper is no key that is missing besides.
        strayed = any(problem.code == "R012" for problem in self.problems[outer:])
        for field in shape.fields:
            if field.required and field.name not in given:
                values[field.name] = None
                if strayed and field.name == _deeper(shape):
                    continue
                where = f"{path}.{field.name}".lstrip(".")
                hint = (
                    f"add {field.name}: {field.example}"
                    if field.example and "\n" not in field.example
                    else f"add {field.name}:"
                )
                self.at_node(node, where, "R010", f"{field.name} is missing", "", hint)
        return values

    def _entries(self, node: Node, shape: Block, path: str) -> Iterator[tuple[Field, Node, Node]]:
        """The keys of a block with their fields; a misspelt key goes on as the one that it was meant for."""
        fields = {field.name: field for field in shape.fields}
        present = {key.text for key, _ in node.entries}
        for key, value in node.entries:
            name = key.text
            if name in fields:
                yield fields[name], key, value
            elif shape.others is not None:
                yield Field(name, shape.others.item, ""), key, value
            elif meant := self._unknown(key, f"{path}.{name}".lstrip("."), tuple(fields), present, _deeper(shape)):
                present.add(meant)
                yield fields[meant], key, value

    def _unknown(self, key: Node, path: str, known: tuple[str, ...], present: set[str], deeper: str = "") -> str:
        """Report a key that is not known; the key that was meant, or an empty text."""
        homes = _homes(self._root, key.text)
        section = re.split(r"[.\[]", path)[0]
        columns = [home for home in _homes(self._root, key.text, of_maps=True) if home.startswith(f"{section}.")]
        homes = homes or columns
        # A key that is right elsewhere is more likely misplaced than misspelt, the more so in the same section.
        meant = near(key.text, set(known) - present, cutoff=1.0 if columns else 0.8 if homes else 0.6)
        if meant:
            hint = f"did you mean {meant}?"
        elif homes:
            hint = f"it belongs under {one_of(tuple(homes))}"
        elif deeper and deeper not in present:
            hint = f"write it one level deeper: {deeper}: {{{key.text}: …}}"
        elif twin := near(key.text, known):
            hint = f"{twin} stands here already"
        else:
            hint = f"possible here: {one_of(known)}"
        self.at_node(key, path, "R012", f"the key '{key.text}' is not known", "", hint)
        return meant

    def sound(self, *paths: str) -> bool:
        """Whether nothing is wrong below some paths, so that what depends on them can be looked at."""
        return not any(
            problem.path == path or problem.path.startswith((f"{path}.", f"{path}["))
            for problem in self.problems
            if problem.severity == ERROR
            for path in paths
        )

    def at_node(
        self, node: Node, path: str, code: str, found: str, expected: str = "", hint: str = "", severity: str = ERROR
    ) -> None:
        """Report a problem at a node."""
        if len(self.problems) >= MOST_PROBLEMS:
            raise TooMany
        found = found if len(found) <= _LONGEST else f"{found[:_LONGEST]} …"
        path = path if len(path) <= _LONGEST else f"{path[:_LONGEST]} …"
        self.problems.append(Problem(code, self.file, node.line, node.column, path, found, expected, hint, severity))

    def at(
        self,
        path: str,
        code: str,
        found: str,
        expected: str = "",
        hint: str = "",
        severity: str = ERROR,
        key: bool = False,
    ) -> None:
        """Report a problem at the value of a path (or at its key), or at the nearest part of the file around it."""
        node = self._nearest(path, self.keys if key else self.places)
        self.at_node(node, path, code, found, expected, hint, severity)

    def line_of(self, path: str) -> int:
        """The line of a path, or of the nearest part of the file around it."""
        return self._nearest(path, self.places).line

    def _nearest(self, path: str, places: Mapping[str, Node]) -> Node:
        while path and path not in places:
            path = path[: max(path.rfind("."), path.rfind("["), 0)]
        return places.get(path) or self.places[""]


def defaults(block: Block) -> dict[str, Any]:
    """The values of a block of which nothing is given."""
    return {field.name: _default(field) for field in block.fields}


def _default(field: Field) -> Any:
    shape, default = field.shape, field.default
    if isinstance(shape, Block) and default == WITH_ITS_DEFAULTS:
        return defaults(shape)
    if isinstance(shape, ListOf) and isinstance(shape.item, Scalar) and default is not None:
        return [shape.item.convert(each) for each in default]
    if isinstance(shape, Scalar) and isinstance(default, str):
        return shape.convert(default) if default else default
    return {} if isinstance(shape, MapOf) else None


def _meanings_of(root: Node) -> dict[str, str]:
    """What the file says that ppm, ppb and ppt mean, wherever it says so."""
    units = next((value for key, value in root.entries if key.text == "units" and value.kind == MAP), None)
    entries = units.entries if units is not None else []
    return {key.text: code for key, value in entries if value.kind == SCALAR and (code := unit_code(value.text))}


def _deeper(block: Block) -> str:
    """The first key of a block, if it alone holds free names, which are easily written one level too high."""
    field, *others = block.fields
    free = isinstance(field.shape, MapOf) and not field.shape.keys
    return field.name if free and all(isinstance(other.shape, Scalar) for other in others) else ""


def _homes(block: Block, name: str, path: str = "", of_maps: bool = False) -> list[str]:
    """The blocks of a schema in which a key is at home, or the maps of given keys."""
    found = [path] if path and not of_maps and any(field.name == name for field in block.fields) else []
    for field in block.fields:
        shape = field.shape
        if of_maps and isinstance(shape, MapOf) and name in shape.keys:
            found.append(f"{path}.{field.name}".lstrip("."))
        while isinstance(shape, (ListOf, MapOf)):
            shape = shape.item
        if isinstance(shape, Block):
            found += _homes(shape, name, f"{path}.{field.name}".lstrip("."), of_maps)
    return found
