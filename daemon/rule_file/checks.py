"""Rule packs, and the limits that a rule file changes: which checks are asked for, with which numbers, from where."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from importlib.resources import files
from typing import Any

from spikeward.daemon.rule_file.walk import Walker, near
from spikeward.daemon.rule_file.yaml_text import KINDS, LIST, MAP, SCALAR, Node, compose
from spikeward.rules.rulebook import Limits
from spikeward.rules.schema_kinds import Scalar, limit, one_of

Value = float | tuple[float, float] | None

FROM_RULE_FILE = "rule file"
"""The source of a limit that the rule file changes."""

_OFF = ("off", "no")


@dataclass(frozen=True, slots=True)
class PackLimit:
    """One limit of a rule pack. ``whole``: it counts something; ``pair``: it is a range."""

    value: Value
    source: str
    whole: bool
    pair: bool


Pack = Mapping[str, Mapping[str, PackLimit]]


class PackBroken(Exception):
    """A rule pack that cannot be read, with the sentence that says where."""


@cache
def shipped_packs() -> Mapping[str, str]:
    """The texts of the packs that come with the program, by name."""
    folder = files("spikeward.rules.packs")
    return {
        each.name.removesuffix(".yaml"): each.read_text(encoding="utf-8")
        for each in sorted(folder.iterdir(), key=lambda each: each.name)
        if each.name.endswith(".yaml")
    }


@cache
def read_pack(text: str, name: str) -> Pack:
    """Read a pack: checks, their limits, and where each comes from.

    Raises
    ------
    PackBroken : with the first thing that is wrong
    """
    root, problems = compose(text, name)
    if problems or root is None or root.kind != MAP:
        raise PackBroken(problems[0].line_text() if problems else f"{name}: the pack is empty")
    return {check: {key: _pack_limit(entry, name, key) for key, entry in node.pairs()} for check, node in root.pairs()}


def _pack_limit(node: Node, name: str, key: str) -> PackLimit:
    parts = dict(node.pairs())
    if "value" not in parts or "source" not in parts or not parts["source"].text:
        raise PackBroken(f"{name}:{node.line}: {key} needs value and source")
    value = parts["value"]
    pair = key.endswith("_outside")
    # A number without a decimal point counts something: vessels, sides, a switch. A null says which kind by its name.
    whole = value.kind == SCALAR and value.text.isdigit()
    try:
        if pair and value.kind == LIST:
            low, high = (limit(whole=False).convert(item.text) for item in value.items)
            return PackLimit((low, high), parts["source"].text, False, True)
        return PackLimit(limit(whole).convert(value.text), parts["source"].text, whole, pair)
    except ValueError as error:
        raise PackBroken(f"{name}:{value.line}:{value.column}: {key}: {error}") from None


def checks_of(value: Mapping[str, Any], walker: Walker, packs: Mapping[str, str]) -> dict[str, Limits]:
    """The checks that are asked for: those of the pack, with what the rule file changes."""
    used = value.get("use")
    name = used.removeprefix("pack:") if used else ""
    if name not in packs:
        if used:
            hint = f"did you mean pack:{meant}?" if (meant := near(name, packs)) else ""
            known = one_of(tuple(f"pack:{each}" for each in sorted(packs)))
            walker.at("checks.use", "R030", f"there is no rule pack '{used}'", known, hint)
        return {}
    try:
        pack = read_pack(packs[name], f"pack {name}")
    except PackBroken as broken:
        walker.at("checks.use", "R030", f"the rule pack '{used}' cannot be used: {broken}")
        return {}
    found = {
        check: Limits({key: entry.value for key, entry in limits.items()}, {key: e.source for key, e in limits.items()})
        for check, limits in pack.items()
    }
    for check, node in value.items():
        if check != "use" and isinstance(node, Node):
            _change(found, check, node, pack, walker)
    return found


def _change(found: dict[str, Limits], check: str, node: Node, pack: Pack, walker: Walker) -> None:
    path = f"checks.{check}"
    if check not in pack:
        meant = near(check, ("use", *pack))
        hint = f"did you mean {meant}?" if meant else f"possible here: {one_of(tuple(pack))}"
        walker.at_node(walker.keys[path], path, "R012", f"the check '{check}' is not known", "", hint)
        if meant not in pack:
            return
        check = meant
    if node.kind == SCALAR and node.text in _OFF and node.plain:
        found.pop(check, None)
        return
    if node.kind != MAP:
        what = "there is no value" if node.kind == SCALAR and not node.text else KINDS[node.kind]
        walker.at_node(node, path, "R011", what, "a map of limits such as {warn_above: 10 %}, or off")
        return
    values, sources = dict(found[check].values), dict(found[check].sources)
    for key, entry in node.entries:
        name, where = key.text, f"{path}.{key.text}"
        if name not in pack[check]:
            meant = near(name, set(pack[check]) - set(dict(node.pairs())))
            hint = f"did you mean {meant}?" if meant else _possible(check, pack)
            walker.at_node(key, where, "R012", f"the limit '{name}' of {check} is not known", "", hint)
            if not meant:
                continue
            name = meant
        walker.places[where] = entry
        known = pack[check][name]
        values[name] = _pair(entry, where, walker) if known.pair else walker.walk(entry, limit(known.whole), where)
        sources[name] = FROM_RULE_FILE
    found[check] = Limits(values, sources)


def _possible(check: str, pack: Pack) -> str:
    return (
        f"possible here: {one_of(tuple(pack[check]))}"
        if pack[check]
        else f"{check} has no limits; only off is possible"
    )


_BOUND: Scalar = limit(whole=False)


def _pair(node: Node, path: str, walker: Walker) -> tuple[float, float] | None:
    expected = "two limits such as [80 %, 120 %], or none"
    if node.kind == SCALAR and node.text in ("none", "null", "~"):
        return None
    if node.kind != LIST or len(node.items) != 2:
        what = "there is no value" if node.kind == SCALAR and not node.text else KINDS[node.kind]
        found = f"a list of {len(node.items)}" if node.kind == LIST else what
        walker.at_node(node, path, "R011", found, expected)
        return None
    low, high = (walker.walk(item, _BOUND, f"{path}[{number}]") for number, item in enumerate(node.items))
    if low is None or high is None:
        return None
    if not low < high:
        walker.at_node(node, path, "R031", "the first limit is not below the second", expected)
        return None
    return low, high
