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
    """A spiking standard: the content of each analyte that one delivery adds; ``density`` links its mass and volume."""

    name: str
    contents: Mapping[str, Quantity]
    lot: str = ""
    expires: str = ""  # ISO date; compared with the acquisition time
    density: Quantity | None = None


@dataclass(frozen=True, slots=True)
class SampleRule:
    """The way from the test solution back to the sample. A text ``bench``, ``name`` or ``column`` names the source."""

    mass: Quantity | str | None = None
    volume: Quantity | str | None = None  # of liquid sample taken into the digest
    digest: Quantity | str | None = None  # volume to which it was made up
    dry_matter: Quantity | str | None = None
    moisture: Quantity | str | None = None  # instead of dry matter
    dilution: tuple[Quantity | str, ...] = ()  # factors in sequence, 1 for undiluted
    density: Quantity | None = None  # of the sample as it came: a content per volume becomes one per mass


@dataclass(frozen=True, slots=True)
class Addition:
    """What one standard adds, by level; without a standard, the amount of analyte itself.

    ``deliveries``: ``each`` is added on top of the earlier ones, ``total`` is all that a level holds.
    """

    standard: str
    levels: Mapping[str, Quantity]  # volume or mass of standard; amount of analyte where ``standard`` is empty
    deliveries: str


@dataclass(frozen=True, slots=True)
class InternalStandard:
    """``names`` maps an analyte to its internal standard; ``entered`` says where it came in.

    ``entered``: in_sample, per_vessel or at_constant_content. ``amount`` (any quantity) went into each vessel.
    """

    names: Mapping[str, str]
    entered: str
    amount: Quantity | None = None


@dataclass(frozen=True, slots=True)
class Electrode:
    """What is known of a logarithmic response: slope in mV per decade, its standard uncertainty, temperature, charge.

    Without ``slope`` it is fitted; with an ``uncertainty`` it is prior knowledge; else it counts as known.
    """

    charge: int
    temperature: float = 25.0  # degrees Celsius
    slope: float | None = None
    uncertainty: float | None = None


@dataclass(frozen=True, slots=True)
class Spike:
    """What a spiked sample received: a volume or mass of a standard, before or after its digestion."""

    standard: str
    delivered: Quantity | str  # or where it comes from: bench, name, column
    added: str  # before digestion, after digestion


@dataclass(frozen=True, slots=True)
class Preparation:
    """How the vessels of a series were made. ``applies`` maps batch, sample, role, analyte to whole-match patterns.

    ``spiked``: the standard went into the ``test solution``, or into the ``sample`` before its preparation; every level
    is then a digest of its own and its aliquot is the sample's mass.
    """

    applies: Mapping[str, str]
    design: str  # single, flasks, successive, weighed
    aliquot: Mapping[str, Quantity]  # level -> volume or mass; key "" for every level
    final: Mapping[str, Quantity]  # the same
    additions: tuple[Addition, ...]
    response: str = "linear"  # linear, log, curve
    spiked: str = "test solution"
    level_0: str = "as the others"  # or undiluted
    diluent: Quantity | None = None
    density: Quantity | None = None  # of the test solution
    internal_standard: InternalStandard | None = None
    electrode: Electrode | None = None
    sample: SampleRule | None = None
    recovery: tuple[float, float] | None = None  # factor and its standard uncertainty, where results are corrected
    spike: Spike | None = None
    report_in: str = ""  # UCUM code; empty: the standard's unit
    line: int = 0

    @property
    def levels(self) -> frozenset[str]:
        """Every level for which an addition is declared."""
        return frozenset(level for addition in self.additions for level in addition.levels)


@dataclass(frozen=True, slots=True)
class BlankRule:
    """What is subtracted.

    ``background`` from every signal; ``process`` as amount through its own addition series; ``reagent`` as the same
    amount in every vessel: through series of role reagent_blank, or the declared ``reagent_amounts`` by analyte (amount
    and standard uncertainty in its unit).
    """

    background: bool = False
    process: bool = False
    reagent: bool = False
    reagent_amounts: Mapping[str, Known] = field(default_factory=dict)


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
class Noise:
    """A declared standard deviation of one vessel's signal: s² = floor² + (relative x fitted signal)²."""

    floor: float
    relative: float
    unit: str


@dataclass(frozen=True, slots=True)
class Precision:
    """Where the scatter comes from: ``own`` residuals, ``pooled`` over the batch, or ``declared`` noise.

    ``noise`` is by analyte or line. ``weights``: ``signal``, every signal is equally noisy and its point counts by how
    far it was scaled up; ``equal``, every point counts the same.
    """

    comes_from: str = "own"
    noise: Mapping[str, Noise] = field(default_factory=dict)
    weights: str = "signal"


@dataclass(frozen=True, slots=True)
class LinesRule:
    """Which line or isotope of an analyte is reported, and how near the others must be: a share, or by their fits."""

    report: str
    agree: float | None = None


@dataclass(frozen=True, slots=True)
class Overlap:
    """Analytes whose signals overlap: read ``at`` several lines, solved together.

    ``method``: generalised, every analyte of ``analytes`` was added on its own; or h_point, two lines at which
    ``interferent`` answers equally and one analyte.
    """

    method: str
    analytes: tuple[str, ...]
    at: tuple[str, ...]  # analyte and line as they are told, such as "As 228.8" or "Cd 228.8"
    interferent: str = ""


@dataclass(frozen=True, slots=True)
class Censored:
    """What a level below detection is taken for: refuse the series, leave out its vessels, or a substitute signal."""

    use: str = "refuse"  # refuse, leave out, substitute
    signals: Mapping[str, Top] = field(default_factory=dict)  # by analyte or line


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
    drift: str = "check"  # or correct
    precision: Precision = Precision()
    lines: Mapping[str, LinesRule] = field(default_factory=dict)  # by analyte
    overlap: tuple[Overlap, ...] = ()
    calibration: Mapping[str, Mapping[str, Quantity]] = field(default_factory=dict)  # solution -> analyte -> content
    censored: Censored = Censored()
    molar_masses: Mapping[str, Quantity] = field(default_factory=dict)  # by analyte
