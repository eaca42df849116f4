"""The invented night as deliveries into a folder, and what a chemist should see when it is over.

Three batches of estuary mud, EM41 to EM43, for manganese, nickel and zinc on two instruments. What goes wrong stands in
``mishaps``; nothing else does, save what chance does to a statistical test.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass
from importlib.resources import files
from pathlib import Path

from spikeward.daemon.demo.chance import Chance
from spikeward.daemon.demo.instruments import ABSORPTION_END, ABSORPTION_HEAD, EMISSION, Measured, absorption_rows
from spikeward.daemon.demo.mishaps import LATE_MASS, MISHAPS, REFUSED, UNNAMED, Delivery, delivered, rinse
from spikeward.daemon.demo.scenario import Series, series_of
from spikeward.daemon.demo.sequences import SEQUENCES, Sequence, run
from spikeward.rules.outcomes import PASS

_ROWS_AT_A_TIME = 3  # vessels between two times that the absorption instrument writes to its file


@dataclass(frozen=True, slots=True)
class Night:
    """One invented night.

    ``deliveries`` are in the order of time, paths relative to the watched folder. ``expected`` is the verdict of every
    series once all batches are closed, by the stem of its files; with another seed than the usual one a statistical
    test may warn by chance. ``truth`` is the content of every sample in mg/kg of dry mud, by stem and analyte.
    """

    rules: str
    deliveries: tuple[Delivery, ...]
    expected: Mapping[str, str]
    truth: Mapping[str, Mapping[str, float]]
    unread: tuple[str, ...] = (REFUSED,)  # paths that stay unread
    unnamed: tuple[str, ...] = (UNNAMED,)  # paths that hold a name which no rule takes


def night(seed: int = 7) -> Night:
    """The night of a seed; the same seed gives the same bytes on every machine."""
    chance = Chance(seed)
    deliveries = [rinse()]
    every: list[Series] = []
    for sequence in SEQUENCES:
        series = series_of(sequence.batch, chance)
        every += series.values()
        deliveries += _bench(sequence, series.values())
        deliveries += _exports(sequence, run(sequence, series, chance))
    return Night(
        rules=files("spikeward.daemon.demo").joinpath("rules.yaml").read_text(encoding="utf-8"),
        deliveries=tuple(sorted(deliveries, key=lambda delivery: (delivery.minute, delivery.path))),
        expected={each.stem: MISHAPS.get(each.stem, (PASS, ""))[0] for each in every},
        truth={each.stem: each.truth for each in every if each.role == "sample"},
    )


def _exports(sequence: Sequence, measured: Mapping[str, list[Measured]]) -> Iterator[Delivery]:
    """The emission instrument writes a file for each vessel, the other one a growing file for each series."""
    for name, vessels in measured.items():
        if sequence.instrument is not EMISSION:
            yield from _growing(f"{sequence.batch}/Lauf_{name}.txt", vessels, sequence.instrument.lasts)
            continue
        for vessel in vessels:
            yield from delivered(f"{sequence.batch}/{vessel.solution}.csv", vessel)


def _growing(path: str, vessels: list[Measured], lasts: float) -> Iterator[Delivery]:
    for upto in range(_ROWS_AT_A_TIME, len(vessels) + _ROWS_AT_A_TIME, _ROWS_AT_A_TIME):
        written = vessels[:upto]
        text = ABSORPTION_HEAD + absorption_rows(written) + (ABSORPTION_END if upto >= len(vessels) else "")
        yield Delivery(written[-1].begun + lasts, path, text.encode("cp1252"))


def _bench(sequence: Sequence, series: Iterable[Series]) -> Iterator[Delivery]:
    """The balance's file of a batch, once more where a mass was forgotten."""
    weighed = [each for each in series if each.mass]
    batch, forgotten, late = LATE_MASS
    path = f"{sequence.batch}/{sequence.batch}_bench.csv"
    if sequence.batch == batch:
        yield Delivery(late, path, _bench_file(weighed))
        weighed = [each for each in weighed if each.sample != forgotten]
    yield Delivery(sequence.begins - 4.0, path, _bench_file(weighed))


def _bench_file(weighed: Iterable[Series]) -> bytes:
    rows = ["Batch,Sample,Mass,DM"]
    rows += [f"{each.batch},{each.sample},{each.mass} g,{each.dry_matter} %" for each in weighed]
    return ("\n".join(rows) + "\n").encode()


def play(invented: Night, folder: str | os.PathLike[str], pace: float, sleep: Callable[[float], object]) -> None:
    """Deliver a night into a folder as its instruments would.

    A file that has grown is appended to, every other content is written under a temporary name and renamed.

    Parameters
    ----------
    pace : minutes of the night in one second; 0 delivers all at once
    sleep : waits so many seconds
    """
    now = 0.0
    written: dict[str, bytes] = {}
    for delivery in invented.deliveries:
        if pace > 0 and delivery.minute > now:
            sleep((delivery.minute - now) / pace)
        now = max(now, delivery.minute)
        path = Path(folder, delivery.path)
        path.parent.mkdir(parents=True, exist_ok=True)
        before = written.get(delivery.path, b"")
        if before and delivery.content.startswith(before):
            with path.open("ab") as file:
                file.write(delivery.content[len(before) :])
        else:
            temporary = path.with_name(f"{path.name}.part")
            temporary.write_bytes(delivery.content)
            temporary.replace(path)
        written[delivery.path] = delivery.content
