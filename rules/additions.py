"""What was added to every level: standards by volume or mass, or the analyte itself, and how much analyte that is."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from decimal import Decimal
from itertools import pairwise

from spikeward.rules.naming import level_order
from spikeward.rules.quantities import UNITS, Quantity, by_density, by_molar_mass
from spikeward.rules.rulebook import Preparation, Rulebook, Standard
from spikeward.rules.sources import Findings, Sources

_ADDABLE = ("volume", "mass", "amount")


@dataclass(frozen=True, slots=True)
class Delivery:
    """One delivery into a vessel; without a ``standard`` the quantity is the analyte's own."""

    standard: str
    quantity: Quantity


Deliveries = Mapping[str, tuple[Delivery, ...] | None]
"""All that each level holds; None where something of it is not known."""


def deliveries(preparation: Preparation, levels: Sequence[str], sources: Sources, findings: Findings) -> Deliveries:
    """Everything that was delivered into each level; of successive deliveries all up to and including the level.

    Parameters
    ----------
    levels : that were measured
    """
    declared = sorted({*preparation.levels, *levels}, key=level_order)
    last = _last_known(declared, preparation, findings)
    known = declared[:last]
    alone = {level: _of_level(preparation, level, sources, findings) for level in known}
    for level in levels:
        if level in alone and alone[level] is None:
            sources.want(
                "addition",
                level,
                findings,
                f"no addition is known for level {level}; declare it under additions: levels, "
                "or give it in the bench file, a column or the name",
            )
    found: dict[str, tuple[Delivery, ...] | None] = dict.fromkeys(declared)
    for number, level in enumerate(known):
        found[level] = _held(preparation, [alone[each] for each in known[: number + 1]])
    return found


def _held(preparation: Preparation, alone: Sequence[tuple[Delivery | None, ...] | None]) -> tuple[Delivery, ...] | None:
    """All that the last of some levels holds, from what each of them received alone."""
    parts: list[Delivery] = []
    for position, addition in enumerate(preparation.additions):
        for delivered in alone if addition.deliveries == "each" else alone[-1:]:
            if delivered is None:
                return None
            if (one := delivered[position]) is not None:
                parts.append(one)
    return tuple(parts)


def _last_known(declared: Sequence[str], preparation: Preparation, findings: Findings) -> int:
    """How many levels come before the first delivery that nobody tells, which every later vessel holds."""
    if all(addition.deliveries == "total" for addition in preparation.additions):
        return len(declared)
    unknown = _level_between(declared, preparation)
    if unknown is None:
        return len(declared)
    findings.lacks(f"the addition of level {unknown} (every later vessel holds it)")
    return sum(level_order(level) < level_order(unknown) for level in declared)


def _level_between(levels: Sequence[str], preparation: Preparation) -> str | None:
    """The first level between others that is neither measured nor declared, so that its delivery is not known.

    Where the rule file declares every level that was measured, its list is taken as it is. Levels may count in steps,
    such as 0, 10, 20.
    """
    numbers = [int(level) for level in levels if level.isascii() and level.isdigit()]
    if set(levels) <= preparation.levels or len(numbers) < 2:
        return None
    steps = [after - before for before, after in pairwise(numbers)]
    least = math.gcd(*steps)
    return next((str(before + least) for before, step in zip(numbers, steps, strict=False) if step > least), None)


def _of_level(
    preparation: Preparation, level: str, sources: Sources, findings: Findings
) -> tuple[Delivery | None, ...] | None:
    """What each addition of the rule file delivers at one level alone; None where no source tells."""
    told = sources.quantity("addition", level, findings, *_ADDABLE)
    standard = sources.find("standard", level, findings)
    meant = _meant(preparation, level, None if standard is None else str(standard), told, findings)
    found: list[Delivery | None] = []
    for position, addition in enumerate(preparation.additions):
        quantity = addition.levels.get(level)
        name = addition.standard
        if position == meant:
            quantity = told or quantity
            name = str(standard) if standard is not None and name else name
        found.append(None if quantity is None else Delivery(name, quantity))
    if any(found) or level_order(level) == level_order("0"):
        return tuple(found)
    return None


