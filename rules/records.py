"""The records that pass between the floors, from a cell of an export to the members of a batch.

Every record is frozen. Signals are in the instrument's own unit (``unit``, as written, spelling folded); times are
ISO 8601 text with a zone; paths are relative to the watched folder, with ``/`` between their parts.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

# What a signal cell can be besides a measured number.
MEASURED = ""
NOT_DETECTED = "not detected"
OVER_RANGE = "over range"
MISSING = "missing"  # an empty cell
FAULTY = "faulty"  # what a program writes instead of a number: '#####', '#N/A'

# Roles with levels are solved as addition series; the others are plain solutions of the batch.
SERIES_ROLES = ("sample", "duplicate", "spiked_sample", "check", "reference", "process_blank", "reagent_blank")
PLAIN_ROLES = ("background", "bracket", "calibration")
ROLES = SERIES_ROLES + PLAIN_ROLES


class Unreadable(Exception):
    """A file that cannot be read: one sentence for a person, with the place.

    Parameters
    ----------
    sentence : what is wrong and what to do, in words for an analyst
    row : line of the file, counted from 1, or None
    column : heading or number of the column, or None
    """

    def __init__(self, sentence: str, row: int | None = None, column: str | None = None) -> None:
        super().__init__(sentence)
        self.sentence = sentence
        self.row = row
        self.column = column

    def __str__(self) -> str:
        place = [f"row {self.row}"] if self.row is not None else []
        place += [f"column {self.column}"] if self.column is not None else []
        return f"{', '.join(place)}: {self.sentence}" if place else self.sentence


@dataclass(frozen=True, slots=True)
class WideColumn:
    """What a column of signals holds where each analyte has one, and the headings of its own scatter (empty: none)."""

    analyte: str
    line: str = ""
    signal_sd: str = ""
    signal_rsd: str = ""
    readings: str = ""


@dataclass(frozen=True, slots=True)
class Layout:
    """How one instrument writes its exports: a reader's options as the rule file declares them.

    Names follow the W3C vocabulary for tabular data (CSVW) where it has them. ``columns`` maps what a column means
    (solution, analyte, line, signal, signal_sd, signal_rsd, readings, reading, unit, measured_at, processed_at, order,
    or a quantity: mass, dry_matter, aliquot, addition, final, dilution, standard) to its heading. ``wide`` maps
    headings of signal columns to what they hold, where each analyte has a column of its own.
    """

    name: str
    format: str = "delimited"
    files: tuple[str, ...] = ("*.csv",)
    encoding: str = "auto"
    delimiter: str = "auto"
    quote_char: str = '"'
    comment_prefix: str = ""
    decimal: str = "auto"  # auto, point or comma
    header_contains: tuple[str, ...] = ()
    columns: Mapping[str, str] = field(default_factory=dict)
    wide: Mapping[str, WideColumn] = field(default_factory=dict)
    unit: str = ""  # of signals, where the file does not say it
    unit_row: bool = False  # the row under the headings holds units
    ends_at: tuple[str, ...] = ()  # the table ends at a row whose first cell is one of these
    time_zone: str = ""
    date_patterns: tuple[str, ...] = ()  # strptime patterns, tried in order; none: ISO 8601
    already: tuple[str, ...] = ()  # of blank, internal_standard, drift
    not_detected: tuple[str, ...] = ()
    over_range: tuple[str, ...] = ()
    end_marker: str = ""  # a file is whole when its last line starts with this; otherwise unfinished


@dataclass(frozen=True, slots=True)
class Entry:
    """One signal cell of an export, before its solution's name is understood.

    ``values`` holds further declared columns as (meaning, quantity text such as ``0.5012 g``); a ``reading`` among them
    is the number of a repeated row. ``digest`` is a hex SHA-256 over the cell texts of the row and the heading of the
    signal's column.
    """

    row: int
    solution: str
    analyte: str
    line: str
    unit: str
    signal: float | None
    text: str
    qualifier: str = MEASURED
    readings: int = 1  # how many single readings the signal is a mean of
    sd: float | None = None  # standard deviation of those single readings, in the signal's unit
    measured_at: str = ""
    processed_at: str = ""
    order: int | None = None
    values: tuple[tuple[str, str], ...] = ()
    digest: str = ""


@dataclass(frozen=True, slots=True)
class Table:
    """What a reader found in one file. ``whole`` is None where the content cannot tell whether the file is complete."""

    entries: tuple[Entry, ...]
    whole: bool | None = None
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class BenchEntry:
    """One row of a bench file: what the bench knows about a sample or one of its levels and the instrument does not."""

    folder: str
    batch: str
    sample: str
    level: str  # empty: of the whole sample
    values: tuple[tuple[str, str], ...]  # (meaning, quantity text)
    path: str
    row: int
    digest: str


@dataclass(frozen=True, slots=True, order=True)
class BatchKey:
    """The unit of purity. ``folder`` is the output folder, relative to the watched folder's output root."""

    root: str
    folder: str
    batch: str


@dataclass(frozen=True, slots=True, order=True)
class SeriesKey:
    """The key of a series, and of the plain solutions of a batch (with their own role)."""

    root: str
    folder: str
    batch: str
    role: str
    sample: str

    @property
    def batch_key(self) -> BatchKey:
        """The batch that the series belongs to."""
        return BatchKey(self.root, self.folder, self.batch)


@dataclass(frozen=True, slots=True)
class Reading:
    """One signal with a name that was understood.

    ``values`` are quantities from the name and from columns: (meaning, quantity text, source) with source ``name`` or
    ``column``. ``file_digest`` serves only to notice equal files under different names.
    """

    series: SeriesKey
    level: str  # empty for plain solutions
    vessel: str
    injection: str
    reading: str
    solution: str
    analyte: str
    line: str
    unit: str
    signal: float | None
    text: str
    qualifier: str
    readings: int
    sd: float | None
    measured_at: str
    processed_at: str
    order: int | None
    values: tuple[tuple[str, str, str], ...]
    already: tuple[str, ...]
    path: str
    row: int
    digest: str
    file_digest: str = ""
    block: str = ""  # the run in which it was read, where one series is measured in several

    @property
    def when(self) -> tuple[str, int]:
        """Sort key in acquisition order: time in UTC, then the declared order; ("", -1) where neither is known."""
        return (self.measured_at, -1 if self.order is None else self.order)


@dataclass(frozen=True, slots=True)
class Decision:
    """What a person decided in the decisions file: ``exclude`` a solution, or ``prefer`` one file over others."""

    kind: str  # exclude or prefer
    target: str  # a solution's name, or a path
    by: str
    on: str
    why: str
    line: int

    @property
    def words(self) -> str:
        """The decision as a report quotes it."""
        return f"{self.by}, {self.on}: {self.why}"


@dataclass(frozen=True, slots=True)
class Members:
    """The readings of one series that are in force, in canonical order, and what happened on the way.

    ``conflicts`` are sentences that fail the series; ``notes`` name duplicates and superseded readings.
    """

    key: SeriesKey
    readings: tuple[Reading, ...]
    conflicts: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()
    warnings: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Batch:
    """Everything that results of one batch may depend on, besides the rules."""

    key: BatchKey
    members: Mapping[SeriesKey, Members]
    bench: tuple[BenchEntry, ...] = ()
    decisions: tuple[Decision, ...] = ()
    closed: bool = False
    lapsed: frozenset[SeriesKey] = frozenset()
