"""The door of the solver: prepared lines in, solved lines out, many at once."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from spikeward.rules.outcomes import Estimate, Point
from spikeward.rules.prepared import PreparedLine
from spikeward.rules.records import BatchKey
from spikeward.rules.solve.line import Fit, Fits, fit_lines
from spikeward.rules.solve.solved import Background, Solved
from spikeward.rules.solve.transform import Transformed, transform, weights_of
from spikeward.rules.solve.verdict import (
    EXACT_FIT,
    NEGATIVE,
    NEGATIVE_AS_READ,
    ONE_ADDITION,
    OUT_OF_RANGE,
    insignificant,
    unsolvable,
)
from spikeward.rules.uncertainty.fieller import g_value, half_widths, t_quantile
from spikeward.rules.uncertainty.interval import Component, FitPart, is_finite, printed

BackgroundKey = tuple[BatchKey, str, str]


def solve_lines(
    lines: Sequence[PreparedLine], backgrounds: Mapping[BackgroundKey, Background], coverage: float
) -> tuple[Solved, ...]:
    """Solve every line as a straight line through its vessels.

    Parameters
    ----------
    lines : of any batches, designs and numbers of vessels together
    backgrounds : by batch, analyte and line; a line without one has no background subtracted
    coverage : of the intervals, such as 0.95

    Returns
    -------
    in the order of ``lines``; the digits of one do not depend on the others
    """
    transformed = [transform(line, backgrounds.get((line.key.batch_key, line.analyte, line.line))) for line in lines]
    fits = _fit(transformed)
    return tuple(
        _solved(line, points, fits.of(column), coverage)
        for column, (line, points) in enumerate(zip(lines, transformed, strict=True))
    )


def _fit(transformed: Sequence[Transformed]) -> Fits:
    """Pack the points into columns, the shorter ones padded with zeros, and fit them together."""
    deepest = max((len(one.rows) for one in transformed), default=0)
    packed = np.zeros((4, max(deepest, 1), len(transformed)))
    for column, one in enumerate(transformed):
        weights = weights_of(one.rows)
        for row, (x, y, shift, _) in enumerate(one.rows):
            packed[:, row, column] = (x, y, weights[row], shift)
    return fit_lines(*packed)


def _solved(line: PreparedLine, transformed: Transformed, fit: Fit, coverage: float) -> Solved:
    """The fit in words and numbers; every way without a number carries its sentence."""
    back, dof = line.way_back, max(len(transformed.rows) - 2, 0)
    bare = Solved(
        prepared=line,
        points=transformed.points,
        degrees_of_freedom=dof,
        no_number=" ".join(line.problems) or transformed.problem,
        background=transformed.background,
        blank_note=transformed.blank_note,
        preparation=back.words if back is not None else "",
        notes=transformed.notes,
    )
    if bare.no_number:
        return bare
    rows = transformed.rows
    refused = unsolvable(rows, (fit.slope, fit.intercept, fit.content), fit.flat, fit.one_x)
    if refused:
        return replace(bare, no_number=refused)
    least = min(row[2] for row in rows)  # a weight of 1 belongs to it, and here to V = V0
    g = g_value(t_quantile(dof, coverage), fit.slope, fit.slope_uncertainty) if dof > 0 else None
    drawn = replace(
        bare,
        points=tuple(_with_fitted(point, fit) for point in transformed.points),
        slope=fit.slope,
        slope_uncertainty=_known(fit.slope_uncertainty),
        intercept=fit.intercept,
        intercept_uncertainty=_known(fit.intercept_uncertainty),
        covariance=_known(fit.covariance),
        residual_sd=_known(fit.residual_sd / least),
        correlation=_known(fit.correlation),
        g=_known(g),
        x_mean=fit.x_mean,
        sxx=_known(fit.sxx / (least * least)),
    )
    refused = insignificant(fit.slope, g)
    if refused:
        return replace(drawn, no_number=refused)
    if fit.content < 0.0:
        drawn = replace(drawn, notes=(*drawn.notes, NEGATIVE if drawn.subtracted else NEGATIVE_AS_READ))
    number = _without_scatter(drawn, fit, coverage) if g is None else _with_interval(drawn, fit, g, coverage)
    within = is_finite(number.content) and is_finite(number.in_sample)
    return number if within else replace(drawn, no_number=OUT_OF_RANGE)


def _with_fitted(point: Point, fit: Fit) -> Point:
    return point if point.excluded else replace(point, fitted=fit.intercept + fit.slope * point.x)


def _known(value: float | None) -> float | None:
    return value if value is not None and math.isfinite(value) else None


def _without_scatter(drawn: Solved, fit: Fit, coverage: float) -> Solved:
    line, back = drawn.prepared, drawn.prepared.way_back
    return replace(
        drawn,
        content=Estimate(fit.content, line.unit, coverage=coverage, reason=ONE_ADDITION),
        in_sample=Estimate(fit.content * back.factor, back.unit, coverage=coverage, reason=ONE_ADDITION)
        if back is not None
        else None,
    )


def _with_interval(drawn: Solved, fit: Fit, g: float, coverage: float) -> Solved:
    line, back = drawn.prepared, drawn.prepared.way_back
    halves = half_widths(fit.content, fit.x_mean, fit.spread, fit.weight, g)
    part = FitPart(fit.content, fit.fit_uncertainty, halves, drawn.degrees_of_freedom)
    rest = background_component(drawn.background, fit.background_effect)
    reason = EXACT_FIT if fit.exact else ""
    content, nu = printed(part, rest, line.unit, coverage, reason)
    in_sample = None
    if back is not None:
        scaled = background_component(drawn.background, fit.background_effect * back.factor)
        in_sample, nu = printed(part.times(back.factor), scaled, back.unit, coverage, reason)
    return replace(
        drawn,
        content=content,
        in_sample=in_sample,
        fit_uncertainty=fit.fit_uncertainty,
        fit_half_widths=halves,
        background_effect=fit.background_effect,
        effective_degrees_of_freedom=nu,
        notes=(*drawn.notes, EXACT_FIT) if fit.exact else drawn.notes,
    )


def background_component(background: Background | None, effect: float) -> list[Component]:
    """The uncertainty of the background's mean in the content; none where it was not subtracted or is not known.

    Parameters
    ----------
    effect : change of the content per unit of signal
    """
    if background is None or background.standard_uncertainty is None or background.degrees_of_freedom < 1:
        return []
    return [Component(abs(effect) * background.standard_uncertainty, background.degrees_of_freedom)]
