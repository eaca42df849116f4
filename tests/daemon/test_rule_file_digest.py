"""Every decision that can change a result changes the digest of the rules; what cannot does not."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import fields, is_dataclass, replace
from decimal import Decimal
from pathlib import Path
from typing import Any

from spikeward.daemon.rule_file.digest import digest_of
from spikeward.daemon.rule_file.load import load_rules
from spikeward.rules.rulebook import Rulebook

EXAMPLE = (Path(__file__).resolve().parents[2] / "config.example.yaml").read_text(encoding="utf-8")
NO_MATTER = {
    ("digest",), ("state",), ("names", "line"), ("preparations", "line"), ("watches", "folder"), ("watches", "events"),
    ("watches", "settle"), ("watches", "output"),
}  # fmt: skip


def other(value: Any) -> Any:
    if isinstance(value, bool):
        return not value
    if isinstance(value, (int, float, Decimal)):
        return value + 1
    return "another" if value in (None, "") else f"{value}x"


def altered(value: Any, path: tuple[str, ...] = ()) -> Iterator[tuple[tuple[str, ...], Any]]:
    """The value with one leaf changed, for every leaf."""
    if is_dataclass(value):
        for each in fields(value):
            for way, changed in altered(getattr(value, each.name), (*path, each.name)):
                yield way, replace(value, **{each.name: changed})
    elif isinstance(value, Mapping):
        for key in value:
            for way, changed in altered(value[key], path):
                yield way, {**value, key: changed}
    elif isinstance(value, tuple):
        for index, item in enumerate(value):
            for way, changed in altered(item, path):
                yield way, (*value[:index], changed, *value[index + 1 :])
    else:
        yield path, other(value)


def example() -> Rulebook:
    rules, problems = load_rules(EXAMPLE, "config.example.yaml")
    assert rules is not None, problems
    return rules


def test_every_leaf_counts_that_can_change_a_result():
    rules = example()
    seen = set()
    for path, changed in altered(rules):
        seen.add(path)
        assert (digest_of(changed) == rules.digest) == (path in NO_MATTER), path
    assert ("preparations", "sample", "digest", "value") in seen
    assert seen >= NO_MATTER
