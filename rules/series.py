"""Complete, waiting or closed: what a series and its batch still lack. Pure; what time decides comes in as data."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Mapping, Sequence

from spikeward.rules.naming import level_order
from spikeward.rules.preparation import preparation_for
from spikeward.rules.prepared import PreparedLine
from spikeward.rules.records import PLAIN_ROLES, SERIES_ROLES, Batch, Members, Reading, SeriesKey
from spikeward.rules.rulebook import Rulebook
from spikeward.rules.words import line_words


def closing_roles(rules: Rulebook) -> tuple[str, ...]:
    """The roles that a batch waits for: those that the rules name, and those that enter the calculation."""
    roles = set(rules.series.closes_with)
    if rules.blanks.background:
        roles.add("background")
    if rules.blanks.process:
        roles.add("process_blank")
    if rules.blanks.reagent and not rules.blanks.reagent_amounts:
        roles.add("reagent_blank")
    if rules.drift == "correct":
        roles.add("bracket")
    return tuple(sorted(roles))


def missing_members(members: Members, lines: Sequence[PreparedLine], rules: Rulebook) -> tuple[str, ...]:
    """What the series itself still lacks: levels, repeated readings, analytes, quantities. Empty when complete."""
    lacking: list[str] = []
    expected = _expected_levels(members, rules)
    present = {reading.level for reading in members.readings}
    lacking += [f"level {level}" for level in expected if level not in present]
    counts: dict[tuple[str, str], dict[_Vessel, int]] = defaultdict(lambda: defaultdict(int))
    for reading in members.readings:
        counts[reading.analyte, reading.line][reading.level, reading.vessel, reading.block] += reading.readings
    vessels = sorted({vessel for found in counts.values() for vessel in found}, key=_vessel_order)
    for analyte, line in sorted(counts):
        for level, vessel, block in vessels:
            found = counts[analyte, line].get((level, vessel, block), 0)
            if found < rules.series.readings:
                needed = rules.series.readings - found
                noun = "reading" if needed == 1 else "readings"
                place = f"level {level}{vessel}{block and f' in run {block}'}"
                lacking.append(f"{needed} more {noun} of {line_words(analyte, line)} at {place}")
    for line_ in lines:
        lacking += line_.missing
    return tuple(dict.fromkeys(lacking))


_Vessel = tuple[str, str, str]  # level, vessel, run


def _vessel_order(vessel: _Vessel) -> tuple[object, ...]:
    return tuple(level_order(part) for part in vessel)


def _expected_levels(members: Members, rules: Rulebook) -> tuple[str, ...]:
    if rules.series.levels:
        return rules.series.levels
    levels: set[str] = set()
    for analyte in {reading.analyte for reading in members.readings}:
        preparation = preparation_for(members.key, analyte, rules)
        if preparation is not None:
            levels |= preparation.levels
    return tuple(sorted(levels, key=level_order))


def closing_missing(batch: Batch, rules: Rulebook, complete: frozenset[SeriesKey]) -> tuple[str, ...]:
    """What a batch waits for before it can close by itself.

    Parameters
    ----------
    complete : the series that lack nothing; a lapsed one is in ``batch.lapsed``
    """
    lacking: list[str] = []
    done = complete | batch.lapsed
    for key in sorted(batch.members):
        if key.role in SERIES_ROLES and key not in done:
            lacking.append(f"{key.role.replace('_', ' ')} {key.sample} to be complete")
    for role in closing_roles(rules):
        if role == "bracket":
            lacking += _closing_bracket(batch.members)
        elif not any(key.role == role for key in batch.members):
            lacking.append(f"a {role.replace('_', ' ')}")
    return tuple(lacking)


def one_sequence(readings: Sequence[Reading]) -> bool:
    """Whether readings can be put in the order in which they were measured.

    By acquisition times wherever all have one; a declared order counts from one again in every file, so it compares
    readings of one file only.
    """
    if all(reading.measured_at for reading in readings):
        return True
    return all(reading.order is not None for reading in readings) and len({reading.path for reading in readings}) == 1


def _closing_bracket(members: Mapping[SeriesKey, Members]) -> list[str]:
    """One bracket later than every vessel; without times or order any bracket will do, the order is not known."""
    brackets = [reading for key, found in members.items() if key.role == "bracket" for reading in found.readings]
    if not brackets:
        return ["a bracket"]
    if not one_sequence(brackets):
        return []
    others = [
        reading
        for key, found in members.items()
        if key.role not in PLAIN_ROLES
        for reading in found.readings
        if one_sequence([brackets[0], reading])
    ]
    last = max(reading.when for reading in brackets)
    if others and max(reading.when for reading in others) > last:
        return ["a closing bracket later than every vessel"]
    return []