def _meant(
    preparation: Preparation, level: str, standard: str | None, told: Quantity | None, findings: Findings
) -> int | None:
    """Which addition of the rule file a quantity or a standard that is given for one level belongs to."""
    additions = preparation.additions
    if len(additions) == 1:
        return 0
    if standard is None and told is None:
        return None
    if standard is not None:
        places = [number for number, each in enumerate(additions) if each.standard == standard]
    else:
        places = [number for number, each in enumerate(additions) if level in each.levels]
    if len(places) == 1:
        return places[0]
    given = f"an addition of {told}" if told is not None else f"the standard {standard}"
    findings.fails(
        f"level {level}: {given} is given and the rule file has several additions; it does not say which one is meant; "
        "give it under additions: levels, or name one of their standards"
    )
    return None


@dataclass(frozen=True, slots=True)
class Spiking:
    """How much of an analyte deliveries hold, by the standards and molar masses of the rules."""

    rules: Rulebook
    findings: Findings

    def standards(self, delivered: Deliveries) -> dict[str, Standard]:
        """The standards of which anything was delivered, by name, in the order of levels."""
        found: dict[str, Standard] = {}
        for parts in delivered.values():
            for delivery in parts or ():
                name = delivery.standard
                if not name or not delivery.quantity.value:
                    continue
                if name in self.rules.standards:
                    found[name] = self.rules.standards[name]
                else:
                    self.findings.fails(f"standard {name} is not under standards in the rule file; add it there")
        return found

    def delivered(self, delivery: Delivery, kind: str, why: str) -> Quantity | None:
        """A delivery as a ``volume`` or a ``mass``, through the density of its standard.

        Parameters
        ----------
        why : the beginning of the sentence that says what cannot be done without the density
        """
        if not delivery.standard:
            return Quantity(Decimal(0), {"volume": "mL", "mass": "g"}[kind])  # the analyte itself takes no room
        standard = self.rules.standards.get(delivery.standard)
        found = by_density(delivery.quantity, kind, standard.density if standard is not None else None)
        if found is None and standard is not None:
            self.findings.fails(f"{why}; add the density of {standard.name} under standards")
        return found

    def amount(self, analyte: str, delivery: Delivery, kind: str) -> Quantity | None:
        """How much of an analyte one delivery holds, as a ``mass`` in g or an ``amount`` in mol.

        Returns
        -------
        zero of an analyte that its standard does not hold; None where a density or a molar mass is missing (noted as a
        problem)
        """
        unit = {"mass": "g", "amount": "mol"}[kind]
        nothing = Quantity(Decimal(0), unit)
        if not delivery.quantity.value:
            return nothing
        amount: Quantity | None = delivery.quantity
        if delivery.standard:
            standard = self.rules.standards.get(delivery.standard)
            if standard is None or analyte not in standard.contents:
                return nothing
            amount = self._from(standard.contents[analyte], delivery)
        if amount is None:
            return None
        found = by_molar_mass(amount, kind, self.rules.molar_masses.get(analyte))
        if found is None:
            self.findings.fails(
                f"{analyte} is added as mass and as amount of substance; give its molar mass under molar_masses"
            )
            return None
        return Quantity(found.in_unit(unit), unit)

    def _from(self, content: Quantity, delivery: Delivery) -> Quantity | None:
        what, _, of = content.dimension.partition(" per ")
        why = f"{delivery.standard} was delivered by {delivery.quantity.dimension} and has its content per {of}"
        delivered = self.delivered(delivery, of, why)
        if delivered is None:
            return None
        taken = delivered.in_unit("L" if of == "volume" else "g")
        return Quantity(content.value * UNITS[content.unit][1] * taken, "g" if what == "mass" else "mol")
