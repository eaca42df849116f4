"""How the vessels of a series were made: volumes and standard by level, and the way back to the sample."""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Iterable, Mapping
from decimal import Decimal
from itertools import pairwise

import re2

from spikeward.rules.naming import level_order
from spikeward.rules.prepared import PreparedLine, PreparedVessel
from spikeward.rules.quantities import Quantity
from spikeward.rules.records import Batch, Members, Reading, SeriesKey
from spikeward.rules.rulebook import Preparation, Rulebook, Standard
from spikeward.rules.sources import Findings, Sources, sources_of
from spikeward.rules.way_back import way_back
from spikeward.rules.words import line_words

Volumes = dict[str, float]

_CONTRACTS = Decimal("1.02")


def prepare(members: Members, batch: Batch, rules: Rulebook) -> tuple[PreparedLine, ...]:
    """Prepare every analyte, on every line, of one addition series.

    Returns
    -------
    in the order of analyte and line; a series without a preparation in the rules carries that as its problem
    """
    by_line: dict[tuple[str, str], list[Reading]] = defaultdict(list)
    for reading in members.readings:
        by_line[reading.analyte, reading.line].append(reading)
    preparations = [preparation_for(members.key, analyte, rules) for analyte in sorted({name for name, _ in by_line})]
    sources = sources_of(members, batch, _bench_is_meant(members.key, preparations))
    excluded = {decision.target: decision.words for decision in batch.decisions if decision.kind == "exclude"}
    return tuple(
        _line(members.key, analyte, line, by_line[analyte, line], sources, excluded, rules)
        for analyte, line in sorted(by_line)
    )


def _bench_is_meant(key: SeriesKey, preparations: Iterable[Preparation | None]) -> bool:
    """A bench file names samples: process blank 1 is not sample 1, unless its preparation asks for the bench file."""
    if key.role != "process_blank":
        return True
    blocks = [each.sample for each in preparations if each is not None and each.sample is not None]
    return any("bench" in (each.mass, each.volume, each.digest, each.dry_matter, each.dilution) for each in blocks)


def preparation_for(key: SeriesKey, analyte: str, rules: Rulebook) -> Preparation | None:
    """The first preparation of the rule file that applies to a series and analyte."""
    texts = {"batch": key.batch, "sample": key.sample, "role": key.role, "analyte": analyte}
    for preparation in rules.preparations:
        if all(re2.fullmatch(pattern, texts[name]) for name, pattern in preparation.applies.items()):
            return preparation
    return None


def _line(
    key: SeriesKey,
    analyte: str,
    line: str,
    readings: list[Reading],
    sources: Sources,
    excluded: Mapping[str, str],
    rules: Rulebook,
) -> PreparedLine:
    findings = Findings({}, {})
    unit, signal_unit = "", readings[0].unit
    preparation = preparation_for(key, analyte, rules)
    for reading in readings:
        if reading.unit != signal_unit:
            findings.fails(
                f"signals of {line_words(analyte, line)} come in {signal_unit} and in {reading.unit} "
                f"({reading.path} row {reading.row}); export one series in one unit"
            )
    if preparation is None:
        told = f"role {key.role}, batch {key.batch or '(folder)'}, sample {key.sample}, {analyte}"
        findings.fails(f"no preparation in the rule file applies to {told}; widen a 'for' under preparations")
        return PreparedLine(
            key,
            analyte,
            line,
            "",
            unit,
            signal_unit,
            (),
            None,
            "",
            "",
            tuple(findings.missing),
            tuple(findings.problems),
        )
    standard = _standard(preparation, sources, findings, rules)
    content = standard.contents.get(analyte) if standard else None
    if standard is not None and content is None:
        findings.fails(f"standard {standard.name} does not hold {analyte}; add its content under standards")
    unit = content.unit if content else ""
    vessels = _vessels(preparation, readings, sources, excluded, content, findings)
    back = way_back(preparation, sources, unit, findings) if preparation.sample and content else None
    return PreparedLine(
        key, analyte, line, preparation.design, unit, signal_unit, vessels, back,
        standard.name if standard else "", standard.expires if standard else "",
        tuple(findings.missing), tuple(findings.problems),
    )  # fmt: skip


def _standard(preparation: Preparation, sources: Sources, findings: Findings, rules: Rulebook) -> Standard | None:
    told = sources.find("standard", "", findings)
    names = {preparation.standard} if told is None else {str(told)}
    names |= {text for (meaning, _), texts in sources.given.items() if meaning == "standard" for text, _ in texts}
    if told is None and len(names) > 1:
        names.discard(preparation.standard)
    if len(names) > 1:
        findings.fails(
            f"the vessels name several standards ({', '.join(sorted(names))}); one series takes one standard"
        )
    name = sorted(names)[0]
    if name not in rules.standards:
        findings.fails(f"standard {name} is not under standards in the rule file; add it there")
        return None
    return rules.standards[name]


