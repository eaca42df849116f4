"""Weights from what is known about the noise: declared by the laboratory, or pooled over the series of a night.

A declared noise s² = s0² + (r S)² is taken at the fitted signal and never at the observed one, which would draw the
line towards the vessels that happen to read low. Neither are weights ever taken from the scatter of a few readings.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy import special

from spikeward.rules.solve.line import Bools, Fits, Floats, fit_lines

ROUNDS = 60
"""Rounds after which weights that still change are given up."""

COCHRAN = 0.01
"""Level of Cochran's test: series of one and the same noise are refused so often."""

_SETTLED = 2.0**-44  # relative change of every vessel's noise at which a series is settled


@dataclass(frozen=True, slots=True)
class NoiseFits:
    """Lines weighted by a declared noise, one entry per series.

    ``fits``: the vessel of least noise has weight 1, and its ``sd``, shape (series,), is the declared one, so that all
    uncertainties follow from the declaration and have no end of degrees of freedom; ``fits.residual_sd`` is what the
    residuals say of the same vessel. ``noise``, shape (vessels, series), is the standard deviation of y, 0 for padding.
    ``chi_square`` is the sum of (residual/noise)² with ``fits.dof`` degrees of freedom, ``p`` the probability to exceed
    it; neither is a number without one. ``settled``: the weights belong to the line that they gave; a series that is
    not settled must not be used. ``rounds`` counts the fits until then.
    """

    fits: Fits
    sd: Floats
    noise: Floats
    chi_square: Floats
    p: Floats
    settled: Bools
    rounds: Floats


def fit_by_noise(
    x: Floats, y: Floats, factor: Floats, floor: Floats, relative: Floats, background: Floats
) -> NoiseFits:
    """Fit lines weighted by a declared noise: fit, noise at the fitted signals, and again until nothing changes.

    A series stops at its own convergence, so that its digits do not depend on the others.

    Parameters
    ----------
    x, y : contents added and volume-corrected signals, shape (vessels, series), 0 for padding
    factor : dy/dS of a vessel, final volume over aliquot, same shape, 0 for padding
    floor : s0, the noise of a vessel's signal near zero, in signal, shape (series,)
    relative : r, the part of the noise that grows with the signal, shape (series,)
    background : signal that was subtracted from every vessel, shape (series,): the noise is that of the whole signal

    Notes
    -----
    w = 1/u² with u known: ISO/TS 28037:2010, clause 6 (from memory).
    """
    series = x.shape[1]
    noise = np.array(factor)  # at first as if it were constant in the signal
    settled, rounds, active = np.zeros(series, dtype=np.bool_), np.zeros(series), np.arange(series)
    with np.errstate(all="ignore"):  # what overflows or has no value never settles
        while active.size and rounds[active[0]] < ROUNDS:
            part = noise[:, active]
            found = _noise_of_line(
                x[:, active], y[:, active], factor[:, active], part, floor[active], relative[active], background[active]
            )
            done = (np.abs(found - part) <= _SETTLED * found).all(axis=0)
            noise[:, active] = found
            settled[active] = done
            rounds[active] += 1.0
            active = active[~(done | np.isnan(found).any(axis=0))]
        w, sd = _weights(noise, factor)
        fits = fit_lines(x, y, w, factor, sd)
        settled &= np.isfinite(sd)  # which it is not without any vessel
        ratio = fits.residual_sd / sd
        chi_square = fits.dof * (ratio * ratio)
        return NoiseFits(fits, sd, noise, chi_square, special.chdtrc(fits.dof, chi_square), settled, rounds)


def _noise_of_line(
    x: Floats, y: Floats, factor: Floats, noise: Floats, floor: Floats, relative: Floats, background: Floats
) -> Floats:
    """The noise of y at the signals that the line says, the line weighted by the noise thought before."""
    fits = fit_lines(x, y, _weights(noise, factor)[0], factor)
    signal = (fits.intercept + fits.slope * x) / factor + background
    grows = np.abs(relative * signal)
    longer = np.maximum(grows, floor)
    ratio = np.minimum(grows, floor) / longer  # none for a vessel without noise, which would weigh everything
    found: Floats = np.where(factor > 0.0, factor * (longer * np.sqrt(1.0 + ratio * ratio)), 0.0)
    return found


def _weights(noise: Floats, factor: Floats) -> tuple[Floats, Floats]:
    """Weights, the largest of them 1 and 0 for padding, and the noise of the vessel that has it."""
    least = np.where(factor > 0.0, noise, math.inf).min(axis=0, initial=math.inf)
    ratio = least / noise
    return np.where(factor > 0.0, ratio * ratio, 0.0), least


@dataclass(frozen=True, slots=True)
class Pooled:
    """One relative noise for several series, and whether they may share it.

    ``relative_sd`` has ``dof`` degrees of freedom. ``shares`` are the parts of each series in the pooled sum of squares
    and ``limits`` what the largest of such parts may be, both in the order of the series and empty below two series,
    which leave nothing to compare. ``outlying`` are the places of series beyond their limit.
    """

    relative_sd: float
    dof: float
    shares: tuple[float, ...]
    limits: tuple[float, ...]
    outlying: tuple[int, ...]


def pool(sd: Sequence[float], scale: Sequence[float], dof: Sequence[float], level: float = COCHRAN) -> Pooled:
    """The pooled relative residual standard deviation sqrt(sum dof (s/scale)² / sum dof), with Cochran's test.

    A series' part may be at most 1 / (1 + (sum dof / dof - 1) / F) with F = F(1 - level/k; dof, sum dof - dof) for k
    series, which for equal dof is Cochran's table (R. U. E. 't Lam, Anal. Chim. Acta 659 (2010) 68, from memory). The
    sums are rounded once, so the order of the series does not matter.

    Parameters
    ----------
    sd : residual standard deviations of the signals
    scale : largest fitted signal of each series, above zero, in the unit of its ``sd``
    dof : degrees of freedom of each ``sd``, above zero
    level : of the test

    Raises
    ------
    ValueError : there is no series, or one without degrees of freedom or a signal
    """
    if not dof or not all(nu > 0.0 for nu in dof) or not all(one > 0.0 for one in scale):
        raise ValueError("only series with degrees of freedom and a signal above zero can be pooled")
    squares = [nu * (s / one) * (s / one) for s, one, nu in zip(sd, scale, dof, strict=True)]
    whole, freedom, count = math.fsum(squares), math.fsum(dof), len(dof)
    relative = math.sqrt(whole / freedom)
    if count < 2:
        return Pooled(relative, freedom, (), (), ())
    shares = tuple(square / whole if whole > 0.0 else 0.0 for square in squares)
    # nu F / (nu F + sum - nu) follows the beta distribution
    limits = tuple(float(special.betainccinv(nu / 2.0, (freedom - nu) / 2.0, level / count)) for nu in dof)
    outlying = tuple(place for place in range(count) if shares[place] > limits[place])
    return Pooled(relative, freedom, shares, limits, outlying)
