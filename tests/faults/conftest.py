"""Stations of these tests lie in memory where the machine has such a folder: their thousands of syncs cost nothing there."""

from __future__ import annotations

import os
import shutil
import tempfile
from collections.abc import Iterator
from pathlib import Path

import pytest


@pytest.fixture
def tmp_path() -> Iterator[Path]:
    top = Path(tempfile.mkdtemp(prefix="spikeward-", dir="/dev/shm" if os.access("/dev/shm", os.W_OK) else None))
    yield top
    shutil.rmtree(top, ignore_errors=True)
