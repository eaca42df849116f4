"""Straight lines as results: from the fitted points to a content with its interval, or the reason why there is none."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from spikeward.rules.outcomes import Point
from spikeward.rules.solve.common import bare, known, with_interval, without_uncertainty
from spikeward.rules.solve.job import Job
from spikeward.rules.solve.line import Fit, Fits, Floats, fit_lines
from spikeward.rules.solve.solved import Scatter, Solved
from spikeward.rules.solve.transform import Row, Transformed, weights_of
from spikeward.rules.solve.verdict import (
    EXACT_FIT,
    ONE_ADDITION,
    UNSETTLED,
    insignificant,
    negative,
    unsolvable,
)
from spikeward.rules.solve.weights import fit_by_noise
from spikeward.rules.uncertainty.fieller import g_value, half_widths, t_quantile
from spikeward.rules.uncertainty.interval import FitPart


@dataclass(frozen=True, slots=True)
class _Drawn:
    """One fitted line; ``dof`` belongs to the scatter that its uncertainties are made of, 0 where it has none."""

    fit: Fit
    dof: float
    weights: tuple[float, ...]
    chi_squared: float | None = None
    settled: bool = True


def solve_straight(jobs: Sequence[Job], transformed: Sequence[Transformed], coverage: float) -> list[Solved]:
    """Solve every line as a straight line through its vessels, all of one kind of scatter together.

    Parameters
    ----------
    jobs, transformed : of the same length, in the same order
    coverage : of the intervals, such as 0.95
    """
    drawn: dict[int, _Drawn] = {}
    for kind, draw in (("own", _by_residuals), ("pooled", _by_pool), ("declared", _by_noise)):
        places = [place for place, job in enumerate(jobs) if job.scatter.kind == kind]
        if places:
            found = draw([transformed[place] for place in places], [jobs[place].scatter for place in places])
            drawn |= dict(zip(places, found, strict=True))
    return [
        _solved(job, points, drawn[place], coverage)
        for place, (job, points) in enumerate(zip(jobs, transformed, strict=True))
    ]


def _packed(transformed: Sequence[Transformed]) -> tuple[Floats, Floats, Floats, Floats]:
    """The points in columns, the shorter ones padded with zeros: x, y, weight and dy/dS, (vessels, series) each."""
    deepest = max((len(one.rows) for one in transformed), default=0)
    packed = np.zeros((4, max(deepest, 1), len(transformed)))
    for column, one in enumerate(transformed):
        for place, row in enumerate(one.rows):
            packed[:, place, column] = (row.x, row.y, row.weight, row.per_signal)
    x, y, weight, per_signal = packed
    return x, y, weight, per_signal


def _by_residuals(transformed: Sequence[Transformed], scatters: Sequence[Scatter]) -> list[_Drawn]:
    fits = fit_lines(*_packed(transformed))
    return [
        _Drawn(fits.of(column), max(len(one.rows) - 2, 0), weights_of(one.rows))
        for column, one in enumerate(transformed)
    ]


def _by_pool(transformed: Sequence[Transformed], scatters: Sequence[Scatter]) -> list[_Drawn]:
    """The pooled scatter is relative to the largest fitted signal, so the line is fitted once to know that."""
    packed = _packed(transformed)
    first = fit_lines(*packed)
    sd = np.array([scatter.relative for scatter in scatters]) * largest_fitted(first, packed[0], packed[2])
    fits = fit_lines(*packed, sd)
    return [
        _Drawn(fits.of(column), scatter.degrees_of_freedom, weights_of(transformed[column].rows))
        for column, scatter in enumerate(scatters)
    ]


def largest_fitted(fits: Fits, x: Floats, w: Floats) -> Floats:
    """The largest fitted y of each series, every one as its weight counts; shape (series,)."""
    with np.errstate(all="ignore"):
        found: Floats = (np.sqrt(w) * np.abs(fits.intercept + fits.slope * x)).max(axis=0, initial=0.0)
    return found


def _by_noise(transformed: Sequence[Transformed], scatters: Sequence[Scatter]) -> list[_Drawn]:
    x, y, _, per_signal = _packed(transformed)  # the noise is that of the signal as it was read, background in it
    noise = [scatter.noise for scatter in scatters]
    floor = np.array([one.floor if one is not None else math.nan for one in noise])
    relative = np.array([one.relative if one is not None else math.nan for one in noise])
    background = np.array([one.background.mean if one.background is not None else 0.0 for one in transformed])
    found = fit_by_noise(x, y, per_signal, floor, relative, background)
    drawn = []
    for column, one in enumerate(transformed):
        noises = [found.noise[place, column].item() for place in range(len(one.rows))]
        shares = [found.sd[column].item() / each if each > 0.0 else 0.0 for each in noises]  # none: not to be solved
        weights = tuple(share * share for share in shares)
        chi_squared = known(found.chi_square[column].item())
        drawn.append(_Drawn(found.fits.of(column), math.inf, weights, chi_squared, bool(found.settled[column])))
    return drawn


def _solved(job: Job, transformed: Transformed, drawn: _Drawn, coverage: float) -> Solved:
    """The fit in words and numbers; every way without a number carries its sentence."""
    bare_one, fit, rows = bare(job, transformed), drawn.fit, transformed.rows
    if bare_one.no_number:
        return bare_one
    refused = unsolvable(rows, (fit.slope, fit.intercept, fit.content), fit.flat, fit.one_x)
    if not refused and not drawn.settled:
        refused = UNSETTLED
    if refused:
        return replace(bare_one, no_number=refused)
    most = max(drawn.weights)
    least = min(row.factor for row, weight in zip(rows, drawn.weights, strict=True) if weight == most)
    has_scatter = drawn.dof > 0 and math.isfinite(fit.slope_uncertainty)
    corrected = bare_one.background is not None or bare_one.reagent is not None
    background_effect, reagent_effect = _effects(rows, drawn.weights, fit) if corrected else (None, None)
    g = g_value(t_quantile(drawn.dof, coverage), fit.slope, fit.slope_uncertainty) if has_scatter else None
    found = replace(
        bare_one,
        points=tuple(_with_fitted(point, drawn, rows) for point in transformed.points),
        slope=fit.slope,
        slope_uncertainty=known(fit.slope_uncertainty),
        intercept=fit.intercept,
        intercept_uncertainty=known(fit.intercept_uncertainty),
        covariance=known(fit.covariance),
        residual_sd=known(fit.residual_sd / least),
        correlation=known(fit.correlation),
        g=known(g),
        x_mean=fit.x_mean,
        sxx=known(fit.sxx),
        background_effect=background_effect,
        scatter_degrees_of_freedom=drawn.dof if has_scatter else 0,
        chi_squared=drawn.chi_squared,
        relative_scatter=_relative_scatter(transformed, fit),
        reagent_effect=reagent_effect,
    )
    refused = insignificant(fit.slope, g)
    if refused:
        return replace(found, no_number=refused)
    found = replace(found, notes=(*found.notes, *negative(fit.content, found.subtracted)))
    if g is None:
        return without_uncertainty(found, fit.content, coverage, ONE_ADDITION)
    exact = fit.exact and job.scatter.kind == "own"
    halves = half_widths(fit.content, fit.x_mean, fit.spread, fit.weight, g)
    part = FitPart(fit.content, fit.fit_uncertainty, halves, drawn.dof)
    found = replace(found, notes=(*found.notes, EXACT_FIT) if exact else found.notes)
    return with_interval(found, part, coverage, EXACT_FIT if exact else "")


def _with_fitted(point: Point, drawn: _Drawn, rows: Sequence[Row]) -> Point:
    if point.excluded:
        return point
    fit, place = drawn.fit, next((n for n, row in enumerate(rows) if (row.x, row.y) == (point.x, point.y)), None)
    weight = point.weight if place is None else drawn.weights[place]
    return replace(point, fitted=fit.intercept + fit.slope * point.x, weight=weight)


def _effects(rows: Sequence[Row], weights: Sequence[float], fit: Fit) -> tuple[float, ...]:
    """How the content changes with the background, which lowers every y, and with the amount that raises every x.

    First-order changes of the weighted least-squares line: db and da, then dC0 = (da - C0 db) / b.
    """
    total = math.fsum(weights)
    y_mean = fit.intercept + fit.slope * fit.x_mean
    found = []
    for moved_x, moved_y in (
        ([0.0] * len(rows), [-row.shift for row in rows]),
        ([row.per_amount for row in rows], [0.0] * len(rows)),
    ):
        at_x = math.fsum(w * d for w, d in zip(weights, moved_x, strict=True)) / total
        at_y = math.fsum(w * d for w, d in zip(weights, moved_y, strict=True)) / total
        change = math.fsum(
            w * ((row.x - fit.x_mean) * (dy - at_y) + (dx - at_x) * (row.y - y_mean)
                 - 2.0 * fit.slope * (row.x - fit.x_mean) * (dx - at_x))
            for row, w, dx, dy in zip(rows, weights, moved_x, moved_y, strict=True)
        ) / fit.sxx  # fmt: skip
        level = at_y - change * fit.x_mean - fit.slope * at_x
        found.append((level - fit.content * change) / fit.slope)
    return tuple(found)


def _relative_scatter(transformed: Transformed, fit: Fit) -> float | None:
    """The residual scatter over the largest fitted signal, both as the weights count them."""
    largest = max(math.sqrt(row.weight) * abs(fit.intercept + fit.slope * row.x) for row in transformed.rows)
    return known(fit.residual_sd / largest) if largest > 0.0 else None
