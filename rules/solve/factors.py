"""Singular values of a few columns, in plain numbers.

Sums are exact before they are rounded, so no digit depends on the order of rows or on the processor.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

Columns = Sequence[Sequence[float]]

_SWEEPS = 60  # a handful of columns needs about six
_ROUNDING = 2.0**-52


@dataclass(frozen=True, slots=True)
class Factors:
    """Columns = left x values x right', the values falling; ``left[k]`` and ``right[k]`` belong to ``values[k]``."""

    left: Columns
    values: Sequence[float]
    right: Columns

    def solve(self, target: Sequence[float]) -> list[float]:
        """The coefficients with which the columns come nearest to ``target``; all values must be above zero."""
        parts = [dot(one, target) / value for one, value in zip(self.left, self.values, strict=True)]
        return [
            math.fsum(part * one[j] for part, one in zip(parts, self.right, strict=True)) for j in range(len(parts))
        ]

    def inverse_product(self, one: Sequence[float], other: Sequence[float]) -> float:
        """``one`` (A'A)^-1 ``other``, A being the columns; all values must be above zero."""
        along = zip(self.right, self.values, strict=True)
        return math.fsum((dot(axis, one) / value) * (dot(axis, other) / value) for axis, value in along)


def factors(columns: Columns) -> Factors:
    """Turn pairs of columns until all stand at right angles; there must be no more columns than rows.

    One-sided Jacobi (G. H. Golub and C. F. Van Loan, Matrix Computations, section 8.6; from memory): short, and exact
    to rounding also for columns of very unlike length.
    """
    count = len(columns)
    turned = [list(column) for column in columns]
    right = [[float(i == j) for i in range(count)] for j in range(count)]
    for _ in range(_SWEEPS):
        turns = [_turn(turned, right, i, j) for j in range(count) for i in range(j)]
        if not any(turns):
            break
    lengths = [length(column) for column in turned]
    order = sorted(range(count), key=lambda j: -lengths[j])
    left = [[value / lengths[j] if lengths[j] > 0.0 else 0.0 for value in turned[j]] for j in order]
    return Factors(left, [lengths[j] for j in order], [right[j] for j in order])


def _turn(turned: list[list[float]], right: list[list[float]], i: int, j: int) -> bool:
    """Turn two columns to a right angle; whether they were not at one."""
    across, first, second = dot(turned[i], turned[j]), length(turned[i]), length(turned[j])
    if abs(across) <= _ROUNDING * first * second:
        return False
    ratio = (second - first) * (second + first) / (2.0 * across)
    tangent = math.copysign(1.0, ratio) / (abs(ratio) + math.sqrt(1.0 + ratio * ratio))
    cosine = 1.0 / math.sqrt(1.0 + tangent * tangent)
    sine = cosine * tangent
    for columns in (turned, right):
        one, other = columns[i], columns[j]
        columns[i] = [cosine * a - sine * b for a, b in zip(one, other, strict=True)]
        columns[j] = [sine * a + cosine * b for a, b in zip(one, other, strict=True)]
    return True


def dot(one: Sequence[float], other: Sequence[float]) -> float:
    """The sum of products, the same in any order."""
    return math.fsum(a * b for a, b in zip(one, other, strict=True))


def length(column: Sequence[float]) -> float:
    """The root of the sum of squares, the same in any order; ``math.hypot`` is not."""
    return math.sqrt(dot(column, column))


def complement(columns: Columns) -> list[list[float]]:
    """Directions of length one at right angles to one another and to every column, which are of length one so."""
    rows = len(columns[0])
    taken = [list(column) for column in columns]
    rest = [[float(i == j) for i in range(rows)] for j in range(rows)]
    for known in taken:
        rest = [_without(one, known) for one in rest]
    found: list[list[float]] = []
    while len(found) < rows - len(columns):
        longest = max(rest, key=length)
        for known in (*taken, *found):  # once more, for what rounding left
            longest = _without(longest, known)
        found.extend(at_unit_length([longest]))
        rest = [_without(one, found[-1]) for one in rest]
    return found


def _without(one: Sequence[float], direction: Sequence[float]) -> list[float]:
    part = dot(one, direction)
    return [a - part * b for a, b in zip(one, direction, strict=True)]


def condition(columns: Columns) -> float:
    """Largest over smallest singular value; infinite where a column follows from the others."""
    values = factors(columns).values
    return values[0] / values[-1] if values[-1] > 0.0 else math.inf


def at_unit_length(columns: Columns) -> list[list[float]]:
    """Every column divided by its length; one of zeros stays."""
    lengths = [length(column) or 1.0 for column in columns]
    return [[value / one for value in column] for column, one in zip(columns, lengths, strict=True)]
