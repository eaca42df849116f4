"""Preparations: volumes that fit, a standard that is there, and a way back that leads to the unit of the report."""

from __future__ import annotations

from collections.abc import Mapping
from decimal import Decimal
from typing import Any

from spikeward.daemon.rule_file.names import groups_of
from spikeward.daemon.rule_file.walk import Walker, near
from spikeward.rules.naming import level_order, number_of
from spikeward.rules.quantities import UNITS
from spikeward.rules.schema_kinds import one_of

Values = Mapping[str, Any]

PER_MASS = {"mass per volume": "mass per mass", "amount per volume": "amount per mass"}


def told_elsewhere(value: Values) -> dict[str, set[str]]:
    """Which quantities bench files, names and columns give."""
    bench = (value["bench"] or {}).get("columns") or {}
    names = {group for rule in value["names"] or () if rule and rule["match"] for group in groups_of(rule["match"])}
    columns = {meaning for reader in (value["readers"] or {}).values() if reader for meaning in reader["columns"] or {}}
    return {"bench": set(bench), "name": names, "column": columns}


def check_preparations(value: Values, walker: Walker) -> None:
    """Everything that preparations can get wrong once each is one."""
    elsewhere = told_elsewhere(value)
    known = set.union(*elsewhere.values())
    for number, each in enumerate(value["preparations"] or ()):
        path = f"preparations[{number}]"
        if each is None:
            continue
        _check_standard(each, path, value, walker)
        _check_volumes(each, path, known, walker)
        if each["sample"] is not None:
            _check_sample(each, path, elsewhere, walker)
        _check_report_unit(each, path, value, walker)


def _check_standard(each: Values, path: str, value: Values, walker: Walker) -> None:
    standards, named = value["standards"] or {}, (each["additions"] or {}).get("standard")
    where = f"{path}.additions.standard"
    if not walker.sound(where) or not walker.sound(f"{path}.additions") and not named:
        return
    if named and named not in standards:
        meant = near(named, standards)
        hint = f"did you mean {meant}?" if meant else "add it there"
        walker.at(where, "R030", f"the standard '{named}' is not under standards", "", hint)
    elif not named and len(standards) > 1:
        walker.at(
            where,
            "R010",
            "the standard is missing, and there are several",
            "",
            f"add standard: {one_of(tuple(standards))}",
        )


def _check_volumes(each: Values, path: str, known: set[str], walker: Walker) -> None:
    parts = (f"{path}.additions", f"{path}.aliquot", f"{path}.final", f"{path}.design")
    if each["additions"] is None or each["aliquot"] is None or not walker.sound(*parts):
        return
    additions = _once(each["additions"]["levels"], f"{path}.additions.levels", walker)
    aliquots = _once(each["aliquot"]["levels"], f"{path}.aliquot.levels", walker)
    aliquot = each["aliquot"]["volume"]
    if not additions and "addition" not in known:
        walker.at(
            f"{path}.additions.levels", "R010", "no level says its addition", "", "add levels: {0: 0 mL, 1: 0.25 mL}"
        )
    elif additions and not any(volume.value for volume in additions.values()) and "addition" not in known:
        walker.at(f"{path}.additions.levels", "R031", "no level adds any standard", "", "give the volumes of standard")
    if aliquot is None and "aliquot" not in known:
        lacking = sorted({*additions} - {*aliquots}, key=level_order)
        if lacking or not aliquots:
            told = f"level {lacking[0]} has no aliquot" if aliquots else "the aliquot is missing"
            walker.at(f"{path}.aliquot", "R010", told, "", "add aliquot: 10 mL")
    _check_design(each, path, additions, known, walker)
    if each["final"] and (aliquot is not None or aliquots):
        _check_fit(each, path, additions, {"": aliquot, **aliquots} if aliquot else aliquots, walker)


def _once(levels: Values | None, path: str, walker: Walker) -> dict[str, Any]:
    """Volumes by level as levels are compared: 01 and 1 are one, and stand twice."""
    found: dict[str, Any] = {}
    for level, volume in (levels or {}).items():
        name = number_of(level)
        if name in found:
            walker.at(f"{path}.{level}", "R031", f"level {name} stands here twice", "", "delete one of the two")
        found[name] = volume
    return found


def _check_design(each: Values, path: str, additions: Values, known: set[str], walker: Walker) -> None:
    design = each["design"]
    if design == "flasks" and not each["final"] and "final" not in known:
        walker.at(path, "R010", "flasks are made up to a final volume, which is missing", "", "add final: 25 mL")
    if design == "successive" and each["final"]:
        hint = "delete final; aliquot, diluent and additions say the volume"
        walker.at(f"{path}.final", "R031", "successive additions have no common final volume", "", hint)
    if design == "single" and additions:
        _check_single(additions, f"{path}.additions.levels", walker)


