"""What a rule file means once it has been read: the laboratory's own decisions, typed.

The rule file's text, its errors and its defaults belong to ``schema`` and to the daemon's loader; everything else reads
these records only.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from spikeward.rules.quantities import Quantity
from spikeward.rules.records import Layout


@dataclass(frozen=True, slots=True)
class Watch:
    """A watched folder. ``output`` is empty for *beside the data*, else the folder in which the tree is mirrored."""

    folder: str
    readers: tuple[str, ...]
    events: str = "auto"  # auto, native, poll
    settle: float = 2.0  # s
    output: str = ""
    spans_folders: bool = False  # one series may come from several sub-folders; needs ``output``


@dataclass(frozen=True, slots=True)
class BenchRule:
    """Bench files: ``key`` names the columns that identify a row (batch, sample, level)."""

    files: tuple[str, ...]
    key: Mapping[str, str]  # meaning (batch, sample, level) -> heading
    columns: Mapping[str, str]  # meaning (mass, dry_matter …) -> heading
    encoding: str = "auto"
    delimiter: str = "auto"
    decimal: str = "auto"


@dataclass(frozen=True, slots=True)
class NameRule:
    """One naming rule: the whole of ``source`` (solution, file or path) must match ``pattern``.

    ``units`` gives the unit of a group that is a quantity.
    """

    role: str
    source: str
    pattern: str
    units: Mapping[str, str] = field(default_factory=dict)
    line: int = 0  # in the rule file


@dataclass(frozen=True, slots=True)
class SeriesRule:
    """What a series needs. ``levels`` empty: the levels that its preparation declares."""

    levels: tuple[str, ...] = ()
    readings: int = 1  # per vessel, at least; an exported mean counts as its number of readings
    same_name: str = "refuse"  # or reading
    lapses_after: float = 5400.0  # s
    lapsed: str = "warn"  # verdict of a lapsed series whose missing members were not required: warn or fail
    closes_with: tuple[str, ...] = ()  # roles


@dataclass(frozen=True, slots=True)
class Standard:
    """A spiking standard: the content of each analyte that one delivery adds."""

    name: str
    contents: Mapping[str, Quantity]
    lot: str = ""
    expires: str = ""  # ISO date; compared with the acquisition time


@dataclass(frozen=True, slots=True)
class SampleRule:
    """The way from the test solution back to the sample. A text ``bench``, ``name`` or ``column`` names the source."""

    mass: Quantity | str | None = None
    volume: Quantity | str | None = None  # of liquid sample taken into the digest
    digest: Quantity | str | None = None  # volume to which it was made up
    dry_matter: Quantity | str | None = None
    dilution: Quantity | str | None = None  # a factor, 1 for undiluted


@dataclass(frozen=True, slots=True)
class Preparation:
    """How the vessels of a series were made. ``applies`` maps batch, sample, role, analyte to whole-match patterns."""

    applies: Mapping[str, str]
    design: str  # single, flasks, successive
    aliquot: Mapping[str, Quantity]  # level -> volume; key "" for every level
    final: Quantity | None
    additions: Mapping[str, Quantity]  # level -> delivered volume
    deliveries: str  # total: the level's whole addition; each: what was added at that level on top of the earlier ones
    standard: str
    level_0: str = "as the others"  # or undiluted
    diluent: Quantity | None = None
    sample: SampleRule | None = None
    report_in: str = ""  # UCUM code; empty: the standard's unit
    line: int = 0


@dataclass(frozen=True, slots=True)
class BlankRule:
    """What is subtracted: ``background`` from every signal, ``process`` as amount through its own addition series."""

    background: bool = False
    process: bool = False


@dataclass(frozen=True, slots=True)
class Known:
    """A content that is known beforehand, of a reference, a check sample or a bracket."""

    content: Quantity
    standard_uncertainty: float | None = None  # in the unit of ``content``


@dataclass(frozen=True, slots=True)
class Top:
    """The largest signal at which the response is still a straight line."""

    signal: float
    unit: str


@dataclass(frozen=True, slots=True)
class Limits:
    """Numbers of one check by their names in the rule file, and where each comes from."""

    values: Mapping[str, float | tuple[float, float] | None]
    sources: Mapping[str, str]


@dataclass(frozen=True, slots=True)
class Rulebook:
    """One rule file, complete. ``digest`` covers everything that can change a result, not watches or the state."""

    station: str
    language: str
    state: str
    watches: tuple[Watch, ...]
    layouts: Mapping[str, Layout]
    bench: BenchRule | None
    names: tuple[NameRule, ...]
    series: SeriesRule
    standards: Mapping[str, Standard]
    preparations: tuple[Preparation, ...]
    blanks: BlankRule
    brackets: Mapping[str, Known]  # analyte -> content of the bracketing solution
    references: Mapping[str, Mapping[str, Known]]  # sample -> analyte -> content, in the unit of the report
    tops: Mapping[str, Top]  # analyte or line -> top
    checks: Mapping[str, Limits]  # by name; a check that is absent is not asked for
    coverage: float
    decisions: str  # file name beside the data
    digest: str
