"""Stations lie in memory where the machine has such a folder: their thousands of syncs cost nothing there."""

from __future__ import annotations

import os
import shutil
import tempfile
from collections.abc import Iterator
from pathlib import Path

import pytest


def pytest_collection_modifyitems(config: pytest.Config, items: list[pytest.Item]) -> None:
    if "bench" not in config.getoption("-m"):
        for item in items:
            if item.get_closest_marker("bench") and item.path.is_relative_to(Path(__file__).parent):
                item.add_marker(pytest.mark.skip(reason="takes minutes: python -m pytest tests/faults -m bench"))


@pytest.fixture
def tmp_path() -> Iterator[Path]:
    top = Path(tempfile.mkdtemp(prefix="spikeward-", dir="/dev/shm" if os.access("/dev/shm", os.W_OK) else None))
    yield top
    shutil.rmtree(top, ignore_errors=True)
