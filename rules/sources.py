"""Where a quantity comes from: bench file, column or name of this very solution, else the rule file's general value.

What is written for this very solution goes before the rule file. Where several of the three speak, they must agree,
else the series fails and names both.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from spikeward.rules.quantities import Quantity, parse_dilution, parse_quantity
from spikeward.rules.records import Batch, Members, SeriesKey

PLACES = {"bench": "the bench file", "name": "the solution's name", "column": "a column of the export"}
"""What the words of the rule file stand for that say where a quantity comes from."""

Told = tuple[str, str, str]  # text, place, and which of PLACES it is


@dataclass(slots=True)
class Findings:
    """What is missing and what contradicts, collected while a series is prepared; each once, in order."""

    missing: dict[str, None]
    problems: dict[str, None]

    def lacks(self, sentence: str) -> None:
        """Note what the series still waits for."""
        self.missing[sentence] = None

    def fails(self, sentence: str) -> None:
        """Note what fails the series."""
        self.problems[sentence] = None


@dataclass(frozen=True, slots=True)
class Sources:
    """The quantities given for particular solutions of one series, from bench file, column and name.

    ``awaited`` are those that a bench file tells, so that one that is not known may still come.
    """

    key: SeriesKey
    given: Mapping[tuple[str, str], tuple[Told, ...]]  # (meaning, level or '') -> what is told
    awaited: frozenset[str] = frozenset()

    def want(self, meaning: str, level: str, findings: Findings, otherwise: str) -> None:
        """Note a quantity of one level that is not known: it is waited for, or fails the series."""
        if meaning in self.awaited:
            findings.lacks(f"{meaning} of {self.key.sample}, level {level}, from {PLACES['bench']}")
        else:
            findings.fails(otherwise)

    def at(self, meaning: str, level: str) -> tuple[Told, ...]:
        """What is told of a level, or else of the whole sample."""
        return self.given.get((meaning, level), ()) or self.given.get((meaning, ""), ())

    def of_all(self, meaning: str) -> tuple[Told, ...]:
        """What is told of the whole sample, whichever of its vessels tells it."""
        return tuple(told for (name, _), texts in sorted(self.given.items()) if name == meaning for told in texts)

    def find(self, meaning: str, level: str | None, findings: Findings, source: str = "") -> Quantity | str | None:
        """The particular value of a quantity at a level, or of the whole sample; contradictions fail the series.

        Parameters
        ----------
        level : None for the whole sample
        source : bench, name or column, where no other one may speak

        Returns
        -------
        a Quantity; for ``standard`` its name; None where no source speaks
        """
        values: dict[Quantity | str, str] = {}
        for text, place, kind in self.of_all(meaning) if level is None else self.at(meaning, level):
            if source and kind != source:
                continue
            try:
                value = _value_of(meaning, text)
            except ValueError as error:
                findings.fails(f"{meaning} from {place}: {error}")
                continue
            values.setdefault(value, place)
        if len(values) > 1:
            told = " and ".join(f"{value} from {place}" for value, place in values.items())
            where = f" of level {level}" if level else ""
            findings.fails(f"{meaning}{where} is given as {told}; correct the source that is wrong")
        return next(iter(values), None)

    def quantity(self, meaning: str, level: str | None, findings: Findings, *dimensions: str) -> Quantity | None:
        """A quantity that measures one of some things; another one fails the series."""
        value = self.find(meaning, level, findings)
        if not isinstance(value, Quantity):
            return None
        named = f"{meaning.replace('_', ' ')} of {f'level {level}' if level else self.key.sample}"
        if value.value < 0:
            findings.fails(f"{named}: {value} is below zero, which cannot be; correct it")
            return None
        if value.dimension in dimensions:
            return value
        findings.fails(f"{named}: {value} is a {value.dimension}, not a {' or '.join(dimensions)}; correct its unit")
        return None


_BASE = {"volume": "mL", "mass": "g", "fraction": "1", "amount": "mol"}


def _value_of(meaning: str, text: str) -> Quantity | str:
    if meaning == "standard":
        return text
    value = parse_dilution(text) if meaning == "dilution" else parse_quantity(text)
    base = _BASE.get(value.dimension)
    # Equal amounts in other units must compare equal: 0.5012 g and 501.2 mg.
    return Quantity(value.in_unit(base).normalize(), base) if base else value


def sources_of(
    members: Members, batch: Batch, with_bench: bool = True, on_the_bench: Iterable[str] = ()
) -> Sources:
    """Everything that bench file, columns and names say about one series; the bench file only where it is meant.

    Parameters
    ----------
    on_the_bench : the quantities that bench files tell by the rules
    """
    given: dict[tuple[str, str], list[Told]] = defaultdict(list)
    key = members.key
    for entry in batch.bench if with_bench else ():
        if entry.sample == key.sample and entry.batch in ("", key.batch):
            for meaning, text in entry.values:
                given[meaning, entry.level].append((text, f"{entry.path} row {entry.row}", "bench"))
    for reading in members.readings:
        for meaning, text, source in reading.values:
            place = f"the name {reading.solution}" if source == "name" else f"{reading.path} row {reading.row}"
            given[meaning, reading.level].append((text, place, source))
    awaited = frozenset(on_the_bench if with_bench else ())
    return Sources(key, {place: tuple(texts) for place, texts in given.items()}, awaited)
