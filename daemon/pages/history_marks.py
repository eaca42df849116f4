"""Where a summary's history section begins and ends: the only part of a page that may differ between two trees."""

from __future__ import annotations

HISTORY_STARTS = "<!-- history -->"
HISTORY_ENDS = "<!-- /history -->"


def without_history(summary: bytes) -> bytes:
    """A summary page without its history section. Escaped text cannot hold the marks, so nothing else is left out."""
    before, start, rest = summary.partition(HISTORY_STARTS.encode())
    return before + rest.partition(HISTORY_ENDS.encode())[2] if start else summary
