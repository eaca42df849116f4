"""`explain`: what was read from a file or for a series, what it became, and why. It looks only; it writes nothing."""

from __future__ import annotations

import os
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from spikeward.daemon.disk import RealDisk
from spikeward.daemon.holdings import Place
from spikeward.daemon.ledger import RuleTexts, whole_events
from spikeward.daemon.names import VERDICTS, series_stem, shown
from spikeward.daemon.pipeline import Pipeline
from spikeward.daemon.records import Records
from spikeward.daemon.settle import Settling
from spikeward.daemon.solving import Solved
from spikeward.daemon.station import Places, read_rule_file, usable, wall_clock
from spikeward.daemon.survey import survey
from spikeward.daemon.trouble import Trouble
from spikeward.daemon.workers import Readers
from spikeward.rules.outcomes import Check, Outcome
from spikeward.rules.records import Reading
from spikeward.rules.words import line_words


@dataclass(slots=True)
class LedgerCopy:
    """The ledger's whole lines as they stand; what would be added is kept in memory only."""

    path: Path
    added: list[Mapping[str, Any]] = field(default_factory=list)

    def read(self) -> list[dict[str, Any]]:
        """All events, oldest first."""
        if not self.path.exists():
            return []
        return whole_events(self.path.read_bytes(), str(self.path))[0]

    def append(self, *events: Mapping[str, Any]) -> None:
        """Events that a daemon would record."""
        self.added += events


def explain(config: str, subject: str) -> int:
    """Print what is known of a file or a series; the exit code.

    Raises
    ------
    Trouble : the rule file cannot be used, or nothing goes by that name
    """
    rule_file = read_rule_file(config)
    rules = usable(rule_file)
    places = Places(rule_file.path.absolute().parent)
    state = places.state(rules)
    disk = RealDisk()
    pipeline = Pipeline(
        places, rules, disk, LedgerCopy(state / "ledger.jsonl"), RuleTexts(disk, str(state / "rules")),
        Records(disk, None), wall_clock,
    )  # fmt: skip
    with Readers(0) as readers:
        for folder, root in pipeline.intake.roots.items():
            root.settling = Settling(0.0)  # files are taken as they stand
            listing = survey(disk, places.inputs(root.watch))
            listing.leftovers.clear()  # another daemon may be writing them
            jobs = pipeline.see(folder, listing, 0.0)
            for reply in readers.read_many(jobs):
                pipeline.intake.take(reply)
    solved = pipeline.solve(pipeline.solving.every())
    place = _place_of(subject, pipeline)
    lines = list(_file(place, pipeline, solved) if place else _series(subject, pipeline, solved))
    for line in lines:
        print(line)
    return 0


def _place_of(subject: str, pipeline: Pipeline) -> Place | None:
    """The file that is meant: a path as the shell gives it, below the rule file, or below a watched folder."""
    tried = [Path(subject).absolute(), pipeline.places.base / subject]
    for folder, root in pipeline.intake.roots.items():
        base = Path(pipeline.places.inputs(root.watch)).absolute()
        for path in [*tried, base / subject]:
            if path.is_file() and path.is_relative_to(base):
                return folder, path.relative_to(base).as_posix()
    return None


def _file(place: Place, pipeline: Pipeline, solved: list[Solved]) -> Iterator[str]:
    root, path = place
    yield f"file {shown(path)} in {shown(root)}"
    holdings = pipeline.solving.present
    content = holdings.contents.get(place)
    if content is None:
        yield "  no reader takes it: its name matches no 'files' pattern of readers or bench, or it is our own"
        return
    if content.sentence:
        yield f"  it cannot be read: {content.sentence}"
        return
    for entry in content.bench:
        told = ", ".join(f"{meaning} {text}" for meaning, text in entry.values)
        yield f"  row {entry.row}: bench entry of batch {entry.batch or '(any)'}, sample {entry.sample}: {told}"
    if content.table is not None and content.layout is not None:
        yield f"  read by '{content.layout.name}': {len(content.table.entries)} readings"
        yield from (f"  {note}" for note in content.table.notes)
    named = holdings.named.get(place)
    if named is None:
        return
    force = {
        (reading.path, reading.row, reading.analyte, reading.line)
        for one in solved
        for members in one.batch.members.values()
        for reading in members.readings
    }
    for reading in named.readings:
        counts = (reading.path, reading.row, reading.analyte, reading.line) in force
        yield f"  row {reading.row}: {_reading(reading)}{'' if counts else ' (another reading is in force)'}"
    yield from (f"  {sentence}" for sentence in named.unnamed)