def _check_single(additions: Values, path: str, walker: Walker) -> None:
    """Two levels of any names: one without addition, which may be left out where it is named 0, and one with."""
    without = [level for level, volume in additions.items() if not volume.value]
    added = len(additions) - len(without)
    if len(without) == 1 and added == 1 or not without and added == 1 and "0" not in additions:
        return
    if not added:
        return  # said already: no level adds any standard
    hint = "give one level 0 mL and one an addition"
    told = "a single addition has two levels, one without and one with an addition"
    walker.at(path, "R031", told, "", hint if len(additions) < 3 else f"{hint}, or say design: flasks")


def _check_fit(each: Values, path: str, additions: Values, aliquots: Values, walker: Walker) -> None:
    final = each["final"]["volume"].in_unit("mL")
    diluent = each["diluent"].in_unit("mL") if each["diluent"] else Decimal(0)
    before = Decimal(0)
    for level in sorted(additions, key=level_order):
        volume = additions[level].in_unit("mL")
        if each["additions"]["deliveries"] == "each":
            volume = before = before + volume
        aliquot = aliquots.get(level, aliquots.get(""))
        if aliquot is None or (each["level_0"] == "undiluted" and not volume):
            continue
        mixed = aliquot.in_unit("mL") + diluent + volume
        if mixed > final:
            volumes = f"{mixed.normalize():f} mL, the final volume {final.normalize():f} mL"
            told = f"level {level}: aliquot and additions are {volumes}"
            walker.at(f"{path}.final", "R031", told, "", "correct the volumes")
            return


def _check_sample(each: Values, path: str, elsewhere: Mapping[str, set[str]], walker: Walker) -> None:
    base, sample = f"{path}.sample", each["sample"]
    for quantity, source in sample.items():
        if isinstance(source, str) and quantity not in elsewhere[source]:
            hint = {
                "bench": f"add {quantity} to the columns under bench",
                "name": f"put (?P<{quantity}>…) into a pattern under names",
                "column": f"add {quantity} to the columns of a reader",
            }[source]
            section = {"bench": "bench", "name": "names", "column": "readers"}[source]
            if walker.sound(section):
                walker.at(f"{base}.{quantity}", "R030", f"no {source} gives the {quantity.replace('_', ' ')}", "", hint)
    if not walker.sound(base):
        return
    mass, volume, digest = (sample[name] is not None for name in ("mass", "volume", "digest"))
    if mass and volume:
        walker.at(base, "R031", "the sample has a mass and a volume", "", "delete one of the two")
    elif digest and not (mass or volume) and each["for"].get("role") != "process_blank":  # which holds no sample
        walker.at(base, "R010", "a digest needs the mass or the volume of the sample", "", "add mass, or say dilution")
    elif (mass or volume) and not digest:
        taken = "mass" if mass else "volume"
        walker.at(
            base, "R010", f"the {taken} of the sample needs the volume that it was made up to", "", "add digest: 50 mL"
        )
    if sample["dry_matter"] is not None and not mass:
        walker.at(f"{base}.dry_matter", "R031", "dry matter needs the mass of the sample", "", "add mass and digest")


def result_dimensions(each: Values, value: Values) -> set[str]:
    """What the results of a preparation measure; empty where the file does not say yet."""
    standards = value["standards"] or {}
    named = (each["additions"] or {}).get("standard")
    chosen = standards.get(named) if named else next(iter(standards.values()), None)
    if not chosen:
        return set()
    contents = [*(chosen["contents"] or {}).values(), chosen["content"]]
    found = {content.dimension for content in contents if content is not None}
    by_mass = bool(each["sample"]) and each["sample"]["mass"] is not None
    return {PER_MASS[dimension] for dimension in found} if by_mass else found


def _check_report_unit(each: Values, path: str, value: Values, walker: Walker) -> None:
    parts = (f"{path}.report_in", f"{path}.sample", f"{path}.additions", "standards")
    if not walker.sound(*parts):
        return
    where, unit, found = f"{path}.report_in", each["report_in"], result_dimensions(each, value)
    if unit and found and found != {UNITS[unit][0]}:
        told = f"{unit} is a unit of {UNITS[unit][0]}; standard and sample lead to {one_of(tuple(sorted(found)))}"
        walker.at(where, "R015", told, "", "give mass and digest for a content per mass, or correct the unit")
    elif not unit and found == {"amount per mass"}:
        walker.at(where, "R010", "report_in is missing", "", "add report_in: mmol/kg")
