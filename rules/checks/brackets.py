"""Brackets: whether the sensitivity before and after a series was still that of the batch's first bracket."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

from spikeward.rules.checks.subject import (
    Subject,
    as_percent,
    graded,
    near_limits,
    not_evaluated,
    not_straight,
    number,
    plain,
    source_of,
)
from spikeward.rules.outcomes import FAIL, PASS, WARN, Check
from spikeward.rules.rulebook import Limits
from spikeward.rules.series import one_sequence
from spikeward.rules.solve.drift import Bracket
from spikeward.rules.solve.vessel_signal import vessel_signal

_NEEDS_TIMES = "Declare the column measured_at"
_ASKED = "the rule file, which asks for brackets"


def around(subject: Subject) -> tuple[Bracket, ...]:
    """The brackets that a line depends on: the nearest before it, those within, the nearest after, and the first."""
    every = subject.context.brackets.get(subject.line_key, ())
    times = [reading.when for reading in subject.readings]
    if not times or not _placed(subject, every):
        return ()
    start, end = min(times), max(times)
    before = sum(one.last <= start for one in every)
    upto = sum(one.first < end for one in every)
    near = every[max(before - 1, 0) : upto + 1]  # they stand in the order of time
    return near if near and near[0] is every[0] else (every[0], *near)


def _placed(subject: Subject, every: Sequence[Bracket]) -> bool:
    """Whether the readings of a series can be put in order with the brackets, of which there are any."""
    return bool(every) and one_sequence([*subject.readings, *(reading for one in every for reading in one.readings)])


def brackets(subject: Subject, limits: Limits) -> Check:
    """The sensitivity of the nearest bracket on either side, relative to the first bracket of the batch."""
    rules, line = subject.context.rules, subject.line_key
    if not rules.brackets and "bracket" not in rules.series.closes_with:
        return not_evaluated("brackets", "the rules ask for no brackets", "Declare brackets, and measure them")
    if subject.solved.prepared.response == "log":
        return not_evaluated("brackets", f"{not_straight(subject)}: potentials of brackets are no sensitivity")
    if any("drift" in reading.already for reading in subject.readings):
        return not_evaluated("brackets", "the export had its drift corrected already", "Export uncorrected signals")
    every, near = subject.context.brackets.get(line, ()), around(subject)
    if line in subject.context.untimed or (every and subject.readings and not _placed(subject, every)):
        sentence = (
            "The drift is not known: without acquisition times, or an order within one file, series and brackets "
            "cannot be placed beside each other."
        )
        return plain("brackets", WARN, sentence, _NEEDS_TIMES, _ASKED)
    times = [reading.when for reading in subject.readings]
    if not times:
        return not_evaluated("brackets", "the series has no readings")
    sides = [any(one.last <= min(times) for one in near), any(one.first >= max(times) for one in near)]
    drifted = drift(near, every, limits)
    if drifted is not None and drifted.verdict == FAIL:
        return drifted
    if sum(sides) < 2 and not subject.context.batch.closed:
        return not_evaluated("brackets", f"the bracket {_side_lacking(sides)} this series is still expected")
    found = _one_sided(sides, limits) or drifted or not_evaluated("brackets", "no bracket was measured")
    return _uncorrected(found, subject)


def _uncorrected(check: Check, subject: Subject) -> Check:
    """A drift that the rules ask to correct and that was not corrected warns at least: the number stands without it."""
    why = subject.solved.not_drifted
    if not why or check.verdict == FAIL:
        return check
    told = f"The drift was not corrected, though the rules ask for it: {why}."
    if check.verdict == WARN:
        return replace(check, sentence=f"{check.sentence} {told}")
    return plain("brackets", WARN, told, "Measure the series again between two brackets", _ASKED)


def drift(near: Sequence[Bracket], every: Sequence[Bracket], limits: Limits) -> Check | None:
    """The largest deviation of some visits from the first bracket of the batch; None where there are none.

    A visit whose own readings scatter does not show the sensitivity any better than the standard uncertainty of their
    mean, s/sqrt(n): where that alone is beyond the limits, it warns.
    """
    if not near:
        return None
    units = sorted({reading.unit or "no unit" for one in near for reading in one.readings})
    if len(units) > 1:
        sentence = f"The units of the brackets differ: they come in {' and '.join(units)}."
        return plain("brackets", FAIL, sentence, "Export all brackets in one unit", "theory")
    for one in near:
        if one.sensitivity is None or (one is every[0] and one.sensitivity <= 0):
            sentence = f"The bracket {one.solution} has no signal that can be used."
            return plain("brackets", FAIL, sentence, "Measure the series again between good brackets", "theory")
    first = every[0].sensitivity or math.nan
    drifts = [((one.sensitivity or 0.0) / first - 1, one.solution) for one in near]
    worst, solution = max(drifts, key=lambda drift: (abs(drift[0]), drift[1]))
    signed = f"{'+' if worst >= 0 else '-'}{near_limits(abs(worst), limits)}"
    told = f"The sensitivity of bracket {solution} is {signed} from the first bracket"
    if worst == 0:
        told = f"The brackets around this series read like the first, {every[0].solution}"
    check = graded(
        "brackets", abs(worst), limits, told,
        f"Measure again what lies between bracket {solution} and its good neighbours", show=as_percent,
    )  # fmt: skip
    check = replace(check, observed=worst)
    return (_scattering(near, limits) or check) if check.verdict == PASS else check


def _scattering(near: Sequence[Bracket], limits: Limits) -> Check | None:
    """A warning where the readings of one visit differ more than brackets may."""
    known = [(u, one.solution) for one in near if (u := _relative_uncertainty(one)) is not None]
    if not known:
        return None
    largest, solution = max(known)
    told = f"The readings of bracket {solution} scatter: their mean is known to ± {near_limits(largest, limits)}"
    remedy = f"Look at the readings of bracket {solution}; measure the series again between good brackets"
    check = graded("brackets", largest, limits, told, remedy, show=as_percent)
    return replace(check, verdict=WARN) if check.verdict in (WARN, FAIL) else None


def _relative_uncertainty(one: Bracket) -> float | None:
    if not one.sensitivity:
        return None
    signal = vessel_signal(one.readings)
    return None if signal.sd is None else signal.sd / math.sqrt(signal.readings) / abs(one.sensitivity)


def _one_sided(sides: Sequence[bool], limits: Limits) -> Check | None:
    """A closed batch in which a side has no bracket: by ``warn_sides_below`` and ``fail_sides_below``."""
    if sum(sides) == 2:
        return None
    verdict, named = PASS, ""
    for limit, severity in (("warn_sides_below", WARN), ("fail_sides_below", FAIL)):
        needed = number(limits, limit)
        if needed is not None and sum(sides) < needed:
            verdict, named = severity, limit
    if verdict == PASS:
        return None
    return Check(
        "brackets", verdict, f"No bracket was measured {_side_lacking(sides)} this series.", float(sum(sides)), "sides",
        "a bracket on both sides", source_of(limits, named, "brackets"),
        "Measure the series again between two brackets",
    )  # fmt: skip


def _side_lacking(sides: Sequence[bool]) -> str:
    return "before or after" if not any(sides) else "after" if sides[0] else "before"
