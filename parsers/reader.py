"""What every reader of a format is: a name, and a function from bytes to a table. Readers know no files, no clocks."""

from __future__ import annotations

from typing import Protocol

from spikeward.rules.records import Layout, Table


class Reader(Protocol):
    """One format. A laboratory adds its own as an object under the entry-point group ``spikeward.readers``."""

    def read(self, content: bytes, layout: Layout) -> Table:
        """Read one file.

        Raises
        ------
        Unreadable : the file cannot be read as the layout says; nothing else is expected to leave a reader
        """
        ...
