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


_UNSOLVED = (
    "the calculation broke on this batch ({}: {}), which is a defect of this program: nothing of it is published until "
    "its files or the program change; other batches go on. Keep its files and report it"
)


@dataclass(slots=True)
class Solving:
    """Holdings under the present rules, and under those of batches that closed earlier.

    ``decisions`` gives the decisions in force for an output folder of a watched folder.
    """

    present: Holdings
    closings: Closings
    decisions: Callable[[str, str], tuple[Decision, ...]]
    earlier: dict[str, Holdings] = field(default_factory=dict)
    unsolved: dict[BatchKey, str] = field(default_factory=dict)  # on which the calculation broke, with a sentence
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
            outcomes = self._evaluated([batch for _, batch in group], rules, last)
            good = [batch for _, batch in group if batch.key in outcomes]
            solved += [Solved(batch, rules, outcomes[batch.key]) for batch in good]
            last.update((batch.key, Earlier(batch, outcomes[batch.key])) for batch in good)
        return sorted(solved, key=lambda one: one.batch.key)

    def _evaluated(
        self, batches: list[Batch], rules: Rulebook, last: dict[BatchKey, Earlier]
    ) -> dict[BatchKey, BatchOutcome]:
        """The outcomes by batch; a batch on which the calculation breaks stands alone and leaves the others be."""
        for batch in batches:
            self.unsolved.pop(batch.key, None)
        try:
            return {outcome.key: outcome for outcome in evaluate(batches, rules, last)}
        except Exception as error:
            if len(batches) == 1:
                self.unsolved[batches[0].key] = _UNSOLVED.format(type(error).__name__, error)
                return {}
        found: dict[BatchKey, BatchOutcome] = {}
        for batch in batches:
            found |= self._evaluated([batch], rules, last)
        return found

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
