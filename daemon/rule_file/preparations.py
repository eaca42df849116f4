"""Preparations: what was added to what, volumes and masses that fit, and which levels a preparation makes."""

from __future__ import annotations

from collections.abc import Mapping
from decimal import Decimal
from typing import Any

from spikeward.daemon.rule_file.names import groups_of
from spikeward.daemon.rule_file.walk import Walker, near
from spikeward.rules.naming import level_order, number_of
from spikeward.rules.quantities import Quantity, by_density
from spikeward.rules.schema_kinds import one_of

Values = Mapping[str, Any]
Levels = dict[str, Quantity]


def told_elsewhere(value: Values) -> dict[str, set[str]]:
    """Which quantities bench files, names and columns give."""
    bench = (value["bench"] or {}).get("columns") or {}
    names = {group for rule in value["names"] or () if rule and rule["match"] for group in groups_of(rule["match"])}
    columns = {meaning for reader in (value["readers"] or {}).values() if reader for meaning in reader["columns"] or {}}
    return {"bench": set(bench), "name": names, "column": columns}


def additions_of(preparation: Values) -> list[Values]:
    """The additions of a preparation that are sound enough to be looked at."""
    return [each for each in preparation["additions"] or () if each is not None]


def standards_of(preparation: Values, standards: Values) -> list[Values]:
    """The standards of a preparation that are there, in the order of its additions."""
    only = next(iter(standards)) if len(standards) == 1 else ""
    # Where no addition is declared, quantities from elsewhere are of the only standard.
    additions = additions_of(preparation) or [{"standard": None, "amounts": None}]
    names = [each["standard"] or only for each in additions if not each["amounts"]]
    return [standard for name in names if (standard := standards.get(name))]


def levels_of(preparation: Values) -> set[str]:
    """The levels that a preparation makes; one named 0 is without addition where no other is declared so."""
    volumes = total_by_level(preparation)
    return set(volumes) | (set() if any(not each for each in volumes.values()) or not volumes else {"0"})


def total_by_level(preparation: Values) -> dict[str, Decimal]:
    """Whether anything is added at each declared level: the sum of its numbers, whatever their units."""
    found: dict[str, Decimal] = {}
    for each in additions_of(preparation):
        for level, quantity in (each["amounts"] or each["levels"] or {}).items():
            if quantity is not None:
                found[number_of(level)] = found.get(number_of(level), Decimal(0)) + quantity.value
    return found


def check_preparations(value: Values, walker: Walker) -> None:
    """What preparations say about vessels, once each is one."""
    known = set.union(*told_elsewhere(value).values())
    for number, each in enumerate(value["preparations"] or ()):
        if each is not None:
            path = f"preparations[{number}]"
            _check_standards(each, path, value, walker)
            _check_vessels(each, path, known, walker, value["standards"] or {})


def _check_standards(each: Values, path: str, value: Values, walker: Walker) -> None:
    standards = value["standards"] or {}
    if not each["additions"] and len(standards) > 1 and "addition" in set.union(*told_elsewhere(value).values()):
        told = "additions come from elsewhere, and there are several standards"
        walker.at(f"{path}.additions", "R010", told, "", f"add additions: {{standard: {next(iter(standards))}}}")
    for number, addition in enumerate(each["additions"] or ()):
        where = f"{path}.additions[{number}]"
        if addition is None or not walker.sound(f"{where}.standard"):
            continue
        named = addition["standard"]
        if addition["amounts"]:
            _check_amounts(addition, each, where, value, walker)
        elif named:
            check_standard(named, f"{where}.standard", standards, walker)
        if walker.sound("standards", where):
            _check_density(addition, where, standards, walker)
        if named or addition["amounts"]:
            continue
        if len(standards) > 1 and walker.sound(where):
            hint = f"add standard: {one_of(tuple(standards))}"
            walker.at(f"{where}.standard", "R010", "the standard is missing, and there are several", "", hint)


