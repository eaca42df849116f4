"""An invented bench: series, batches and rules built from a few numbers, for tests of checks and verdicts."""

from __future__ import annotations

import sys
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from decimal import Decimal
from functools import cache
from importlib.resources import files
from types import ModuleType
from typing import Any

import pytest
import yaml

from spikeward.rules.checks.registry import REGISTRY
from spikeward.rules.checks.subject import Context, Subject
from spikeward.rules.outcomes import BatchOutcome, Check, Outcome
from spikeward.rules.prepared import PreparedLine, PreparedVessel
from spikeward.rules.quantities import Quantity
from spikeward.rules.records import Batch, BatchKey, Decision, Members, Reading, SeriesKey
from spikeward.rules.rulebook import (
    Addition,
    BlankRule,
    Limits,
    Preparation,
    Rulebook,
    SampleRule,
    SeriesRule,
    Standard,
)
from spikeward.rules.solve.job import Job
from spikeward.rules.solve.lines import solve_lines


@cache
def _pack() -> dict[str, Limits]:
    text = (files("spikeward.rules.packs") / "general.yaml").read_text(encoding="utf-8")
    found: dict[str, Limits] = {}
    for name, limits in yaml.safe_load(text).items():
        values = {
            limit: tuple(entry["value"]) if isinstance(entry["value"], list) else entry["value"]
            for limit, entry in limits.items()
        }
        found[name] = Limits(values, {limit: entry["source"] for limit, entry in limits.items()})
    return found


def general_pack() -> dict[str, Limits]:
    return dict(_pack())


def quantity(value: str, unit: str) -> Quantity:
    return Quantity(Decimal(value), unit)


def rulebook(**changes: Any) -> Rulebook:
    """Cadmium by additions of 10 mg/L to aliquots of 10 mL in 25 mL: x is 0, 0.25, 0.5 and 0.75 mg/L."""
    flasks = Preparation(
        applies={}, design="flasks", aliquot={"": quantity("10", "mL")}, final={"": quantity("25", "mL")},
        additions=(Addition("Mix", {str(n): quantity(f"{0.25 * n:g}", "mL") for n in range(4)}, "total"),),
        sample=SampleRule(mass=quantity("0.5", "g"), digest=quantity("50", "mL")), report_in="mg/kg",
    )  # fmt: skip
    contents = {"Cd": quantity("10", "mg/L"), "Pb": quantity("10", "mg/L")}
    standard = Standard("Mix", contents, expires="2031-03-31")
    book = Rulebook(
        station="bench", language="en", state="", watches=(), layouts={}, bench=None, names=(), series=SeriesRule(),
        standards={"Mix": standard}, preparations=(flasks,), blanks=BlankRule(), brackets={}, references={}, tops={},
        checks=general_pack(), coverage=0.95, decisions="", digest="rules-digest",
    )  # fmt: skip
    return replace(book, **changes)


NOISE = (0.0004, -0.0007, 0.0005, -0.0002)
"""Signals scatter so much about a top of about 0.4, level by level: a good series."""


@dataclass
class Night:
    """Collects readings in the order in which they are measured, one a minute, into one batch."""

    rules: Rulebook = field(default_factory=rulebook)
    readings: list[Reading] = field(default_factory=list)
    timed: bool = True
    key: BatchKey = BatchKey("root", "inbox", "MD12")

    def read(self, role: str, sample: str, level: str, signal: float | None, **changes: Any) -> Reading:
        order = len(self.readings)
        reading = Reading(
            series=SeriesKey(self.key.root, self.key.folder, self.key.batch, role, sample), level=level, vessel="",
            injection="", reading="", solution=f"MD12_{role}_{sample}_{level or order}", analyte="Cd", line="",
            unit="A", signal=signal, text=f"{signal}", qualifier="", readings=1, sd=None,
            measured_at=f"2030-05-01T{order // 60:02d}:{order % 60:02d}:00Z" if self.timed else "", processed_at="",
            order=None, values=(), already=(), path="inbox/run.csv", row=order + 2, digest=f"digest-{order}-{signal}",
        )  # fmt: skip
        reading = replace(reading, **changes)
        self.readings.append(reading)
        return reading

    def series(
        self,
        sample: str = "07",
        role: str = "sample",
        content: float = 0.3,
        levels: Sequence[int] = (0, 1, 2, 3),
        slope: float = 1.0,
        background: float = 0.0,
        shifts: Mapping[int, float] | None = None,
        **changes: Any,
    ) -> Night:
        """A series of a test solution of ``content`` mg/L; ``shifts`` adds to the signals of some levels."""
        for level in levels:
            signal = slope * 0.4 * (content + 0.25 * level) + NOISE[level] + background + (shifts or {}).get(level, 0.0)
            self.read(role, sample, str(level), signal, **changes)
        return self

    def batch(
        self,
        closed: bool = False,
        lapsed: Sequence[str] = (),
        decisions: Sequence[Decision] = (),
        telling: Mapping[str, Mapping[str, tuple[str, ...]]] | None = None,
    ) -> Batch:
        """The batch so far; ``lapsed`` names samples, ``telling`` gives conflicts, notes or warnings by sample."""
        grouped: dict[SeriesKey, list[Reading]] = {}
        for reading in self.readings:
            grouped.setdefault(reading.series, []).append(reading)
        members = {
            key: Members(key, tuple(found), **(telling or {}).get(key.sample, {})) for key, found in grouped.items()
        }
        over = frozenset(key for key in grouped if key.sample in lapsed)
        return Batch(self.key, members, decisions=tuple(decisions), closed=closed, lapsed=over)


def line_of(x: Sequence[float], y: Sequence[float], **changes: Any) -> PreparedLine:
    """A prepared line whose points are just (x, y): aliquot and final volume are 1 mL."""
    key = SeriesKey("root", "inbox", "MD12", changes.pop("role", "sample"), "07")
    vessels = tuple(
        PreparedVessel(
            level=str(n), vessel="", aliquot=1.0, addition=0.0, final=1.0, added=added,
            readings=(Night().read(key.role, key.sample, str(n), signal),),
        )  # fmt: skip
        for n, (added, signal) in enumerate(zip(x, y, strict=True))
    )
    line = PreparedLine(key, "Cd", "", "flasks", "mg/L", "A", vessels, None, "Mix", "2031-03-31")
    return replace(line, **changes)


def subject_of(line: PreparedLine, rules: Rulebook | None = None, closed: bool = False) -> Subject:
    book = rules or rulebook()
    (solved,) = solve_lines([Job(line)], 0.95)
    return Subject(solved, Context(Batch(BatchKey("root", "inbox", "MD12"), {}, closed=closed), book))


def check_of(name: str, subject: Subject, **limits: Any) -> Check:
    """One check by name, under the general pack with some limits changed."""
    asked = general_pack().get(name, Limits({}, {}))
    return REGISTRY[name].function(subject, replace(asked, values={**asked.values, **limits}))


def outcome_of(found: Sequence[BatchOutcome], sample: str = "07") -> Outcome:
    return next(outcome for batch in found for outcome in batch.outcomes if outcome.key.sample == sample)


def named(checks: Sequence[Check], name: str) -> Check:
    (check,) = [check for check in checks if check.name == name]
    return check


@pytest.fixture
def bench() -> ModuleType:
    """This module under one name: test modules do not import each other."""
    return sys.modules[__name__]
