"""What solving one line says: the fit, the content, and why there is no number where there is none."""

from __future__ import annotations

from dataclasses import dataclass

from spikeward.rules.outcomes import Estimate, Parameter, Point
from spikeward.rules.prepared import PreparedLine
from spikeward.rules.records import Reading
from spikeward.rules.rulebook import Noise
from spikeward.rules.uncertainty.interval import Component


@dataclass(frozen=True, slots=True)
class Background:
    """A constant signal of the detector, to be taken off every reading before any volume correction.

    ``mean`` is over vessels, each vessel being the mean of its readings; ``standard_uncertainty`` is that of the mean
    and None for one vessel. ``problem`` is a sentence: with it the background is not known and must not be used.
    ``note`` names readings that were left out.
    """

    mean: float
    standard_uncertainty: float | None
    degrees_of_freedom: int
    vessels: int
    readings: tuple[Reading, ...]
    unit: str
    note: str = ""
    problem: str = ""


@dataclass(frozen=True, slots=True)
class Reagent:
    """The amount that reagents bring into every vessel, in the line's content unit times its aliquot's.

    ``standard_uncertainty`` is None where it is not known; ``problem`` is a sentence with which it must not be used.
    """

    amount: float
    standard_uncertainty: float | None
    degrees_of_freedom: float
    note: str = ""
    problem: str = ""
    background_effect: float = 0.0  # change of the amount per unit of the background that was off the reagent blanks


@dataclass(frozen=True, slots=True)
class Scatter:
    """What the uncertainty of a line is made of.

    ``own``: its residuals. ``pooled``: ``relative``, the scatter over the largest fitted signal, with
    ``degrees_of_freedom``. ``declared``: ``noise``. ``words`` say it for a report; ``problem`` is a sentence with which
    there is no number.
    """

    kind: str = "own"
    noise: Noise | None = None
    relative: float = 0.0
    degrees_of_freedom: float = 0.0
    words: str = "its own scatter"
    problem: str = ""


OWN = Scatter()


@dataclass(frozen=True, slots=True)
class Solved:
    """One line after the fit. Without a number ``no_number`` says why, and ``content`` and ``in_sample`` are None.

    A straight line is fitted with the weights of its points; ``correlation``, ``x_mean`` and ``sxx`` are weighted so,
    and ``residual_sd`` is that of a vessel of weight 1, as a signal: in signal, at y = signal. ``slope`` is in signal
    per content, ``intercept`` and ``residual_sd`` in signal, ``x_mean`` in content, ``sxx`` in content squared,
    ``covariance`` (of intercept and slope) in signal squared per content. They stay where the line could be fitted even
    if it gives no number. ``g`` is t² u(slope)² / slope² at the coverage asked for. ``relative_scatter`` is the
    residual scatter over the largest fitted signal. ``parameters`` tell of other models. ``fit_half_widths`` are the
    lower and upper half of the interval of the fit alone, in content of the test solution, ``fit_uncertainty`` its
    standard uncertainty; ``background_effect`` is the change of the content per unit of background signal,
    ``reagent_effect`` per unit of reagent amount; ``other_backgrounds`` are those of lines that were solved together
    with this one, each with the change of the content per unit, and ``drift`` is what the scatter of brackets brings
    into the content of the test solution where its drift was corrected (``drifted``). ``ratio``: signals are ratios to
    an internal standard. ``degrees_of_freedom`` are those that the points leave, ``scatter_degrees_of_freedom`` those
    of the scatter, infinite where it was declared; ``chi_squared`` is the sum of squared residuals over declared noise.
    ``effective_degrees_of_freedom`` belong to ``in_sample``, or to ``content`` where that is None. ``points`` stand in
    the order of the vessels; an excluded vessel without a measured signal has none. ``background`` is what was
    subtracted; ``blank`` is in the unit of ``in_sample``, the mean of ``blanks`` process blanks.
    """

    prepared: PreparedLine
    points: tuple[Point, ...]
    slope: float | None = None
    slope_uncertainty: float | None = None
    intercept: float | None = None
    intercept_uncertainty: float | None = None
    covariance: float | None = None
    residual_sd: float | None = None
    correlation: float | None = None
    degrees_of_freedom: int = 0
    g: float | None = None
    x_mean: float | None = None
    sxx: float | None = None
    content: Estimate | None = None
    in_sample: Estimate | None = None
    no_number: str = ""
    fit_uncertainty: float | None = None
    fit_half_widths: tuple[float, float] | None = None
    background_effect: float | None = None
    effective_degrees_of_freedom: float = 0
    background: Background | None = None
    blank: float | None = None
    blanks: int = 0
    blank_note: str = ""
    preparation: str = ""
    notes: tuple[str, ...] = ()
    scatter: Scatter = OWN
    scatter_degrees_of_freedom: float = 0
    relative_scatter: float | None = None
    chi_squared: float | None = None
    reagent: Reagent | None = None
    reagent_effect: float | None = None
    other_backgrounds: tuple[tuple[Background, float], ...] = ()
    drift: tuple[Component, ...] = ()
    drifted: bool = False
    ratio: bool = False
    parameters: tuple[Parameter, ...] = ()
    corrected: tuple[str, ...] = ()
    not_drifted: str = ""  # why the drift was not corrected although the rules ask for it

    @property
    def net_by_export(self) -> bool:
        """Whether the export says that it took the blank off its signals."""
        return any("blank" in r.already for v in self.prepared.vessels if not v.excluded for r in v.readings)

    @property
    def subtracted(self) -> bool:
        """Whether anything was taken off: a background here or in the export, or a reagent or process blank."""
        return (
            self.net_by_export
            or self.background is not None
            or self.blank is not None
            or self.reagent is not None
        )
