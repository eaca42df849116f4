"""Planes through vessel means: the signal of every sensor against what was added of several analytes.

Sums are exact before they are rounded, so no digit depends on the order of the vessels or on the processor.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from spikeward.rules.solve.factors import Columns, Factors, dot, factors, length
from spikeward.rules.solve.line import DUST

Row = tuple[float, ...]
Rows = Sequence[Sequence[float]]

_NAMED = 1e-6  # share in a dependence from which on a column belongs to it


@dataclass(frozen=True, slots=True)
class Additions:
    """What was added, brought below one by powers of two, which changes no digit.

    ``columns`` is per analyte and vessel, around the weighted mean and times the root of the weight.
    """

    roots: Sequence[float]
    powers: Sequence[int]
    means: Sequence[float]
    columns: Columns
    factors: Factors

    @property
    def weight(self) -> float:
        """The sum of the weights."""
        return dot(self.roots, self.roots)

    def reach(self, contents: Sequence[float]) -> float:
        """The variance of a fitted plane at minus the contents, for a variance of 1 in a vessel of weight 1."""
        away = [mean + content for mean, content in zip(self.means, contents, strict=True)]
        return 1.0 / self.weight + self.factors.inverse_product(away, away)

    def plane(self, values: Sequence[float]) -> tuple[float, list[float], list[float]]:
        """Height, slopes and weighted residuals of a plane through the values of the vessels."""
        mean, column = _centred(values, self.roots)
        slopes = self.factors.solve(column)
        rows = zip(column, zip(*self.columns, strict=True), strict=True)
        residuals = [math.fsum([value, *(-b * x for b, x in zip(slopes, row, strict=True))]) for value, row in rows]
        return mean - dot(slopes, self.means), slopes, residuals


@dataclass(frozen=True, slots=True)
class Planes:
    """The plane of every sensor in contents and signals below one; ``answers`` is per analyte and sensor.

    ``residuals`` is per sensor and vessel, times the root of the weight; ``largest`` is the largest signal.
    """

    additions: Additions
    powers: Sequence[int]
    largest: Sequence[float]
    heights: Sequence[float]
    answers: Columns
    residuals: Columns

    def tuned(self, tuning: Sequence[float]) -> list[list[float]]:
        """``answers`` with every sensor times its tuning."""
        return [[t * answer for t, answer in zip(tuning, row, strict=True)] for row in self.answers]


def roots_of(dilutions: Sequence[float]) -> list[float]:
    """The roots of the weights, the largest of them 1; zero where a dilution is not above zero."""
    least = min(dilutions)
    return [least / one if least > 0.0 else 0.0 for one in dilutions]


def additions_of(additions: Rows, roots: Sequence[float]) -> Additions:
    """Contents added, shape (vessels, analytes), made ready for any number of planes."""
    scaled, powers = _scaled(additions)
    centred = [_centred(column, roots) for column in scaled]
    columns = [column for _, column in centred]
    return Additions(roots, powers, [mean for mean, _ in centred], columns, factors(columns))


def planes_of(added: Additions, signals: Rows) -> Planes:
    """The planes of all sensors; signals are volume-corrected, shape (vessels, sensors)."""
    scaled, powers = _scaled(signals)
    planes = [added.plane(column) for column in scaled]
    dof = len(signals) - len(added.columns) - 1
    dust = DUST * math.sqrt(max(dof, 1))
    return Planes(
        additions=added,
        powers=powers,
        largest=[max(map(abs, column)) for column in scaled],
        heights=[height for height, _, _ in planes],
        answers=[list(row) for row in zip(*(slopes for _, slopes, _ in planes), strict=True)],
        # as for a straight line, what is rounding only is no scatter
        residuals=[r if length(r) > dust else [0.0] * len(r) for _, _, r in planes],
    )


def _scaled(rows: Rows) -> tuple[list[list[float]], list[int]]:
    """The columns, each brought below one by a power of two, and these powers."""
    columns = [list(column) for column in zip(*rows, strict=True)]
    powers = [math.frexp(max(map(abs, column)))[1] for column in columns]
    return [[math.ldexp(v, -power) for v in column] for column, power in zip(columns, powers, strict=True)], powers


def _centred(values: Sequence[float], roots: Sequence[float]) -> tuple[float, list[float]]:
    """The weighted mean, and the values around it times the roots of their weights."""
    mean = dot([root * root for root in roots], values) / dot(roots, roots)
    return mean, [root * (value - mean) for root, value in zip(roots, values, strict=True)]


def dependent(columns: Columns, dust: float) -> tuple[int, ...]:
    """The places of the first columns that follow from one another but for dust, or nothing."""
    for count in range(1, len(columns) + 1):
        found = factors(columns[:count])
        if found.values[-1] <= dust:
            return tuple(place for place, share in enumerate(found.right[-1]) if abs(share) > _NAMED)
    return ()


def lifted(values: Sequence[float], powers: Sequence[int]) -> Row:
    """The values times two to their powers: back in the units that were given."""
    return tuple(math.ldexp(value, power) for value, power in zip(values, powers, strict=True))


def mixed(shares: Sequence[float], columns: Columns) -> list[float]:
    """The columns of the sensors, mixed by their shares."""
    return [dot(shares, row) for row in zip(*columns, strict=True)]
