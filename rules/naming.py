"""A solution's name or a file's path becomes role, batch, sample, level, vessel, injection and reading.

Patterns run on a linear-time engine and must match the whole name; the first rule that takes a name wins. ``file`` is
the file's name and ``path`` its path below the watched folder, both without the last ending.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache

import re2

from spikeward.rules.records import PLAIN_ROLES, Entry, Layout, Reading, SeriesKey, Table
from spikeward.rules.rulebook import NameRule, Rulebook

QUANTITY_GROUPS = (
    "mass", "volume", "digest", "dry_matter", "moisture", "dilution", "aliquot", "addition", "final", "standard",
    "internal_standard", "spike", "content",
)  # fmt: skip
GROUPS = (
    "batch", "sample", "rerun_of", "level", "vessel", "block", "injection", "reading", "analyte", "line",
    *QUANTITY_GROUPS,
)  # fmt: skip


@dataclass(frozen=True, slots=True)
class Source:
    """Where a table came from, as names and keys need it.

    ``path`` is relative to the watched folder; ``folder`` is the output folder of its series, relative to the root.
    """

    root: str
    path: str
    folder: str
    layout: Layout
    file_digest: str = ""


@dataclass(frozen=True, slots=True)
class Understood:
    """What one name means: the rule that took it (its position from 0) and the groups that it filled."""

    rule: NameRule
    position: int
    groups: Mapping[str, str]


@dataclass(frozen=True, slots=True)
class Named:
    """The readings of one file, and the names that no rule took with the reason."""

    readings: tuple[Reading, ...]
    unnamed: tuple[str, ...] = ()


class Namer:
    """The naming rules of one rule book, compiled once; answers are remembered."""

    def __init__(self, rules: Sequence[NameRule]) -> None:
        self._rules = [(rule, re2.compile(rule.pattern)) for rule in rules]
        self.understand = lru_cache(maxsize=65536)(self._understand)

    def _understand(self, solution: str, path: str) -> Understood | None:
        texts = _texts(solution, path)
        for position, (rule, pattern) in enumerate(self._rules):
            match = pattern.fullmatch(texts[rule.source]) if texts[rule.source] else None
            if match is not None:
                groups = {name: value for name, value in match.groupdict().items() if value is not None}
                return Understood(rule, position, groups)
        return None

    def takers(self, solution: str, path: str) -> tuple[NameRule, ...]:
        """Every rule that could take a name, in order; more than one means that a later rule is shadowed here."""
        texts = _texts(solution, path)
        return tuple(
            rule for rule, pattern in self._rules if texts[rule.source] and pattern.fullmatch(texts[rule.source])
        )


def _texts(solution: str, path: str) -> dict[str, str]:
    stem = path[: -len(ending)] if (ending := _ending(path)) else path
    return {"solution": solution, "file": stem.rsplit("/", 1)[-1], "path": stem}


def _ending(path: str) -> str:
    name = path.rsplit("/", 1)[-1]
    return name[name.rfind(".") :] if name.rfind(".") > 0 else ""


def number_of(text: str) -> str:
    """A level, vessel or reading as it is compared: ``02`` and ``2`` are one."""
    return str(int(text)) if text.isascii() and text.isdigit() else text


def level_order(level: str) -> tuple[int, int, str]:
    """Sort key of levels and vessels: numbers by value, before words."""
    return (0, int(level), "") if level.isascii() and level.isdigit() else (1, 0, level)


def name(table: Table, source: Source, namer: Namer, rules: Rulebook) -> Named:
    """Give every entry of a table its place, or say why it has none.

    Returns
    -------
    the readings in the order of the table; names without a place once each, with a sentence
    """
    only_analyte = _only_analyte(rules)
    readings: list[Reading] = []
    unnamed: dict[str, None] = {}
    for entry in table.entries:
        shown = entry.solution or source.path
        understood = namer.understand(entry.solution, source.path)
        if understood is None:
            unnamed[f"'{shown}': no naming rule takes this name; add a rule under names, or rename the solution"] = None
            continue
        reading, problem = _reading(entry, source, understood, only_analyte)
        if reading is None:
            unnamed[f"'{shown}': {problem}"] = None
        else:
            readings.append(reading)
    return Named(tuple(readings), tuple(unnamed))


def _only_analyte(rules: Rulebook) -> str:
    analytes = {analyte for standard in rules.standards.values() for analyte in standard.contents}
    return analytes.pop() if len(analytes) == 1 else ""


def _reading(entry: Entry, source: Source, understood: Understood, only_analyte: str) -> tuple[Reading | None, str]:
    groups, rule = understood.groups, understood.rule
    level = number_of(groups.get("level", ""))
    if not level and rule.role not in PLAIN_ROLES:
        return None, f"the rule for role {rule.role} took it without a level; the level must be part of the name"
    analyte = groups.get("analyte", entry.analyte) or only_analyte
    if not analyte:
        return None, "the file does not say the analyte; declare its column, or name it in the pattern"
    values = [
        (group, f"{groups[group]} {rule.units.get(group, '')}".strip(), "name")
        for group in QUANTITY_GROUPS
        if group in groups
    ]
    if "rerun_of" in groups:
        values.append(("rerun_of", groups["rerun_of"], "name"))
    values += [(meaning, text, "column") for meaning, text in entry.values if meaning not in ("reading", "block")]
    key = SeriesKey(source.root, source.folder, groups.get("batch", ""), rule.role, groups.get("sample", ""))
    reading = Reading(
        series=key,
        level=level,
        vessel=groups.get("vessel", ""),
        injection=number_of(groups.get("injection", "")),
        reading=number_of(groups.get("reading", dict(entry.values).get("reading", ""))),
        solution=entry.solution or source.path,
        analyte=analyte,
        line=groups.get("line", entry.line),
        unit=entry.unit,
        signal=entry.signal,
        text=entry.text,
        qualifier=entry.qualifier,
        readings=entry.readings,
        sd=entry.sd,
        measured_at=entry.measured_at,
        processed_at=entry.processed_at,
        order=entry.order,
        values=tuple(values),
        already=source.layout.already,
        path=source.path,
        row=entry.row,
        digest=entry.digest,
        file_digest=source.file_digest,
        block=number_of(groups.get("block", dict(entry.values).get("block", ""))),
    )
    return reading, ""
