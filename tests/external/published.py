"""Published series as files: the cases, a watch over their folders, and the page that compares them.

``python -m tests.external.published`` writes the page ``daemon/guide/published.md`` anew. A case is a folder with a
rule file, exports in a layout of its own, and ``published.yaml`` with the printed numbers, of which the rule file knows
nothing.
"""

from __future__ import annotations

import json
import math
import shutil
import tempfile
import threading
import time
from collections.abc import Iterator, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor, wait
from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction
from pathlib import Path
from typing import Any

import yaml
from scipy.special import stdtrit

from spikeward.daemon.opening import open_station
from spikeward.daemon.watch import Watching
from spikeward.daemon.workers import Readers
from spikeward.rules.outcomes import FAIL, WAITING, WARN

CASES = Path(__file__).parent / "cases"
PAGE = Path(__file__).parents[2] / "daemon" / "guide" / "published.md"
PATIENCE = 120.0  # s, for all of them together
COVERAGE = 0.95

Document = dict[str, Any]
"""What stands in a ``result.json``."""


@dataclass(frozen=True)
class Printed:
    """A number of a publication as its digits stand there; ``within`` replaces half a unit of the last of them."""

    of: str
    value: Decimal
    why: str = ""
    within: Decimal | None = None

    @property
    def unit(self) -> Decimal:
        """One unit of the last printed digit."""
        return Decimal(1).scaleb(int(self.value.as_tuple().exponent))

    @property
    def tolerance(self) -> float:
        """How far a recomputed number may be away."""
        return float(self.unit / 2 if self.within is None else self.within)


@dataclass(frozen=True)
class Case:
    """One published series: vessels as aliquot, addition and final volume in mL, and signal."""

    name: str
    title: str
    source: str
    memory: str
    unit: str
    standard: Fraction
    flasks: tuple[tuple[Fraction, Fraction, Fraction, Fraction], ...]
    over: Fraction | None  # content of the test solution over it is the content of the sample
    sample_unit: str
    printed: tuple[Printed, ...]
    wrong: tuple[Printed, ...]
    outcome: str
    says: str

    @property
    def folder(self) -> Path:
        """Where its rule file and its exports are kept."""
        return CASES / self.name

    def unit_of(self, of: str) -> str:
        """The unit of one of its numbers."""
        return self.sample_unit if of.endswith(" in sample") else self.unit


def cases() -> tuple[Case, ...]:
    """All cases, by name."""
    return tuple(_case(path.parent) for path in sorted(CASES.glob("*/published.yaml")))


def _case(folder: Path) -> Case:
    # every scalar stays text, so that the digits stay as they are printed
    told = yaml.load((folder / "published.yaml").read_text(encoding="utf-8"), Loader=yaml.BaseLoader)
    in_sample = told.get("in_sample", {})
    return Case(
        name=folder.name,
        title=told["case"],
        source=told["source"],
        memory=told.get("memory", ""),
        unit=told["unit"],
        standard=Fraction(told["standard"]),
        flasks=tuple((Fraction(v0), Fraction(v), Fraction(end), Fraction(s)) for v0, v, end, s in told["flasks"]),
        over=Fraction(in_sample["over"]) if in_sample else None,
        sample_unit=in_sample.get("unit", ""),
        printed=tuple(_printed(each) for each in told.get("printed", ())),
        wrong=tuple(_printed(each) for each in told.get("wrong", ())),
        outcome=told.get("outcome", "solved"),
        says=told.get("says", ""),
    )


def _printed(told: Mapping[str, str]) -> Printed:
    within = Decimal(told["within"]) if "within" in told else None
    return Printed(told["of"], Decimal(told["value"]), told.get("why", ""), within)


# ---- what follows from the printed digits --------------------------------------------------------------------------


def recomputed(case: Case) -> dict[str, float]:
    """The case in fractions, so that nothing is rounded before the last step.

    Least squares on x = standard x addition / aliquot and y = signal x final / aliquot with weights (aliquot / final)²,
    for noise that is constant in the signal; the standard uncertainty of an extrapolated content (Miller and Miller,
    Statistics and Chemometrics for Analytical Chemistry, chapter 5) and its limits by Fieller's theorem. Two points
    have no uncertainty.
    """
    x = [case.standard * addition / aliquot for aliquot, addition, _, _ in case.flasks]
    y = [signal * final / aliquot for aliquot, _, final, signal in case.flasks]
    w = [Fraction(aliquot / final) ** 2 for aliquot, _, final, _ in case.flasks]
    n, total = len(x), sum(w, Fraction())
    x_mean = sum((c * a for c, a in zip(w, x, strict=True)), Fraction()) / total
    y_mean = sum((c * b for c, b in zip(w, y, strict=True)), Fraction()) / total
    sxx = sum((c * (a - x_mean) ** 2 for c, a in zip(w, x, strict=True)), Fraction())
    slope = sum((c * (a - x_mean) * (b - y_mean) for c, a, b in zip(w, x, y, strict=True)), Fraction()) / sxx
    content = y_mean / slope - x_mean
    found = {"content": float(content)}
    if n > 2:
        left = [b - y_mean - slope * (a - x_mean) for a, b in zip(x, y, strict=True)]
        rest = sum(c * each**2 for c, each in zip(w, left, strict=True)) / (n - 2)
        found["standard_uncertainty"] = math.sqrt(rest / slope**2 * (1 / total + (content + x_mean) ** 2 / sxx))
        t = Fraction(float(stdtrit(float(n - 2), 0.5 + COVERAGE / 2)))
        g = t**2 * rest / (slope**2 * sxx)
        half = float(t) * math.sqrt(rest / slope**2 * ((1 - g) / total + (content + x_mean) ** 2 / sxx))
        middle = float((content + x_mean) / (1 - g) - x_mean)
        found["low"], found["high"] = middle - half / float(1 - g), middle + half / float(1 - g)
    if case.over is not None:
        found |= {f"{of} in sample": value / float(case.over) for of, value in found.items()}
    return found


