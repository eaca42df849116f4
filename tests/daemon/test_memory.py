"""What the journal remembers is taken only where it makes sense; anything else is read again."""

from __future__ import annotations

import sqlite3
from contextlib import closing
from pathlib import Path

import pytest

from spikeward.daemon.memory import recall, remember
from spikeward.daemon.opening import open_station
from spikeward.daemon.sweep import Pauses, sweep, two_looks
from spikeward.daemon.workers import Readers

RULES = r"""
watch: {folder: inbox, settle: 0 s}
readers: {readings: {files: "*.csv", decimal: point, columns: {solution: Solution, signal: Signal}, unit: A}}
names:
  - {role: sample, match: '(?P<batch>N\d+)_(?P<sample>\d+)_A(?P<level>\d+)'}
standards: {Cd-10: {analyte: Cd, content: 10 mg/L}}
preparations:
  design: flasks
  aliquot: 10 mL
  final: 25 mL
  additions: {levels: {0: 0 mL, 1: 0.25 mL, 2: 0.5 mL, 3: 0.75 mL}}
"""
EXPORT = "Solution,Signal\nN1_07_A0,0.1012\nN1_07_A1,0.2007\nN1_07_A2,0.3031\nN1_07_A3,0.4019\n"
PAUSES = Pauses(lambda: 0.0, lambda seconds: None)


@pytest.fixture
def config(tmp_path: Path) -> str:
    """A station whose journal remembers one file."""
    (tmp_path / "inbox").mkdir()
    (tmp_path / "inbox" / "run.csv").write_text(EXPORT)
    (tmp_path / "rules.yaml").write_text(RULES)
    config = str(tmp_path / "rules.yaml")
    with open_station(config) as opened, Readers(0) as readers:
        replies = readers.read_many(two_looks(opened.pipeline, PAUSES))
        opened.pipeline.take(replies)
        remember(opened.pipeline, opened.journal, replies)
    return config


def test_what_was_remembered_is_not_read_again(config: str) -> None:
    with open_station(config) as opened:
        recall(opened.pipeline, opened.journal)
        assert two_looks(opened.pipeline, PAUSES) == []


@pytest.mark.parametrize(
    "change",
    [
        "payload = '{\"x\":1'",
        "payload = '[null,[],[[1]]]'",
        "payload = replace(payload, '0.2007', '\"0.2007\"')",
        "kind = 'bench', payload = '[[1,2]]'",
        "kind = 'something else'",
    ],
)
def test_what_makes_no_sense_is_read_again(config: str, change: str, tmp_path: Path) -> None:
    with closing(sqlite3.connect(tmp_path / ".spikeward" / "journal.sqlite")) as db:
        assert db.execute(f"update files set {change}").rowcount == 1
        db.commit()
    with open_station(config) as opened, Readers(0) as readers:
        recall(opened.pipeline, opened.journal)
        (solved,) = sweep(opened.pipeline, readers, PAUSES)
        assert [outcome.verdict for outcome in solved.outcome.outcomes] == ["pass"]
