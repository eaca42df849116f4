"""Every text that a person or a program reads, as it stands: a difference is reviewed like code.

``SPIKEWARD_GOLDEN=write python -m pytest tests/daemon/test_pages_golden.py`` writes the files of ``golden/`` anew.
"""

from __future__ import annotations

import os
from pathlib import Path

import pytest

from spikeward.daemon.pages.board import render_board
from spikeward.daemon.pages.csv_file import render_csv
from spikeward.daemon.pages.flag import render_flag, render_unread
from spikeward.daemon.pages.result_json import render_result
from spikeward.daemon.pages.summary import render_summary
from tests.daemon.page_cases import (
    BATCH_OUTCOME,
    HISTORY,
    HOSTILE,
    LINKS,
    NOTICES,
    OUTCOMES,
    STATION,
    TURNED,
    digest_of,
)

GOLDEN = Path(__file__).parent / "golden"
SHOWN = ("hostile", "failed", "waiting", "extreme")


def _rendered() -> dict[str, bytes]:
    made = {
        "MD12.board.html": render_board(BATCH_OUTCOME, NOTICES, LINKS, STATION),
        "folder.board.html": render_board(None, NOTICES, {}, STATION, "inbox/2031"),
        "MD12.results.csv": render_csv(BATCH_OUTCOME),
        "night.csv.unread.flag": render_unread(f"aas/{TURNED}/night.csv", f"row 14: {HOSTILE}\nverdict: pass"),
    }
    for name in SHOWN:
        outcome = OUTCOMES[name]
        made[f"{name}.summary.html"] = render_summary(outcome, HISTORY, STATION)
        made[f"{name}.result.json"] = render_result(outcome)
        made[f"{name}.flag"] = render_flag(outcome, digest_of(name))
    return made


RENDERED = _rendered()


@pytest.mark.parametrize("name", sorted(RENDERED))
def test_as_it_stands(name: str):
    if os.environ.get("SPIKEWARD_GOLDEN") == "write":
        GOLDEN.mkdir(exist_ok=True)
        (GOLDEN / name).write_bytes(RENDERED[name])
    assert RENDERED[name] == (GOLDEN / name).read_bytes()


def test_no_golden_file_is_left_over():
    assert {path.name for path in GOLDEN.iterdir()} == set(RENDERED)


def test_the_same_records_give_the_same_bytes():
    assert _rendered() == RENDERED