def _check_density(addition: Values, where: str, standards: Values, walker: Walker) -> None:
    """A standard whose content is per volume and that is weighed, or the other way, needs its density."""
    name = addition["standard"] or (next(iter(standards)) if len(standards) == 1 else "")
    standard = standards.get(name)
    if not standard or standard["density"] is not None or addition["amounts"]:
        return
    ofs = {
        content.dimension.partition(" per ")[2]
        for content in (*(standard["contents"] or {}).values(), standard["content"])
        if content is not None
    }
    for level, quantity in (addition["levels"] or {}).items():
        if quantity.value and ofs - {quantity.dimension}:
            told = f"a {quantity.dimension} of {name}, whose content is per {one_of(tuple(sorted(ofs)))}"
            hint = f"give it by {one_of(tuple(sorted(ofs)))}, or add density to the standard"
            walker.at(f"{where}.levels.{level}", "R010", told, "", hint)
            return


def check_standard(named: str, where: str, standards: Values, walker: Walker) -> None:
    """A standard that is named must be there."""
    if named not in standards:
        meant = near(named, standards)
        hint = f"did you mean {meant}?" if meant else "add it there"
        walker.at(where, "R030", f"the standard '{named}' is not under standards", "", hint)


def _check_amounts(addition: Values, each: Values, where: str, value: Values, walker: Walker) -> None:
    """Amounts of the analyte itself: of no standard, and of one analyte."""
    for other in ("levels", "standard"):
        if addition[other]:
            told = f"amounts are of the analyte itself, and {other} stands beside them"
            walker.at(f"{where}.amounts", "R031", told, "", "delete one of the two")
    if len(analytes_of(value)) > 1 and "analyte" not in each["for"]:
        told = "amounts are of one analyte, and this preparation is for several"
        walker.at(f"{where}.amounts", "R031", told, "", "add for: {analyte: Cd}")


def analytes_of(value: Values) -> set[str]:
    """The analytes of all standards."""
    found: set[str] = set()
    for standard in (value["standards"] or {}).values():
        if standard is not None:
            found |= set(standard["contents"] or {})
            found |= {standard["analyte"]} if standard["analyte"] else set()
    return found


def _check_vessels(each: Values, path: str, known: set[str], walker: Walker, standards: Values) -> None:
    parts = (f"{path}.additions", f"{path}.aliquot", f"{path}.final", f"{path}.design", f"{path}.spiked")
    if each["aliquot"] is None or not walker.sound(*parts):
        return
    for number, addition in enumerate(additions_of(each)):
        for key in ("levels", "amounts"):
            once(addition[key], f"{path}.additions[{number}].{key}", walker)
    added = total_by_level(each)
    where = f"{path}.additions[0].levels" if each["additions"] else f"{path}.additions"
    if "addition" not in known:
        if not added:
            walker.at(where, "R010", "no level says its addition", "", "add levels: {0: 0 mL, 1: 0.25 mL}")
        elif not any(added.values()):
            walker.at(where, "R031", "no level adds any standard", "", "give the volumes of standard")
    if each["spiked"] == "sample":
        if any(each["aliquot"][key] for key in ("volume", "mass", "levels")):
            told = "the sample was spiked, so that each level's sample is its aliquot, and an aliquot is declared"
            walker.at(f"{path}.aliquot", "R031", told, "", "delete aliquot; give the mass under sample")
        return
    aliquots = _of_levels(each["aliquot"], f"{path}.aliquot", walker)
    finals = _of_levels(each["final"], f"{path}.final", walker) if each["final"] else {}
    if "" not in aliquots and "aliquot" not in known:
        lacking = sorted({*added} - {*aliquots}, key=level_order)
        if lacking or not aliquots:
            told = f"level {lacking[0]} has no aliquot" if aliquots else "the aliquot is missing"
            walker.at(f"{path}.aliquot", "R010", told, "", "add aliquot: 10 mL")
    _check_design(each, path, added, {"aliquot": aliquots, "final": finals}, known, walker)
    if finals and aliquots:
        _check_fit(each, path, finals, aliquots, walker, standards)


def once(levels: Values | None, path: str, walker: Walker) -> Levels:
    """Quantities by level as levels are compared: 01 and 1 are one, and stand twice."""
    found: Levels = {}
    for level, quantity in (levels or {}).items():
        name = number_of(level)
        if name in found:
            walker.at(f"{path}.{level}", "R031", f"level {name} stands here twice", "", "delete one of the two")
        found[name] = quantity
    return found


