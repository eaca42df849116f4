"""The digest of a published file: what two trees that hold the same results must agree about."""

from __future__ import annotations

import hashlib

HISTORY_STARTS = "<!-- history -->"
HISTORY_ENDS = "<!-- /history -->"
SUMMARY_ENDING = ".summary.html"


def content_digest(name: str, content: bytes) -> str:
    """Hex SHA-256 of a published file; a summary page counts without its history section.

    Escaped text cannot hold the marks of the section, so nothing else of a summary is left out.
    """
    if name.endswith(SUMMARY_ENDING):
        before, start, rest = content.partition(HISTORY_STARTS.encode())
        content = before + start + rest.partition(HISTORY_ENDS.encode())[2]
    return hashlib.sha256(content).hexdigest()
