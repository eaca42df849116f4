"""What solving one line says: the fit, the content, and why there is no number where there is none."""

from __future__ import annotations

from dataclasses import dataclass

from spikeward.rules.outcomes import Estimate, Point
from spikeward.rules.prepared import PreparedLine
from spikeward.rules.records import Reading


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
class Solved:
    """One line after the fit. Without a number ``no_number`` says why, and ``content`` and ``in_sample`` are None.

    The line is fitted with weights (V0/V)², for noise that is constant in the signal; ``correlation``, ``x_mean`` and
    ``sxx`` are weighted so, and ``residual_sd`` is that of a vessel of weight 1: in signal, at V = V0.
    ``slope`` is in signal per content, ``intercept`` and ``residual_sd`` in signal, ``x_mean`` in content, ``sxx`` in
    content squared, ``covariance`` (of intercept and slope) in signal squared per content. They stay where the line
    could be fitted even if it gives no number. ``g`` is t² u(slope)² / slope² at the coverage asked for.
    ``fit_half_widths`` are the lower and upper half of the interval of the fit alone, in content of the test solution,
    ``fit_uncertainty`` its standard uncertainty; ``background_effect`` is the change of the content per unit of
    background signal. ``effective_degrees_of_freedom`` belong to ``in_sample``, or to ``content`` where that is None.
    ``points`` stand in the order of the vessels; an excluded vessel without a measured signal has none.
    ``background`` is what was subtracted; ``blank`` is in the unit of ``in_sample``, the mean
    of ``blanks`` process blanks.
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
    effective_degrees_of_freedom: int = 0
    background: Background | None = None
    blank: float | None = None
    blanks: int = 0
    blank_note: str = ""
    preparation: str = ""
    notes: tuple[str, ...] = ()

    @property
    def net_by_export(self) -> bool:
        """Whether the export says that it took the blank off its signals."""
        return any("blank" in r.already for v in self.prepared.vessels if not v.excluded for r in v.readings)

    @property
    def subtracted(self) -> bool:
        """Whether anything was taken off: a background here or in the export, or a process blank."""
        return self.net_by_export or self.background is not None or self.blank is not None
