"""The preparation factor: from the content of the test solution back to the sample as it came in."""

from __future__ import annotations

from decimal import Decimal

from spikeward.rules.prepared import WayBack
from spikeward.rules.quantities import UNITS, Quantity
from spikeward.rules.rulebook import Preparation
from spikeward.rules.sources import Findings, Sources
from spikeward.rules.words import listed, unit_words

_BASE = {"mass": "g", "volume": "mL", "digest": "mL", "dry_matter": "1", "dilution": "1"}


def way_back(preparation: Preparation, sources: Sources, unit: str, findings: Findings) -> WayBack | None:
    """Dilution, digest volume over mass or volume, and dry matter as one factor.

    Content in the sample = content in the test solution x dilution x digest volume / (mass x dry matter fraction).

    Parameters
    ----------
    unit : of the content in the test solution; the factor carries it over to ``report_in``

    Returns
    -------
    None where a quantity is missing (noted as missing) or does not fit (noted as a problem)
    """
    found = {name: _needed(preparation, sources, name, findings) for name in _BASE}
    if any(value is _ABSENT for value in found.values()):
        return None
    numbers = {name: value for name, value in found.items() if isinstance(value, Decimal)}
    for name, value in numbers.items():
        if value <= 0 or (name == "dry_matter" and value > 1):
            findings.fails(f"{name} is {value:f} {_BASE[name]}, which cannot be; correct it")
            return None
    factor, dimension = _factor(numbers, UNITS[unit][0])
    report_in = preparation.report_in or (unit if UNITS[unit][0] == dimension else "mg/kg")
    if UNITS[report_in][0] != dimension:
        findings.fails(
            f"report_in asks for {unit_words(report_in)}, {_KINDS[UNITS[report_in][0]]}, but from a standard in "
            f"{unit_words(unit)} the sample block leads to {_KINDS[dimension]} ({_gives(numbers)}); {_mend(dimension)}"
        )
        return None
    mass = numbers.get("mass")
    dry = numbers.get("dry_matter", Decimal(1))
    digest = numbers.get("digest")
    return WayBack(
        factor=float(factor * UNITS[unit][1] / UNITS[report_in][1]),
        unit=report_in,
        basis="dry matter" if "dry_matter" in numbers else "",
        digest_ml=float(digest * numbers.get("dilution", Decimal(1))) if digest is not None else None,
        mass_g=float(mass * dry) if mass is not None else None,
        words=_words(numbers),
    )


_ABSENT = object()
_KINDS = {
    "mass per volume": "a mass per volume", "mass per mass": "a mass per mass",
    "amount per volume": "an amount per volume", "amount per mass": "an amount per mass",
}  # fmt: skip
_SUCH = {
    "mass per volume": "a unit such as mg/L", "mass per mass": "a unit such as mg/kg",
    "amount per volume": "a unit such as mmol/L", "amount per mass": "a unit such as mmol/kg",
}  # fmt: skip


def _gives(numbers: dict[str, Decimal]) -> str:
    """Which of the sample block's quantities decide whether a content is per volume or per mass."""
    given = [name for name in ("mass", "volume", "digest") if name in numbers]
    return f"it gives {listed(given)}" if given else "it gives neither mass nor digest"


def _mend(dimension: str) -> str:
    if dimension.endswith("volume"):
        return f"report in {_SUCH[dimension]}, or give mass and digest for a content per mass"
    return f"report in {_SUCH[dimension]}, or take the mass out for a content per volume"


def _needed(preparation: Preparation, sources: Sources, name: str, findings: Findings) -> object:
    """The quantity in its base unit, None where the rules do not ask for it, ``_ABSENT`` where it must still come."""
    rule = getattr(preparation.sample, name)
    told = sources.find(name, "", findings)
    quantity = told if isinstance(told, Quantity) else rule
    if quantity is None:
        return None
    if isinstance(quantity, str):
        places = {"bench": "the bench file", "name": "the solution's name", "column": "a column of the export"}
        findings.lacks(f"{name.replace('_', ' ')} of {sources.key.sample} from {places[quantity]}")
        return _ABSENT
    try:
        return quantity.in_unit(_BASE[name])
    except ValueError as error:
        findings.fails(f"{name.replace('_', ' ')} of {sources.key.sample}: {error}; correct its unit")
        return _ABSENT


def _factor(numbers: dict[str, Decimal], start: str) -> tuple[Decimal, str]:
    """The factor in (test solution unit's base) per (result's base), and the dimension of the result.

    Bases are g/L, mol/L and g/g: a mass in g and a digest in mL give g/L x mL/g = 1e-3 g/g.
    """
    factor = numbers.get("dilution", Decimal(1))
    digest = numbers.get("digest")
    if digest is not None and "mass" in numbers:
        per_mass = {"mass per volume": "mass per mass", "amount per volume": "amount per mass"}.get(start, start)
        return factor * digest / numbers["mass"] / numbers.get("dry_matter", Decimal(1)) / 1000, per_mass
    if digest is not None and "volume" in numbers:
        return factor * digest / numbers["volume"], start
    return factor, start


def _words(numbers: dict[str, Decimal]) -> str:
    shown = {name: f"{value.normalize():f}" for name, value in numbers.items()}
    parts = []
    if "dilution" in shown:
        parts.append(f"diluted by a factor {shown['dilution']}")
    if "digest" in shown:
        taken = f"{shown['mass']} g" if "mass" in shown else f"{shown.get('volume', '?')} mL"
        parts.append(f"{taken} made up to {shown['digest']} mL")
    if "dry_matter" in shown:
        parts.append(f"dry matter {(numbers['dry_matter'] * 100).normalize():f} %")
    return "; ".join(parts)
