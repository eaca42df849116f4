"""Published series as files: the cases, a watch over their folders, and what follows from the printed digits.

A case is a folder with a rule file, exports in a layout of its own, and ``published.yaml`` with the printed numbers, of
which the rule file knows nothing.
"""

from __future__ import annotations

import json
import shutil
import threading
import time
from collections.abc import Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor, wait
from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction
from pathlib import Path
from typing import Any

import yaml

from spikeward.daemon.opening import open_station
from spikeward.daemon.watch import Watching
from spikeward.daemon.workers import Readers
from spikeward.rules.outcomes import WAITING
from spikeward.rules.solve.calibration import BESIDE

CASES = Path(__file__).parent / "cases"
PATIENCE = 120.0  # s, for all of them together

Document = dict[str, Any]
"""What stands in a ``result.json``."""

Flask = tuple[Fraction, Fraction, Fraction, Fraction]
"""One vessel: aliquot, addition and final volume in mL or g, and signal."""


@dataclass(frozen=True)
class Printed:
    """A number as its digits stand in a publication, or ``why`` it stands here although it does not.

    ``of`` names it: ``content``, ``high in sample``, ``content by calibration``, ``parameter electrode slope``, or a
    field of a result. ``within`` replaces half a unit of the last digit.
    """

    of: str
    value: Decimal
    why: str = ""
    within: Decimal | None = None
    analyte: str = ""
    unit: str | None = None  # where it is not that of the case

    @property
    def one(self) -> Decimal:
        """One unit of the last printed digit."""
        return Decimal(1).scaleb(int(self.value.as_tuple().exponent))

    @property
    def tolerance(self) -> float:
        """How far our number may be away."""
        return float(self.one / 2 if self.within is None else self.within)


@dataclass(frozen=True)
class Case:
    """One published series, as it is told in its ``published.yaml``.

    ``printed`` stand in the publication, ``computed`` follow from it by arithmetic or by construction, ``wrong`` must
    not be returned. Without ``flasks`` the series has no single line of its own.
    """

    name: str
    title: str
    source: str
    memory: str
    unit: str
    printed: tuple[Printed, ...]
    computed: tuple[Printed, ...]
    wrong: tuple[Printed, ...]
    outcome: str  # solved, flagged: a number that does not pass, refused: no number
    says: str
    sample_unit: str = ""
    over: Fraction | None = None  # content of the test solution over it is the content of the sample
    flasks: tuple[Flask, ...] = ()
    standard: Fraction = Fraction(0)
    response: str = "linear"
    slope: float | None = None  # mV per decade, of an electrode
    noise: Fraction | None = None  # declared for every signal
    equal: bool = False  # every point counts the same

    @property
    def folder(self) -> Path:
        """Where its rule file and its exports are kept."""
        return CASES / self.name

    def unit_of(self, printed: Printed) -> str:
        """The unit of one of its numbers."""
        if printed.unit is not None:
            return printed.unit
        return self.sample_unit if printed.of.endswith(" in sample") else self.unit


def cases() -> tuple[Case, ...]:
    """All cases, by name."""
    return tuple(_case(path.parent) for path in sorted(CASES.glob("*/published.yaml")))


def _case(folder: Path) -> Case:
    # every scalar stays text, so that the digits stay as they are printed
    told = yaml.load((folder / "published.yaml").read_text(encoding="utf-8"), Loader=yaml.BaseLoader)
    in_sample = told.pop("in_sample", {})
    rest = {name: told[name] for name in told.keys() & {"response", "outcome", "says", "memory"}}
    return Case(
        **{"outcome": "solved", "says": "", "memory": "", **rest},
        name=folder.name,
        title=told["case"],
        source=told["source"],
        unit=told["unit"],
        **{kind: tuple(_printed(each) for each in told.get(kind, ())) for kind in ("printed", "computed", "wrong")},
        sample_unit=in_sample.get("unit", ""),
        over=Fraction(in_sample["over"]) if in_sample else None,
        flasks=tuple((_number(a), _number(b), _number(c), _number(d)) for a, b, c, d in told.get("flasks", ())),
        standard=Fraction(told.get("standard", "0")),
        slope=float(told["slope"]) if "slope" in told else None,
        noise=Fraction(told["noise"]) if "noise" in told else None,
        equal=told.get("weights") == "equal",
    )


def _number(text: str) -> Fraction:
    """A number, or a ratio such as 553/582."""
    above, _, below = text.partition("/")
    return Fraction(above) / Fraction(below or "1")


