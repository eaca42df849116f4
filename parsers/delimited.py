"""Delimited text: the table is found by its headings; everything stays text but what is declared to be a number."""

from __future__ import annotations

from spikeward.parsers.grid import Style, grid_of
from spikeward.parsers.tables import table_of, wanted_headings
from spikeward.parsers.text import decode, lines_of
from spikeward.rules.records import Layout, Table


class Delimited:
    """The reader of CSV and its kin."""

    def read(self, content: bytes, layout: Layout) -> Table:
        """Read one export. A file without its declared end marker is unfinished: no entries, ``whole`` is False.

        Raises
        ------
        Unreadable : with row and column where there is one
        """
        text, encoding = decode(content, layout.encoding)
        notes = (f"read as {encoding}",)
        whole: bool | None = None
        if layout.end_marker:
            text, whole = _without_end(text, layout.end_marker)
            if not whole:
                return Table((), False, (*notes, f"the last line does not begin with '{layout.end_marker}' yet"))
        style = Style(layout.delimiter, layout.quote_char, layout.comment_prefix)
        return table_of(grid_of(text, style, wanted_headings(layout)), layout, whole, notes)


def _without_end(text: str, marker: str) -> tuple[str, bool]:
    """The text before the end marker, and whether it stands at the beginning of the last line with text."""
    lines = lines_of(text)
    while lines and not lines[-1].strip():
        lines.pop()
    if not lines or not lines[-1].lstrip().startswith(marker):
        return text, False
    return "\n".join(lines[:-1]) + "\n", True


READER = Delimited()