def number(result: Mapping[str, Any], of: str) -> float | None:
    """One number of a result, such as ``content`` or ``high in sample``; None where there is none."""
    name = of.removesuffix(" in sample")
    block = result["in_sample"] if name != of else result
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


# ---- the page ------------------------------------------------------------------------------------------------------

_HEAD = """\
# Published series

This page is written by `python -m tests.external.published` in the source tree; do not edit it.

Series from textbooks and courses, each written as an export with a layout of its own and a short rule file (both under
`tests/external/cases`). A watch ran over their folders while the exports arrived; *ours* was read from the
`result.json` that it left beside them. A printed number counts as agreed to a digit when ours is not further away than
half a unit of that digit. Where no answer is printed, ours is compared with the same arithmetic in whole fractions.
*From memory* means that the publication was not read again for this page.
"""
_WRONG = """\
## Wrong answers that are not returned

They stand in print or in copies, or follow from a formula in use, and rest on a mistake or a simplification.
"""
_VERDICTS = """\
## Verdicts

What the general pack says of the same series. Textbook data are no model of a good series: some carry few vessels,
small additions, a bent line or a strange point, and that is said of them.
"""


def page(chosen: Sequence[Case], documents: Mapping[str, Document]) -> str:
    """The page that compares print and result."""
    tables = [
        (_HEAD, ("series", "source", "quantity", "published", "ours", "digits agreed"), _agreed, 2),
        (_WRONG, ("series", "quantity", "wrong answer", "ours", "what is wrong with it"), _not_returned, 1),
        (_VERDICTS, ("series", "verdict", "because of these checks"), _verdict, 0),
    ]
    parts = []
    for head, titles, rows_of, columns in tables:
        rows = [row for case in chosen for row in _once(rows_of(case, documents[case.name]), columns)]
        rule = ("---",) * len(titles)
        parts.append(f"{head}\n" + "".join(f"| {' | '.join(row)} |\n" for row in (titles, rule, *rows)))
    return "\n".join(parts)


def _once(rows: Iterator[tuple[str, ...]], columns: int) -> Iterator[tuple[str, ...]]:
    """The rows of one case, what its first columns say only in the first of them."""
    for position, row in enumerate(rows):
        yield row if position == 0 else ("",) * columns + row[columns:]


def _agreed(case: Case, document: Document) -> Iterator[tuple[str, ...]]:
    (result,) = document["results"]
    source = f"{case.source} ({case.memory})" if case.memory else case.source
    if not case.printed and case.outcome == "solved":
        exact = recomputed(case)["content"]
        ours = number(result, "content")
        assert ours is not None
        agreed, digits = digits_agreed(Decimal(f"{exact:.12g}"), ours)
        refuted = any(wrong.of.startswith("content") for wrong in case.wrong)
        told = f"{'none that holds' if refuted else 'none'}; in fractions {exact:.12g} {case.unit}"
        yield case.title, source, "content", told, f"{ours:.12g}", f"{agreed} of {digits}"
    for printed in case.printed:
        ours = number(result, printed.of)
        assert ours is not None
        agreed, digits = digits_agreed(printed.value, ours)
        told = f"{printed.value} {case.unit_of(printed.of)}"
        yield case.title, source, _words(printed.of), told, f"{ours:.{digits + 2}g}", f"{agreed} of {digits}"


def _not_returned(case: Case, document: Document) -> Iterator[tuple[str, ...]]:
    (result,) = document["results"]
    for wrong in case.wrong:
        ours = number(result, wrong.of)
        digits = len(wrong.value.as_tuple().digits) + 1
        shown = "no number" if ours is None else f"{ours:.{digits}g}"
        yield case.title, _words(wrong.of), f"{str(wrong.value).lower()} {case.unit_of(wrong.of)}", shown, wrong.why


def _verdict(case: Case, document: Document) -> Iterator[tuple[str, ...]]:
    (result,) = document["results"]
    checks = [_words(check["name"]) for check in result["checks"] if check["verdict"] in (WARN, FAIL)]
    yield case.title, document["verdict"], ", ".join(checks)


def _words(of: str) -> str:
    return of.replace("_", " ").replace("low", "lower limit, 95 %").replace("high", "upper limit, 95 %")


def main() -> None:
    """Write the page."""
    chosen = cases()
    with tempfile.TemporaryDirectory() as work:
        PAGE.write_text(page(chosen, through_files(chosen, Path(work))), encoding="utf-8")


if __name__ == "__main__":
    main()
