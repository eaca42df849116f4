"""``BATCH.results.csv``: one row a result, for spreadsheets and data frames. RFC 4180, UTF-8, no clock.

A text that starts with ``=``, ``+``, ``-``, ``@``, a tab, a line break or an apostrophe gets an apostrophe in front, so
that no spreadsheet runs it as a formula; take one leading apostrophe off to have the text back. Texts are quoted,
numbers are bare, with a decimal point and 12 significant digits; an empty cell is a number that there is none of.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable

from spikeward.daemon.pages.numbers import machine
from spikeward.daemon.pages.text import encodable
from spikeward.rules.outcomes import FAIL, WARN, BatchOutcome, Estimate, Outcome, Result

Cell = str | float | None

_FORMULA_STARTS = tuple("=+-@\t\r\n'＝＋－＠")

_OF_SERIES: dict[str, Callable[[Outcome], Cell]] = {
    "root": lambda outcome: outcome.key.root,
    "folder": lambda outcome: outcome.key.folder,
    "batch": lambda outcome: outcome.key.batch,
    "role": lambda outcome: outcome.key.role,
    "sample": lambda outcome: outcome.key.sample,
    "series_verdict": lambda outcome: outcome.verdict,
    "final": lambda outcome: "yes" if outcome.final else "no",
    "waiting_for": lambda outcome: "; ".join(outcome.waiting_for),
    "inputs_digest": lambda outcome: outcome.inputs_digest,
    "rules_digest": lambda outcome: outcome.rules_digest,
    "calculation_version": lambda outcome: outcome.calculation_version,
}
_OF_RESULT: dict[str, Callable[[Result], Cell]] = {
    "analyte": lambda result: result.analyte,
    "line": lambda result: result.line,
    "reported_line": lambda result: "yes" if result.reported_line else "no",
    "response": lambda result: result.response,
    "precision": lambda result: result.precision,
    "verdict": lambda result: result.verdict,
    "no_number": lambda result: result.no_number,
    "basis": lambda result: result.basis,
    "slope": lambda result: result.slope,
    "slope_uncertainty": lambda result: result.slope_uncertainty,
    "intercept": lambda result: result.intercept,
    "intercept_uncertainty": lambda result: result.intercept_uncertainty,
    "residual_sd": lambda result: result.residual_sd,
    "degrees_of_freedom": lambda result: float(result.degrees_of_freedom),
    "vessels": lambda result: float(sum(not point.excluded for point in result.points)),
    "excluded_vessels": lambda result: float(sum(bool(point.excluded) for point in result.points)),
    "signal_unit": lambda result: result.signal_unit,
    "background": lambda result: result.background,
    "blank": lambda result: result.blank,
}
_OF_ESTIMATE: dict[str, Callable[[Estimate], Cell]] = {
    "content": lambda estimate: estimate.content,
    "unit": lambda estimate: estimate.unit,
    "standard_uncertainty": lambda estimate: estimate.standard_uncertainty,
    "expanded_uncertainty": lambda estimate: estimate.expanded_uncertainty,
    "coverage_factor": lambda estimate: estimate.coverage_factor,
    "effective_degrees_of_freedom": lambda estimate: _number(estimate.effective_degrees_of_freedom),
    "interval_low": lambda estimate: estimate.interval[0] if estimate.interval else None,
    "interval_high": lambda estimate: estimate.interval[1] if estimate.interval else None,
    "coverage": lambda estimate: estimate.coverage,
    "uncertainty_reason": lambda estimate: estimate.reason,
}
COLUMNS = (
    "root", "folder", "batch", "role", "sample", "analyte", "line", "reported_line", "verdict", "series_verdict",
    "final", "waiting_for", "no_number", *(f"sample_{name}" for name in _OF_ESTIMATE), "basis",
    *(f"solution_{name}" for name in _OF_ESTIMATE),
    "response", "precision", "degrees_of_freedom", "vessels", "excluded_vessels", "checks_to_look_at", "slope",
    "slope_uncertainty", "intercept", "intercept_uncertainty", "residual_sd", "signal_unit", "background",
    "blank", "inputs_digest", "rules_digest", "calculation_version",
)  # fmt: skip


def _number(count: int | None) -> float | None:
    return None if count is None else float(count)


def render_csv(batch: BatchOutcome) -> bytes:
    """All results of a batch; a series that has none yet keeps a row, so that nothing is missing without a word.

    ``sample_…`` is the content in the sample, ``solution_…`` the content in the test solution as it was pipetted.
    """
    rows = [_cells(outcome, result) for outcome in batch.outcomes for result in outcome.results or (None,)]
    lines = [_line(COLUMNS), *(_line(row.get(column) for column in COLUMNS) for row in rows)]
    return "".join(lines).encode()


def _cells(outcome: Outcome, result: Result | None) -> dict[str, Cell]:
    cells: dict[str, Cell] = {name: read(outcome) for name, read in _OF_SERIES.items()}
    cells["checks_to_look_at"] = _to_look_at(outcome, result)
    if result is None:
        return cells | {"verdict": outcome.verdict}
    cells |= {name: read(result) for name, read in _OF_RESULT.items()}
    for prefix, estimate in (("sample", result.in_sample), ("solution", result.content)):
        if estimate is not None:
            cells |= {f"{prefix}_{name}": read(estimate) for name, read in _OF_ESTIMATE.items()}
    return cells


def _to_look_at(outcome: Outcome, result: Result | None) -> str:
    checks = (*outcome.checks, *(result.checks if result else ()))
    return "; ".join(f"{check.verdict} {check.name}" for check in checks if check.verdict in (FAIL, WARN))


def _line(cells: Iterable[Cell]) -> str:
    return ",".join(map(_cell, cells)) + "\r\n"


def _cell(cell: Cell) -> str:
    if not isinstance(cell, str):
        return machine(cell)
    text = encodable(cell).replace("\0", "␀")  # a NUL ends a text for some programs
    if not text:
        return ""
    quoted = text.replace('"', '""')
    return f"\"{chr(39) if text.startswith(_FORMULA_STARTS) else ''}{quoted}\""
