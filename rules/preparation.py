"""How the vessels of a series were made, put together: what the solver takes in of every analyte on every line."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

import re2

from spikeward.rules.additions import Delivery, Spiking, deliveries
from spikeward.rules.amounts import Amounts, amounts_of, check_contents, content_unit
from spikeward.rules.cannot_tell import cannot_tell
from spikeward.rules.internal_standard import Internal, internal_of, only_internal
from spikeward.rules.naming import level_order
from spikeward.rules.prepared import PreparedLine, PreparedVessel
from spikeward.rules.quantities import UNITS
from spikeward.rules.records import Batch, Members, Reading, SeriesKey
from spikeward.rules.rulebook import Preparation, Rulebook, Standard
from spikeward.rules.sources import PLACES, Findings, Sources, sources_of
from spikeward.rules.vessels import Parts, Vessels, vessels_of
from spikeward.rules.way_back import Returned, way_back
from spikeward.rules.words import line_words, listed

SPIKED = "spiked_sample"

Place = tuple[str, str, str]  # level, vessel, block


@dataclass(frozen=True, slots=True)
class _Series:
    """What all lines of a series share; ``excluded`` gives the decision by solution."""

    key: SeriesKey
    readings: Sequence[Reading]
    sources: Sources
    excluded: Mapping[str, str]
    rules: Rulebook


def prepare(members: Members, batch: Batch, rules: Rulebook) -> tuple[PreparedLine, ...]:
    """Prepare every analyte, on every line, of one addition series.

    Returns
    -------
    in the order of analyte and line; a series without a preparation in the rules carries that as its problem
    """
    readings = members.readings
    analytes = sorted({reading.analyte for reading in readings})
    preparations = {analyte: preparation_for(members.key, analyte, rules) for analyte in analytes}
    internal = only_internal(preparations, readings)
    by_line: dict[tuple[str, str], list[Reading]] = defaultdict(list)
    for reading in readings:
        if reading.analyte not in internal:
            by_line[reading.analyte, reading.line].append(reading)
    series = _Series(
        key=members.key,
        readings=readings,
        sources=sources_of(
            members,
            batch,
            _bench_is_meant(members.key, preparations.values()),
            rules.bench.columns if rules.bench is not None else (),
        ),
        excluded={decision.target: decision.words for decision in batch.decisions if decision.kind == "exclude"},
        rules=rules,
    )
    return tuple(
        _line(series, preparations[analyte], analyte, line, by_line[analyte, line]) for analyte, line in sorted(by_line)
    )


def _bench_is_meant(key: SeriesKey, preparations: Iterable[Preparation | None]) -> bool:
    """A bench file names samples: process blank 1 is not sample 1, unless its preparation asks for the bench file."""
    if key.role != "process_blank":
        return True
    blocks = [each.sample for each in preparations if each is not None and each.sample is not None]
    return any(
        "bench" in (each.mass, each.volume, each.digest, each.dry_matter, each.moisture, *each.dilution)
        for each in blocks
    )


def preparation_for(key: SeriesKey, analyte: str, rules: Rulebook) -> Preparation | None:
    """The first preparation of the rule file that applies to a series and analyte."""
    texts = {"batch": key.batch, "sample": key.sample, "role": key.role, "analyte": analyte}
    for preparation in rules.preparations:
        if all(re2.fullmatch(pattern, texts[name]) for name, pattern in preparation.applies.items()):
            return preparation
    return None


def _line(
    series: _Series, preparation: Preparation | None, analyte: str, line: str, readings: Sequence[Reading]
) -> PreparedLine:
    findings = Findings({}, {})
    signal_unit = readings[0].unit
    for reading in readings:
        if reading.unit != signal_unit:
            findings.fails(
                f"signals of {line_words(analyte, line)} come in {signal_unit} and in {reading.unit} "
                f"({reading.path} row {reading.row}); export one series in one unit"
            )
    if preparation is not None and preparation.response == "log" and signal_unit != "mV":
        told = f"potentials are reckoned in mV, and signals come in {signal_unit or 'no unit'}"
        findings.fails(f"{told}; export them in mV")
    if preparation is not None:
        return _Line(series, preparation, analyte, findings).prepared(line, readings)
    key = series.key
    told = f"role {key.role}, batch {key.batch or '(folder)'}, sample {key.sample}, {analyte}"
    findings.fails(f"no preparation in the rule file applies to {told}; widen a 'for' under preparations")
    problems = tuple(findings.problems)
    return PreparedLine(key, analyte, line, "", "", signal_unit, (), None, "", "", problems=problems)


@dataclass(frozen=True, slots=True)
class _Line:
    """One analyte of a series while it is prepared; everything that is wrong goes to ``findings``."""

    series: _Series
    preparation: Preparation
    analyte: str
    findings: Findings

    def prepared(self, line: str, readings: Sequence[Reading]) -> PreparedLine:
        """The line with its vessels, its way back, and what was found on the way."""
        rule, sources = self.preparation, self.series.sources
        levels = sorted({reading.level for reading in readings}, key=level_order)
        delivered = deliveries(rule, levels, sources, self.findings)
        spiking = Spiking(self.series.rules, self.findings)
        used = spiking.standards(delivered) or self._declared()
        check_contents(rule, self.analyte, used, self.findings)
        vessels = vessels_of(rule, levels, delivered, sources, spiking)
        unit = content_unit(rule, self.analyte, used, delivered, UNITS[vessels.aliquot_unit][0])
        held = {level: delivered[level] for level in vessels.parts}
        amounts = amounts_of(spiking, self.analyte, held, unit, vessels.aliquot_unit) if unit else {}
        internal = internal_of(rule, self.analyte, readings, self.series.readings, sources, self.findings)
        made = self._vessels(readings, vessels, amounts, internal)
        # Without any vessel it is not known yet whether contents are per volume or per mass.
        back = self._back(unit) if vessels.parts or not self.findings.missing else None
        spiked = self._spiked(back, unit)
        rerun_of = self._rerun_of(readings)
        return PreparedLine(
            key=self.series.key,
            analyte=self.analyte,
            line=line,
            design=rule.design,
            unit=unit,
            signal_unit=readings[0].unit,
            vessels=made,
            way_back=back.back if back is not None else None,
            standard=", ".join(used),
            expires=min((standard.expires for standard in used.values() if standard.expires), default=""),
            missing=tuple(self.findings.missing),
            problems=tuple(self.findings.problems),
            response=rule.response,
            aliquot_unit=vessels.aliquot_unit,
            addition_unit=vessels.addition_unit,
            final_unit=vessels.final_unit,
            internal=internal.name,
            entered=internal.entered,
            electrode=rule.electrode,
            cannot_tell=cannot_tell(rule, self.series.key.role, made),
            spiked_amount=spiked,
            spiked_when=rule.spike.added if rule.spike is not None and self.series.key.role == SPIKED else "",
            rerun_of=rerun_of,
        )

    def _declared(self) -> dict[str, Standard]:
        """The standards of the rule file, where nothing was delivered yet."""
        known = self.series.rules.standards
        names = (addition.standard for addition in self.preparation.additions)
        return {name: known[name] for name in names if name in known}

    def _vessels(
        self, readings: Sequence[Reading], vessels: Vessels, amounts: Mapping[str, Amounts], internal: Internal
    ) -> tuple[PreparedVessel, ...]:
        grouped: dict[Place, list[Reading]] = defaultdict(list)
        for reading in readings:
            grouped[reading.level, reading.vessel, reading.block].append(reading)
        places = sorted(grouped, key=lambda place: tuple(level_order(part) for part in place))
        return tuple(
            self._vessel(place, grouped[place], vessels.parts[place[0]], amounts.get(place[0]), internal)
            for place in places
            if place[0] in vessels.parts
        )

    def _vessel(
        self, place: Place, readings: Sequence[Reading], parts: Parts, amounts: Amounts | None, internal: Internal
    ) -> PreparedVessel:
        excluded = self.series.excluded
        kept = [reading for reading in readings if reading.solution not in excluded]
        decision = "" if kept else excluded[readings[0].solution]
        beside = internal.of(place, excluded)
        if beside == () and not decision:
            level, vessel, _ = place
            self.findings.lacks(f"the reading of the internal standard {internal.name} at level {level}{vessel}")
        return PreparedVessel(
            level=place[0],
            vessel=place[1],
            aliquot=float(parts.aliquot),
            addition=float(parts.addition),
            final=float(parts.final),
            added=float(amounts.own) if amounts is not None else 0.0,
            readings=tuple(kept or readings),
            excluded=decision,
            block=place[2],
            others=amounts.others if amounts is not None else (),
            internal_amount=float(internal.amounts[place[0]]) if internal.amounts is not None else 1.0,
            internal=beside or (),
        )

    def _back(self, unit: str) -> Returned | None:
        if self.preparation.sample is None or not unit:
            return None
        molar_mass = self.series.rules.molar_masses.get(self.analyte)
        return way_back(self.preparation, self.series.sources, unit, self.findings, molar_mass)

    def _spiked(self, back: Returned | None, unit: str) -> float | None:
        """What the analyte of a spiked sample rose by, in the unit of its way back times g or mL of sample."""
        spike = self.preparation.spike
        if spike is None or self.series.key.role != SPIKED:
            return None
        told = self.series.sources.quantity("spike", None, self.findings, "volume", "mass")
        delivered = told or spike.delivered
        if isinstance(delivered, str):
            self.findings.lacks(f"spike of {self.series.key.sample} from {PLACES[delivered]}")
            return None
        standard = self.series.rules.standards.get(spike.standard)
        if standard is None or self.analyte not in standard.contents or back is None or back.rise is None:
            return None
        what = UNITS[unit][0].partition(" per ")[0]
        spiking = Spiking(self.series.rules, self.findings)
        amount = spiking.amount(self.analyte, Delivery(spike.standard, delivered), what)
        return float(amount.value * back.rise) if amount is not None else None

    def _rerun_of(self, readings: Sequence[Reading]) -> str:
        told = sorted({text for reading in readings for meaning, text, _ in reading.values if meaning == "rerun_of"})
        if len(told) > 1:
            self.findings.fails(
                f"the vessels say that this is a rerun of {listed(told)}; a series is a rerun of one sample only"
            )
        return told[0] if told else ""
