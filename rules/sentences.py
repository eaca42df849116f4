"""The words that a person reads first: verdict, result with uncertainty, what to do, and what is not shown."""

from __future__ import annotations

from collections.abc import Sequence

from spikeward.rules.checks.registry import REGISTRY
from spikeward.rules.outcomes import FAIL, NOT_EVALUATED, WAITING, WARN, Check, Estimate, Result
from spikeward.rules.records import SeriesKey
from spikeward.rules.rounding import figure, percent, rounded
from spikeward.rules.solve.solved import Solved
from spikeward.rules.uncertainty.fieller import t_quantile
from spikeward.rules.words import counted, freedom, line_words, listed, unit_words

_SHOWN_AT_MOST = 3  # a headline names so many troubles and counts the rest
_WIDE_K = 3.0  # from here on a coverage factor needs a word: people expect 2

# What explains other failures of its line stands before them in a headline: what the vessels hold, then a vessel that
# lies off the line, then what the line says as a whole.
_EXPLAINS_FIRST = ("preparation", "units", "linear_top", "standard", "residual", "studentised")


def series_name(key: SeriesKey) -> str:
    """A series as people call it: batch and sample, with the role where it is no sample."""
    name = f"{key.batch}-{key.sample}" if key.batch and key.sample else key.sample or key.batch
    return name if key.role == "sample" else f"{key.role.replace('_', ' ')} {name}"


def estimate_words(estimate: Estimate, basis: str = "") -> str:
    """A content with expanded uncertainty and unit, rounded for a report."""
    unit = f"{unit_words(estimate.unit)} {basis}".strip()
    if not estimate.expanded_uncertainty:  # a scatter of zero is not a real one
        return f"{figure(estimate.content, full=True)} {unit}, uncertainty not known"
    value, spread = rounded(estimate.content, estimate.expanded_uncertainty)
    return f"{value} ± {spread} {unit}"


def short_result(result: Result) -> str:
    """One result without its details."""
    # a wavelength must not run into the number
    name = f"{line_words(result.analyte, result.line)}{':' if result.line else ''}"
    if result.reported is None:
        return f"{name} no number"
    return f"{name} {estimate_words(result.reported, result.basis if result.in_sample else '')}"


def result_sentence(result: Result, solved: Solved) -> str:
    """One result with coverage, vessels, what was subtracted, what the interval holds and what is not shown."""
    if result.reported is None:
        name, why = line_words(result.analyte, result.line), result.no_number.rstrip(".")
        return f"{name}: no number, because {_uncapital(why)}."
    text = f"{short_result(result)} ({'; '.join(_details(result, solved))})."
    holds = interval_holds(result, solved)
    missing = not_shown([result])
    return " ".join(part for part in (text, holds, missing) if part)


def _details(result: Result, solved: Solved) -> list[str]:
    estimate, parts, left = result.reported, [], freedom(result.degrees_of_freedom)
    if estimate is not None and estimate.expanded_uncertainty:
        parts.append(f"{percent(estimate.coverage, 3)}{_coverage_factor(estimate, solved)}")
    elif estimate is not None and estimate.reason:
        parts.append(estimate.reason.rstrip("."))
    vessels = sum(not point.excluded for point in result.points)
    if solved.scatter.kind != "own":
        parts.append(solved.scatter.words)
    told = any(f" {left}" in part for part in parts)  # the coverage factor has said it already
    parts.append(counted(vessels, "vessel") if told else f"{counted(vessels, 'vessel')}, {left}")
    if excluded := sum(bool(vessel.excluded) for vessel in solved.prepared.vessels):
        parts.append(f"{excluded} excluded by decision")
    if result.blank is not None and result.reported is not None:
        parts.append(f"process blank {figure(result.blank, 2)} {unit_words(result.reported.unit)} subtracted")
    if result.background is not None:
        parts.append(f"background {figure(result.background, 2)} {result.background_unit}".rstrip() + " subtracted")
    return parts


def _coverage_factor(estimate: Estimate, solved: Solved) -> str:
    """The coverage factor, and why where it is far from the 2 that people expect."""
    k, left = estimate.coverage_factor, estimate.effective_degrees_of_freedom
    if not k:
        return ""
    if left is None:
        return f", k {figure(k, 2)}"
    told, of_line = f", k {figure(k, 2)}", solved.scatter_degrees_of_freedom
    if k > _WIDE_K and left > 0 and t_quantile(left, estimate.coverage) > _WIDE_K:
        return f"{told}, because {freedom(left)} {'remains' if left == 1 else 'remain'}"
    if left != of_line:
        told += f" with {freedom(left)}"
    if k <= _WIDE_K:
        return told
    if of_line > 0 and t_quantile(of_line, estimate.coverage) > _WIDE_K:
        return f"{told}, because the line alone has {of_line:.0f}"
    return f"{told}, because the slope is not known well"


def interval_holds(result: Result, solved: Solved) -> str:
    """What the interval contains and what it leaves out."""
    if result.reported is None or not result.reported.expanded_uncertainty:
        return ""
    straight = solved.prepared.response == "linear" or solved.scatter.kind != "own"
    parts = [_SCATTER_WORDS[solved.scatter.kind] if straight else "the scatter about the fit"]
    if solved.background is not None and solved.background.standard_uncertainty is not None:
        parts.append("the background")
    if solved.reagent is not None and solved.reagent.standard_uncertainty is not None:
        parts.append("the reagent blank")
    if result.blank is not None and "not known" not in solved.blank_note:
        parts.append("the process blank")
    if solved.drift:
        parts.append("the scatter of the brackets")
    back = solved.prepared.way_back
    if result.in_sample is not None and back is not None and back.relative_uncertainty:
        parts.append("the recovery")
    told = parts[0] if len(parts) == 1 else f"{', '.join(parts[:-1])} and {parts[-1]}"
    lacking = ""
    if solved.background is not None and solved.background.standard_uncertainty is None:
        lacking += ", nor is the background, whose scatter is not known"
    if solved.drifted and not solved.drift:
        lacking += ", nor is the scatter of the brackets"
    if solved.reagent is not None and solved.reagent.standard_uncertainty is None:
        lacking += ", nor is the reagent blank"
    if result.blank is not None and solved.blanks == 1:
        lacking += ", nor is how blanks vary between preparations, which one process blank does not show"
    return f"The interval holds {told}; standard, volumes and mass are not in it{lacking}."


