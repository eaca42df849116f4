"""Values that were read from a rule file become the records that everything else reads."""

from __future__ import annotations

import posixpath
from collections.abc import Mapping
from typing import Any

from spikeward.daemon.rule_file.walk import Walker
from spikeward.parsers.headings import unit_text
from spikeward.rules.naming import number_of
from spikeward.rules.quantities import Quantity
from spikeward.rules.records import Layout, WideColumn
from spikeward.rules.rulebook import (
    BenchRule,
    BlankRule,
    Known,
    Limits,
    NameRule,
    Preparation,
    Rulebook,
    SampleRule,
    SeriesRule,
    Standard,
    Top,
    Watch,
)

Values = Mapping[str, Any]


def build(value: Values, checks: Mapping[str, Limits], walker: Walker) -> Rulebook:
    """The rule book of a file without errors; its digest is still empty."""
    series = value["series"]
    return Rulebook(
        station=value["station"],
        language=value["language"],
        state=value["state"],
        watches=tuple(_watch(each, tuple(value["readers"])) for each in value["watch"]),
        layouts={name: _layout(name, each) for name, each in value["readers"].items()},
        bench=_bench(value["bench"]) if value["bench"] else None,
        names=tuple(
            NameRule(each["role"], each["from"], each["match"], each["units"], _line(walker, f"names[{number}]"))
            for number, each in enumerate(value["names"])
        ),
        series=SeriesRule(
            tuple(number_of(level) for level in series["expects"]["levels"]),
            series["expects"]["readings"],
            series["same_name"],
            series["lapses_after"],
            series["lapsed"],
            tuple(series["closes_with"]),
        ),  # fmt: skip
        standards={name: _standard(name, each) for name, each in value["standards"].items()},
        preparations=tuple(
            _preparation(each, tuple(value["standards"]), _line(walker, f"preparations[{number}]"))
            for number, each in enumerate(value["preparations"])
        ),
        blanks=BlankRule(value["blanks"]["background"] is not None, value["blanks"]["process"] is not None),
        brackets={
            analyte: Known(content) for analyte, content in ((value["brackets"] or {}).get("contents") or {}).items()
        },
        references={sample: _reference(each) for sample, each in value["references"].items()},
        tops={name: Top(each["top"], unit_text(each["unit"])) for name, each in value["range"].items()},
        checks=dict(checks),
        coverage=value["report"]["coverage"],
        decisions=value["decisions"],
        digest="",
    )


def folder_of(text: str) -> str:
    """A folder as it is compared: ``./inbox/`` is ``inbox``."""
    return posixpath.normpath(text)


def _line(walker: Walker, path: str) -> int:
    return walker.places[path].line


def _watch(each: Values, readers: tuple[str, ...]) -> Watch:
    output = "" if each["output"] == "beside" else folder_of(each["output"])
    named = tuple(each["reader"] or readers)
    return Watch(folder_of(each["folder"]), named, each["events"], each["settle"], output, each["spans_folders"])


def _bench(each: Values) -> BenchRule:
    return BenchRule(
        tuple(each["files"]), each["key"], each["columns"], each["encoding"], each["delimiter"], each["decimal"]
    )


_TUPLES = ("files", "header_contains", "ends_at", "date_patterns", "already", "not_detected", "over_range")


def _layout(name: str, each: Values) -> Layout:
    values: dict[str, Any] = {key: tuple(part) if key in _TUPLES else part for key, part in each.items()}
    values["wide"] = {heading: WideColumn(**meant) for heading, meant in each["wide"].items()}
    return Layout(name=name, **values)


def _standard(name: str, each: Values) -> Standard:
    contents = each["contents"] or {each["analyte"]: each["content"]}
    return Standard(name, contents, each["lot"], each["expires"])


def _preparation(each: Values, standards: tuple[str, ...], line: int) -> Preparation:
    aliquot, additions = each["aliquot"], each["additions"]
    by_level = _by_level(aliquot["levels"])
    if aliquot["volume"] is not None:
        by_level[""] = aliquot["volume"]
    return Preparation(
        applies=each["for"],
        design=each["design"],
        aliquot=by_level,
        final=each["final"]["volume"] if each["final"] else None,
        additions=_by_level(additions["levels"]),
        deliveries=additions["deliveries"] or ("each" if each["design"] == "successive" else "total"),
        standard=additions["standard"] or standards[0],
        level_0=each["level_0"],
        diluent=each["diluent"],
        # Another unit of report is reached by a way back on which nothing was done.
        sample=SampleRule(**each["sample"] or {}) if each["sample"] or each["report_in"] else None,
        report_in=each["report_in"],
        line=line,
    )


def _by_level(levels: Values) -> dict[str, Quantity]:
    return {number_of(level): volume for level, volume in levels.items()}


def _reference(each: Values) -> dict[str, Known]:
    """Known contents by analyte; a common uncertainty holds for each analyte that states none of its own."""
    found = {}
    for analyte, known in each.items():
        if analyte not in ("uncertainty", "k"):
            stated = known if known["uncertainty"] is not None else each
            found[analyte] = Known(known["content"], _standard_uncertainty(known["content"], stated))
    return found


def _standard_uncertainty(content: Quantity, stated: Values) -> float | None:
    uncertainty, k = stated["uncertainty"], stated["k"]
    if uncertainty is None:
        return None
    if uncertainty.dimension == "fraction":
        return float(content.value * uncertainty.in_unit("1")) / float(k)
    return float(uncertainty.in_unit(content.unit)) / float(k)
