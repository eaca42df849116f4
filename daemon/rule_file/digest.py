"""The digest of a rule book: equal for equal decisions, whatever the file's comments, order of keys, or folders.

It covers everything that can change a result: station and language (they stand in summaries), readers and which of them
a watch uses, bench files, names, series, standards, preparations, blanks, brackets, references, ranges, the limits of
every check with their sources, coverage and the decisions file, and the versions of readers from other packages. It
does not cover where folders and the state lie, how changes are noticed, and in which line a rule stands.
"""

from __future__ import annotations

import hashlib
import json
from dataclasses import fields, is_dataclass
from typing import Any

from spikeward.parsers.registry import origin
from spikeward.rules.quantities import Quantity
from spikeward.rules.rulebook import Rulebook

# What cannot change a result, by the record that holds it: a field of the same name elsewhere may well change one.
_LEFT_OUT = {"Rulebook": {"digest", "state", "watches"}, "NameRule": {"line"}, "Preparation": {"line"}}


def digest_of(rules: Rulebook) -> str:
    """The hex SHA-256 of a canonical rendering of the rules."""
    content = _plain(rules)
    # Which readers take a file, in which order, decides what is read; where the folder lies does not.
    content["watches"] = sorted({(watch.readers, watch.spans_folders) for watch in rules.watches})
    content["origins"] = {layout.format: origin(layout.format) for layout in rules.layouts.values()}
    text = json.dumps(content, ensure_ascii=False, sort_keys=True, separators=(",", ":"))
    return hashlib.sha256(text.encode("utf-8")).hexdigest()


def _plain(value: Any) -> Any:
    if isinstance(value, Quantity):
        return str(value)
    if is_dataclass(value) and not isinstance(value, type):
        left_out = _LEFT_OUT.get(type(value).__name__, set())
        return {each.name: _plain(getattr(value, each.name)) for each in fields(value) if each.name not in left_out}
    if isinstance(value, dict):
        return {key: _plain(each) for key, each in value.items()}
    if isinstance(value, (tuple, list)):
        return [_plain(each) for each in value]
    return value
