"""The door of the solver: prepared lines in, solved lines out, many at once."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from spikeward.rules.solve.bent import solve_blocks, solve_curves, solve_log_responses
from spikeward.rules.solve.drift_noise import with_drift_noise
from spikeward.rules.solve.job import Job
from spikeward.rules.solve.solved import Solved
from spikeward.rules.solve.straight import solve_straight
from spikeward.rules.solve.transform import Transformed, transform

_SOLVERS: dict[str, Callable[[Sequence[Job], Sequence[Transformed], float], list[Solved]]] = {
    "linear": solve_straight, "blocks": solve_blocks, "log": solve_log_responses, "curve": solve_curves,
}  # fmt: skip


def solve_lines(jobs: Sequence[Job], coverage: float) -> tuple[Solved, ...]:
    """Solve every line: straight ones together, and those of other responses each with their like.

    Parameters
    ----------
    jobs : lines of any batches, designs and numbers of vessels together
    coverage : of the intervals, such as 0.95

    Returns
    -------
    in the order of ``jobs``; the digits of one do not depend on the others
    """
    return with_drift_noise(jobs, _solved(jobs, coverage), lambda moved: _solved(moved, coverage), coverage)


def _solved(jobs: Sequence[Job], coverage: float) -> tuple[Solved, ...]:
    transformed = [transform(job.line, job.corrections) for job in jobs]
    by_model: dict[str, list[int]] = {}
    for place, (job, one) in enumerate(zip(jobs, transformed, strict=True)):
        runs = {row.block for row in one.rows}
        model = "blocks" if job.line.response == "linear" and len(runs) > 1 else job.line.response
        by_model.setdefault(model, []).append(place)
    found: dict[int, Solved] = {}
    for model, places in by_model.items():
        alike = [jobs[place] for place in places], [transformed[place] for place in places]
        with np.errstate(all="ignore"):  # what overflows or has no value is recognised by its result
            solved = _SOLVERS[model](*alike, coverage)
        found |= dict(zip(places, solved, strict=True))
    return tuple(found[place] for place in range(len(jobs)))
