"""Responses to the logarithm of the content, as of ion-selective electrodes: E = E0 + S log10(content in the vessel).

With the content fixed, E0 and S are a straight line, so ``separable`` solves it. The slope is fitted, known, or known
with an uncertainty; then it counts as one more observation.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from scipy.special import xlog1py, xlogy

from spikeward.rules.solve.line import DUST, Bools, Floats, Powers, in_portions, total
from spikeward.rules.solve.separable import (
    ABOVE_ZERO,
    Best,
    Interval,
    Look,
    deviation_of,
    interval,
    joined,
    lowest,
    picked,
    powers_of,
)

GAS_CONSTANT = 8.31446261815324
"""J/(mol K), exact (CODATA 2018)."""
FARADAY_CONSTANT = 96485.33212331001
"""C/mol, exact (CODATA 2018)."""
DECADE = math.log(10.0)


@dataclass(frozen=True, slots=True)
class LogFit:
    """One series of ``LogFits``: the same names as plain numbers."""

    vessels: float
    dof: float
    content: float
    fit_uncertainty: float
    low: float
    high: float
    slope: float
    slope_uncertainty: float
    standard_potential: float
    residual_sd: float
    exact: bool
    ambiguous: bool
    fitted: tuple[float, ...]
    steps: tuple[float, ...]


@dataclass(frozen=True, slots=True)
class LogFits:
    """Log responses, one entry per series; where something has no value it is not finite.

    ``content`` and its ends in the unit of x, ``slope`` in mV per decade, ``standard_potential`` in mV at a content of
    one unit. ``dof`` belongs to the uncertainties: infinite for declared noise, and zero where nothing tells the noise.
    ``low`` or ``high`` is infinite where the interval has no end on that side. ``residual_sd`` is in mV, of a vessel of
    weight 1, and not a number without a degree of freedom. ``exact``: residuals are rounding only. ``ambiguous``: two
    contents fit equally well, each with a slope of its own, and none is given. ``fitted``: E on the curve, (vessels,
    series). ``steps``: E of a vessel less that of the vessel before, (vessels - 1, series), in mV.
    """

    vessels: Floats
    dof: Floats
    content: Floats
    fit_uncertainty: Floats
    low: Floats
    high: Floats
    slope: Floats
    slope_uncertainty: Floats
    standard_potential: Floats
    residual_sd: Floats
    exact: Bools
    ambiguous: Bools
    fitted: Floats
    steps: Floats

    def of(self, series: int) -> LogFit:
        """The fit of one series, by its column."""
        return picked(self, LogFit, series)


@dataclass(frozen=True, slots=True)
class _Line:
    """The line of E over ln(content in the vessel) at one content, each row less its weighted mean.

    ``moved`` is how ln(content in the vessel) changes with the content, ``pulled`` the sum of its products with
    ``phi``, ``turn`` how much of it a slope could follow; ``hold`` is the part of the slope's weight that comes from
    what was known of it.
    """

    slope: Floats
    change: Floats
    phi_mean: Floats
    phi: Floats
    phi_squares: Floats
    moved_mean: Floats
    moved: Floats
    pulled: Floats
    turn: Floats
    hold: Floats
    residuals: Floats


@dataclass(frozen=True, slots=True)
class _Electrode:
    """Readings of all series, scaled: additions above the lowest one, ln of shares over the top one, E less its mean.

    ``slope`` is what is known of it, per unit of ln, zero where nothing is. ``grip`` is how hard it is held, the
    variance of E over that of the slope: zero where it is free, infinite where it is exact.
    """

    above: Floats
    top_share: Floats
    log_share: Floats
    e: Floats
    w: Floats
    weight: Floats
    slope: Floats
    grip: Floats

    def line(self, content: Floats) -> _Line:
        """The least-squares line, at contents before the shares, the lowest addition included."""
        phi = xlog1py(1.0, self.above / content) + self.log_share
        phi_mean = total(self.w * phi) / self.weight
        phi = phi - phi_mean
        moved = 1.0 / (content + self.above)
        moved_mean = total(self.w * moved) / self.weight
        moved = moved - moved_mean
        w_phi = self.w * phi
        phi_squares, pulled = total(w_phi * phi), total(w_phi * moved)
        held = phi_squares + self.grip
        left = self.e - self.slope * phi
        change = total(w_phi * left) / held
        return _Line(
            slope=self.slope + change,
            change=change,
            phi_mean=phi_mean,
            phi=phi,
            phi_squares=phi_squares,
            moved_mean=moved_mean,
            moved=moved,
            pulled=pulled,
            turn=pulled / held,
            hold=np.where(np.isinf(self.grip), 1.0, self.grip / held),
            residuals=left - change * phi,
        )

    def look(self, content: Floats) -> Look:
        """The profile; what is known of the slope counts as one more observation."""
        line = self.line(content)
        alone, alone_squares = self._alone(line)
        grip = np.where(np.isinf(self.grip), 0.0, self.grip)  # of a slope that can change at all
        return Look(
            squares=total(self.w * line.residuals * line.residuals) + grip * line.change * line.change,
            pull=line.slope * (total(self.w * line.residuals * alone) + line.hold * line.pulled * line.change),
            stiffness=line.slope * line.slope * alone_squares,
        )

    def _alone(self, line: _Line) -> tuple[Floats, Floats]:
        """What of ``moved`` no slope can follow, and the sum of its squares; holding the slope adds to it."""
        alone = line.moved - line.turn * line.phi
        return alone, total(self.w * alone * alone) + line.hold * line.pulled * line.turn

    def sound(self, content: Floats) -> Bools:
        """Whether E responds, and whether content and slope can be told apart, both beyond rounding."""
        line = self.line(content)
        responds = line.slope * line.slope * line.phi_squares > DUST * DUST
        moved = total(self.w * line.moved * line.moved) + self.weight * line.moved_mean * line.moved_mean
        phi = line.phi_squares + self.weight * line.phi_mean * line.phi_mean
        # what rounding leaves is in proportion to what the means were taken from
        apart = self._alone(line)[1] > DUST * DUST * (moved + line.turn * line.turn * phi)
        return responds & apart


def fit_log_response(
    x: Floats,
    share: Floats,
    e: Floats,
    w: Floats,
    slope: Floats,
    slope_uncertainty: Floats,
    noise: Floats,
    coverage: float,
) -> LogFits:
    """Fit one log response per column.

    Parameters
    ----------
    x : contents added, Cs v / V0, shape (vessels, series)
    share : of test solution in the vessel, V0 / V, buffer counted in V; same shape
    e : mean potential of each vessel, mV, same shape
    w : weight of a vessel that is fitted, in inverse proportion to the variance of its E, the largest 1; 0 for padding
    slope : what is known of it, mV per decade, signed by the ion's charge, shape (series,); not a number: it is fitted
    slope_uncertainty : standard uncertainty of it, mV per decade; zero: it is exact
    noise : standard deviation of E in a vessel of weight 1, mV, where it was declared; not a number: the residuals tell
    coverage : of the interval, such as 0.95

    Notes
    -----
    Degrees of freedom are vessels - 3, and vessels - 2 with an exact slope. A slope known with an uncertainty is one
    more observation; where no noise was declared its weight needs the residuals of the fit with a free slope, so from
    four vessels on; with fewer it is taken as exact, and no uncertainty follows. (Multiple known addition: Brand and
    Rechnitz, Anal. Chem. 42 (1970) 1172; observations of parameters: Bates and Watts, chapter 3.)
    """
    fits = []
    with np.errstate(all="ignore"):  # what overflows or has no value is recognised by its result
        for part in in_portions(*x.shape):
            added, shares, readings, weights = (rows[:, None, part] for rows in (x, share, e, w))
            nominal, u = slope[None, part] / DECADE, slope_uncertainty[None, part] / DECADE
            fits.append(_portion(added, shares, readings, weights, nominal, u, noise[None, part], coverage))
    return joined(fits)


def _portion(
    x: Floats, share: Floats, e: Floats, w: Floats, slope: Floats, slope_u: Floats, noise: Floats, coverage: float
) -> LogFits:
    used = w > 0.0
    bottom = np.where(used, x, np.inf).min(axis=0, initial=np.inf)
    above = np.where(used, x - bottom, 0.0)
    x_power, e_power = powers_of(above), powers_of(np.where(used, e, 0.0))
    one_x = ~(above.max(axis=0, initial=0.0) > DUST * np.where(used, np.abs(x), 0.0).max(axis=0, initial=0.0))
    weight, top_share = total(w), np.where(used, share, 0.0).max(axis=0, initial=0.0)
    scaled_e = np.where(used, np.ldexp(e, -e_power), 0.0)
    mean = total(w * scaled_e) / weight
    fitted = np.isnan(slope)
    free = _Electrode(
        above=np.where(one_x, np.nan, np.ldexp(above, -x_power)),
        top_share=top_share,
        log_share=np.where(used, xlogy(1.0, share / top_share), 0.0),
        e=scaled_e - mean,
        w=w,
        weight=weight,
        slope=np.zeros(slope.shape),
        grip=np.zeros(slope.shape),
    )
    n = total(np.where(used, 1.0, 0.0))
    declared = np.ldexp(noise, -e_power)
    # the slope's weight against the readings needs their noise; residuals about the slope itself would beg the question
    asked = ~fitted & (slope_u > 0.0) & np.isnan(noise)
    observed = np.where(asked, _free_deviation(free, n), np.nan) if asked.any() else np.full(n.shape, np.nan)
    electrode = replace(
        free,
        slope=np.where(fitted, 0.0, np.ldexp(slope, -e_power)),
        grip=_grip(fitted, np.ldexp(slope_u, -e_power), np.where(asked, observed, declared)),
    )
    found = _solve(electrode, n, np.where(fitted, 3.0, 2.0), declared, observed, asked, coverage)
    return _unscaled(electrode, found, bottom, mean, e, x_power, e_power)


def _free_deviation(electrode: _Electrode, n: Floats) -> Floats:
    best = lowest(electrode, ABOVE_ZERO, n.size)
    return deviation_of(best.squares, n - 3.0)


def _grip(fitted: Bools, slope_u: Floats, deviation: Floats) -> Floats:
    ratio = deviation / slope_u
    exact = (slope_u == 0.0) | (np.isnan(deviation) & (slope_u > 0.0))
    return np.where(fitted, 0.0, np.where(exact, np.inf, ratio * ratio))


@dataclass(frozen=True, slots=True)
class _Found:
    """What was found, in scaled units."""

    n: Floats
    best: Best
    interval: Interval
    line: _Line
    slope_u: Floats
    residual_sd: Floats


def _solve(
    electrode: _Electrode,
    n: Floats,
    parameters: Floats,
    declared: Floats,
    observed: Floats,
    asked: Bools,
    coverage: float,
) -> _Found:
    best = lowest(electrode, ABOVE_ZERO, n.size)
    residual_sd = np.where(asked, observed, deviation_of(best.squares, n - parameters))
    deviation = np.where(np.isnan(declared), residual_sd, declared)
    dof = np.where(np.isnan(declared), n - np.where(asked, 3.0, parameters), np.inf)
    known = interval(electrode, best, deviation, dof, coverage, floor=0.0)
    line = electrode.line(best.content)
    turned = line.slope * line.turn
    spread = np.sqrt(1.0 / (line.phi_squares + electrode.grip) + turned * turned / best.stiffness)
    s = np.where(known.dof > 0.0, deviation, np.nan)
    return _Found(n, best, known, line, s * spread, residual_sd)


def _unscaled(
    electrode: _Electrode,
    found: _Found,
    bottom: Floats,
    mean: Floats,
    e: Floats,
    x_power: Powers,
    e_power: Powers,
) -> LogFits:
    line, ends = found.line, found.interval
    lowest_vessel = np.ldexp(found.best.content, x_power)
    vessel_mean = line.phi_mean + xlogy(1.0, electrode.top_share) + xlogy(1.0, lowest_vessel)
    used = electrode.w > 0.0
    return LogFits(
        vessels=found.n[0],
        dof=ends.dof[0],
        content=(lowest_vessel - bottom)[0],
        fit_uncertainty=np.ldexp(ends.uncertainty, x_power)[0],
        low=(np.ldexp(ends.low, x_power) - bottom)[0],
        high=(np.ldexp(ends.high, x_power) - bottom)[0],
        slope=np.ldexp(line.slope * DECADE, e_power)[0],
        slope_uncertainty=np.ldexp(found.slope_u * DECADE, e_power)[0],
        standard_potential=np.ldexp(mean - line.slope * vessel_mean, e_power)[0],
        residual_sd=np.ldexp(found.residual_sd, e_power)[0],
        exact=(found.residual_sd == 0.0)[0],
        ambiguous=found.best.ambiguous()[0],
        fitted=np.where(used, np.ldexp(mean + line.slope * line.phi, e_power), np.nan)[:, 0],
        steps=np.where(used[1:], e[1:] - e[:-1], np.nan)[:, 0],
    )


def theoretical_slope(temperature: float, charge: int) -> float:
    """The slope of an ideal electrode, RT ln 10 / (z F): 59.16 mV per decade at 25 degC and a charge of one.

    Parameters
    ----------
    temperature : of the solution, degC
    charge : of the ion, signed

    Returns
    -------
    mV per decade, of the sign of the charge
    """
    return 1000.0 * GAS_CONSTANT * (temperature + 273.15) * DECADE / (charge * FARADAY_CONSTANT)
