"""The one door into the core: batches in, outcomes out."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

from spikeward.rules.checks.batch import check_batch
from spikeward.rules.checks.reruns import beside_each_other
from spikeward.rules.checks.subject import Context, LineKey
from spikeward.rules.night import TURNS, Earlier, Night, Series, gather
from spikeward.rules.outcomes import FAIL, BatchOutcome, Outcome
from spikeward.rules.records import Batch, BatchKey, SeriesKey
from spikeward.rules.report import Standing, report
from spikeward.rules.rulebook import Rulebook
from spikeward.rules.series import closing_missing
from spikeward.rules.solving import Solution, solve_nights
from spikeward.rules.verdicts import depends_on_batch, settled

__all__ = ["Earlier", "evaluate"]


def evaluate(
    batches: Sequence[Batch], rules: Rulebook, earlier: Mapping[BatchKey, Earlier] | None = None
) -> tuple[BatchOutcome, ...]:
    """Prepare, solve and check every series of some batches.

    Parameters
    ----------
    batches : each with everything that its results may depend on, in any order
    earlier : evaluations under the same rules. They save time and never change the answer: a sample is taken over only
        where neither its own members nor anything of the batch that it depends on has changed

    Returns
    -------
    one outcome per batch in the order of their keys, each holding its series in the order of theirs; what one batch
    says does not depend on the others
    """
    nights = [gather(batch, rules, (earlier or {}).get(batch.key)) for batch in sorted(batches, key=lambda b: b.key)]
    solutions = solve_nights(nights, rules)
    return tuple(_finish(night, solution, rules) for night, solution in zip(nights, solutions, strict=True))


def _finish(night: Night, solution: Solution, rules: Rulebook) -> BatchOutcome:
    """Check, and say what stands."""
    waiting = frozenset(series.members.key for series in night.series if series.incomplete)
    waiting |= {key for key, outcome in night.standing.items() if outcome.incomplete}
    context = Context(
        night.batch, rules, waiting=waiting,
        backgrounds=night.backgrounds, brackets=night.brackets, untimed=night.untimed,
        calibrations=night.calibrations, pooling=solution.pooling,
    )  # fmt: skip
    context = beside_each_other(context, (line for lines in solution.lines.values() for line in lines))
    outcomes: dict[SeriesKey, Outcome] = dict(night.standing)
    for roles in TURNS:
        for series in night.series:
            key = series.members.key
            if key.role in roles:
                outcomes[key] = report(_standing(series, night, rules), solution.lines[key], context)
        context = replace(context, failed=_failed(outcomes))
    ordered = tuple(outcomes[key] for key in sorted(outcomes))
    return BatchOutcome(
        night.batch.key,
        night.batch.closed,
        () if night.batch.closed else closing_missing(night.batch, rules, _complete(night)),
        ordered,
        check_batch(context, ordered, night.lacking),
        night.lacking,
    )


def _complete(night: Night) -> frozenset[SeriesKey]:
    gathered = {series.members.key for series in night.series if not series.missing}
    return frozenset(gathered | {key for key, outcome in night.standing.items() if not outcome.incomplete})


def _standing(series: Series, night: Night, rules: Rulebook) -> Standing:
    """What a series waits for: its own members first, then those of the batch."""
    stands = settled(night.batch.closed, series.incomplete, rules)
    waiting_for = series.missing if series.incomplete else ()
    if not stands and not waiting_for:
        waiting_for = night.lacking or ("the end of the batch",)
    elif not stands and depends_on_batch(rules):
        waiting_for = (*waiting_for, *night.lacking)
    return Standing(series.members, series.missing, series.over, stands, tuple(dict.fromkeys(waiting_for)))


def _failed(outcomes: Mapping[SeriesKey, Outcome]) -> frozenset[tuple[SeriesKey, LineKey]]:
    return frozenset(
        (key, (result.analyte, result.line))
        for key, outcome in outcomes.items()
        for result in outcome.results
        if result.verdict == FAIL
    )
