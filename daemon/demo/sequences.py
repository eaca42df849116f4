"""The sequences of the invented night: which vessel is measured when, and how sensitive the instrument then is."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from spikeward.daemon.demo.chance import Chance
from spikeward.daemon.demo.instruments import ABSORPTION, EMISSION, Instrument, Measured, Vessel, measure
from spikeward.daemon.demo.scenario import ANALYTES, BRACKET, Series

UNSUPPRESSED = dict.fromkeys(ANALYTES, 1.0)
NOTHING = dict.fromkeys(ANALYTES, 0.0)

# What is measured in which order: a series by the name of its solutions, or one plain solution.
ORDER = {
    "EM41": (
        "BLK1", "BR1", "PB1", "REF-MUD-2", "CHK-CTL-1", "01", "02", "03", "BR2", "04", "05", "06", "07", "PB2", "BLK2",
        "BR3",
    ),
    "EM42": (
        "BLK1", "BR1", "PB1", "PB2", "REF-MUD-2", "CHK-CTL-1", "08", "09", "10", "11", "BR2", "12", "13", "14", "15",
        "BLK2", "BR3",
    ),
    "EM43": ("BLK1", "BR1", "PB1", "PB2", "REF-MUD-2", "CHK-CTL-1", "21", "22", "BR2", "23", "24", "BLK2", "BR3"),
}  # fmt: skip


@dataclass(frozen=True, slots=True)
class Sequence:
    """One batch on one instrument. ``drift``: sensitivity relative to the evening at each bracket, linear between."""

    batch: str
    instrument: Instrument
    begins: float  # minute of the night
    drift: tuple[float, float, float]


SEQUENCES = (
    Sequence("EM41", EMISSION, 6.0, (1.0, 0.992, 0.985)),
    Sequence("EM42", EMISSION, 206.0, (1.0, 0.99, 0.86)),  # after the second bracket the nebuliser clogs
    Sequence("EM43", ABSORPTION, 12.0, (1.0, 0.996, 1.004)),
)


def run(sequence: Sequence, series: Mapping[str, Series], chance: Chance) -> dict[str, list[Measured]]:
    """Measure one sequence: by the name of a series or plain solution, its vessels in the order of measurement."""
    found: dict[str, list[Measured]] = {}
    vessels = [
        (name, vessel)
        for name in (f"{sequence.batch}_{each}" for each in ORDER[sequence.batch])
        for vessel in (_vessels(series[name]) if name in series else [_plain(name)])
    ]
    turns = [turn for turn, (name, _) in enumerate(vessels) if "_BR" in name]
    for turn, (name, vessel) in enumerate(vessels):
        begun = sequence.begins + turn * sequence.instrument.lasts
        sensitivity = _interpolated(turn, turns, sequence.drift)
        found.setdefault(name, []).append(measure(vessel, sequence.instrument, begun, sensitivity, chance))
    return found


def _vessels(series: Series) -> list[Vessel]:
    return [
        Vessel(
            f"{series.name}_A{level}",
            {analyte: series.in_vessel(analyte, level) for analyte in ANALYTES},
            series.response,
            series.bending,
        )
        for level in range(len(series.additions))
    ]


def _plain(name: str) -> Vessel:
    return Vessel(name, BRACKET if "_BR" in name else NOTHING, UNSUPPRESSED, {})


def _interpolated(turn: int, turns: list[int], drift: tuple[float, ...]) -> float:
    for number in range(len(turns) - 1):
        if turns[number] <= turn <= turns[number + 1]:
            share = (turn - turns[number]) / (turns[number + 1] - turns[number])
            return drift[number] + share * (drift[number + 1] - drift[number])
    return drift[0]  # before the first bracket
