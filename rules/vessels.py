"""What every vessel of a series was made of: aliquot, additions and final by level, each as a volume or a mass."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from decimal import Decimal

from spikeward.rules.additions import Deliveries, Delivery, Spiking
from spikeward.rules.quantities import Quantity, by_density
from spikeward.rules.rulebook import Preparation, SampleRule
from spikeward.rules.sample import ABSENT, dilutions_of, of_sample, product
from spikeward.rules.sources import Findings, Sources

UNIT = {"volume": "mL", "mass": "g"}
"""In which a volume or a mass is reckoned."""

_SEVERAL = {"volume": "volumes", "mass": "masses"}
_CONTRACTS = Decimal("1.02")


@dataclass(frozen=True, slots=True)
class Parts:
    """One level: aliquot, all standard in it, and what it was made up to, in the units of the series."""

    aliquot: Decimal
    addition: Decimal
    final: Decimal


@dataclass(frozen=True, slots=True)
class Vessels:
    """The levels of one series. Units are mL or g and hold for every level."""

    parts: Mapping[str, Parts]
    aliquot_unit: str
    addition_unit: str
    final_unit: str


def vessels_of(
    preparation: Preparation,
    levels: Sequence[str],
    delivered: Deliveries,
    sources: Sources,
    spiking: Spiking,
) -> Vessels:
    """Volumes and masses by level; a level of which something is not known is left out, with the reason noted.

    Parameters
    ----------
    levels : that were measured, in order
    delivered : by level, see ``deliveries``
    """
    known = {level: parts for level in levels if (parts := delivered[level]) is not None}
    if preparation.spiked == "sample":
        return _digests(preparation, known, sources, spiking)
    return _mixed(preparation, known, sources, spiking)


def _mixed(
    preparation: Preparation, known: Mapping[str, tuple[Delivery, ...]], sources: Sources, spiking: Spiking
) -> Vessels:
    """Aliquots of one test solution, made up or as they were mixed."""
    findings = spiking.findings
    aliquots = {level: _given("aliquot", preparation.aliquot, level, sources, findings) for level in known}
    for level, aliquot in aliquots.items():
        if aliquot is None:
            told = f"no aliquot is known for level {level}; declare it under preparations: aliquot"
            sources.want("aliquot", level, findings, told)
    finals = {level: _given("final", preparation.final, level, sources, findings) for level in known}
    unfilled = _unfilled(preparation, known, finals, "final" in sources.awaited)
    for level in unfilled:
        told = f"no final volume is known for level {level}; declare it under preparations: final, or give it for each"
        sources.want("final", level, findings, told)
    kind = _one_kind("aliquots", aliquots, findings)
    final_kind = _one_kind("final volumes", finals, findings) or kind
    spiked_kind = _kind_of_additions(known)
    bench = _Bench(preparation, spiking, final_kind)
    found: dict[str, Parts] = {}
    for level, parts in known.items():
        aliquot = aliquots[level]
        if aliquot is None or aliquot.dimension != kind or level in unfilled:
            continue
        addition = _total(parts, spiked_kind, level, spiking)
        final = bench.final(level, aliquot, parts, finals[level])
        if addition is not None and final is not None:
            found[level] = Parts(aliquot.in_unit(UNIT[kind]), addition, final)
    return Vessels(found, UNIT[kind], UNIT[spiked_kind], UNIT[final_kind])


def _undiluted(preparation: Preparation, parts: Sequence[Delivery]) -> bool:
    """Whether a vessel was read on the test solution as it is."""
    return preparation.level_0 == "undiluted" and not any(delivery.quantity.value for delivery in parts)


def _unfilled(
    preparation: Preparation,
    known: Mapping[str, tuple[Delivery, ...]],
    finals: Mapping[str, Quantity | None],
    awaited: bool,
) -> list[str]:
    """Levels without a final volume where the others were made up: they were not left as they were mixed.

    What was added again and again to one vessel is the sum of its parts, unless somebody read it.
    """
    made_up = any(finals.values()) or (awaited and preparation.design in ("flasks", "weighed"))
    if preparation.design == "successive" or not made_up:
        return []
    return [level for level, final in finals.items() if final is None and not _undiluted(preparation, known[level])]


def _given(
    meaning: str, rule: Mapping[str, Quantity], level: str, sources: Sources, findings: Findings
) -> Quantity | None:
    told = sources.quantity(meaning, level, findings, "volume", "mass")
    return told or rule.get(level, rule.get(""))


def _one_kind(named: str, quantities: Mapping[str, Quantity | None], findings: Findings) -> str:
    """Volume or mass, whichever all levels say; else a problem. Volume where none says anything."""
    first: dict[str, str] = {}
    for level, quantity in quantities.items():
        if quantity is not None:
            first.setdefault(quantity.dimension, f"level {level} {quantity}")
    if len(first) > 1:
        findings.fails(
            f"{named} are given by volume and by mass ({' and '.join(first.values())}); give all in one kind"
        )
    return next(iter(first), "volume" if named == "aliquots" else "")


def _kind_of_additions(known: Mapping[str, tuple[Delivery, ...]]) -> str:
    kinds = [
        delivery.quantity.dimension
        for parts in known.values()
        for delivery in parts
        if delivery.standard and delivery.quantity.value and delivery.quantity.dimension in UNIT
    ]
    return kinds[0] if kinds else "volume"


def _total(parts: Sequence[Delivery], kind: str, level: str, spiking: Spiking) -> Decimal | None:
    """All standard in a vessel, in mL or g."""
    total = Decimal(0)
    for delivery in parts:
        one = spiking.delivered(delivery, kind, f"level {level}: some additions are volumes and some are masses")
        if one is None:
            return None
        total += one.in_unit(UNIT[kind])
    return total


@dataclass(frozen=True, slots=True)
class _Bench:
    """How vessels were filled up; ``kind`` is that of every final volume, volume or mass."""

    preparation: Preparation
    spiking: Spiking
    kind: str

    def final(self, level: str, aliquot: Quantity, parts: Sequence[Delivery], given: Quantity | None) -> Decimal | None:
        """What a vessel holds when it is measured, in mL or g."""
        if _undiluted(self.preparation, parts):
            return self._of_test_solution(level, aliquot)
        if given is None:
            return self._as_mixed(level, aliquot, parts)
        if given.dimension != self.kind:
            return None  # noted: final volumes of two kinds
        final = given.in_unit(UNIT[self.kind])
        self._fits(level, aliquot, parts, final)
        return final

    def _of_test_solution(self, level: str, aliquot: Quantity) -> Decimal | None:
        found = by_density(aliquot, self.kind, self.preparation.density)
        if found is None:
            self.spiking.findings.fails(
                f"level {level}: its aliquot is a {aliquot.dimension} and the vessels are told by {self.kind}; add "
                "density, that of the test solution, to the preparation"
            )
            return None
        return found.in_unit(UNIT[self.kind])

    def _as_mixed(self, level: str, aliquot: Quantity, parts: Sequence[Delivery]) -> Decimal | None:
        """The sum of what was put together; of a volume and a mass it takes a density."""
        total = self._of_test_solution(level, aliquot)
        diluent = self.preparation.diluent
        if total is None:
            return None
        if diluent is not None:
            if diluent.dimension != self.kind:
                self.spiking.findings.fails(
                    f"level {level}: the diluent is a {diluent.dimension} and the aliquot a {self.kind}; give both by "
                    f"{self.kind}, or give final"
                )
                return None
            total += diluent.in_unit(UNIT[self.kind])
        for delivery in parts:
            why = f"level {level}: the vessel holds a {self.kind} of test solution and {delivery.quantity} of standard"
            one = self.spiking.delivered(delivery, self.kind, f"{why}, and no final {self.kind} is given")
            if one is None:
                return None
            total += one.in_unit(UNIT[self.kind])
        return total

    def _fits(self, level: str, aliquot: Quantity, parts: Sequence[Delivery], final: Decimal) -> None:
        """Whether the parts fit into the vessel, as far as they can be compared."""
        standards = self.spiking.rules.standards
        held = [(aliquot, self.preparation.density)]
        if self.preparation.diluent is not None:
            held.append((self.preparation.diluent, None))
        for delivery in parts:
            if delivery.standard in standards:
                held.append((delivery.quantity, standards[delivery.standard].density))
        found = [by_density(quantity, self.kind, density) for quantity, density in held]
        mixed = sum((one.in_unit(UNIT[self.kind]) for one in found if one is not None), Decimal(0))
        # What was mixed in one vessel and then measured may be a little less than the sum of its parts.
        room = final * (_CONTRACTS if self.preparation.design in ("successive", "weighed") else 1)
        if None not in found and mixed > room:
            self.spiking.findings.fails(
                f"level {level}: aliquot and additions ({mixed.normalize():f} {UNIT[self.kind]}) do not fit into the "
                f"final {self.kind} ({final.normalize():f} {UNIT[self.kind]}); correct the {_SEVERAL[self.kind]}"
            )


def _digests(
    preparation: Preparation, known: Mapping[str, tuple[Delivery, ...]], sources: Sources, spiking: Spiking
) -> Vessels:
    """Additions to the sample before its preparation: every level is a digest of its own."""
    rule, findings = preparation.sample or SampleRule(), spiking.findings
    asked = "mass" if rule.volume is None else "volume"
    kind = _kind_of_additions(known)
    digests = {level: _measured(rule, "digest", level, sources, findings) for level in known}
    final_kind = _one_kind("digests", digests, findings) or "volume"
    found: dict[str, Parts] = {}
    for level, parts in known.items():
        taken, digest = _measured(rule, asked, level, sources, findings), digests[level]
        factors = dilutions_of(rule, sources, findings, level)
        addition = _total(parts, kind, level, spiking)
        if taken is None or digest is None or factors is ABSENT or addition is None or digest.dimension != final_kind:
            continue
        final = digest.in_unit(UNIT[final_kind]) * product(factors)
        found[level] = Parts(taken.in_unit(UNIT[asked]), addition, final)
    return Vessels(found, UNIT[asked], UNIT[kind], UNIT[final_kind])


def _measured(rule: SampleRule, name: str, level: str, sources: Sources, findings: Findings) -> Quantity | None:
    """A quantity that each level needs of its own."""
    found = of_sample(rule, name, sources, findings, level)
    if found is None:
        findings.fails(f"no {name} is known for level {level}; declare it under sample, or give it for each level")
    return found if isinstance(found, Quantity) else None
