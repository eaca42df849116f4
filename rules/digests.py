"""The digest of everything that a series' outcome depends on: equal inputs give equal digests, and only they."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Sequence

from spikeward.rules.outcomes import CALCULATION_VERSION, Check
from spikeward.rules.records import Batch, Decision, Members, Reading
from spikeward.rules.rulebook import Rulebook


def inputs_digest(
    members: Members, batch: Batch, context: Sequence[Reading], told: Sequence[Check], lent: Sequence[str],
    waiting_for: Sequence[str], is_settled: bool, rules: Rulebook,
) -> str:
    """SHA-256, as hex, over one canonical text.

    Parameters
    ----------
    context : readings of the batch that entered: backgrounds, process blanks, brackets
    told : checks whose finding comes from the rest of the batch
    lent : what else comes from there, such as a pooled scatter
    waiting_for : what is still expected
    is_settled : whether the verdict stands
    """
    key = members.key
    used = {text for reading in (*members.readings, *context) for text in (reading.solution, reading.path)}
    parts = [
        ["calculation", CALCULATION_VERSION, rules.digest],
        ["series", key.root, key.folder, key.batch, key.role, key.sample],
        ["readings", [_reading(reading) for reading in members.readings]],
        ["told", members.conflicts, members.warnings],
        ["bench", sorted(
            [entry.level, entry.values, entry.path, entry.row, entry.digest]
            for entry in batch.bench
            if entry.sample == key.sample and entry.batch in ("", key.batch)
        )],
        ["decisions", sorted(_decision(decision) for decision in batch.decisions if decision.target in used)],
        ["context", [_reading(reading) for reading in context]],
        ["batch says", [[check.name, check.verdict, check.sentence, check.remedy] for check in told]],
        ["lent", list(lent)],
        ["state", waiting_for, is_settled, key in batch.lapsed],
    ]  # fmt: skip
    text = json.dumps(parts, ensure_ascii=False, separators=(",", ":"))
    return hashlib.sha256(text.encode("utf-8", "surrogatepass")).hexdigest()


def _reading(reading: Reading) -> list[object]:
    return [
        reading.series.role, reading.series.sample, reading.level, reading.vessel, reading.injection, reading.reading,
        reading.solution, reading.analyte, reading.line, reading.unit, reading.signal, reading.text, reading.qualifier,
        reading.readings, reading.sd, reading.measured_at, reading.processed_at, reading.order, reading.values,
        reading.already, reading.path, reading.row, reading.digest, reading.block,
    ]  # fmt: skip


def _decision(decision: Decision) -> list[str]:
    return [decision.kind, decision.target, decision.by, decision.on, decision.why]
