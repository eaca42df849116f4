"""What changed between two revisions of a result, in words for the history."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

from spikeward.daemon.pages.numbers import value_shown
from spikeward.rules.outcomes import Estimate
from spikeward.rules.words import line_words


def quoted(result: Mapping[str, Any]) -> Iterator[tuple[str, str, str]]:
    """Every reading that a result quotes, as (path, row and text for people, digest)."""
    groups = [vessel["readings"] for vessel in result.get("vessels", [])] + [result.get("context", [])]
    for readings in groups:
        for reading in readings:
            yield reading["path"], f"row {reading['row']}: {reading['text']}", reading["digest"]


def what_changed(before: Mapping[str, Any] | None, after: Mapping[str, Any]) -> tuple[str, tuple[str, ...]]:
    """Why there is a new revision, and its particulars; ``before`` is None for the first.

    Returns
    -------
    (why, changes), sentences for an analyst
    """
    if before is None:
        return "first result", ()
    changes = []
    old, new = set(quoted(before)), set(quoted(after))
    gone, come = sorted(old - new), sorted(new - old)
    changes += [f"{path} {place} no longer counts" for path, place, _ in gone]
    changes += [f"{path} {place} counts now" for path, place, _ in come]
    reasons = ["readings changed"] if changes else []
    for name, word in (("rules_digest", "the rules changed"), ("calculation_version", "the calculation changed")):
        if before.get(name) != after[name]:
            reasons.append(word)
    if before.get("verdict") != after["verdict"]:
        changes.append(f"verdict {before.get('verdict')} became {after['verdict']}")
    changes += _contents(before, after)
    return "; ".join(reasons) or "what the series depends on changed", tuple(changes)


def _contents(before: Mapping[str, Any], after: Mapping[str, Any]) -> Iterator[str]:
    known = {(result["analyte"], result["line"]): result for result in before.get("results", [])}
    for result in after["results"]:
        earlier = known.get((result["analyte"], result["line"]))
        if earlier is None or _best(earlier) == _best(result):
            continue
        name, then, now = line_words(result["analyte"], result["line"]), _shown(earlier), _shown(result)
        yield f"{name}: {now} changed, but in no digit that is shown" if then == now else f"{name}: {then} became {now}"


def _best(result: Mapping[str, Any]) -> tuple[Any, ...]:
    """The content in the sample where it is known, else in the test solution, with what is shown beside it."""
    best = result.get("in_sample") or result
    return best.get("content"), best.get("unit"), best.get("expanded_uncertainty"), best.get("basis", "")


def _shown(result: Mapping[str, Any]) -> str:
    content, unit, spread, basis = _best(result)
    if content is None:
        return "no number"
    return f"{value_shown(Estimate(content, unit, expanded_uncertainty=spread))} {basis}".rstrip()
