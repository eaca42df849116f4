"""Everything that is in force, as a rule file would say it, with a mark on what is the default."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import fields
from typing import Any

from spikeward.daemon.rule_file.checks import FROM_RULE_FILE
from spikeward.daemon.rule_file.walk import defaults
from spikeward.rules.quantities import Quantity
from spikeward.rules.records import Layout, WideColumn
from spikeward.rules.rulebook import (
    BenchRule,
    BlankRule,
    Electrode,
    InternalStandard,
    Known,
    LinesRule,
    NameRule,
    Preparation,
    Rulebook,
    SampleRule,
    Spike,
    Top,
)
from spikeward.rules.schema import BENCH, NAME, READER, RULE_FILE, WATCH
from spikeward.rules.schema_preparation import ELECTRODE, PREPARATION

_MARK = "  # default"
_PLAIN = frozenset("abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789_ ./%-")

_DEFAULTS = defaults(RULE_FILE)
_SERIES = _DEFAULTS["series"]
_WATCH, _READER, _BENCH, _NAME, _PREPARATION, _ELECTRODE = map(
    defaults, (WATCH, READER, BENCH, NAME, PREPARATION, ELECTRODE)
)


def effective(rules: Rulebook) -> str:
    """Every rule in force. A value equal to its default is marked, whether the file says it or not."""
    return "\n".join(_lines(rules)) + "\n"


def _lines(rules: Rulebook) -> Iterator[str]:
    yield _line(0, "station", rules.station, _DEFAULTS["station"])
    if rules.molar_masses:
        yield f"molar_masses: {_text(rules.molar_masses)}"
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
        yield _line(4, "density", standard.density or "not given", "not given")
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
    yield _line(4, "response", each.response, _PREPARATION["response"])
    yield _line(4, "spiked", each.spiked, _PREPARATION["spiked"])
    if each.spiked != "sample":
        yield f"    aliquot: {_vessels(each.aliquot) or 'from elsewhere'}"
        yield f"    final: {_vessels(each.final) or 'as mixed'}"
    usual = "each" if each.design == "successive" else "total"
    yield "    additions:"
    for addition in each.additions:
        yield f"      - standard: {_text(addition.standard) if addition.standard else 'none, the analyte itself'}"
        yield _line(8, "deliveries", addition.deliveries, usual)
        yield f"        {'levels' if addition.standard else 'amounts'}: {_text(addition.levels)}"
    yield _line(4, "level_0", each.level_0, _PREPARATION["level_0"])
    yield _line(4, "diluent", each.diluent or "none", "none")
    yield _line(4, "density", each.density or "not given", "not given")
    if each.internal_standard is not None:
        yield f"    internal_standard: {_given(each.internal_standard, names='for')}"
    if each.electrode is not None:
        yield from _electrode(each.electrode)
    if each.sample is not None:
        yield f"    sample: {_given(each.sample)}"
    if each.recovery is not None:
        factor, uncertainty = each.recovery
        yield f"    recovery: {{factor: {factor:g}, uncertainty: {uncertainty:g}}}"
    if each.spike is not None:
        yield f"    spike: {_given(each.spike)}"
    yield f"    report_in: {each.report_in or f'the unit of the standard{_MARK}'}"


def _vessels(levels: Mapping[str, Quantity]) -> str:
    """A volume or mass for every level, those that differ beside it."""
    if set(levels) == {""}:
        return _text(levels[""])
    return _text({level or "others": quantity for level, quantity in levels.items()}) if levels else ""


def _given(record: InternalStandard | SampleRule | Spike, **renamed: str) -> str:
    """What a record says, without what was left out; ``renamed`` gives the keys of the rule file."""
    parts = {renamed.get(each.name, each.name): getattr(record, each.name) for each in fields(record)}
    return _text({key: part for key, part in parts.items() if part not in (None, ())})


def _electrode(electrode: Electrode) -> Iterator[str]:
    yield "    electrode:"
    yield f"      charge: {electrode.charge}"
    yield _line(6, "temperature", f"{electrode.temperature:g} Cel", str(_ELECTRODE["temperature"]))
    yield f"      slope: {_mv(electrode.slope) or f'fitted{_MARK}'}"
    yield f"      uncertainty: {_mv(electrode.uncertainty) or f'none{_MARK}'}"


def _mv(value: float | None) -> str:
    return "" if value is None else f"{value:g} mV"


def _batch(rules: Rulebook) -> Iterator[str]:
    yield from _blanks(rules.blanks)
    if rules.brackets:
        yield "brackets:"
        yield f"  contents: {_text({analyte: known.content for analyte, known in rules.brackets.items()})}"
        yield _line(2, "drift", rules.drift, "check")
    if rules.references:
        yield "references:"
        for sample, known in rules.references.items():
            yield f"  {_text(sample)}: {_text({analyte: _known(each) for analyte, each in known.items()})}"
    if rules.tops:
        yield f"range: {_text(_signals(rules.tops))}"
    if rules.calibration:
        yield f"calibration: {_text({'contents': rules.calibration})}"
    if rules.lines:
        yield f"lines: {_text({analyte: _reported(each) for analyte, each in rules.lines.items()})}"
    for overlap in rules.overlap:
        yield f"overlap: {_text({each.name: getattr(overlap, each.name) for each in fields(overlap)})}"
    yield from _precision(rules)
    yield "report:"
    yield _line(2, "coverage", _percent(rules.coverage), _percent(_DEFAULTS["report"]["coverage"]))


def _blanks(blanks: BlankRule) -> Iterator[str]:
    yield "blanks:"
    yield _line(2, "background", "subtract signal" if blanks.background else "none", "none")
    yield _line(2, "process", "subtract amount" if blanks.process else "none", "none")
    yield _line(2, "reagent", "subtract amount" if blanks.reagent else "none", "none")
    if blanks.reagent_amounts:
        amounts = {analyte: _known(each) for analyte, each in blanks.reagent_amounts.items()}
        yield f"  reagent amounts: {_text(amounts)}"


def _signals(signals: Mapping[str, Top]) -> dict[str, str]:
    return {name: f"{top.signal:g} {top.unit}" for name, top in signals.items()}


def _reported(each: LinesRule) -> dict[str, str]:
    return {"report": each.report, "agree": "as their fits allow" if each.agree is None else _percent(each.agree)}


def _precision(rules: Rulebook) -> Iterator[str]:
    """Vessels below detection, and where the scatter comes from."""
    yield "below_detection:"
    yield _line(2, "use", rules.censored.use, _DEFAULTS["below_detection"]["use"])
    if rules.censored.signals:
        yield f"  signals: {_text(_signals(rules.censored.signals))}"
    usual = _DEFAULTS["precision"]
    yield "precision:"
    yield _line(2, "from", rules.precision.comes_from, usual["from"])
    if rules.precision.noise:
        noise = {
            name: {"floor": f"{one.floor:g}", "relative": _percent(one.relative), "unit": one.unit}
            for name, one in rules.precision.noise.items()
        }
        yield f"  noise: {_text(noise)}"
    yield _line(2, "weights", rules.precision.weights, usual["weights"])


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
