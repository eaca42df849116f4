"""One known interferent at two sensors: the H-point standard addition.

At two sensors at which the interferent answers equally the lines y1 = a1 + b1 x and y2 = a2 + b2 x cross at (-C_H,
A_H): C_H is the content of the analyte and A_H the signal of the interferent (F. Bosch-Reig and P. Campins-Falco,
Analyst 113 (1988) 1011). The interferent drops out of the difference y1 - y2, which is a line by itself: C_H is its
intercept over its slope. That the interferent answers equally is known beforehand; the vessels cannot show it.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from spikeward.rules.solve.line import DUST, Fit, fit_lines
from spikeward.rules.solve.planes import roots_of
from spikeward.rules.solve.verdict import EXACT_FIT, ONE_ADDITION, OUT_OF_RANGE, unreadable
from spikeward.rules.uncertainty.fieller import g_value, half_widths, t_quantile

Rows = Sequence[tuple[float, float, float, float]]

_LOST = (
    "the slopes at {} and {} do not differ beyond the scatter of the points, so where their lines cross is not known "
    "and the interval of the content has no end: choose two sensors at which the analyte answers more differently"
)


@dataclass(frozen=True, slots=True)
class HPoint:
    """The point in which two lines cross. Without a content ``no_number`` says why.

    ``content``, its ``standard_uncertainty`` and ``half_widths`` (lower and upper, Fieller's interval) are in the unit
    in which the content was added; ``interferent_signal`` and ``interferent_uncertainty`` in signal. Where an
    uncertainty is None ``no_uncertainty`` or ``interferent_no_uncertainty`` says why. ``degrees_of_freedom`` is
    vessels - 2 and belongs to both.

    ``lines`` are the lines at the two sensors, ``difference`` that of the first less the second; weights are
    (V0 / V)². ``g`` is t² u² of the slope of the difference over its square. ``background_effects`` is the change of
    the content per unit by which the background of the first and of the second sensor rises.
    """

    degrees_of_freedom: int = 0
    no_number: str = ""
    no_uncertainty: str = ""
    content: float | None = None
    standard_uncertainty: float | None = None
    half_widths: tuple[float, float] | None = None
    interferent_signal: float | None = None
    interferent_uncertainty: float | None = None
    interferent_no_uncertainty: str = ""
    g: float | None = None
    lines: tuple[Fit, Fit] | None = None
    difference: Fit | None = None
    background_effects: tuple[float, float] | None = None


def solve_h_point(
    additions: Sequence[float],
    signals: tuple[Sequence[float], Sequence[float]],
    dilutions: Sequence[float],
    sensors: tuple[str, str],
    coverage: float,
) -> HPoint:
    """Solve one series read at two sensors.

    Parameters
    ----------
    additions : content added per aliquot, Cs v / V0, per vessel
    signals : volume-corrected signals (S - B) V / V0 of the first and of the second sensor, per vessel
    dilutions : V / V0 of the vessels; the noise of signals is taken as constant, so weights are (V0 / V)²
    sensors : names, for sentences
    coverage : of the interval, such as 0.95

    Returns
    -------
    with a content, or with the sentence why there is none

    Notes
    -----
    The sensors are read in the same vessels and scatter together. Residuals of y1 - y2 hold that, whatever their
    correlation: u(C_H) and Fieller's interval are those of one straight line. For A_H the same holds of
    z = (b1 y2 - b2 y1) / (b1 - b2), which the analyte leaves unchanged: u(A_H) is that of the line through z at
    x = -C_H (delta method).
    """
    rows = sorted(zip(additions, *signals, dilutions, strict=True))  # their order must not reach the last digit
    bare = HPoint(degrees_of_freedom=max(len(rows) - 2, 0))
    refused = _unusable(rows)
    if refused:
        return replace(bare, no_number=refused)
    fits = _fits(rows, [(y1, y2, y1 - y2) for _, y1, y2, _ in rows])
    drawn = replace(bare, lines=(fits[0], fits[1]), difference=fits[2], g=_g(fits[2], bare, coverage))
    refused = _parallel(fits[2], drawn.g, _dust(rows), sensors)
    if refused:
        return replace(drawn, no_number=refused)
    solved = _crossing(drawn, fits, _interferent(rows, fits[0].slope, fits[1].slope), _dust(rows))
    return solved if _within_range(solved) else replace(drawn, no_number=OUT_OF_RANGE)


def _unusable(rows: Rows) -> str:
    """Why no lines can be drawn through the vessels, or an empty text."""
    if len(rows) < 2:
        usable = "only one vessel" if rows else "no vessel"
        return f"{usable} can be used: a standard addition needs at least two levels"
    refused = unreadable([value for row in rows for value in row])
    if refused:
        return refused
    if not all(weight > 0.0 for weight in _weights(rows)):
        return OUT_OF_RANGE
    if all(row[0] == 0.0 for row in rows):
        return "no vessel received an addition: without one the response is not known"
    return ""


def _weights(rows: Rows) -> list[float]:
    return [root * root for root in roots_of([row[3] for row in rows])]


def _fits(rows: Rows, signals: Sequence[Sequence[float]]) -> list[Fit]:
    """The line of every column of ``signals`` against what was added."""
    count = len(signals[0])
    x, w, shift = (
        np.array([[float(value)] * count for value in column])
        for column in ([row[0] for row in rows], _weights(rows), [row[3] for row in rows])
    )
    fits = fit_lines(x, np.array(signals, dtype=np.float64), w, shift)
    return [fits.of(column) for column in range(count)]


def _dust(rows: Rows) -> float:
    """What is rounding only in a difference of signals, which may be far smaller than they are."""
    return DUST * max(abs(signal) for _, y1, y2, _ in rows for signal in (y1, y2))


def _g(difference: Fit, bare: HPoint, coverage: float) -> float | None:
    if bare.degrees_of_freedom == 0:
        return None
    return g_value(t_quantile(bare.degrees_of_freedom, coverage), difference.slope, difference.slope_uncertainty)


def _parallel(difference: Fit, g: float | None, dust: float, sensors: tuple[str, str]) -> str:
    """Why the lines do not cross, or an empty text."""
    if difference.one_x:
        return "all vessels received the same addition: a standard addition needs at least two levels"
    if abs(difference.slope) * difference.spread <= dust * math.sqrt(difference.weight):
        return (
            f"the signals at {sensors[0]} and {sensors[1]} rise alike with the additions, so their lines do not cross: "
            "choose two sensors at which the interferent answers equally and the analyte does not"
        )
    if difference.slope == 0.0 or not math.isfinite(difference.slope):
        return OUT_OF_RANGE
    return "" if g is None or g < 1.0 else _LOST.format(*sensors)


def _interferent(rows: Rows, first: float, second: float) -> Fit:
    """The line through what the analyte leaves unchanged; its intercept is the signal of the interferent."""
    # slopes over the larger of them, so that no product leaves the range
    larger = max(abs(first), abs(second))
    b1, b2 = first / larger, second / larger
    return _fits(rows, [((b1 * y2 - b2 * y1) / (b1 - b2),) for _, y1, y2, _ in rows])[0]


def _crossing(drawn: HPoint, fits: Sequence[Fit], interferent: Fit, dust: float) -> HPoint:
    """The point, and how well it is known."""
    first, second, difference = fits
    known = replace(
        drawn,
        content=difference.content,
        interferent_signal=interferent.intercept,
        background_effects=(difference.background_effect, -difference.background_effect),
    )
    if drawn.g is None:
        return replace(known, no_uncertainty=ONE_ADDITION, interferent_no_uncertainty=ONE_ADDITION)
    # rounding of signals reaches the interferent's line as the slopes are to their difference
    if interferent.residual_sd <= dust * (abs(first.slope) + abs(second.slope)) / abs(difference.slope):
        known = replace(known, interferent_no_uncertainty=EXACT_FIT)
    else:
        away = (difference.content + difference.x_mean) / difference.spread
        reach = math.sqrt(1.0 / difference.weight + away * away)
        known = replace(known, interferent_uncertainty=interferent.residual_sd * reach)
    if difference.residual_sd <= dust:
        return replace(known, no_uncertainty=EXACT_FIT)
    halves = half_widths(difference.content, difference.x_mean, difference.spread, difference.weight, drawn.g)
    return replace(known, standard_uncertainty=difference.fit_uncertainty, half_widths=halves)


def _within_range(solved: HPoint) -> bool:
    numbers = (
        solved.content, solved.standard_uncertainty, *(solved.half_widths or ()), solved.interferent_signal,
        solved.interferent_uncertainty, *(solved.background_effects or ()),
    )  # fmt: skip
    return all(number is None or math.isfinite(number) for number in numbers)