def _of_levels(block: Values, path: str, walker: Walker) -> Levels:
    """Volumes or masses by level, that of every level under an empty name."""
    found = once(block["levels"], f"{path}.levels", walker)
    if block["volume"] is not None and block["mass"] is not None:
        walker.at(path, "R031", "there are a volume and a mass for every level", "", "delete one of the two")
    common = block["volume"] if block["volume"] is not None else block["mass"]
    if common is not None:
        found[""] = common
    return found


def _check_design(
    each: Values,
    path: str,
    added: Mapping[str, Decimal],
    vessels: Mapping[str, Levels],
    known: set[str],
    walker: Walker,
) -> None:
    design = each["design"]
    if design == "flasks" and not vessels["final"] and "final" not in known:
        walker.at(path, "R010", "flasks are made up to a final volume, which is missing", "", "add final: 25 mL")
    if design == "successive" and "" in vessels["final"]:
        hint = "delete final; aliquot, diluent and additions say the volume"
        walker.at(f"{path}.final", "R031", "successive additions have no common final volume", "", hint)
    if design == "single" and added:
        _check_single(
            added, f"{path}.additions[0].{'amounts' if additions_of(each)[0]['amounts'] else 'levels'}", walker
        )
    if design == "weighed" and not _weighs(each, vessels) and not known & {"aliquot", "addition", "final"}:
        hint = "give aliquot, additions or final by mass, or say design: flasks"
        walker.at(path, "R031", "vessels made by mass, and no mass is given", "", hint)


def _weighs(each: Values, vessels: Mapping[str, Levels]) -> bool:
    quantities = [quantity for levels in vessels.values() for quantity in levels.values()]
    quantities += [quantity for addition in additions_of(each) for quantity in (addition["levels"] or {}).values()]
    return any(quantity.dimension == "mass" for quantity in quantities)


def _check_single(added: Mapping[str, Decimal], path: str, walker: Walker) -> None:
    """Two levels of any names: one without addition, which may be left out where it is named 0, and one with."""
    without = [level for level, amount in added.items() if not amount]
    spiked = len(added) - len(without)
    if len(without) == 1 and spiked == 1 or not without and spiked == 1 and "0" not in added:
        return
    if not spiked:
        return  # said already: no level adds any standard
    hint = "give one level 0 mL and one an addition"
    told = "a single addition has two levels, one without and one with an addition"
    walker.at(path, "R031", told, "", hint if len(added) < 3 else f"{hint}, or say design: flasks")


def _check_fit(each: Values, path: str, finals: Levels, aliquots: Levels, walker: Walker, standards: Values) -> None:
    """Whether what goes into a vessel fits into it, where all of it can be compared."""
    unit = {"volume": "mL", "mass": "g"}
    for level in sorted(levels_of(each), key=level_order):
        aliquot, final = aliquots.get(level, aliquots.get("")), finals.get(level, finals.get(""))
        held = _added_by(each, level, standards)
        if (
            aliquot is None
            or final is None
            or (each["level_0"] == "undiluted" and not any(one.value for one, _ in held))
        ):
            continue
        kind = final.dimension
        held += [(aliquot, each["density"])] + ([(each["diluent"], None)] if each["diluent"] else [])
        parts = [by_density(quantity, kind, density) for quantity, density in held]
        mixed = sum((part.in_unit(unit[kind]) for part in parts if part is not None), Decimal(0))
        full = final.in_unit(unit[kind])
        if None not in parts and mixed > full:
            amounts = f"{mixed.normalize():f} {unit[kind]}, the final {kind} {full.normalize():f} {unit[kind]}"
            told = f"level {level}: aliquot and additions are {amounts}"
            walker.at(f"{path}.final", "R031", told, "", f"correct the {'volumes' if kind == 'volume' else 'masses'}")
            return


def _added_by(each: Values, level: str, standards: Values) -> list[tuple[Quantity, Quantity | None]]:
    """Volumes or masses of standard in one level, each with the density of its standard."""
    found: list[tuple[Quantity, Quantity | None]] = []
    for addition in additions_of(each):
        levels = {number_of(name): quantity for name, quantity in (addition["levels"] or {}).items()}
        standard = standards.get(addition["standard"] or next(iter(standards), ""))
        density = standard["density"] if standard else None
        successive = addition["deliveries"] == "each" or (
            addition["deliveries"] is None and each["design"] == "successive"
        )
        before = [name for name in levels if level_order(name) <= level_order(level)] if successive else [level]
        found += [(levels[name], density) for name in before if name in levels]
    return found
