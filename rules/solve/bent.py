"""Responses that are no single straight line, as results: several runs, curves, and the logarithm of electrodes.

Their interval is that of the profile of the fit; everything common to all vessels is added to it as for a line.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from spikeward.rules.outcomes import Parameter, Point
from spikeward.rules.solve.blocks import BlockFits, fit_blocks
from spikeward.rules.solve.common import bare, known, with_interval, without_uncertainty
from spikeward.rules.solve.curve import CurveFits, fit_curves
from spikeward.rules.solve.job import Job
from spikeward.rules.solve.line import Floats
from spikeward.rules.solve.log_response import LogFit, LogFits, fit_log_response, theoretical_slope
from spikeward.rules.solve.solved import Scatter, Solved
from spikeward.rules.solve.transform import Row, Transformed
from spikeward.rules.solve.verdict import AMBIGUOUS, EXACT_FIT, NO_NOISE, NOT_FOUND, UNBOUNDED, negative, unreadable
from spikeward.rules.uncertainty.interval import FitPart
from spikeward.rules.words import listed

SLOPE_BY_VESSELS = "slope by these vessels"
"""The name of the slope that is fitted beside a declared one."""

_ROUNDS = 12  # of weights at the signals that the fit says; declared noise settles to all digits in far fewer


@dataclass(frozen=True, slots=True)
class _Bent:
    """What the models have in common. ``fitted`` stands in the order of the rows, as signals or as y."""

    content: float
    fit_uncertainty: float
    low: float
    high: float
    dof: float
    left: int  # degrees of freedom that the points leave
    residual_sd: float
    exact: bool
    fitted: tuple[float, ...]
    parameters: tuple[Parameter, ...]
    refused: str = ""


def _column(transformed: Sequence[Transformed], of: Callable[[Row], float], empty: float = 0.0) -> Floats:
    """One number of every row, series as columns, padded."""
    deepest = max(1, *(len(one.rows) for one in transformed))
    packed = np.full((deepest, len(transformed)), empty)
    for column, one in enumerate(transformed):
        for place, row in enumerate(one.rows):
            packed[place, column] = of(row)
    return packed


def _noise_of(scatters: Sequence[Scatter], signal: Floats, background: Floats) -> Floats:
    """Declared or pooled standard deviations of signals at the fitted ones; not a number where residuals tell."""
    found = np.full(signal.shape, np.nan)
    for column, scatter in enumerate(scatters):
        if scatter.kind == "pooled":
            found[:, column] = scatter.relative * np.nanmax(np.abs(signal[:, column]))
        elif scatter.noise is not None:
            part = scatter.noise.relative * (signal[:, column] + background[column])
            floor = scatter.noise.floor
            found[:, column] = np.sqrt(floor * floor + part * part)
    return found


def _backgrounds(transformed: Sequence[Transformed]) -> Floats:
    return np.array([one.background.mean if one.background is not None else 0.0 for one in transformed])


def _dof(job: Job, own: float, has: float) -> float:
    """Of the scatter: what the fit says, but those of the pool where it is pooled."""
    return job.scatter.degrees_of_freedom if job.scatter.kind == "pooled" and has > 0 else own


def solve_blocks(jobs: Sequence[Job], transformed: Sequence[Transformed], coverage: float) -> list[Solved]:
    """Series measured in several runs: one content, and a slope for each run."""
    scatters = [job.scatter for job in jobs]
    x = _column(transformed, lambda row: row.x)
    y, w = _column(transformed, lambda row: row.y), _column(transformed, lambda row: row.weight)
    run = _column(transformed, lambda row: row.block, -1.0).astype(np.int64)
    names = [sorted({point.block for point in one.points if not point.excluded}) for one in transformed]

    shift, per = _column(transformed, lambda row: row.shift), _column(transformed, lambda row: row.per_amount)
    noisy = _column(transformed, lambda row: row.per_signal)

    def fit(background: float = 0.0, amount: float = 0.0) -> BlockFits:
        net, above = y - background * shift, x + amount * per
        fits = fit_blocks(above, net, w, run, np.full(len(jobs), np.nan), coverage)
        if all(scatter.kind == "own" for scatter in scatters):
            return fits
        weights, noise = w, np.full(len(jobs), np.nan)
        for _ in range(_ROUNDS):
            before = weights, noise
            weights, noise = _reweighted(scatters, fits.fitted, noisy, weights, _backgrounds(transformed))
            if all(np.array_equal(*pair, equal_nan=True) for pair in zip(before, (weights, noise), strict=True)):
                break  # what gives itself again would do so in every further round
            fits = fit_blocks(above, net, weights, run, noise, coverage)
        return fits

    fits = fit()
    found = []
    for column in range(len(jobs)):
        one = fits.of(column)
        slopes = tuple(
            Parameter(f"slope of run {name}", slope, _per(jobs[column]))
            for name, slope in zip(names[column], one.slopes, strict=False)
        )
        left = max(len(transformed[column].rows) - 1 - len(names[column]), 0)
        found.append(
            _Bent(
                one.content, one.fit_uncertainty, one.low, one.high, one.dof, left, one.residual_sd, one.exact,
                one.fitted, slopes, _falling(slopes, transformed[column].rows),
            )  # fmt: skip
        )
    return _results(jobs, transformed, found, _effects(transformed, lambda *step: fit(*step).content), coverage)


def _falling(slopes: Sequence[Parameter], rows: Sequence[Row]) -> str:
    """Why a run does not carry a content, or an empty text."""
    if all(len({row.x for row in rows if row.block == run}) < 2 for run in {row.block for row in rows}):
        return "no run holds two different additions, so that the slope of none is known: measure more levels in a run"
    falling = [one.name.removeprefix("slope of ") for one in slopes if one.value <= 0.0]
    return f"the signal does not rise with the additions in {listed(falling)}: look at that run" if falling else ""


def _per(job: Job) -> str:
    return f"{job.line.signal_unit or '1'} per {job.line.unit}"


def _reweighted(
    scatters: Sequence[Scatter], fitted: Floats, noisy: Floats, w: Floats, background: Floats
) -> tuple[Floats, Floats]:
    """Weights and the standard deviation of y at weight 1, from declared or pooled noise; ``noisy`` is dy/dS."""
    with np.errstate(all="ignore"):
        noise = _noise_of(scatters, np.where(w > 0.0, fitted / noisy, np.nan), background) * noisy
        own = np.isnan(noise).all(axis=0)
        least = np.where(w > 0.0, noise, np.inf).min(axis=0)
        ratio = least / noise
        weights = np.where(own, w, np.where(w > 0.0, ratio * ratio, 0.0))
        return weights, np.where(own, np.nan, least)


def solve_curves(jobs: Sequence[Job], transformed: Sequence[Transformed], coverage: float) -> list[Solved]:
    """A curved response in the content of the vessel, where the method allows one."""
    scatters = [job.scatter for job in jobs]
    x, share = _column(transformed, lambda row: row.x), _column(transformed, lambda row: row.share)
    signal, one = _column(transformed, lambda row: row.y * row.share), _column(transformed, lambda row: 1.0)

    per = _column(transformed, lambda row: row.per_amount)
    shift = _column(transformed, lambda row: row.shift * row.share)
    noisy = _column(transformed, lambda row: row.per_signal * row.share)

    def fit(background: float = 0.0, amount: float = 0.0) -> CurveFits:
        net, above = signal - background * shift, x + amount * per
        fits = fit_curves(above, share, net, one, np.full(len(jobs), np.nan), coverage)
        if all(scatter.kind == "own" for scatter in scatters):
            return fits
        weights, noise = one, np.full(len(jobs), np.nan)
        for _ in range(_ROUNDS):
            before = weights, noise
            weights, noise = _reweighted(scatters, fits.fitted, noisy, weights, _backgrounds(transformed))
            if all(np.array_equal(*pair, equal_nan=True) for pair in zip(before, (weights, noise), strict=True)):
                break  # what gives itself again would do so in every further round
            fits = fit_curves(above, share, net, weights, noise, coverage)
        return fits

    fits = fit()
    found = []
    for column, job in enumerate(jobs):
        curve = fits.of(column)
        parameters = (
            Parameter("slope at no content", curve.slope, _per(job)),
            Parameter("curvature", curve.curvature, f"{_per(job)} squared"),
        )
        left = max(len(transformed[column].rows) - 3, 0)
        found.append(
            _Bent(
                curve.content, curve.fit_uncertainty, curve.low, curve.high, curve.dof, left, curve.residual_sd,
                curve.exact, curve.fitted, parameters,
            )  # fmt: skip
        )
    return _results(jobs, transformed, found, _effects(transformed, lambda *step: fit(*step).content), coverage)


def solve_log_responses(jobs: Sequence[Job], transformed: Sequence[Transformed], coverage: float) -> list[Solved]:
    """Electrodes: the potential is a straight line in the logarithm of the content of the vessel."""
    electrodes = [job.line.electrode for job in jobs]
    slope = [math.nan if one is None or one.slope is None else one.slope for one in electrodes]
    slope_u = [0.0 if one is None or one.uncertainty is None else one.uncertainty for one in electrodes]
    noise = [math.nan if job.scatter.noise is None else job.scatter.noise.floor for job in jobs]
    x, per = _column(transformed, lambda row: row.x), _column(transformed, lambda row: row.per_amount)
    share, potential = _column(transformed, lambda row: row.share), _column(transformed, lambda row: row.signal)
    one = _column(transformed, lambda row: 1.0)

    def fit(amount: float = 0.0) -> LogFits:
        above = x + amount * per
        return fit_log_response(
            above, share, potential, one, np.array(slope), np.array(slope_u), np.array(noise), coverage
        )

    fits, unknown = fit(), np.full(len(jobs), np.nan)
    # where the slope is declared these vessels may contradict it
    known_nothing = np.zeros(len(jobs))
    free_fits = fit_log_response(x, share, potential, one, unknown, known_nothing, np.array(noise), coverage)
    found = []
    for column, job in enumerate(jobs):
        curve = fits.of(column)
        free = math.isnan(slope[column])
        asked = free or (slope_u[column] > 0.0 and math.isnan(noise[column]))  # the scatter is that about a free slope
        left = max(len(transformed[column].rows) - (3 if asked else 2), 0)
        found.append(
            _Bent(
                curve.content, curve.fit_uncertainty, curve.low, curve.high, curve.dof, left, curve.residual_sd,
                curve.exact, curve.fitted, _electrode_words(job, curve, None if free else free_fits.of(column)),
                AMBIGUOUS if curve.ambiguous else "",
            )  # fmt: skip
        )
    return _results(jobs, transformed, found, _effects(transformed, lambda _, amount: fit(amount).content), coverage)


def _electrode_words(job: Job, fit: LogFit, free: LogFit | None) -> tuple[Parameter, ...]:
    electrode = job.line.electrode
    if electrode is None:
        return ()
    theory = theoretical_slope(electrode.temperature, electrode.charge)
    spread = known(fit.slope_uncertainty)
    percent = None if spread is None else abs(100.0 * spread / theory)
    by_vessels = known(free.slope_uncertainty) if free is not None else None
    return (
        Parameter("electrode slope", fit.slope, "mV per decade", spread),
        Parameter("slope in theory", theory, "mV per decade"),
        Parameter("slope efficiency", 100.0 * fit.slope / theory, "%", percent),
        Parameter("potential at one unit", fit.standard_potential, "mV"),
        *(
            [Parameter(SLOPE_BY_VESSELS, free.slope, "mV per decade", by_vessels or None)]
            if free is not None and math.isfinite(free.slope) and math.isfinite(free.content)
            else []
        ),
    )


_Effects = tuple[float | None, float | None]


def _effects(transformed: Sequence[Transformed], content: Callable[[float, float], Floats]) -> list[_Effects]:
    """How the content of each series changes with its background and its reagent amount.

    By small steps of the size of their uncertainties; one series at a time, so that its step does not depend on others.
    """
    found = []
    for column, one in enumerate(transformed):
        background = (one.background.standard_uncertainty or 0.0) if one.background is not None else 0.0
        amount = (one.reagent.standard_uncertainty or 0.0) if one.reagent is not None else 0.0
        found.append((_slope(content, column, (background, 0.0)), _slope(content, column, (0.0, amount))))
    return found


def _slope(content: Callable[[float, float], Floats], column: int, step: tuple[float, float]) -> float | None:
    size = 2.0 * max(step)
    if not size > 0.0:
        return None
    up, down = content(*step), content(-step[0], -step[1])
    return known((up[column].item() - down[column].item()) / size)


def _results(
    jobs: Sequence[Job],
    transformed: Sequence[Transformed],
    found: Sequence[_Bent],
    effects: Sequence[_Effects],
    coverage: float,
) -> list[Solved]:
    return [
        _result(job, points, bent, effect, coverage)
        for job, points, bent, effect in zip(jobs, transformed, found, effects, strict=True)
    ]


def _result(
    job: Job, transformed: Transformed, bent: _Bent, effects: _Effects, coverage: float
) -> Solved:
    drawn = replace(bare(job, transformed), degrees_of_freedom=bent.left)
    if drawn.no_number:
        return drawn
    refused = unreadable([value for row in transformed.rows for value in (row.x, row.signal, row.factor)])
    refused = refused or bent.refused or _in_runs(job, transformed)
    if refused or not math.isfinite(bent.content):
        return replace(drawn, no_number=refused or NOT_FOUND)
    fitted = dict(zip(((row.x, row.signal, row.factor) for row in transformed.rows), bent.fitted, strict=False))
    dof = _dof(job, bent.dof, bent.dof)
    drawn = replace(
        drawn,
        points=tuple(_with_fitted(point, fitted, job.line.response) for point in drawn.points),
        residual_sd=known(bent.residual_sd),
        parameters=bent.parameters,
        background_effect=effects[0],
        reagent_effect=effects[1],
        scatter_degrees_of_freedom=dof,
        notes=(*drawn.notes, *negative(bent.content, drawn.subtracted)),
    )
    if not dof > 0:
        return without_uncertainty(drawn, bent.content, coverage, NO_NOISE)
    if not (math.isfinite(bent.low) and math.isfinite(bent.high)):
        return replace(drawn, no_number=UNBOUNDED)
    exact = bent.exact and job.scatter.kind == "own"
    part = FitPart(bent.content, bent.fit_uncertainty, (bent.content - bent.low, bent.high - bent.content), dof)
    drawn = replace(drawn, notes=(*drawn.notes, EXACT_FIT) if exact else drawn.notes)
    return with_interval(drawn, part, coverage, EXACT_FIT if exact else "")


def _in_runs(job: Job, transformed: Transformed) -> str:
    """Why a response that is no straight line is not solved over several runs, or an empty text."""
    if job.line.response == "linear" or not any(row.block for row in transformed.rows):
        return ""
    return "only straight lines are solved over several runs: give each run of this series a sample name of its own"


def _with_fitted(point: Point, fitted: dict[tuple[float, float, float], float], response: str) -> Point:
    """The point with what the model says there, as y; models of signals say signals."""
    value = fitted.get((point.x, point.signal, point.factor))
    if point.excluded or value is None:
        return point
    if response == "curve":
        return replace(point, fitted=value / point.matrix_share)
    return replace(point, fitted=value if response == "linear" else value * point.factor)
