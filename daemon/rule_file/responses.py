"""How a preparation's vessels answer: electrodes, curves and internal standards."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from spikeward.daemon.rule_file.preparations import analytes_of, levels_of
from spikeward.daemon.rule_file.walk import Walker, near
from spikeward.rules.schema_kinds import one_of

Values = Mapping[str, Any]

_CURVE_LEVELS = 4
"""A parabola takes three levels, and one more shows whether it is one."""


def check_responses(value: Values, walker: Walker) -> None:
    """Everything that response, electrode and internal standard can get wrong once each preparation is one."""
    for number, each in enumerate(value["preparations"] or ()):
        path = f"preparations[{number}]"
        if each is None:
            continue
        if walker.sound(f"{path}.electrode", f"{path}.response", f"{path}.design"):
            _check_electrode(each, path, walker)
        _check_curve(each, path, walker)
        if each["internal_standard"] is not None and walker.sound(f"{path}.internal_standard", "standards"):
            _check_internal(each, f"{path}.internal_standard", value, walker)


def _check_electrode(each: Values, path: str, walker: Walker) -> None:
    electrode, where = each["electrode"], f"{path}.electrode"
    if each["response"] != "log":
        if electrode is not None:
            told = f"an electrode, and the response is {each['response']}"
            walker.at(where, "R031", told, "", "say response: log, or delete electrode")
        return
    if each["internal_standard"] is not None:
        told = "an electrode has no internal standard"
        walker.at(f"{path}.internal_standard", "R031", told, "", "delete internal_standard")
    if electrode is None:
        hint = "add electrode: {charge: -1}, with slope: -58.6 mV where it is known"
        walker.at(f"{path}.response", "R010", "a log response needs its electrode", "", hint)
        return
    slope = electrode["slope"]
    if slope is not None and (slope.value > 0) != (electrode["charge"] > 0):
        told = f"a slope of {slope} does not go with a charge of {electrode['charge']}"
        walker.at(f"{where}.slope", "R031", told, "", "the slope has the sign of the charge; correct one of the two")
    if electrode["uncertainty"] is not None and slope is None:
        told = "the uncertainty of a slope that is not given"
        walker.at(f"{where}.uncertainty", "R010", told, "", "add slope: -58.6 mV")
    if each["design"] == "single" and slope is None:
        told = "from two vessels no slope can be fitted"
        walker.at(where, "R010", told, "", "add slope: -58.6 mV, and its uncertainty")


def _check_curve(each: Values, path: str, walker: Walker) -> None:
    if each["response"] != "curve" or not walker.sound(f"{path}.additions", f"{path}.response"):
        return
    levels = levels_of(each)
    if levels and len(levels) < _CURVE_LEVELS:
        told = f"a curve needs {_CURVE_LEVELS} levels, and {len(levels)} are declared"
        walker.at(f"{path}.response", "R031", told, "", "add levels, or say response: linear")


def _check_internal(each: Values, where: str, value: Values, walker: Walker) -> None:
    rule, analytes = each["internal_standard"], analytes_of(value)
    for analyte, internal in rule["for"].items():
        if analyte not in analytes:
            meant = near(analyte, analytes)
            hint = f"did you mean {meant}?" if meant else f"possible here: {one_of(tuple(sorted(analytes)))}"
            walker.at(f"{where}.for.{analyte}", "R030", f"no standard holds '{analyte}'", "", hint, key=True)
        if internal in analytes:
            told = f"{internal} is in a standard, so that its signal rises with the additions"
            walker.at(f"{where}.for.{analyte}", "R031", told, "", "name an analyte that no standard holds")
    if rule["amount"] is not None and rule["entered"] != "per_vessel":
        told = f"the amount in each vessel, and the internal standard entered {rule['entered']}"
        walker.at(f"{where}.amount", "R031", told, "", "say entered: per_vessel, or delete amount")
