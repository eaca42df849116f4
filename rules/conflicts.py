"""Readings that cannot all count, told once for a series however many vessels and lines they touch."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from spikeward.rules.naming import level_order
from spikeward.rules.records import Reading
from spikeward.rules.words import line_words, listed

_NUMBERED = (
    "if these are repeated readings say same_name: reading under series, or give their number in a column or the name"
)
_TIMED = "if these are repeated readings give each its own time, or its number in the name"
_CHOOSE = "remove the wrong file, declare the column of the processing time, or say prefer in the decisions file"


@dataclass(frozen=True, slots=True)
class Dispute:
    """Readings of one vessel on one line that cannot all count, two or more, in the order of path and row.

    ``again``: nothing but their time or order tells them apart; otherwise they are rivals for one reading.
    """

    readings: tuple[Reading, ...]
    again: bool

    @property
    def paths(self) -> tuple[str, ...]:
        """The files that they stand in."""
        return tuple(dict.fromkeys(reading.path for reading in self.readings))


def conflict_sentences(disputes: Iterable[Dispute], readings: Sequence[Reading], repeats: bool) -> tuple[str, ...]:
    """One sentence for each cause, ``what; what to do``.

    Parameters
    ----------
    readings : those of the series that are in force
    repeats : the rules take readings of one name for repeated readings
    """
    causes: dict[tuple[tuple[str, ...], bool], list[Dispute]] = {}
    for dispute in sorted(disputes, key=_order):
        paths = dispute.paths
        causes.setdefault((paths, dispute.again and len(paths) > 1), []).append(dispute)
    vessels = {_vessel(reading) for reading in readings}
    several_lines = len({(reading.analyte, reading.line) for reading in readings}) > 1
    return tuple(
        _within(found, _who(found, vessels), several_lines, repeats) if len(paths) == 1
        else _between(found, _who(found, vessels), again)
        for (paths, again), found in causes.items()
    )  # fmt: skip


def _order(dispute: Dispute) -> tuple[object, ...]:
    first = dispute.readings[0]
    vessel = tuple(level_order(part) for part in _vessel(first))
    return vessel, first.analyte, first.line, first.path, first.row


def _vessel(reading: Reading) -> tuple[str, str, str]:
    """A vessel in one run of its series."""
    return reading.level, reading.vessel, reading.block


def _who(found: Sequence[Dispute], vessels: set[tuple[str, str, str]]) -> str:
    """The vessels of some disputes, as the subject of a sentence."""
    names = list(dict.fromkeys(dispute.readings[0].solution for dispute in found))
    if len(names) == 1:
        return names[0]
    touched = {_vessel(dispute.readings[0]) for dispute in found}
    return "every vessel" if touched == vessels else listed(names)


def _within(found: Sequence[Dispute], who: str, several_lines: bool, repeats: bool) -> str:
    """One file holds a vessel more often than the rules allow."""
    first, counts = found[0].readings, {len(dispute.readings) for dispute in found}
    times = f"{max(counts)} times" if len(counts) == 1 else f"up to {max(counts)} times"
    rows = f"rows {listed([str(reading.row) for reading in first])}"
    if several_lines:
        rows = f"{line_words(first[0].analyte, first[0].line)}: {rows}"
    named = f"first: {first[0].solution}, {rows}" if who != first[0].solution else rows
    plural = who not in ("every vessel", first[0].solution)
    told = f"{who} {'stand' if plural else 'stands'} {times}{' each' if plural else ''} in {first[0].path} ({named})"
    return f"{told}; {_TIMED if repeats else _NUMBERED}"


def _between(found: Sequence[Dispute], who: str, again: bool) -> str:
    """Several files speak about a vessel, at other times or with other values."""
    first = found[0].readings
    name = f"{first[0].solution}, {line_words(first[0].analyte, first[0].line)}"
    places = listed([_place(each) if again else f"{_place(each)} ({words})" for each, words in _told_apart(first)])
    if again:
        told = f"{name}: the same vessel is met again ({places})"
        if len(found) > 1:
            told = f"{who} {'is' if who == 'every vessel' else 'are'} met again (first: {name}: {places})"
        other_names = len({reading.solution for reading in first}) > 1
        wrong = "exclude one in the decisions file" if other_names else "take the wrong file out"
        return f"{told}; if these are repeated readings say same_name: reading under series, else {wrong}"
    told = f"{name}: {places} disagree about one reading"
    if len(found) > 1:
        told = f"{listed(found[0].paths)} disagree about {who} (first: {name}: {places})"
    return f"{told}; {_CHOOSE}"


def _told_apart(readings: Sequence[Reading]) -> list[tuple[Reading, str]]:
    """Each reading with its signal, and with whatever else differs between them."""
    words = [_words(reading) for reading in readings]
    differs = [len({each[place] for each in words}) > 1 for place in range(len(words[0]))]
    told = [", ".join(part for part, shown in zip(each, [True, *differs[1:]], strict=True) if shown) for each in words]
    return list(zip(readings, told, strict=True))


def _words(reading: Reading) -> tuple[str, ...]:
    """What can differ between two readings, part by part: the signal first."""
    spread = "no SD" if reading.sd is None else f"SD {reading.sd:g}"
    values = [f"{meaning.replace('_', ' ')} {text} from the {source}" for meaning, text, source in reading.values]
    taken = " and ".join(reading.already).replace("_", " ")
    return (
        f"{reading.text} {reading.unit}".rstrip(),
        reading.qualifier or "measured",
        f"mean of {reading.readings}" if reading.readings > 1 else "a single reading",
        spread,
        ", ".join(values) or "no quantity beside it",
        f"{taken} taken off already" if taken else "nothing taken off",
    )


def _place(reading: Reading) -> str:
    return f"{reading.path} row {reading.row}"
