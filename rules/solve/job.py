"""One line that is to be solved."""

from __future__ import annotations

from dataclasses import dataclass

from spikeward.rules.prepared import PreparedLine
from spikeward.rules.solve.corrections import Corrections
from spikeward.rules.solve.solved import OWN, Scatter


@dataclass(frozen=True, slots=True)
class Job:
    """One line to be solved, what comes off its signals, and where its scatter comes from."""

    line: PreparedLine
    corrections: Corrections = Corrections()
    scatter: Scatter = OWN
