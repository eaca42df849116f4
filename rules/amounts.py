"""How much analyte each level holds, in the unit of content that the series is solved in."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from decimal import Decimal

from spikeward.rules.additions import Deliveries, Delivery, Spiking
from spikeward.rules.quantities import UNITS, per
from spikeward.rules.rulebook import Addition, Preparation, Standard
from spikeward.rules.sources import Findings
from spikeward.rules.words import listed

_READABLE = {"g": "mg", "mol": "mmol"}
"""In what an amount is told that a name or a column gave: its own unit is no longer known there."""


@dataclass(frozen=True, slots=True)
class Amounts:
    """The analyte of one level, and of further analytes, each in its content's unit times the aliquot's."""

    own: Decimal
    others: tuple[tuple[str, float], ...] = ()


def content_unit(
    preparation: Preparation, analyte: str, standards: Mapping[str, Standard], delivered: Deliveries, kind: str
) -> str:
    """The unit of contents: that of the first addition, per volume or per mass as the aliquots are.

    Parameters
    ----------
    standards : of which anything was delivered, by name
    kind : ``volume`` or ``mass``, what aliquots are

    Returns
    -------
    an empty text where no standard holds the analyte
    """
    for addition in preparation.additions:
        unit = "" if addition.standard else _own_unit(addition, delivered)
        if unit:
            return per(unit, kind)
    order = [addition.standard for addition in preparation.additions]
    for name in sorted(standards, key=lambda name: order.index(name) if name in order else len(order)):
        if analyte in standards[name].contents:
            return per(standards[name].contents[analyte].unit, kind)
    return ""


def _own_unit(addition: Addition, delivered: Deliveries) -> str:
    """The unit in which the analyte itself was added."""
    for quantity in addition.levels.values():
        return quantity.unit
    told = [each.quantity for parts in delivered.values() for each in parts or () if not each.standard]
    return _READABLE.get(told[0].unit, "") if told else ""


def check_contents(
    preparation: Preparation, analyte: str, standards: Mapping[str, Standard], findings: Findings
) -> None:
    """Every standard of a single addition must hold the analyte; of several that make one series, one of them."""
    lacking = [name for name, standard in standards.items() if analyte not in standard.contents]
    if lacking and (len(preparation.additions) == 1 or len(lacking) == len(standards)):
        named = f"standard {lacking[0]} does" if len(lacking) == 1 else f"standards {listed(lacking)} do"
        findings.fails(f"{named} not hold {analyte}; add its content under standards")


def amounts_of(
    spiking: Spiking, analyte: str, delivered: Deliveries, unit: str, aliquot_unit: str
) -> dict[str, Amounts]:
    """The amounts of every level; a level of which something is not known is left out, with the reason noted.

    Parameters
    ----------
    unit : of contents
    aliquot_unit : mL or g
    """
    kind = UNITS[aliquot_unit][0]
    found: dict[str, Amounts] = {}
    others = _others(spiking, analyte, unit, kind) if spiking.rules.overlap else {}
    # What another analyte lacks is told where that one is prepared itself.
    quiet = Spiking(spiking.rules, Findings({}, {}))
    for level, parts in delivered.items():
        own = None if parts is None else _sum(spiking, analyte, parts, unit, aliquot_unit)
        if parts is None or own is None:
            continue
        named = [each for each in parts if each.standard]
        sums = {name: _sum(quiet, name, named, other, aliquot_unit) for name, other in others.items()}
        found[level] = Amounts(own, tuple((name, float(each)) for name, each in sums.items() if each is not None))
    return found


def _others(spiking: Spiking, analyte: str, unit: str, kind: str) -> dict[str, str]:
    """Further analytes of all standards and the unit of their content: that of the line where it measures the same."""
    units: dict[str, str] = {}
    for standard in spiking.rules.standards.values():
        for name, content in sorted(standard.contents.items()):
            own = per(content.unit, kind)
            units.setdefault(name, unit if UNITS[own][0] == UNITS[unit][0] else own)
    return {name: units[name] for name in sorted(units) if name != analyte}


def _sum(spiking: Spiking, analyte: str, parts: Sequence[Delivery], unit: str, aliquot_unit: str) -> Decimal | None:
    """All that some deliveries hold of an analyte, in the unit of content times that of the aliquot."""
    what = UNITS[unit][0].partition(" per ")[0]
    total = Decimal(0)
    for delivery in parts:
        amount = spiking.amount(analyte, delivery, what)
        if amount is None:
            return None
        total += amount.value
    return total / (UNITS[unit][1] * UNITS[aliquot_unit][1])
