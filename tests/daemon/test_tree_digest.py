"""The digest over a published tree: blind for history and boards, for nothing else."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

from spikeward.daemon.tree_digest import tree_digest

FILES = {
    "MD1_07.result.json": b"{}",
    "MD1_07.summary.html": b"<p>1.25</p><!-- history --><li>03:00</li>\n<!-- /history --><p>end</p>",
    "MD1_07.pass.flag": b"verdict: pass\n",
    "MD1.results.csv": b"sample\n",
    "night/tray.csv.unread.flag": b"sentence: no\n",
}


def plant(root: Path, files: dict[str, bytes]) -> str:
    for path, data in files.items():
        (root / path).parent.mkdir(parents=True, exist_ok=True)
        (root / path).write_bytes(data)
    return tree_digest(str(root))


def test_the_order_in_which_files_appeared_does_not_matter(tmp_path: Path) -> None:
    backwards = dict(reversed(FILES.items()))
    assert plant(tmp_path / "a", FILES) == plant(tmp_path / "b", backwards)


@pytest.mark.parametrize(
    "change",
    [
        {"tray.csv": b"raw"},
        {"MD1.board.html": b"now 03:00"},
        {"MD1_07.result.json.kept-1": b"edit"},
        {".spikeward-tmp-MD1_07.result.json": b"half"},
        {".spikeward/journal.sqlite3": b"x"},
        {".spikeward-station": b"pid: 1"},
        {"MD1_07.summary.html": b"<p>1.25</p><!-- history --><li>04:00</li><li>twice</li><!-- /history --><p>end</p>"},
    ],
)
def test_what_may_differ(tmp_path: Path, change: dict[str, bytes]) -> None:
    assert plant(tmp_path / "a", FILES) == plant(tmp_path / "b", FILES | change)


@pytest.mark.parametrize(
    "change",
    [
        {"MD1_07.result.json": b"{ }"},
        {"MD1_07.summary.html": b"<p>1.26</p><!-- history --><!-- /history --><p>end</p>"},
        {"MD1_07.summary.html": b"<p>1.25</p><!-- history --><!-- /history --><p>end!</p>"},
        {"MD1_07.fail.flag": b"verdict: pass\n"},
        {"MD1.results.csv": b"sample,\n"},
        {"night/tray.csv.unread.flag": b"sentence: yes\n"},
        {"other/MD1_07.result.json": b"{}"},
        {"HOLD.flag": b""},
    ],
)
def test_what_may_not_differ(tmp_path: Path, change: dict[str, bytes]) -> None:
    assert plant(tmp_path / "a", FILES) != plant(tmp_path / "b", FILES | change)


def test_bytes_do_not_wander_between_files(tmp_path: Path) -> None:
    one = {"a.result.json": b"b.result.json", "b.result.json": b""}
    other = {"a.result.json": b"", "b.result.json": b"b.result.json"}
    assert plant(tmp_path / "a", one) != plant(tmp_path / "b", other)


def test_from_the_command_line(tmp_path: Path) -> None:
    digest = plant(tmp_path, FILES)
    command = [sys.executable, "-m", "spikeward.daemon.tree_digest"]
    answer = subprocess.run([*command, str(tmp_path)], capture_output=True, text=True, check=True)
    assert answer.stdout == digest + "\n"
    for wrong in ([], [str(tmp_path / "nowhere")], ["a", "b"]):
        refused = subprocess.run([*command, *wrong], capture_output=True, text=True, check=False)
        assert refused.returncode == 2
        assert "Traceback" not in refused.stderr
