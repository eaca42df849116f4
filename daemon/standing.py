"""What stands besides results and a person should see: names, unread files, duplicates, what is held back."""

from __future__ import annotations

import os
from collections.abc import Iterable, Mapping

from spikeward.daemon.closings import Closings
from spikeward.daemon.decisions import DecisionBook
from spikeward.daemon.holdings import Holdings
from spikeward.daemon.names import batch_words
from spikeward.daemon.output import Output
from spikeward.daemon.pages.facts import Notice
from spikeward.daemon.records import Records
from spikeward.daemon.solving import Solved
from spikeward.rules.outcomes import CALCULATION_VERSION
from spikeward.rules.records import BatchKey
from spikeward.rules.rulebook import Rulebook

Placed = tuple[str, str, Notice]  # root, output folder, notice

_NO_SERIES = "no series has the sample '{}', while others wait for the bench file; compare how the names are written"
_KEPT = "somebody had edited or replaced this file; the edit was kept aside under this name"


def standing_notices(
    present: Holdings,
    solved: Iterable[Solved],
    unsolved: Mapping[BatchKey, str],
    decisions: DecisionBook,
    records: Records,
    output: Output,
) -> list[Placed]:
    """Everything that stands about files, batches and outputs."""
    every = list(solved)
    found: list[Placed] = decisions.notices(present) + list(records.refusals.standing.values())
    for place, named in present.named.items():
        folder = present.output_folder(place)
        found += [(place[0], folder, Notice("unnamed", place[1], sentence)) for sentence in named.unnamed]
    for place, sentence in present.unread().items():
        found.append((place[0], present.output_folder(place), Notice("unread", place[1], sentence)))
    for one in every:
        key = one.batch.key
        notes = sorted({note for members in one.batch.members.values() for note in members.notes})
        found += [(key.root, key.folder, Notice("duplicate", key.batch, note)) for note in notes]
    found += [(key.root, key.folder, notice) for key, notice in output.held.items()]
    found += [(key.root, key.folder, Notice("not solved", key.batch, told)) for key, told in sorted(unsolved.items())]
    return found + _idle_bench(present, every)


def _idle_bench(present: Holdings, solved: Iterable[Solved]) -> list[Placed]:
    lacking = {
        one.batch.key: {key.sample for key in one.batch.members}
        for one in solved
        if any("from the bench file" in what for outcome in one.outcome.outcomes for what in outcome.waiting_for)
    }
    return [
        (key.root, key.folder, Notice("bench", f"{entry.path} row {entry.row}", _NO_SERIES.format(entry.sample)))
        for key, entry in present.idle_bench(lacking)
    ]


def kept_aside(path: str) -> Notice:
    """That an output which somebody had edited was kept under another name."""
    return Notice("kept aside", os.path.basename(path), _KEPT)


def closed_otherwise(closings: Closings, rules: Rulebook, rule_file: str) -> list[str]:
    """How to solve closed batches again that stand under other rules or another calculation than the present ones."""
    other = sorted(
        batch_words(key)
        for key, closing in closings.closed.items()
        if closing.rules_digest != rules.digest or closing.calculation_version != CALCULATION_VERSION
    )
    if not other:
        return []
    told = ", ".join(other[:5]) + (f" and {len(other) - 5} more" if len(other) > 5 else "")
    remedy = f"spikeward sweep {rule_file} --again"
    return [f"closed under earlier rules: {told}; to solve again under the present ones: {remedy}"]
