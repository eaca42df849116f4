"""An evaluation that takes over what nothing touched says exactly what a fresh one says."""

from __future__ import annotations

from types import ModuleType

from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from spikeward.rules.evaluate import Earlier, evaluate
from spikeward.rules.rulebook import BlankRule, SeriesRule

MEMBERS = [("sample", "1"), ("sample", "2"), ("duplicate", "3"), ("reference", "R"), ("process_blank", "1")]


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    steps=st.lists(st.lists(st.integers(0, 27), max_size=6), min_size=2, max_size=5),
    blanks=st.booleans(),
    closing=st.booleans(),
)
def test_every_step_of_a_night(bench: ModuleType, steps: list[list[int]], blanks: bool, closing: bool):
    rules = bench.rulebook(
        blanks=BlankRule(background=blanks),
        series=SeriesRule(closes_with=("bracket",) if closing else ()),
    )
    full = bench.Night(rules)
    for role, sample in MEMBERS:
        full.series(sample, role)
    full.read("background", "1", "", 0.002)
    full.read("background", "2", "", 0.003)
    full.read("bracket", "1", "", 0.3)
    for level in range(5):
        full.read("sample", "4", str(level), 0.1 + 0.1 * level)
    every = list(full.readings)
    present: set[int] = set()
    earlier: dict = {}
    for number, step in enumerate(steps):
        present ^= set(step)
        full.readings = [every[index] for index in sorted(present) if index < len(every)]
        batch = full.batch(closed=number == len(steps) - 1)
        fresh = evaluate([batch], rules)
        assert evaluate([batch], rules, earlier) == fresh
        earlier = {batch.key: Earlier(batch, fresh[0])}