def _vessels(
    preparation: Preparation,
    readings: list[Reading],
    sources: Sources,
    excluded: Mapping[str, str],
    content: Quantity | None,
    findings: Findings,
) -> tuple[PreparedVessel, ...]:
    grouped: dict[tuple[str, str], list[Reading]] = defaultdict(list)
    for reading in readings:
        grouped[reading.level, reading.vessel].append(reading)
    additions = _additions(preparation, sorted({level for level, _ in grouped}, key=level_order), sources, findings)
    vessels = []
    for level, vessel in sorted(grouped, key=lambda place: (level_order(place[0]), level_order(place[1]))):
        kept = [reading for reading in grouped[level, vessel] if reading.solution not in excluded]
        decision = "" if kept else excluded[grouped[level, vessel][0].solution]
        volumes = _volumes(preparation, level, additions, sources, findings)
        if volumes is None:
            continue
        added = float(content.value) * volumes["addition"] if content else 0.0
        vessels.append(
            PreparedVessel(
                level,
                vessel,
                volumes["aliquot"],
                volumes["addition"],
                volumes["final"],
                added,
                tuple(kept or grouped[level, vessel]),
                decision,
            )  # fmt: skip
        )
    return tuple(vessels)


def _additions(
    preparation: Preparation, levels: list[str], sources: Sources, findings: Findings
) -> dict[str, Decimal | None]:
    """Total delivered volume in mL by level; of successive deliveries everything up to and including the level."""
    delivered: dict[str, Decimal | None] = {}
    declared = sorted({*preparation.additions, *levels}, key=level_order)
    for level in declared:
        quantity = sources.find("addition", level, findings) or preparation.additions.get(level)
        if isinstance(quantity, Quantity):
            delivered[level] = quantity.in_unit("mL")
        elif level_order(level) == level_order("0"):
            delivered[level] = Decimal(0)
        else:
            delivered[level] = None
    known = set(levels)
    if preparation.deliveries == "each":
        unknown = _level_between(declared, preparation)
        if unknown is not None:
            findings.lacks(f"the addition of level {unknown} (every later vessel holds it)")
            known = {level for level in levels if level_order(level) < level_order(unknown)}
            delivered |= {level: None for level in declared if level not in known}
        total: Decimal | None = Decimal(0)
        for level in declared:
            step = delivered[level]
            total = None if total is None or step is None else total + step
            delivered[level] = total
    for level in levels:
        if delivered[level] is None and level in known:
            findings.fails(
                f"no addition is known for level {level}; declare it under additions: levels, "
                "or give it in the bench file, a column or the name"
            )
    return delivered


def _level_between(levels: list[str], preparation: Preparation) -> str | None:
    """The first level between others that is neither measured nor declared, so that its delivery is not known.

    Where the rule file declares every level that was measured, its list is taken as it is. Levels may count in steps,
    such as 0, 10, 20.
    """
    numbers = [int(level) for level in levels if level.isascii() and level.isdigit()]
    if set(levels) <= set(preparation.additions) or len(numbers) < 2:
        return None
    steps = [after - before for before, after in pairwise(numbers)]
    least = math.gcd(*steps)
    return next((str(before + least) for before, step in zip(numbers, steps, strict=False) if step > least), None)


def _volumes(
    preparation: Preparation,
    level: str,
    additions: Mapping[str, Decimal | None],
    sources: Sources,
    findings: Findings,
) -> Volumes | None:
    """Aliquot, addition and final volume of one vessel in mL; None with the reason noted."""
    addition = additions[level]
    told = sources.find("aliquot", level, findings)
    aliquot = told if isinstance(told, Quantity) else preparation.aliquot.get(level, preparation.aliquot.get(""))
    if aliquot is None:
        findings.fails(f"no aliquot is known for level {level}; declare it under preparations: aliquot")
    if aliquot is None or addition is None:
        return None
    v0 = aliquot.in_unit("mL")
    told = sources.find("final", level, findings)
    final = told if isinstance(told, Quantity) else preparation.final
    diluent = preparation.diluent.in_unit("mL") if preparation.diluent else Decimal(0)
    mixed = v0 + diluent + addition
    if preparation.level_0 == "undiluted" and not addition:
        volume = v0
    elif final is None:
        volume = mixed
    else:
        volume = final.in_unit("mL")
        # What was mixed in one vessel and then measured may be a little less than the sum of its parts.
        if mixed > volume * (_CONTRACTS if preparation.design == "successive" else 1):
            findings.fails(
                f"level {level}: aliquot and additions ({mixed.normalize():f} mL) do not fit into the final volume "
                f"({volume.normalize():f} mL); correct the volumes"
            )
    return {"aliquot": float(v0), "addition": float(addition), "final": float(volume)}
