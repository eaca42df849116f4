"""From what has been read to outcomes: each batch under its own rules, with closings, lapses and decisions as data."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable, Iterable
from dataclasses import dataclass, field, replace

from spikeward.daemon.closings import Closings
from spikeward.daemon.holdings import Holdings
from spikeward.rules.evaluate import Earlier, evaluate
from spikeward.rules.in_force import Memory, State, in_force
from spikeward.rules.outcomes import BatchOutcome
from spikeward.rules.records import Batch, BatchKey, Decision
from spikeward.rules.rulebook import Rulebook


@dataclass(frozen=True, slots=True)
class Solved:
    """A batch as it was assembled, the rules it stands under, and what came out."""

    batch: Batch
    rules: Rulebook
    outcome: BatchOutcome


@dataclass(slots=True)
class Solving:
    """Holdings under the present rules, and under those of batches that closed earlier.

    ``decisions`` gives the decisions in force for an output folder of a watched folder.
    """

    present: Holdings
    closings: Closings
    decisions: Callable[[str, str], tuple[Decision, ...]]
    earlier: dict[str, Holdings] = field(default_factory=dict)
    _last: dict[str, dict[BatchKey, Earlier]] = field(default_factory=dict)
    _in_force: dict[str, Memory] = field(default_factory=dict)

    def every(self) -> set[BatchKey]:
        """All batches that any rules in use know of."""
        return set(self._under_earlier_rules()) | set(self.present.batch_keys())

    def _under_earlier_rules(self) -> Iterable[BatchKey]:
        return (
            key
            for digest, holdings in self.earlier.items()
            for key in holdings.batch_keys()
            if key in self.closings.closed and self.closings.closed[key].rules_digest == digest
        )

    def solve(self, keys: Iterable[BatchKey]) -> list[Solved]:
        """Evaluate some batches, each under its own rules; the answer is in the order of their keys."""
        assembled = [(holdings.rules, batch) for holdings, batch in self._assemble(sorted(set(keys)))]
        by_rules: dict[str, list[tuple[Rulebook, Batch]]] = defaultdict(list)
        for rules, batch in assembled:
            by_rules[rules.digest].append((rules, batch))
        solved = []
        for group in by_rules.values():
            rules = group[0][0]
            last = self._last.setdefault(rules.digest, {})
            outcomes = {outcome.key: outcome for outcome in evaluate([batch for _, batch in group], rules, last)}
            solved += [Solved(batch, rules, outcomes[batch.key]) for _, batch in group]
            last.update((batch.key, Earlier(batch, outcomes[batch.key])) for _, batch in group)
        return sorted(solved, key=lambda one: one.batch.key)

    def _assemble(self, keys: list[BatchKey]) -> Iterable[tuple[Holdings, Batch]]:
        left = set(keys)
        for digest, holdings in self.earlier.items():
            mine = {
                key for key in left if key in self.closings.closed and self.closings.closed[key].rules_digest == digest
            }
            for batch in self._batches(holdings, mine):
                if batch.closed:
                    left.discard(batch.key)
                    yield holdings, batch
        for batch in self._batches(self.present, left):
            yield self.present, batch

    def _batches(self, holdings: Holdings, keys: set[BatchKey]) -> Iterable[Batch]:
        states = {key: State(bench=holdings.bench(key), decisions=self.decisions(key.root, key.folder)) for key in keys}
        memory = self._in_force.setdefault(holdings.rules.digest, {})
        for batch in in_force(holdings.readings(keys), holdings.rules, states, memory):
            closed = self.closings.covers(batch.key, batch.members)
            yield replace(batch, closed=closed, lapsed=self.closings.lapses_of(batch))