_SCATTER_WORDS = {
    "own": "the scatter about the line",
    "pooled": "the scatter of the batch's series about their lines",
    "declared": "the declared noise",
}


def not_shown(results: Sequence[Result]) -> str:
    """What checks could not speak about, as a sentence, or an empty text."""
    found: dict[str, dict[str, str]] = {}  # what is not shown -> line -> reason
    for result in results:
        for check in result.checks:
            word = REGISTRY[check.name].not_shown
            if word and check.verdict == NOT_EVALUATED:
                reason = check.sentence.removeprefix("Not evaluated: ").rstrip(".")
                found.setdefault(word, {})[line_words(result.analyte, result.line)] = reason
    told = []
    for word, reasons in found.items():
        every = set(reasons.values())
        told.append(f"{word} ({every.pop()})" if len(every) == 1 else f"{word} of {', '.join(reasons)}")
    return f"Not shown: {', '.join(told)}." if told else ""


def headline(
    key: SeriesKey,
    verdict: str,
    so_far: str,
    final: bool,
    checks: Sequence[Check],
    results: Sequence[Result],
    waiting_for: Sequence[str],
    excluded: Sequence[str] = (),
) -> str:
    """The first words about a series.

    Parameters
    ----------
    checks : of the series as a whole; those of results stand in ``results``
    excluded : the vessels that a decision leaves out
    """
    told = _headline(key, verdict, so_far, final, checks, results, waiting_for)
    return f"{told} Excluded by decision: {listed(excluded)}." if excluded else told


def _headline(
    key: SeriesKey,
    verdict: str,
    so_far: str,
    final: bool,
    checks: Sequence[Check],
    results: Sequence[Result],
    waiting_for: Sequence[str],
) -> str:
    name = series_name(key)
    deciding = [result for result in results if result.reported_line]
    if verdict == FAIL:
        word = "DO NOT REPORT" if key.role in ("sample", "duplicate", "spiked_sample") else "FAIL"
        return f"{word}{'' if final else ' (so far)'}. {name}{_failures(checks, deciding)}"
    if verdict == WAITING:
        worries = f" {_troubles(checks, deciding, WARN)}" if so_far == WARN else ""
        stands = f"so far {so_far}; " if so_far != WAITING else ""
        return f"WAITING. {name}: {stands}waits for {listed(waiting_for)}.{worries}"
    worries = f" {_troubles(checks, deciding, WARN)}" if verdict == WARN else ""
    return f"{verdict.upper()}. {name} {_results(results)}{worries}"


def _results(results: Sequence[Result]) -> str:
    beside = [line_words(result.analyte, result.line) for result in results if not result.reported_line]
    results = [result for result in results if result.reported_line]
    told = f" Beside it: {listed(beside)}, not reported." if beside else ""
    if len(results) == 1:
        return f"{results[0].sentence}{told}"
    missing = not_shown(results)
    short = "; ".join(short_result(result) for result in results)
    return f"{short}." + (f" {missing}" if missing else "") + told


def _failures(checks: Sequence[Check], results: Sequence[Result]) -> str:
    """What fails, the whole series first, then each line by its first failing check; equal words once."""
    common = [check for check in checks if check.verdict == FAIL]
    if common:
        told = [_told(check) for check in common]
        return f": {' '.join(told[:_SHOWN_AT_MOST])}{_more(len(told) - _SHOWN_AT_MOST)}"
    said: dict[str, list[str]] = {}
    good, count = [], 0
    for result in results:
        failing = sorted((check for check in result.checks if check.verdict == FAIL), key=_explains)
        name = line_words(result.analyte, result.line)
        count += max(0, len(failing) - 1)
        if failing:
            said.setdefault(_told(failing[0]), []).append(name)
        else:
            good.append(name)
    told = [f"{', '.join(names)}: {text}" for text, names in said.items()]
    stands = f" Not touched by this: {', '.join(good)}." if good else ""
    return f" {' '.join(told[:_SHOWN_AT_MOST])}{_more(count + max(0, len(told) - _SHOWN_AT_MOST))}{stands}"


def _explains(check: Check) -> int:
    return _EXPLAINS_FIRST.index(check.name) if check.name in _EXPLAINS_FIRST else len(_EXPLAINS_FIRST)


def _more(count: int) -> str:
    return f" {count} more {'check fails' if count == 1 else 'checks fail'}." if count > 0 else ""


def _troubles(checks: Sequence[Check], results: Sequence[Result], verdict: str) -> str:
    told = [check.sentence for check in checks if check.verdict == verdict]
    for result in results:
        name = f"{line_words(result.analyte, result.line)}: " if len(results) > 1 else ""
        told += [f"{name}{check.sentence}" for check in result.checks if check.verdict == verdict]
    rest = len(told) - _SHOWN_AT_MOST
    return " ".join(told[:_SHOWN_AT_MOST]) + (f" {rest} more to look at." if rest > 0 else "")


def _told(check: Check) -> str:
    return f"{check.sentence} {check.remedy}." if check.remedy else check.sentence


def _uncapital(text: str) -> str:
    return text[:1].lower() + text[1:] if text[1:2].islower() else text
