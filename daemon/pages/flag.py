"""Flag files: plain ``key: value`` lines that a sequence script can poll. A poller reads the content, not the name."""

from __future__ import annotations

from collections.abc import Iterable, Iterator

from spikeward.daemon.pages.numbers import coverage_shown, value_shown
from spikeward.daemon.pages.text import one_line
from spikeward.rules.outcomes import FAIL, WARN, Check, Outcome, Result
from spikeward.rules.words import line_words

Line = tuple[str, str]


def render_flag(outcome: Outcome, result_digest: str) -> bytes:
    """The flag of one series; the first line is ``verdict: pass``, ``warn``, ``fail`` or ``waiting``.

    Parameters
    ----------
    result_digest : hex SHA-256 of the series' ``result.json``, written before the flag
    """
    key = outcome.key
    lines: list[Line] = [
        ("verdict", outcome.verdict),
        ("series", "/".join(part for part in (key.root, key.folder, key.batch, key.role, key.sample) if part)),
        ("batch", key.batch),
        ("role", key.role),
        ("sample", key.sample),
        ("so_far", outcome.so_far),
        ("final", "yes" if outcome.final else "no"),
        ("sentence", outcome.sentence),
    ]
    lines += [("result" if result.reported_line else "not_reported", _result(result)) for result in outcome.results]
    lines += [("missing", what) for what in outcome.waiting_for]
    lines += _reasons("", outcome.checks)
    for result in outcome.results:
        lines += _reasons(result_name(result), result.checks)
    lines += [
        ("result_digest", result_digest),
        ("inputs_digest", outcome.inputs_digest),
        ("rules_digest", outcome.rules_digest),
        ("calculation_version", outcome.calculation_version),
    ]
    return _lines(lines)


def render_unread(path: str, sentence: str) -> bytes:
    """The flag beside a file that could not be read.

    Parameters
    ----------
    path : relative to the watched folder
    sentence : what is wrong, where, and what to do
    """
    return _lines([("verdict", "unread"), ("file", path), ("sentence", sentence)])


def result_name(result: Result) -> str:
    """The analyte, with its line where it has one and the line does not already name it."""
    return line_words(result.analyte, result.line)


def _result(result: Result) -> str:
    name, reported = result_name(result), result.reported
    if reported is None or result.no_number:
        return f"{result.verdict}, {name}, no number: {result.no_number or 'it was not calculated'}"
    basis = f" {result.basis}" if result.basis and result.in_sample is not None else ""
    return f"{result.verdict}, {name}, {value_shown(reported)}{basis} ({coverage_shown(reported)})"


def told(check: Check) -> str:
    """What a check found and what to do about it."""
    return f"{check.sentence} {check.remedy.rstrip('.')}." if check.remedy else check.sentence


def _reasons(name: str, checks: Iterable[Check]) -> Iterator[Line]:
    for check in checks:
        if check.verdict in (FAIL, WARN):
            about = f"{check.verdict}, {f'{name}, ' if name else ''}{check.name}"
            yield "reason", f"{about}: {told(check)}{f' Source: {check.source}.' if check.source else ''}"


def _lines(lines: Iterable[Line]) -> bytes:
    return "".join(f"{key}: {one_line(value)}\n" for key, value in lines).encode()
