"""Where a quantity comes from: bench file, column or name of this very solution, else the rule file's general value.

What is written for this very solution goes before the rule file. Where several of the three speak, they must agree,
else the series fails and names both.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Mapping
from dataclasses import dataclass

from spikeward.rules.quantities import Quantity, parse_dilution, parse_quantity
from spikeward.rules.records import Batch, Members, SeriesKey


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
    """The quantities given for particular solutions of one series, from bench file, column and name."""

    key: SeriesKey
    given: Mapping[tuple[str, str], tuple[tuple[str, str], ...]]  # (meaning, level or '') -> ((text, place), ...)

    def find(self, meaning: str, level: str, findings: Findings) -> Quantity | str | None:
        """The particular value of a quantity at a level, else of the whole sample; contradictions fail the series.

        Returns
        -------
        a Quantity; for ``standard`` its name; None where no source speaks
        """
        places = self.given.get((meaning, level), ()) or self.given.get((meaning, ""), ())
        values: dict[object, str] = {}
        for text, place in places:
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
        return next(iter(values), None)  # type: ignore[return-value]


def _value_of(meaning: str, text: str) -> Quantity | str:
    if meaning == "standard":
        return text
    value = parse_dilution(text) if meaning == "dilution" else parse_quantity(text)
    base = {"volume": "mL", "mass": "g", "fraction": "1"}.get(value.dimension)
    # Equal amounts in other units must compare equal: 0.5012 g and 501.2 mg.
    return Quantity(value.in_unit(base).normalize(), base) if base else value


def sources_of(members: Members, batch: Batch, with_bench: bool = True) -> Sources:
    """Everything that bench file, columns and names say about one series; the bench file only where it is meant."""
    given: dict[tuple[str, str], list[tuple[str, str]]] = defaultdict(list)
    key = members.key
    for entry in batch.bench if with_bench else ():
        if entry.sample == key.sample and entry.batch in ("", key.batch):
            for meaning, text in entry.values:
                given[meaning, entry.level].append((text, f"{entry.path} row {entry.row}"))
    for reading in members.readings:
        for meaning, text, source in reading.values:
            # A mass belongs to the sample whichever vessel tells it; volumes belong to their level.
            level = reading.level if meaning in ("aliquot", "addition", "final", "standard") else ""
            place = f"the name {reading.solution}" if source == "name" else f"{reading.path} row {reading.row}"
            given[meaning, level].append((text, place))
    return Sources(key, {place: tuple(texts) for place, texts in given.items()})
