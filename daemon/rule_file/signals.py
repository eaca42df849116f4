"""What a rule file says of signals: blanks of reagents, drift, vessels below detection, precision, and overlap."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

from spikeward.daemon.rule_file.preparations import analytes_of
from spikeward.daemon.rule_file.problems import WARNING
from spikeward.daemon.rule_file.walk import Walker, near
from spikeward.rules.schema_kinds import one_of

Values = Mapping[str, Any]


def check_signals(value: Values, walker: Walker) -> None:
    """Everything that corrections of signals can get wrong once each is one."""
    _check_reagent(value, walker)
    _check_drift(value, walker)
    _check_below_detection(value, walker)
    _check_precision(value, walker)
    _check_overlap(value, walker)


def _check_reagent(value: Values, walker: Walker) -> None:
    reagent, path = (value["blanks"] or {}).get("reagent"), "blanks.reagent"
    if not reagent or not walker.sound(path):
        return
    amounts = reagent["amounts"] or {}
    for analyte, known in amounts.items():
        where = f"{path}.amounts.{analyte}"
        if known["uncertainty"] is not None and known["uncertainty"].dimension != known["amount"].dimension:
            told = f"the uncertainty is a {known['uncertainty'].dimension}, the amount a {known['amount'].dimension}"
            walker.at(f"{where}.uncertainty", "R015", told, "", "give both in one unit")
        if walker.sound("standards") and analyte not in analytes_of(value):
            _not_known(analyte, analytes_of(value), f"no standard holds '{analyte}'", where, walker)
        elif walker.sound("standards", "molar_masses"):
            _check_amount(analyte, known["amount"].dimension, value, where, walker)
    if not walker.sound("names", "standards", path):
        return
    named = any(rule and rule["role"] == "reagent_blank" for rule in value["names"] or ())
    lacking = sorted(analytes_of(value) - set(amounts))
    if named and amounts and not lacking:
        told = "the amount of every analyte is declared, so that series of role reagent_blank are not used"
        walker.at(path, "R041", told, "", "delete amounts, or the naming rule", WARNING)
    elif not named and lacking:
        hint = "add amounts: {Cd: 0.5 ng}, or a rule with role: reagent_blank under names"
        told = f"nothing says what the reagents hold of {one_of(tuple(lacking))}"
        walker.at(path, "R030", told, "", hint)


def _check_amount(analyte: str, dimension: str, value: Values, where: str, walker: Walker) -> None:
    """A mass where contents are amounts of substance, or the other way, takes a molar mass."""
    kinds = {kind.partition(" per ")[0] for kind in _dimensions_of(analyte, value)}
    if kinds and dimension not in kinds and analyte not in (value["molar_masses"] or {}):
        told = f"the reagents bring {_KIND[dimension]}, and a standard's content is {_KIND[next(iter(kinds))]}"
        hint = f"give both in one kind of unit, or add molar_masses: {{{analyte}: 112.414 g/mol}}"
        walker.at(where, "R015", told, "", hint)


_KIND = {"mass": "a mass", "amount": "an amount of substance"}


def _dimensions_of(analyte: str, value: Values) -> Iterable[str]:
    """What the standards give the content of an analyte in."""
    for standard in (value["standards"] or {}).values():
        content = (standard["contents"] or {}).get(analyte)
        if content is None and standard["analyte"] == analyte:
            content = standard["content"]
        if content is not None:
            yield content.dimension


def _check_drift(value: Values, walker: Walker) -> None:
    if (value["brackets"] or {}).get("drift") != "correct" or not walker.sound("brackets"):
        return
    for name, reader in (value["readers"] or {}).items():
        if reader is None or not walker.sound(f"readers.{name}"):
            continue
        columns = reader["columns"] or {}
        if "drift" in (reader["already"] or ()):
            told = f"the exports of the reader '{name}' had their drift corrected already"
            walker.at("brackets.drift", "R041", told, "", "say drift: check, or take it out of already", WARNING)
        elif reader["format"] == "delimited" and not columns.keys() & {"measured_at", "order"}:
            told = f"the drift is to be corrected, and the reader '{name}' reads neither times nor an order"
            walker.at("brackets.drift", "R010", told, "", "add measured_at: or order: and its heading to its columns")


def _check_below_detection(value: Values, walker: Walker) -> None:
    rule, path = value["below_detection"], "below_detection"
    if rule is None or not walker.sound(path):
        return
    if rule["use"] == "substitute" and not rule["signals"]:
        told = "no signal is declared that stands for what was not detected"
        walker.at(path, "R010", told, "", "add signals: {Cd: {signal: 0.0008, unit: A}}")
    elif rule["use"] != "substitute" and rule["signals"]:
        told = f"signals stand for what was not detected, and use says {rule['use']}"
        walker.at(f"{path}.signals", "R031", told, "", "say use: substitute, or delete signals")
    _check_places(rule["signals"] or {}, f"{path}.signals", value, walker)


def _check_precision(value: Values, walker: Walker) -> None:
    rule, path = value["precision"], "precision"
    if rule is None or not walker.sound(path):
        return
    if rule["from"] == "declared" and not rule["noise"]:
        hint = "add noise: {Cd: {floor: 0.0008, relative: 1.0 %, unit: A}}"
        walker.at(path, "R010", "the noise is declared, and none is there", "", hint)
    elif rule["from"] != "declared" and rule["noise"]:
        told = f"a noise is declared, and the precision is {rule['from']}"
        walker.at(f"{path}.noise", "R031", told, "", "say from: declared, or delete noise")
    if rule["from"] == "declared" and rule["weights"] == "equal":
        told = "the declared noise gives each point its weight, and weights says equal"
        walker.at(f"{path}.weights", "R031", told, "", "delete weights")
    _check_places(rule["noise"] or {}, f"{path}.noise", value, walker)


def _check_overlap(value: Values, walker: Walker) -> None:
    """Analytes that a standard holds, and lines of theirs, each once and as many as the method takes."""
    for number, rule in enumerate(value["overlap"] or ()):
        path = f"overlap[{number}]"
        if not rule or not walker.sound(path, "standards"):
            continue
        analytes, at, known = rule["analytes"], rule["at"], analytes_of(value)
        for place, name in enumerate(analytes):
            if name not in known:
                _not_known(name, known, f"no standard holds '{name}'", f"{path}.analytes[{place}]", walker, key=False)
        for place, name in enumerate(at):
            if not any(name == analyte or name.startswith(f"{analyte} ") for analyte in analytes):
                told = f"'{name}' is no line of {one_of(tuple(analytes) or ('any analyte',))}"
                hint = "write the analyte before its line, such as Cd 228.8, and name it under analytes"
                walker.at(f"{path}.at[{place}]", "R030", told, "", hint)
        if len(set(at)) < len(at) or len(set(analytes)) < len(analytes) or not analytes:
            walker.at(path, "R031", "an analyte or line stands there twice, or none does", "", "name each of them once")
        elif (len(analytes), len(at)) != (1, 2) if rule["method"] == "h_point" else len(at) < len(analytes):
            h_point = rule["method"] == "h_point"
            needed = "one analyte and two lines" if h_point else "as many lines as analytes, or more"
            told = f"{rule['method']} takes {needed}; here are {len(analytes)} and {len(at)}"
            walker.at(path, "R031", told, "", "name them, or delete the entry")


def _check_places(found: Values, path: str, value: Values, walker: Walker) -> None:
    """Names of analytes or lines; a line is known by its reader only where that names it."""
    if not walker.sound("standards", "readers"):
        return
    readers = [reader for reader in (value["readers"] or {}).values() if reader]
    if any("line" in (reader["columns"] or {}) or reader["format"] != "delimited" for reader in readers):
        return  # what lines there are stands in the exports
    lines = {meant["line"] for reader in readers for meant in (reader["wide"] or {}).values() if meant["line"]}
    groups = any("(?P<line>" in rule["match"] for rule in value["names"] or () if rule and rule["match"])
    known = analytes_of(value) | lines
    for name in found:
        if name not in known and not groups:
            _not_known(name, known, f"'{name}' is no analyte of a standard and no line of a reader", f"{path}.{name}",
                       walker)  # fmt: skip


def _not_known(
    name: str, known: Iterable[str], told: str, where: str, walker: Walker, key: bool = True
) -> None:
    meant = near(name, known)
    hint = f"did you mean {meant}?" if meant else f"possible here: {one_of(tuple(sorted(known)))}"
    walker.at(where, "R030", told, "", hint, key=key)
