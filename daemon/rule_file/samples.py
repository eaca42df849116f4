"""The way back of a preparation: sample, dilutions, densities, recovery, spike, and the unit that results come in."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import re2

from spikeward.daemon.rule_file.preparations import (
    additions_of,
    analytes_of,
    check_standard,
    standards_of,
    told_elsewhere,
)
from spikeward.daemon.rule_file.walk import Walker
from spikeward.rules.quantities import UNITS
from spikeward.rules.schema_kinds import one_of
from spikeward.rules.words import listed

Values = Mapping[str, Any]

_SECTIONS = {"bench": "bench", "name": "names", "column": "readers"}


def check_samples(value: Values, walker: Walker) -> None:
    """Everything that the way from test solution to sample can get wrong once each preparation is one."""
    elsewhere = told_elsewhere(value)
    for number, each in enumerate(value["preparations"] or ()):
        path = f"preparations[{number}]"
        if each is None:
            continue
        if each["sample"] is not None:
            _check_sources(each["sample"], f"{path}.sample", elsewhere, walker)
            _check_sample(each, f"{path}.sample", walker)
        _check_spiked(each, path, walker)
        _check_spike(each, path, value, elsewhere, walker)
        _check_recovery(each, path, walker)
        _check_report_unit(each, path, value, walker)


def _from_elsewhere(source: str, quantity: str, where: str, elsewhere: Mapping[str, set[str]], walker: Walker) -> None:
    """A quantity that is said to come from bench, name or column must be told there."""
    if quantity in elsewhere[source] or not walker.sound(_SECTIONS[source]):
        return
    hint = {
        "bench": f"add {quantity} to the columns under bench",
        "name": f"put (?P<{quantity}>…) into a pattern under names",
        "column": f"add {quantity} to the columns of a reader",
    }[source]
    walker.at(where, "R030", f"no {source} gives the {quantity.replace('_', ' ')}", "", hint)


def _check_sources(sample: Values, base: str, elsewhere: Mapping[str, set[str]], walker: Walker) -> None:
    for quantity, source in sample.items():
        if isinstance(source, str):
            _from_elsewhere(source, quantity, f"{base}.{quantity}", elsewhere, walker)
    words = [(number, each) for number, each in enumerate(sample["dilution"] or ()) if isinstance(each, str)]
    for number, source in words:
        where = f"{base}.dilution[{number}]"
        _from_elsewhere(source, "dilution", where, elsewhere, walker)
        if [each for _, each in words].index(source) < [place for place, _ in words].index(number):
            walker.at(where, "R031", f"two dilutions come from one {source}", "", "say one of the two as a factor")


def _check_sample(each: Values, base: str, walker: Walker) -> None:
    if not walker.sound(base):
        return
    sample = each["sample"]
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
    for share in ("dry_matter", "moisture"):
        if sample[share] is not None and not mass:
            named = share.replace("_", " ")
            walker.at(f"{base}.{share}", "R031", f"{named} needs the mass of the sample", "", "add mass and digest")
    if sample["dry_matter"] is not None and sample["moisture"] is not None:
        told = "dry_matter and moisture say the same thing"
        walker.at(f"{base}.moisture", "R031", told, "", "delete one of the two")


def _check_spiked(each: Values, path: str, walker: Walker) -> None:
    """Additions to the sample itself: each level has a mass and a digest of its own, and no aliquot."""
    if each["spiked"] != "sample" or not walker.sound(f"{path}.sample", f"{path}.aliquot", f"{path}.final"):
        return
    sample = each["sample"] or {}
    if sample.get("mass") is None and sample.get("volume") is None or sample.get("digest") is None:
        told = "spiked: sample needs the mass of sample and the digest of each level"
        walker.at(f"{path}.spiked", "R010", told, "", "add sample: {mass: bench, digest: 50 mL}")
    aliquot = each["aliquot"] or {}
    if aliquot.get("volume") or aliquot.get("mass") or aliquot.get("levels"):
        told = "with spiked: sample the whole digest of each level is read, and there is no aliquot"
        walker.at(f"{path}.aliquot", "R031", told, "", "delete aliquot; a dilution of the digest belongs under sample")
    if each["final"]:
        told = "with spiked: sample every level is made up to its digest"
        walker.at(f"{path}.final", "R031", told, "", "delete final; a dilution of the digest belongs under sample")


def _check_spike(each: Values, path: str, value: Values, elsewhere: Mapping[str, set[str]], walker: Walker) -> None:
    spike, where = each["spike"], f"{path}.spike"
    if spike is None or not walker.sound(where):
        return
    if walker.sound("standards"):
        check_standard(spike["standard"], f"{where}.standard", value["standards"] or {}, walker)
    if isinstance(spike["delivered"], str):
        _from_elsewhere(spike["delivered"], "spike", f"{where}.delivered", elsewhere, walker)
    sample = each["sample"] or {}
    if walker.sound(f"{path}.sample") and sample.get("mass") is None and sample.get("volume") is None:
        told = "the recovery of a spike needs the mass or the volume of the sample"
        walker.at(where, "R010", told, "", "add sample: {mass: bench, digest: 50 mL}")
    if each["spiked"] == "sample":
        told = "spike is for samples whose test solution the additions go into"
        walker.at(where, "R031", told, "", "delete spike, or give spiked samples a preparation of their own")


def _check_recovery(each: Values, path: str, walker: Walker) -> None:
    recovery = each["recovery"]
    if recovery is None or not walker.sound(f"{path}.recovery"):
        return
    if recovery["factor"] > _LARGEST_RECOVERY:
        told = f"a recovery of {recovery['factor']:g} is not possible as a factor"
        walker.at(f"{path}.recovery.factor", "R031", told, "", f"write {recovery['factor'] / 100:g} for per cent")


_LARGEST_RECOVERY = 2.0  # beyond, per cent were meant


def result_dimensions(each: Values, value: Values) -> set[str]:
    """What the results of a preparation can measure; empty where the file does not say yet."""
    whats = set().union(*_added(each, value).values())
    if whats and value["molar_masses"]:
        whats = {"mass", "amount"}
    ofs = {"volume", "mass"} if _density_leads(each) else _denominators(each)
    return {f"{what} per {of}" for what in whats for of in ofs}


def _added(each: Values, value: Values) -> dict[str, set[str]]:
    """Whether the additions of each analyte are known as mass or as amount of substance."""
    found: dict[str, set[str]] = {}
    asked = each["for"].get("analyte") or ".*"
    contents = [
        (analyte, content.dimension.partition(" per ")[0])
        for standard in standards_of(each, value["standards"] or {})
        for analyte, content in (*(standard["contents"] or {}).items(), (standard["analyte"], standard["content"]))
        if content is not None
    ]
    contents += [
        (analyte, quantity.dimension)
        for addition in additions_of(each)
        for quantity in (addition["amounts"] or {}).values()
        for analyte in analytes_of(value)
        if quantity is not None
    ]
    for analyte, what in contents:
        if re2.fullmatch(asked, analyte):
            found.setdefault(analyte, set()).add(what)
    return found


def _denominators(each: Values) -> set[str]:
    """Whether results are per volume or per mass: as the sample was taken, or else as aliquots are.

    Both where aliquots are told elsewhere, by volume or by mass as it will turn out.
    """
    sample = each["sample"] or {}
    if sample.get("mass") is not None:
        return {"mass"}
    if sample.get("volume") is not None:
        return {"volume"}
    aliquot = each["aliquot"] or {}
    given = (aliquot.get("volume"), aliquot.get("mass"), *(aliquot.get("levels") or {}).values())
    kinds = {one.dimension for one in given if one is not None}
    if each["spiked"] != "sample" and not kinds:
        return {"volume", "mass"}
    return {"mass"} if "mass" in kinds else {"volume"}


def _density_leads(each: Values) -> bool:
    """Whether a density carries results per volume over to results per mass, or back."""
    sample = each["sample"] or {}
    if sample.get("density") is not None:
        return True
    return each["density"] is not None and sample.get("digest") is None


def _check_report_unit(each: Values, path: str, value: Values, walker: Walker) -> None:
    parts = ("report_in", "sample", "additions", "aliquot", "for", "density")
    if not each["report_in"] or not walker.sound("standards", "molar_masses", *(f"{path}.{part}" for part in parts)):
        return
    unit, added, ofs = each["report_in"], _added(each, value), _denominators(each)
    what, _, asked = UNITS[unit][0].partition(" per ")
    lacking = sorted(name for name, ways in added.items() if ways != {what} and name not in value["molar_masses"])
    ways = []
    if asked not in ofs and not _density_leads(each):
        ways.append("give mass and digest for a content per mass, or density" if asked == "mass" else "give density")
    if lacking:
        ways.append(f"give the molar mass of {listed(lacking)} under molar_masses")
    if added and ways:
        leads = one_of(tuple(sorted({f"{one} per {of}" for each_ in added.values() for one in each_ for of in ofs})))
        told = f"{unit} is a unit of {UNITS[unit][0]}; standard and sample lead to {leads}"
        walker.at(f"{path}.report_in", "R015", told, "", f"{' and '.join(ways)}, or correct the unit")
