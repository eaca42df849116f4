"""Everything that is in force, as a rule file would say it, with a mark on what is the default."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import fields
from typing import Any

from spikeward.daemon.rule_file.checks import FROM_RULE_FILE
from spikeward.daemon.rule_file.walk import defaults
from spikeward.rules.quantities import Quantity
from spikeward.rules.records import Layout, WideColumn
from spikeward.rules.rulebook import BenchRule, Known, NameRule, Preparation, Rulebook
from spikeward.rules.schema import BENCH, NAME, PREPARATION, READER, RULE_FILE, WATCH

_MARK = "  # default"
_PLAIN = frozenset("abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789_ ./%-")

_DEFAULTS = defaults(RULE_FILE)
_SERIES = _DEFAULTS["series"]
_WATCH, _READER, _BENCH, _NAME, _PREPARATION = map(defaults, (WATCH, READER, BENCH, NAME, PREPARATION))


def effective(rules: Rulebook) -> str:
    """Every rule in force. A value equal to its default is marked, whether the file says it or not."""
    return "\n".join(_lines(rules)) + "\n"


def _lines(rules: Rulebook) -> Iterator[str]:
    yield _line(0, "station", rules.station, _DEFAULTS["station"])
    yield _line(0, "language", rules.language, _DEFAULTS["language"])
    yield _line(0, "state", rules.state, _DEFAULTS["state"])
    yield "watch:"
    for watch in rules.watches:
        yield f"  - folder: {_text(watch.folder)}"
        yield f"    reader: {_text(watch.readers)}"
        yield _line(4, "events", watch.events, _WATCH["events"])
        yield _line(4, "settle", f"{watch.settle:g} s", f"{_WATCH['settle']:g} s")
        yield _line(4, "output", watch.output or "beside", _WATCH["output"])
        yield _line(4, "spans_folders", watch.spans_folders, _WATCH["spans_folders"])
    if rules.bench is not None:
        yield "bench:"
        yield from _against(rules.bench, _BENCH, 2)
    yield "readers:"
    for name, layout in rules.layouts.items():
        yield f"  {_text(name)}:"
        yield from _against(layout, _READER, 4)
    yield "names:"
    for rule in rules.names:
        yield from _name(rule)
    yield from _series(rules)
    yield "standards:"
    for standard in rules.standards.values():
        yield f"  {_text(standard.name)}:"
        yield f"    contents: {_text(standard.contents)}"
        yield _line(4, "lot", standard.lot, "")
        yield _line(4, "expires", standard.expires, "")
    yield "preparations:"
    for preparation in rules.preparations:
        yield from _preparation(preparation)
    yield from _batch(rules)
    yield from _checks(rules)
    yield _line(0, "decisions", rules.decisions, _DEFAULTS["decisions"])


def _line(indent: int, key: str, value: Any, default: Any) -> str:
    return f"{' ' * indent}{key}: {_text(value)}{_MARK if value == default else ''}"


def _against(record: Layout | BenchRule, usual: Mapping[str, Any], indent: int) -> Iterator[str]:
    for key, default in usual.items():
        yield _line(indent, key, getattr(record, key), tuple(default) if isinstance(default, list) else default)


def _name(rule: NameRule) -> Iterator[str]:
    yield f"  - role: {rule.role}"
    yield _line(4, "from", rule.source, _NAME["from"])
    yield f"    match: {_quoted(rule.pattern)}"
    if rule.units:
        yield f"    units: {_text(rule.units)}"


def _series(rules: Rulebook) -> Iterator[str]:
    series = rules.series
    yield "series:"
    yield "  expects:"
    yield f"    levels: {_text(series.levels)}" if series.levels else f"    levels: those of the preparation{_MARK}"
    yield _line(4, "readings", series.readings, _SERIES["expects"]["readings"])
    yield _line(2, "same_name", series.same_name, _SERIES["same_name"])
    yield _line(2, "lapses_after", _minutes(series.lapses_after), _minutes(_SERIES["lapses_after"]))
    yield _line(2, "lapsed", series.lapsed, _SERIES["lapsed"])
    yield _line(2, "closes_with", series.closes_with, tuple(_SERIES["closes_with"]))


def _minutes(seconds: float) -> str:
    return f"{seconds / 60:g} min"


def _percent(share: float) -> str:
    return f"{share * 100:g} %"


def _preparation(each: Preparation) -> Iterator[str]:
    yield f"  - for: {_text(each.applies)}{'' if each.applies else _MARK}"
    yield f"    design: {each.design}"
    common = each.aliquot.get("") if set(each.aliquot) == {""} else None
    yield f"    aliquot: {_text(common if common is not None else each.aliquot)}"
    yield f"    final: {_text(each.final) if each.final else 'as mixed'}"
    usual = "each" if each.design == "successive" else "total"
    yield "    additions:"
    yield f"      standard: {_text(each.standard)}"
    yield _line(6, "deliveries", each.deliveries, usual)
    yield f"      levels: {_text(each.additions)}"
    yield _line(4, "level_0", each.level_0, _PREPARATION["level_0"])
    yield _line(4, "diluent", each.diluent or "none", "none")
    if each.sample is not None:
        parts = {key: getattr(each.sample, key) for key in each.sample.__dataclass_fields__}
        yield f"    sample: {_text({key: part for key, part in parts.items() if part is not None})}"
    yield f"    report_in: {each.report_in or f'the unit of the standard{_MARK}'}"


def _batch(rules: Rulebook) -> Iterator[str]:
    yield "blanks:"
    yield _line(2, "background", "subtract signal" if rules.blanks.background else "none", "none")
    yield _line(2, "process", "subtract amount" if rules.blanks.process else "none", "none")
    if rules.brackets:
        yield f"brackets: {_text({analyte: known.content for analyte, known in rules.brackets.items()})}"
    if rules.references:
        yield "references:"
        for sample, known in rules.references.items():
            yield f"  {_text(sample)}: {_text({analyte: _known(each) for analyte, each in known.items()})}"
    if rules.tops:
        yield f"range: {_text({name: f'{top.signal:g} {top.unit}' for name, top in rules.tops.items()})}"
    yield "report:"
    yield _line(2, "coverage", _percent(rules.coverage), _percent(_DEFAULTS["report"]["coverage"]))


def _known(known: Known) -> str:
    if known.standard_uncertainty is None:
        return str(known.content)
    return f"{known.content}, standard uncertainty {known.standard_uncertainty:.4g} {known.content.unit}"


def _checks(rules: Rulebook) -> Iterator[str]:
    yield "checks:"
    for name, limits in rules.checks.items():
        yield f"  {name}:" if limits.values else f"  {name}: {{}}"
        for key, value in limits.values.items():
            source = limits.sources.get(key, "")
            yield f"    {key}: {_limit(value)}" + (f"  # {source}" if source != FROM_RULE_FILE else "")


def _limit(value: float | tuple[float, float] | None) -> str:
    if value is None:
        return "none"
    return f"[{value[0]:g}, {value[1]:g}]" if isinstance(value, tuple) else f"{value:g}"


def _text(value: Any) -> str:
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, Quantity):
        return str(value)
    if isinstance(value, Mapping):
        return "{" + ", ".join(f"{_text(key)}: {_text(each)}" for key, each in value.items()) + "}"
    if isinstance(value, WideColumn):
        parts = {each.name: getattr(value, each.name) for each in fields(value)}
        return _text({key: part for key, part in parts.items() if part})
    if isinstance(value, tuple):
        return "[" + ", ".join(_text(each) for each in value) + "]"
    text = str(value)
    return text if text and not set(text) - _PLAIN and text == text.strip() and text[0] not in "-%" else _quoted(text)


def _quoted(text: str) -> str:
    if text.isprintable():
        return "'" + text.replace("'", "''") + "'"
    return '"' + text.encode("unicode_escape").decode("ascii").replace('"', '\\"') + '"'
