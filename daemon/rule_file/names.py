"""Naming rules: what their groups mean, which they need, and which rule can never be reached."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from typing import Any

import re2

from spikeward.daemon.rule_file.pattern_examples import examples
from spikeward.daemon.rule_file.problems import WARNING
from spikeward.daemon.rule_file.walk import Walker, near
from spikeward.rules.naming import GROUPS
from spikeward.rules.quantities import UNITS
from spikeward.rules.records import SERIES_ROLES
from spikeward.rules.schema_kinds import one_of

_CONTENT = ("mass per volume", "amount per volume", "mass per mass", "amount per mass")

DIMENSIONS = {
    "mass": ("mass",), "volume": ("volume",), "digest": ("volume", "mass"), "aliquot": ("volume", "mass"),
    "addition": ("volume", "mass", "amount"), "final": ("volume", "mass"), "internal_standard": ("volume", "mass"),
    "spike": ("volume", "mass"), "content": _CONTENT,
}  # fmt: skip
"""What a quantity in a name measures, where it needs a unit."""
_USUAL = {"volume": "mL", "mass": "g", "mass per volume": "mg/L"}
_UNITLESS = ("dilution", "standard")

Rule = dict[str, Any]


def groups_of(pattern: str) -> list[str]:
    """The names of a pattern's groups in order, each as often as it stands there."""
    # Escaped characters and classes are skipped: a bracket in them opens no group.
    parts = re.finditer(r"\\.|\[\^?\]?(?:\\.|[^\]\\])*\]|\(\?P?<(\w+)>", pattern, re.DOTALL)
    return [part[1] for part in parts if part[1]]


def check_names(value: Mapping[str, Any], walker: Walker) -> None:
    """Everything that the naming rules can get wrong once each is a rule."""
    rules: list[Rule | None] = value["names"] or []
    for number, rule in enumerate(rules):
        path = f"names[{number}]"
        if rule is not None and rule["match"] is not None:
            _check_groups(rule, path, walker)
            _check_units(rule, path, walker)
    if not walker.sound("names"):
        return
    sound = [rule for rule in rules if rule]
    _check_batches(sound, walker)
    _check_shadows(sound, walker)


def _check_groups(rule: Rule, path: str, walker: Walker) -> None:
    groups = groups_of(rule["match"])
    for group in dict.fromkeys(groups):
        if group not in GROUPS:
            meant = near(group, set(GROUPS) - set(groups))
            hint = (
                f"did you mean {meant}?"
                if meant
                else f"possible here: {one_of(GROUPS)}; or (?:…) for a group without meaning"
            )
            walker.at(f"{path}.match", "R021", f"the group '{group}' is not known", "", hint)
        elif groups.count(group) > 1:
            walker.at(f"{path}.match", "R021", f"the group '{group}' stands there twice", "", "write two naming rules")
    if rule["role"] in SERIES_ROLES:
        for needed in ("sample", "level"):
            if needed not in groups and not near(needed, set(groups) - set(GROUPS)):
                told = f"the pattern of role {rule['role']} does not say the {needed}"
                walker.at(f"{path}.match", "R022", told, "", f"put (?P<{needed}>…) around the {needed} in the pattern")


def _check_units(rule: Rule, path: str, walker: Walker) -> None:
    groups, units = set(groups_of(rule["match"])), rule["units"] or {}
    for group, dimensions in DIMENSIONS.items():
        if group in groups and group not in units:
            if not walker.sound(f"{path}.units"):
                continue
            told = f"the {group} in the name has no unit"
            walker.at(f"{path}.match", "R023", told, "", f"add units: {{{group}: {_USUAL[dimensions[0]]}}}")
    for group, unit in units.items():
        where = f"{path}.units.{group}"
        expected = DIMENSIONS.get(group, ("fraction",))
        if group not in groups:
            walker.at(where, "R031", f"the pattern has no group {group}", "", f"delete the unit, or add (?P<{group}>…)")
        elif group in _UNITLESS:
            walker.at(where, "R023", f"a {group} has no unit", "", "delete it")
        elif unit is not None and UNITS[unit][0] not in expected:
            walker.at(where, "R023", f"{unit} is a unit of {UNITS[unit][0]}", f"a unit of {one_of(expected)}")


def _check_batches(rules: list[Rule], walker: Walker) -> None:
    """A blank that names no batch never meets samples that do."""
    named = ["batch" in groups_of(rule["match"]) for rule in rules]
    if not any(named) or all(named):
        return
    number = named.index(False)
    told = "this rule names no batch and others do; what it takes stands in a batch of its own, that of the folder"
    walker.at(f"names[{number}].match", "R042", told, "", "add (?P<batch>…), or take it out of the others", WARNING)


def _check_shadows(rules: list[Rule], walker: Walker) -> None:
    for number, taken, before in shadowed(rules):
        role, line = rules[before]["role"], walker.places[f"names[{before}]"].line
        told = (
            f"this rule for role {rules[number]['role']} takes nothing: "
            f"names such as '{taken}' go to the rule for role {role} in line {line}"
        )
        walker.at(f"names[{number}]", "R040", told, "", "put the special rule before the general one", WARNING)


def shadowed(rules: list[Rule]) -> Iterator[tuple[int, str, int]]:
    """Rules all of whose example names an earlier rule takes: (position, an example, position of the earlier)."""
    compiled = [(rule["from"], re2.compile(rule["match"])) for rule in rules]
    for number, rule in enumerate(rules):
        names = examples(rule["match"])
        takers = [_taker(name, rule["from"], compiled[:number]) for name in names]
        first = takers[0] if takers else None
        if first is not None and None not in takers:
            yield number, names[0], first


def _taker(name: str, source: str, earlier: list[tuple[str, Any]]) -> int | None:
    for number, (other, pattern) in enumerate(earlier):
        if other == source and pattern.fullmatch(name):
            return number
    return None
