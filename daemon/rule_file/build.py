"""Values that were read from a rule file become the records that everything else reads."""

from __future__ import annotations

import posixpath
from collections.abc import Mapping
from typing import Any

from spikeward.daemon.rule_file.build_preparation import preparation, standard
from spikeward.daemon.rule_file.walk import Walker
from spikeward.parsers.headings import unit_text
from spikeward.rules.naming import number_of
from spikeward.rules.quantities import Quantity
from spikeward.rules.records import Layout, WideColumn
from spikeward.rules.rulebook import (
    BenchRule,
    BlankRule,
    Censored,
    Known,
    Limits,
    LinesRule,
    NameRule,
    Noise,
    Overlap,
    Precision,
    Rulebook,
    SeriesRule,
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
        standards={name: standard(name, each) for name, each in value["standards"].items()},
        preparations=tuple(
            preparation(each, tuple(value["standards"]), _line(walker, f"preparations[{number}]"))
            for number, each in enumerate(value["preparations"])
        ),
        blanks=_blanks(value["blanks"]),
        brackets={
            analyte: Known(content) for analyte, content in ((value["brackets"] or {}).get("contents") or {}).items()
        },
        references={sample: _reference(each) for sample, each in value["references"].items()},
        tops={name: Top(each["top"], unit_text(each["unit"])) for name, each in value["range"].items()},
        checks=dict(checks),
        coverage=value["report"]["coverage"],
        decisions=value["decisions"],
        digest="",
        drift=(value["brackets"] or {}).get("drift") or "check",
        precision=_precision(value["precision"]),
        lines={analyte: LinesRule(each["report"], each["agree"]) for analyte, each in value["lines"].items()},
        overlap=tuple(
            Overlap(each["method"], tuple(each["analytes"]), tuple(each["at"]), each["interferent"] or "")
            for each in value["overlap"] or ()
        ),
        calibration=(value["calibration"] or {}).get("contents") or {},
        censored=Censored(value["below_detection"]["use"], _signals(value["below_detection"]["signals"])),
        molar_masses=value["molar_masses"],
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


def _blanks(each: Values) -> BlankRule:
    reagent = each["reagent"] or {}
    amounts = {
        analyte: Known(known["amount"], _in_unit_of(known["amount"], known["uncertainty"]))
        for analyte, known in (reagent.get("amounts") or {}).items()
    }
    return BlankRule(each["background"] is not None, each["process"] is not None, bool(reagent), amounts)


def _in_unit_of(amount: Quantity, uncertainty: Quantity | None) -> float | None:
    return None if uncertainty is None else float(uncertainty.in_unit(amount.unit))


def _precision(each: Values) -> Precision:
    noise = {
        name: Noise(one["floor"], one["relative"] or 0.0, unit_text(one["unit"])) for name, one in each["noise"].items()
    }
    return Precision(each["from"], noise, each["weights"])


def _signals(each: Values) -> dict[str, Top]:
    return {name: Top(one["signal"], unit_text(one["unit"])) for name, one in each.items()}


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
