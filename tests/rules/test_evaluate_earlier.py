"""An evaluation that takes over what nothing touched says exactly what a fresh one says."""

from __future__ import annotations

from types import ModuleType

from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from spikeward.rules.evaluate import Earlier, evaluate
from spikeward.rules.rulebook import BlankRule, Known, LinesRule, Precision, SeriesRule

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
    _take_steps(full, rules, steps)


def _take_steps(full, rules, steps):
    """Readings come and go; the last step closes the batch."""
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


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    steps=st.lists(st.lists(st.integers(0, 52), max_size=12), min_size=2, max_size=5),
    drift=st.sampled_from(["check", "correct"]),
    precision=st.sampled_from(["own", "pooled"]),
    closing=st.booleans(),
)
def test_every_step_of_a_night_in_which_series_lend_each_other(
    bench: ModuleType, steps: list[list[int]], drift: str, precision: str, closing: bool
):
    """Duplicates, spiked samples, another dilution, two lines, standards, reagents, brackets, pooled precision."""
    rules = bench.rulebook(
        blanks=BlankRule(reagent=True),
        brackets={"Cd": Known(bench.quantity("0.3", "mg/L"))},
        drift=drift,
        precision=Precision(precision),
        lines={"Cd": LinesRule("214.4", 0.1)},
        calibration={f"S{n}": {"Cd": bench.quantity(str(0.2 * n), "mg/L")} for n in range(4)},
        series=SeriesRule(closes_with=("reference",) if closing else ()),
    )
    full = bench.Night(rules)
    for role, sample in (("sample", "1"), ("duplicate", "1"), ("spiked_sample", "1"), ("sample", "2")):
        full.series(sample, role, line="214.4")
    full.read("bracket", "", "", 0.30, solution="BR", line="214.4")
    full.series("1", line="226.5")
    full.series("2-D5", content=0.06, line="214.4", values=(("rerun_of", "2", "name"),))
    full.read("bracket", "", "", 0.29, solution="BR", line="214.4")
    full.series("RB", "reagent_blank", content=0.01, line="214.4")
    full.series("R", "reference", line="214.4")
    for n in range(4):
        full.read("calibration", f"S{n}", "", 0.08 * n + 0.001 * (n % 2), line="214.4")
    full.read("bracket", "", "", 0.28, solution="BR", line="214.4")
    full.series("3", content=0.5, line="214.4")
    full.series("4", content=0.4, line="214.4")
    for level in range(5):
        full.read("sample", "5", str(level), 0.1 + 0.1 * level, line="214.4")
    _take_steps(full, rules, steps)
