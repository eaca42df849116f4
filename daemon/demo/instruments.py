"""Two invented instruments: what they read of a vessel, and how their exports are written."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from datetime import datetime, timedelta
from decimal import Decimal

from spikeward.daemon.demo.chance import Chance, mean, relative_sd

EVENING = datetime(2026, 11, 17, 18, 0)  # minute 0 of the night, local time
_VESSEL_NOISE, _READING_NOISE = 0.0012, 0.0020  # relative, of a preparation and of one reading


@dataclass(frozen=True, slots=True)
class Instrument:
    """``sensitivity`` is signal per mg/L; ``background`` and ``saturation`` are signals; ``lines`` by analyte."""

    lines: Mapping[str, str]
    unit: str
    sensitivity: Mapping[str, float]
    background: float
    saturation: float
    readings: int  # of one vessel
    lasts: float  # minutes for one vessel


EMISSION = Instrument(
    {"Mn": "Mn 257.6", "Ni": "Ni 231.6", "Zn": "Zn 206.2"}, "cps",
    {"Mn": 20000.0, "Ni": 180000.0, "Zn": 52000.0}, 152.0, 80000.0, readings=2, lasts=4.0,
)  # fmt: skip
ABSORPTION = Instrument(
    {"Mn": "Mn 279.5", "Ni": "Ni 232.0", "Zn": "Zn 213.9"}, "A",
    {"Mn": 0.14, "Ni": 2.4, "Zn": 0.62}, 0.0031, 1.5, readings=3, lasts=3.0,
)  # fmt: skip


@dataclass(frozen=True, slots=True)
class Vessel:
    """One solution in the sequence. Contents as measured, mg/L; ``response`` is the share that the matrix leaves."""

    solution: str
    contents: Mapping[str, float]
    response: Mapping[str, float]
    bending: Mapping[str, float]  # L/mg; a bent response is c / (1 + bending c)


@dataclass(frozen=True, slots=True)
class Measured:
    """What an instrument read of one vessel: the signals by analyte, and minutes of the night."""

    solution: str
    begun: float
    signals: Mapping[str, tuple[float, ...]]


def measure(vessel: Vessel, instrument: Instrument, begun: float, sensitivity: float, chance: Chance) -> Measured:
    """Read every analyte of a vessel as often as the instrument does.

    Parameters
    ----------
    begun : minute of the night
    sensitivity : of the instrument at that time, relative to the evening
    """
    signals = {}
    for analyte, content in vessel.contents.items():
        prepared = content * chance.noise(_VESSEL_NOISE)
        bent = prepared / (1.0 + vessel.bending.get(analyte, 0.0) * prepared)
        net = instrument.sensitivity[analyte] * sensitivity * vessel.response[analyte] * bent
        signals[analyte] = tuple(
            net * chance.noise(_READING_NOISE) + instrument.background * chance.noise(0.01)
            for _ in range(instrument.readings)
        )
    return Measured(vessel.solution, begun, signals)


def digits(value: float, count: int = 5) -> str:
    """A number with so many significant digits, never with a power of ten."""
    return f"{Decimal(f'{value:.{count - 1}e}'):f}"


def clock(minute: float) -> datetime:
    """Local time of a minute of the night, to the second."""
    return EVENING + timedelta(seconds=round(60 * minute))


def emission_export(measured: Measured, exported: float, factor: float = 1.0) -> str:
    """A file of the emission instrument: one row for each reading of each line, decimal points.

    Parameters
    ----------
    exported : minute of the night
    factor : of another evaluation of the same raw signals
    """
    rows = ["Bench spectrometer, results", f"Sequence,{measured.solution.split('_')[0]}"]
    rows.append("Solution,Element,Line,Signal,Unit,Measured,Exported")
    for number in range(EMISSION.readings):
        at = clock(measured.begun + 1.5 * number).isoformat()
        for analyte, signals in measured.signals.items():
            signal = signals[number] * factor
            shown = "OVER" if signal > EMISSION.saturation else digits(signal)
            cells = (
                f"{measured.solution}_r{number + 1}", analyte, EMISSION.lines[analyte], shown, EMISSION.unit, at,
                clock(exported).isoformat(),
            )  # fmt: skip
            rows.append(",".join(cells))
    return "\n".join(rows) + "\n"


ABSORPTION_HEAD = "Messprotokoll Platz 2\r\nLösung;Element;Linie;Mittelwert;RSD %;Anzahl;Einheit;Messzeit\r\n"
ABSORPTION_END = "Ende des Protokolls\r\n"


def absorption_rows(several: Iterable[Measured]) -> str:
    """Rows of the absorption instrument: the mean of three readings with its RSD, decimal commas, German headings."""
    rows = []
    for measured in several:
        at = clock(measured.begun).strftime("%d.%m.%Y %H:%M:%S")
        for analyte, signals in measured.signals.items():
            cells = (
                measured.solution, analyte, ABSORPTION.lines[analyte], digits(mean(signals)).replace(".", ","),
                f"{relative_sd(signals):.2f}".replace(".", ","), str(len(signals)), ABSORPTION.unit, at,
            )  # fmt: skip
            rows.append(";".join(cells) + "\r\n")
    return "".join(rows)
