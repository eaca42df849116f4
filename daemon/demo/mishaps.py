"""What goes wrong with files on the invented night: each mishap as the deliveries that it leaves in the folder."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass

from spikeward.daemon.demo.instruments import EMISSION, Measured, clock, emission_export
from spikeward.rules.outcomes import FAIL, PASS, WARN


@dataclass(frozen=True, slots=True)
class Delivery:
    """The content of a file from one minute of the night on; a path that comes again was rewritten or has grown."""

    minute: float
    path: str
    content: bytes


MISHAPS: Mapping[str, tuple[str, str]] = {
    "EM41_02": (PASS, "level 2 is evaluated with a wrong base line, then its file is rewritten"),
    "EM41_03": (WARN, "level 2 never arrives: three vessels carry the line"),
    "EM41_04": (PASS, "its mass is entered late"),
    "EM41_05": (FAIL, "manganese is over range"),
    "EM41_06": (PASS, "the file of level 1 arrives torn, and whole later"),
    "EM41_07": (PASS, "level 3 arrives an hour and a half after the closing bracket"),
    "EM42_09": (PASS, "level 2 is exported again under another name with a later processing time"),
    "EM42_10": (WARN, "the numbers of level 2 can be read in two ways, so the file is refused"),
    "EM42_12": (FAIL, "the sensitivity is lost before the closing bracket"),
    "EM42_13": (FAIL, "the sensitivity is lost before the closing bracket"),
    "EM42_14": (FAIL, "the sensitivity is lost before the closing bracket"),
    "EM42_15": (FAIL, "the sensitivity is lost before the closing bracket"),
    "EM43_22": (FAIL, "the response of zinc is curved"),
}
"""Verdict at the end, and what happened, of every series that the night does not leave in peace."""

LATE_MASS = ("EM41", "04", 255.0)  # batch, sample, minute
TORN, REFUSED, UNNAMED = "EM41/EM41_06_A1.csv", "EM42/EM42_10_A2.csv", "EM41/EM41_rinse.csv"


def delivered(path: str, measured: Measured) -> Iterator[Delivery]:
    """The deliveries of one vessel of the emission instrument, whatever becomes of them."""
    done = measured.begun + EMISSION.lasts
    yield from _MISHAPS.get(path, _in_peace)(path, measured, done)


def _in_peace(path: str, measured: Measured, done: float) -> Iterator[Delivery]:
    yield _export(done, path, measured)


def _export(minute: float, path: str, measured: Measured, factor: float = 1.0) -> Delivery:
    return Delivery(minute, path, emission_export(measured, minute, factor).encode())


def _rewritten(path: str, measured: Measured, done: float) -> Iterator[Delivery]:
    yield _export(done, path, measured, factor=1.13)
    yield _export(240.0, path, measured)


def _lost(path: str, measured: Measured, done: float) -> Iterator[Delivery]:
    yield from ()


def _torn(path: str, measured: Measured, done: float) -> Iterator[Delivery]:
    whole = _export(done, path, measured)
    yield Delivery(done, path, whole.content[: whole.content.rfind(b"cps")])
    yield Delivery(250.0, path, whole.content)


def _late(path: str, measured: Measured, done: float) -> Iterator[Delivery]:
    yield Delivery(300.0, path, emission_export(measured, done).encode())


def _evaluated_again(path: str, measured: Measured, done: float) -> Iterator[Delivery]:
    yield _export(done, path, measured, factor=0.9)
    yield _export(430.0, path.replace(".csv", "_again.csv"), measured)


def _retyped(path: str, measured: Measured, done: float) -> Iterator[Delivery]:
    """Somebody saved the file from a spreadsheet: 23456 has become 23,456, which is also 23.456."""
    rows = emission_export(measured, done).split("\n")
    for number, row in enumerate(rows):
        cells = row.split(",")
        if len(cells) > 3 and cells[3].replace(".", "").isdigit():
            whole = f"{round(float(cells[3])):05d}"
            cells[3] = f'"{whole[:-3]},{whole[-3:]}"'
        rows[number] = ",".join(cells)
    yield Delivery(done, path, "\n".join(rows).encode())


_MISHAPS: Mapping[str, Callable[[str, Measured, float], Iterator[Delivery]]] = {
    "EM41/EM41_02_A2.csv": _rewritten,
    "EM41/EM41_03_A2.csv": _lost,
    TORN: _torn,
    "EM41/EM41_07_A3.csv": _late,
    "EM42/EM42_09_A2.csv": _evaluated_again,
    REFUSED: _retyped,
}


def rinse() -> Delivery:
    """A solution between two series that no naming rule knows."""
    minute = 90.0
    row = f"RINSE 3,Mn,Mn 257.6,161.30,cps,{clock(minute).isoformat()},{clock(minute).isoformat()}"
    head = "Bench spectrometer, results\nSequence,EM41\nSolution,Element,Line,Signal,Unit,Measured,Exported\n"
    return Delivery(minute + 1.0, UNNAMED, f"{head}{row}\n".encode())
