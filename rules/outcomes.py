"""What an evaluation says: results with unit, uncertainty and verdict, and every check with its sentence."""

from __future__ import annotations

from dataclasses import dataclass

from spikeward.rules.records import BatchKey, Reading, SeriesKey

PASS, WARN, WAITING, FAIL = "pass", "warn", "waiting", "fail"
NOT_EVALUATED = "not evaluated"
SEVERITY = {NOT_EVALUATED: 0, PASS: 0, WARN: 1, WAITING: 2, FAIL: 3}

CALCULATION_VERSION = "2"
"""Raised by every change that can alter a digit of a result; the changelog says which."""


@dataclass(frozen=True, slots=True)
class Check:
    """One check of one series or batch.

    ``observed`` is a number in ``unit`` or None; ``limit`` is text such as ``at least 3``; ``source`` says where the
    limit comes from; ``remedy`` is what to do, empty for a pass.
    """

    name: str
    verdict: str  # pass, warn, fail, not evaluated
    sentence: str
    observed: float | None = None
    unit: str = ""
    limit: str = ""
    source: str = ""
    remedy: str = ""


@dataclass(frozen=True, slots=True)
class Estimate:
    """A content with its uncertainty. Without uncertainty ``reason`` says why; the interval is at ``coverage``."""

    content: float
    unit: str
    standard_uncertainty: float | None = None
    expanded_uncertainty: float | None = None
    coverage_factor: float | None = None
    interval: tuple[float, float] | None = None
    coverage: float = 0.95
    reason: str = ""
    effective_degrees_of_freedom: int | None = None  # of the coverage factor, by Welch and Satterthwaite; None: no end


@dataclass(frozen=True, slots=True)
class Point:
    """One vessel on the line: x and y after the transform, in the units of content and of signal."""

    level: str
    vessel: str
    x: float
    y: float
    fitted: float | None
    signal: float  # mean of the vessel's readings, background subtracted, before the volume correction
    readings: int
    sd: float | None  # of single readings
    matrix_share: float  # aliquot over final volume
    excluded: str = ""  # who, when, why; an excluded point is shown but not fitted
    factor: float = 1.0  # y over signal
    weight: float = 1.0  # in the fit, the largest being 1
    block: str = ""  # the run in which it was read


@dataclass(frozen=True, slots=True)
class Parameter:
    """One fitted or derived number of a model, such as the slope of an electrode.

    Without a standard uncertainty ``reason`` says why.
    """

    name: str
    value: float
    unit: str
    standard_uncertainty: float | None = None
    reason: str = "its uncertainty is not calculated; that of the content holds it"


@dataclass(frozen=True, slots=True)
class Beside:
    """What another way of calculation gives for the same test solution, for comparison only."""

    name: str
    estimate: Estimate
    sentence: str


@dataclass(frozen=True, slots=True)
class Result:
    """One analyte (on one line) of one series.

    ``content`` is in the test solution as it was pipetted; ``in_sample`` after the preparation factor, or None where
    the rule file declares no way back to the sample. Without a number, ``no_number`` says why.
    """

    analyte: str
    line: str
    verdict: str
    content: Estimate | None
    in_sample: Estimate | None
    no_number: str
    signal_unit: str
    content_unit: str
    basis: str  # such as "dry matter", or empty
    slope: float | None = None
    slope_uncertainty: float | None = None
    intercept: float | None = None
    intercept_uncertainty: float | None = None
    residual_sd: float | None = None
    correlation: float | None = None
    degrees_of_freedom: int = 0
    points: tuple[Point, ...] = ()
    checks: tuple[Check, ...] = ()
    background: float | None = None  # signal subtracted from every reading, in ``background_unit``
    blank: float | None = None  # subtracted process blank, in the unit of the sample's result
    preparation: str = ""  # the way back to the sample in words
    sentence: str = ""
    reported_line: bool = True  # False: another line of this analyte is the one that is reported
    response: str = "linear"  # linear, log, curve, overlap
    precision: str = ""  # where the scatter comes from, in words
    parameters: tuple[Parameter, ...] = ()  # of what is no straight line, and further ones of a line
    beside: tuple[Beside, ...] = ()  # what other ways of calculation give, never instead
    corrected: tuple[str, ...] = ()  # what was corrected and what not, a sentence each
    cannot_tell: tuple[str, ...] = ()  # what this design does not show, a sentence each
    background_unit: str = ""

    @property
    def reported(self) -> Estimate | None:
        """What a reader wants: the content in the sample where it is known, else in the test solution."""
        return self.in_sample or self.content


@dataclass(frozen=True, slots=True)
class VesselReport:
    """One vessel as it was understood, with every reading in force; each quantity with its own unit, mL or g."""

    level: str
    vessel: str
    aliquot: float | None
    addition: float | None  # total standard in the vessel
    final: float | None
    standard: str
    readings: tuple[Reading, ...]
    excluded: str = ""
    aliquot_unit: str = "mL"
    addition_unit: str = "mL"
    final_unit: str = "mL"
    block: str = ""


@dataclass(frozen=True, slots=True)
class Outcome:
    """All that is known about one series.

    ``verdict`` is what the flag says: waiting, pass, warn or fail. ``so_far`` is the verdict of the checks as they
    stand, equal to ``verdict`` once nothing that is expected can change it. ``waiting_for`` says what is missing.
    """

    key: SeriesKey
    verdict: str
    so_far: str
    final: bool
    waiting_for: tuple[str, ...]
    design: str
    sentence: str
    results: tuple[Result, ...]
    checks: tuple[Check, ...]
    vessels: tuple[VesselReport, ...]
    context: tuple[Reading, ...]  # backgrounds, brackets and other readings of the batch that the result depends on
    notes: tuple[str, ...]
    inputs_digest: str
    rules_digest: str
    calculation_version: str = CALCULATION_VERSION
    incomplete: bool = False  # members of its own are missing, and it has not lapsed


@dataclass(frozen=True, slots=True)
class BatchOutcome:
    """The outcomes of a batch in the order of their keys, and what holds for the batch as a whole.

    ``waiting_for`` is what the batch needs to close by itself; ``lacking`` the closing members among it.
    """

    key: BatchKey
    closed: bool
    waiting_for: tuple[str, ...]
    outcomes: tuple[Outcome, ...]
    checks: tuple[Check, ...]
    lacking: tuple[str, ...] = ()


def worst(verdicts: list[str]) -> str:
    """The most severe of several verdicts; a list without any that count is ``pass``."""
    ranked = sorted((v for v in verdicts if v != NOT_EVALUATED), key=SEVERITY.__getitem__)
    return ranked[-1] if ranked else PASS