def _printed(told: Mapping[str, str]) -> Printed:
    numbers = {name: Decimal(told[name]) for name in told.keys() & {"value", "within"}}
    return Printed(**{**told, **numbers})


# ---- what stands in a result ---------------------------------------------------------------------------------------


def result_of(document: Document, analyte: str = "") -> Document:
    """The only result of a series, or that of one analyte, on the line that is reported."""
    (found,) = (
        each for each in document["results"] if (each["analyte"] == analyte or not analyte) and each["reported_line"]
    )
    return dict(found)


def number(result: Mapping[str, Any], of: str) -> float | None:
    """One number of a result, such as ``content`` or ``high in sample``; None where there is none."""
    if of.startswith("parameter "):
        (value,) = (each["value"] for each in result["parameters"] if each["name"] == of.removeprefix("parameter "))
        return None if value is None else float(value)
    name, block = of, result
    if of.endswith(" in sample"):
        name, block = of.removesuffix(" in sample"), result["in_sample"]
    elif of.endswith(" by calibration"):
        name = of.removesuffix(" by calibration")
        (block,) = (each for each in result["beside"] if each["name"] == BESIDE)
    if block is None:
        return None
    if name in ("low", "high"):
        return None if block["interval"] is None else float(block["interval"][name == "high"])
    return None if block[name] is None else float(block[name])


def digits_agreed(printed: Decimal, ours: float) -> tuple[int, int]:
    """How many significant digits agree, to half a unit of the last of them, and how many are printed."""
    digits = len(printed.as_tuple().digits)
    for count in range(digits, 0, -1):
        if abs(Decimal(ours) - printed) <= Decimal(1).scaleb(printed.adjusted() - count + 1) / 2:
            return count, digits
    return 0, digits


# ---- through files -------------------------------------------------------------------------------------------------


def through_files(chosen: Sequence[Case], work: Path) -> dict[str, Document]:
    """Watch a folder for each case, let its exports arrive, and read what is left beside them.

    Returns
    -------
    the result of each case, by its name

    Raises
    ------
    TimeoutError : some case has no result that no longer waits; it says which, and what lies there
    """
    for case in chosen:
        (work / case.name / "inbox").mkdir(parents=True)
        shutil.copy(case.folder / "rules.yaml", work / case.name)
    stop, opened = threading.Event(), threading.Semaphore(0)
    with ThreadPoolExecutor(len(chosen)) as threads:
        watchers = [threads.submit(_watch, work / case.name / "rules.yaml", stop, opened) for case in chosen]
        try:
            for watcher in watchers:
                watcher.add_done_callback(lambda _: opened.release())  # one that could not open is not waited for
            for _ in chosen:
                opened.acquire()
            for case in chosen:
                for export in sorted((case.folder / "inbox").iterdir()):
                    shutil.copy(export, work / case.name / "inbox")
            ends = time.monotonic() + PATIENCE
            while lacking := [case.name for case in chosen if not _arrived(work / case.name / "inbox")]:
                ended = wait(watchers, timeout=0.05, return_when="FIRST_COMPLETED").done
                if ended or time.monotonic() > ends:
                    for each in ended:
                        each.result()
                    raise TimeoutError("; ".join(f"{name}: {_present(work / name / 'inbox')}" for name in lacking))
        finally:
            stop.set()
    return {case.name: _result(work / case.name / "inbox") for case in chosen}


def _watch(rules: Path, stop: threading.Event, opened: threading.Semaphore) -> None:
    """One station; files are read in this process, since a process for each case would take most of the time."""
    with open_station(str(rules)) as station, Readers(0) as readers:
        opened.release()
        Watching(station, readers, time.monotonic).run(stop)


def _arrived(inbox: Path) -> bool:
    """Whether a series was published that waits for nothing; the flag comes last."""
    flags = [path.name for path in inbox.glob("*.flag")]
    return len(flags) == 1 and not flags[0].endswith((f".{WAITING}.flag", ".unread.flag")) and not _waits(inbox)


def _waits(inbox: Path) -> bool:
    return bool(_result(inbox)["waiting_for"])


def _present(inbox: Path) -> str:
    return ", ".join(sorted(path.name for path in inbox.iterdir()))


def _result(inbox: Path) -> Document:
    (path,) = inbox.glob("*.result.json")
    document: Document = json.loads(path.read_text(encoding="utf-8"))
    return document
