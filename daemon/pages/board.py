"""``BATCH.board.html``: one look over a batch in the morning. What needs a person comes first."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from urllib.parse import quote

from spikeward.daemon.pages.facts import Notice
from spikeward.daemon.pages.flag import result_name, told
from spikeward.daemon.pages.numbers import coverage_shown, interval_shown, value_shown
from spikeward.daemon.pages.template import attention, page
from spikeward.rules.outcomes import FAIL, NOT_EVALUATED, PASS, WAITING, WARN, BatchOutcome, Check, Outcome, Result
from spikeward.rules.records import SeriesKey
from spikeward.rules.words import counted

_REPORTED = ("sample", "duplicate", "spiked sample")


_QUIET = ("duplicate", "no reader")  # notices that ask nothing of a person stand last


@dataclass(frozen=True, slots=True)
class Row:
    """One analyte of one series, or a series that has no result yet, as the board lists it."""

    verdict: str
    role: str
    sample: str
    name: str  # analyte or line
    value: str
    how: str  # coverage and interval, or why there is no number
    says: str
    link: str
    excluded: str = ""  # that a decision leaves vessels out


def render_board(
    batch: BatchOutcome | None,
    notices: Sequence[Notice],
    links: Mapping[SeriesKey, str],
    station: str,
    folder: str = "",
) -> bytes:
    """The board of one batch, or of a folder in which no batch was recognised.

    Parameters
    ----------
    batch : None for a folder without any
    notices : what stands on this board besides results, in any order
    links : file name of each series' summary, beside the board
    folder : as a person knows it; of the batch where it is left out
    """
    rows = [row for outcome in (batch.outcomes if batch else ()) for row in _rows(outcome, links)]
    return page(
        "board.html.jinja",
        batch=batch,
        headline=headline(batch, rows),
        urgent=causes(row for row in rows if row.verdict != PASS),
        rows=rows,
        notices=sorted(
            notices,
            key=lambda notice: (notice.kind in _QUIET, notice.kind, notice.subject, notice.sentence, notice.since),
        ),
        folder=folder or (_place(batch.key.root, batch.key.folder) if batch else ""),
        station=station,
    )


@dataclass(slots=True)
class Cause:
    """One reason that needs a person, and every series that it is the reason for, each with its analytes."""

    verdict: str
    says: str
    series: list[tuple[Row, list[str]]]


def causes(rows: Iterable[Row]) -> list[Cause]:
    """Rows that say the same stand together, the gravest first: forty failures with one bracket are one line."""
    found: dict[tuple[str, str], Cause] = {}
    for row in rows:
        cause = found.setdefault((row.verdict, row.says), Cause(row.verdict, row.says, []))
        if not cause.series or (cause.series[-1][0].role, cause.series[-1][0].sample) != (row.role, row.sample):
            cause.series.append((row, []))
        if row.name:
            cause.series[-1][1].append(row.name)
    return sorted(found.values(), key=lambda cause: attention(cause.verdict))


def headline(batch: BatchOutcome | None, rows: Sequence[Row]) -> str:
    """The first line: ``41 of 44 results reportable, 2 fail, 1 waits; in control: brackets, reference.``"""
    if batch is None:
        return "No batch was recognised in this folder."
    reported = [row for row in rows if row.role in _REPORTED]
    controls = [row for row in rows if row.role not in _REPORTED]
    good = sum(row.verdict in (PASS, WARN) for row in reported)
    noun = "result" if len(reported) == 1 else "results"
    text = f"{good} of {len(reported)} {noun} reportable{_trouble(reported)}" if reported else "No sample yet"
    if controls and (trouble := _trouble(controls)):
        text += f"; {len(controls)} {'result' if len(controls) == 1 else 'results'} of blanks and references{trouble}"
    return f"{text}{_control(batch.checks)}."


def _trouble(rows: Sequence[Row]) -> str:
    """How many warn, fail and wait, those that there are none of left out."""
    count = {verdict: sum(row.verdict == verdict for row in rows) for verdict in (WARN, FAIL, WAITING)}
    words = f" ({count[WARN]} with a warning)" if count[WARN] else ""
    words += f", {count[FAIL]} {'fails' if count[FAIL] == 1 else 'fail'}" if count[FAIL] else ""
    return words + (f", {count[WAITING]} {'waits' if count[WAITING] == 1 else 'wait'}" if count[WAITING] else "")


def _control(checks: Iterable[Check]) -> str:
    words_for = {FAIL: "", WARN: "to look at", NOT_EVALUATED: "not evaluated", PASS: "in control"}
    by_name: dict[str, list[str]] = {}
    for check in checks:
        by_name.setdefault(check.name.replace("_", " "), []).append(check.verdict)
    parts = []
    for verdict, words in words_for.items():
        # each name once, at the gravest of its verdicts: what fails somewhere is not in control elsewhere
        names = [name for name, found in by_name.items() if min(found, key=list(words_for).index) == verdict]
        told = [f"{name}: {_failing(by_name[name])}" if verdict == FAIL else name for name in names]
        parts += [f"; {words}: {', '.join(told)}"] if told and verdict != FAIL else [f"; {one}" for one in told]
    return "".join(parts)


def _failing(verdicts: Sequence[str]) -> str:
    count = verdicts.count(FAIL)
    return f"{count} {'fails' if count == 1 else 'fail'}"


def _rows(outcome: Outcome, links: Mapping[SeriesKey, str]) -> list[Row]:
    key = outcome.key
    name = links.get(key, "")
    # a colon or a leading slash in a name must not turn the link into an address elsewhere
    link = f"./{quote(name, safe='', errors='surrogateescape')}" if name else ""
    role, sample = key.role.replace("_", " "), key.sample or key.batch or "one series"
    if not outcome.results:
        return [Row(outcome.verdict, role, sample, "", "no result yet", "", outcome.sentence, link)]
    return [
        Row(
            result.verdict, role, sample, result_name(result), *_value(result), _says(outcome, result), link,
            _excluded(outcome, result),
        )
        for result in outcome.results
        if result.reported_line
    ]  # fmt: skip


def _excluded(outcome: Outcome, result: Result) -> str:
    """How many vessels of a result a decision leaves out, in words; a vessel without a signal is no point."""
    vessels = {(point.level, point.vessel) for point in result.points if point.excluded}
    vessels |= {(vessel.level, vessel.vessel) for vessel in outcome.vessels if vessel.excluded}
    return f"{counted(len(vessels), 'vessel')} excluded" if vessels else ""


def _value(result: Result) -> tuple[str, str]:
    reported = result.reported
    if reported is None or result.no_number:
        return "no number", result.no_number or "it was not calculated"
    basis = f" {result.basis}" if result.basis and result.in_sample is not None else ""
    where = "" if result.in_sample is not None else "in the test solution; "
    interval = interval_shown(reported)
    return value_shown(reported) + basis, f"{where}{coverage_shown(reported)}{f'; {interval}' if interval else ''}"


def _says(outcome: Outcome, result: Result) -> str:
    """Why a result needs a person: failing checks before warning ones, then what is waited for."""
    checks = (*outcome.checks, *result.checks)
    for verdict in (FAIL, WARN):
        sentences = [told(check) for check in checks if check.verdict == verdict]
        if sentences and result.verdict in (verdict, WAITING):
            return " ".join(sentences)
    if outcome.waiting_for and result.verdict == WAITING:
        return f"Waiting for {', '.join(outcome.waiting_for)}."
    return result.sentence


def _place(*parts: str) -> str:
    return "/".join(part for part in parts if part)
