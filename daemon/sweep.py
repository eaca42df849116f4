"""`sweep`: take in all that is there by content, publish, and exit. It trusts no memory, so it is the reference."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass

from spikeward.daemon.names import batch_words, shown
from spikeward.daemon.opening import open_station
from spikeward.daemon.pipeline import Pipeline
from spikeward.daemon.solving import Solved
from spikeward.daemon.survey import survey
from spikeward.daemon.trouble import Trouble
from spikeward.daemon.workers import Readers, ReadJob
from spikeward.rules.outcomes import PASS
from spikeward.rules.series import closing_roles

_PORTION = 256  # files between two steps of the progress bar


@dataclass(frozen=True, slots=True)
class Pauses:
    """The settling pause between two looks, passed in so that tests need not wait."""

    monotonic: Callable[[], float]
    sleep: Callable[[float], None]


def sweep_command(config: str, close: bool, again: str | None, workers: int, json_log: bool) -> int:
    """Run `sweep` from the command line; the exit code."""
    import time

    with open_station(config, json_log=json_log) as opened, Readers(workers) as readers:
        pipeline = opened.pipeline
        solved = sweep(
            pipeline, readers, Pauses(time.monotonic, time.sleep), close=close, again=again, bar=progress_bar
        )
        for line in report(pipeline, solved):
            print(line)
        return 0 if all_pass(pipeline, solved) else 1


Bar = Callable[[Iterable[Sequence[ReadJob]], int], Iterable[Sequence[ReadJob]]]


def no_bar(portions: Iterable[Sequence[ReadJob]], total: int) -> Iterable[Sequence[ReadJob]]:
    """No progress is shown."""
    return portions


def progress_bar(portions: Iterable[Sequence[ReadJob]], total: int) -> Iterable[Sequence[ReadJob]]:
    """Files read so far, on a terminal only."""
    if not sys.stderr.isatty():
        yield from portions
        return
    from tqdm import tqdm

    with tqdm(total=total, unit=" files", desc="reading", leave=False) as bar:
        for portion in portions:
            yield portion
            bar.update(len(portion))


def sweep(
    pipeline: Pipeline,
    readers: Readers,
    pauses: Pauses,
    close: bool = False,
    again: str | None = None,
    bar: Bar = no_bar,
) -> list[Solved]:
    """Two looks a settling time apart, then the whole way for every file.

    Returns
    -------
    every batch that is known, as it stands published
    """
    jobs = two_looks(pipeline, pauses)
    portions = [jobs[start : start + _PORTION] for start in range(0, len(jobs), _PORTION)]
    for portion in bar(portions, len(jobs)):
        pipeline.take(sorted(readers.read_many(portion), key=lambda reply: reply.key))
    pipeline.catch_up()
    if again is not None:
        _again(pipeline, again)
    solved = pipeline.solve(pipeline.solving.every())
    due = [one for one in solved if one.outcome.outcomes and not one.outcome.closed and (close or _is_over(one))]
    if due:
        pipeline.close(due)
        solved = pipeline.solve(pipeline.solving.every())
    pipeline.publish(solved, check_all=True)
    pipeline.withdraw_orphans()
    pipeline.publish_boards()
    return solved


def two_looks(pipeline: Pipeline, pauses: Pauses) -> list[ReadJob]:
    """The files that looked the same twice, as jobs for the readers."""
    longest = max((root.watch.settle for root in pipeline.intake.roots.values()), default=0.0)
    jobs: list[ReadJob] = []
    for look in range(2):
        if look:
            pauses.sleep(longest)
        now = pauses.monotonic()
        for folder, root in list(pipeline.intake.roots.items()):
            jobs += pipeline.see(folder, survey(pipeline.disk, pipeline.places.inputs(root.watch)), now)
    return jobs


def _again(pipeline: Pipeline, batch: str) -> None:
    closed = sorted({key.batch for key in pipeline.closings.closed})
    if batch and batch not in closed:
        told = ", ".join(shown(each) for each in closed if each) or "none"
        raise Trouble(f"--again {shown(batch)}: no closed batch is called so; closed are: {told}")
    pipeline.reopen(batch or None)


def _is_over(one: Solved) -> bool:
    """Without closing members a batch is over at the end of the scan if every series is complete."""
    return not closing_roles(one.rules) and not one.outcome.waiting_for


def all_pass(pipeline: Pipeline, solved: Sequence[Solved]) -> bool:
    """Whether nothing needs a person and nothing waits."""
    verdicts = {outcome.verdict for one in solved for outcome in one.outcome.outcomes}
    return verdicts <= {PASS} and not pipeline.needs_a_person()


def report(pipeline: Pipeline, solved: Sequence[Solved]) -> list[str]:
    """What a person reads at the end of a sweep: one line a batch, then what needs a decision."""
    lines = []
    for one in solved:
        counts: dict[str, int] = {}
        for outcome in one.outcome.outcomes:
            counts[outcome.verdict] = counts.get(outcome.verdict, 0) + 1
        told = ", ".join(
            f"{counts[verdict]} {verdict}" for verdict in ("fail", "waiting", "warn", "pass") if verdict in counts
        )
        state = "closed" if one.outcome.closed else "open"
        lines.append(f"batch {batch_words(one.batch.key)}: {told or 'no series yet'} ({state})")
    lines += pipeline.needs_a_person()
    lines += pipeline.remedies()
    return lines
