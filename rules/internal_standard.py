"""The internal standard of a line: its readings, vessel by vessel, and how much of it went into each."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from decimal import Decimal

from spikeward.rules.quantities import UNITS, Quantity
from spikeward.rules.records import Reading
from spikeward.rules.rulebook import Preparation
from spikeward.rules.sources import Findings, Sources
from spikeward.rules.words import line_words, listed

Place = tuple[str, str, str]  # level, vessel, block


@dataclass(frozen=True, slots=True)
class Internal:
    """The internal standard of one line; ``name`` is empty where it has none."""

    name: str = ""
    entered: str = ""
    readings: Mapping[Place, tuple[Reading, ...]] | None = None  # None: the export has divided by it already
    amounts: Mapping[str, Decimal] | None = None  # by level, in one unit; None: equal in all

    def of(self, place: Place, excluded: Mapping[str, str]) -> tuple[Reading, ...] | None:
        """Its readings in one vessel, without those that are excluded; None where there are none to be expected."""
        if not self.name or self.readings is None:
            return None
        return tuple(reading for reading in self.readings.get(place, ()) if reading.solution not in excluded)


def only_internal(preparations: Mapping[str, Preparation | None], readings: Iterable[Reading]) -> frozenset[str]:
    """The analytes of a series that are internal standards, and therefore no analytes to be solved.

    Parameters
    ----------
    preparations : of each analyte of the series
    """
    names = {
        preparation.internal_standard.names[analyte]
        for analyte, preparation in preparations.items()
        if preparation is not None and preparation.internal_standard is not None
        and analyte in preparation.internal_standard.names
    }  # fmt: skip
    return frozenset(reading.analyte for reading in readings if any(_is(reading, name) for name in names))


def _is(reading: Reading, name: str) -> bool:
    """A rule names an internal standard by its analyte, or with the line that is meant."""
    return name in (reading.analyte, f"{reading.analyte} {reading.line}", line_words(reading.analyte, reading.line))


def internal_of(
    preparation: Preparation,
    analyte: str,
    own: Sequence[Reading],
    all_readings: Sequence[Reading],
    sources: Sources,
    findings: Findings,
) -> Internal:
    """The internal standard of one line.

    Parameters
    ----------
    own : the readings of the line
    all_readings : of the series, those of the internal standard among them
    """
    rule = preparation.internal_standard
    if rule is None or analyte not in rule.names:
        return Internal()
    name = rule.names[analyte]
    amounts = _amounts(preparation, {each.level for each in own}, sources, findings) if _counts(rule.entered) else None
    already = {"internal_standard" in reading.already for reading in own}
    if already == {True}:
        return Internal(name, rule.entered, None, amounts)
    if already == {True, False}:
        findings.fails(
            "some exports of this series say that the internal standard was applied already and others do not: export "
            "all vessels in the same way"
        )
    found = [reading for reading in all_readings if _is(reading, name)]
    lines = sorted({line_words(reading.analyte, reading.line) for reading in found})
    units = sorted({reading.unit for reading in found})
    if len(lines) > 1:
        findings.fails(
            f"the internal standard {name} was read at {listed(lines)}; name the one that is meant, with its line, "
            "under internal_standard: for"
        )
    elif len(units) > 1:
        findings.fails(f"signals of {name} come in {listed(units)}; export one series in one unit")
    grouped: dict[Place, list[Reading]] = defaultdict(list)
    for reading in found:
        grouped[reading.level, reading.vessel, reading.block].append(reading)
    return Internal(name, rule.entered, {place: tuple(each) for place, each in grouped.items()}, amounts)


def _counts(entered: str) -> bool:
    """Whether it matters how much of the internal standard went into a vessel."""
    return entered == "per_vessel"


def _amounts(
    preparation: Preparation, levels: set[str], sources: Sources, findings: Findings
) -> dict[str, Decimal] | None:
    """What went into the vessels of each level, in one unit; None where nobody says, which is equal amounts."""
    rule = preparation.internal_standard
    usual = rule.amount if rule is not None else None
    found = {level: sources.find("internal_standard", level, findings) or usual for level in sorted(levels)}
    given = {level: each for level, each in found.items() if isinstance(each, Quantity)}
    if not given:
        return None
    kinds = sorted({each.dimension for each in given.values()})
    unknown = [f"level {level}" for level in found if level not in given]
    if unknown:
        findings.fails(f"no amount of the internal standard is known for {listed(unknown)}; give it for every level")
        return None
    if len(kinds) > 1:
        findings.fails(f"amounts of the internal standard are {listed(kinds)}; give all in one kind of unit")
        return None
    if any(each.value <= 0 for each in given.values()):
        findings.fails("an amount of the internal standard is not above zero; correct it")
        return None
    return {level: each.value * UNITS[each.unit][1] for level, each in given.items()}