def _reading(reading: Reading) -> str:
    key = reading.series
    where = [f"role {key.role}", f"batch {key.batch or '(folder)'}", f"sample {key.sample}"] if key.sample else [
        f"role {key.role}", f"batch {key.batch or '(folder)'}",
    ]  # fmt: skip
    for word in ("level", "vessel", "injection", "reading"):
        if value := getattr(reading, word):
            where.append(f"{word} {value}")
    signal = reading.qualifier or f"{reading.text} {reading.unit}".strip()
    return f"'{shown(reading.solution)}' is {', '.join(where)}: {line_words(reading.analyte, reading.line)} {signal}"


def _series(subject: str, pipeline: Pipeline, solved: list[Solved]) -> Iterator[str]:
    wanted = os.path.basename(subject)
    for ending in (".result.json", ".summary.html", *(f".{verdict}.flag" for verdict in VERDICTS)):
        wanted = wanted.removesuffix(ending)
    found = [
        (one, outcome)
        for one in solved
        for outcome in one.outcome.outcomes
        if wanted in (series_stem(outcome.key), outcome.key.sample)
    ]
    if not found:
        known = sorted({series_stem(outcome.key) for one in solved for outcome in one.outcome.outcomes})
        told = ", ".join(known[:12]) + (" …" if len(known) > 12 else "")
        raise Trouble(f"no file and no series goes by '{shown(subject)}'; the series are: {told or '(none yet)'}")
    for one, outcome in found:
        yield from _outcome(one, outcome)


def _outcome(one: Solved, outcome: Outcome) -> Iterator[str]:
    yield f"series {series_stem(outcome.key)} ({outcome.design or 'no design'}): {outcome.sentence}"
    yield from (f"  waits for {what}" for what in outcome.waiting_for)
    for vessel in outcome.vessels:
        volumes = ", ".join(
            (
                f"aliquot {_size(vessel.aliquot, vessel.aliquot_unit)}",
                f"addition {_size(vessel.addition, vessel.addition_unit)}",
                f"final {_size(vessel.final, vessel.final_unit)}",
            )
        )
        excluded = f"; excluded: {vessel.excluded}" if vessel.excluded else ""
        run = f" in run {vessel.block}" if vessel.block else ""
        yield f"  level {vessel.level}{vessel.vessel}{run}: {volumes}{excluded}"
        for reading in vessel.readings:
            signal = reading.qualifier or f"{reading.text} {reading.unit}".strip()
            yield f"    {shown(reading.path)} row {reading.row}: {line_words(reading.analyte, reading.line)} {signal}"
    yield from (f"  {_check(check)}" for check in outcome.checks)
    for result in outcome.results:
        yield f"  {line_words(result.analyte, result.line)}: {result.verdict}: {result.sentence}"
        yield from (f"    {_check(check)}" for check in result.checks)
    yield from (f"  {note}" for note in outcome.notes)
    yield from (f"  {note}" for note in one.batch.members[outcome.key].notes)


def _size(size: float | None, unit: str) -> str:
    return "unknown" if size is None else f"{size:.6g} {unit}"


def _check(check: Check) -> str:
    return f"{check.verdict}: {check.name.replace('_', ' ')}: {check.sentence}"
