"""Published figures that are no series of one sample: a sheet of them for each publication, against the functions."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from decimal import Decimal

import numpy as np

from spikeward.rules.solve.line import Fit, Floats, fit_lines
from spikeward.rules.solve.straightness import Straightness, straightness


@dataclass(frozen=True)
class Figure:
    """One or several numbers as they are published, and ours.

    ``why`` is empty where a number stands in print; else it says what the number is. ``within`` replaces half a unit of
    the last digit, and ``relative`` widens it to a share of the number.
    """

    of: str
    published: str  # numbers with their digits, between blanks
    ours: tuple[float, ...]
    why: str = ""
    within: float | None = None
    relative: float = 0.0

    @property
    def values(self) -> tuple[Decimal, ...]:
        """The published numbers."""
        return tuple(Decimal(each) for each in self.published.split())

    def tolerance(self, value: Decimal) -> float:
        """How far our number may be away from one of them."""
        half = float(Decimal(1).scaleb(int(value.as_tuple().exponent)) / 2)
        return max(half if self.within is None else self.within, self.relative * abs(float(value)))


@dataclass(frozen=True)
class Sheet:
    """The figures of one publication; ``wrong`` ones are in print or in copies, and must not be what we find."""

    title: str
    source: str
    figures: tuple[Figure, ...]
    wrong: tuple[Figure, ...] = ()
    memory: str = ""


def figure(
    of: str, published: str, *ours: float, why: str = "", within: float | None = None, relative: float = 0.0
) -> Figure:
    """A figure, its numbers one after the other."""
    return Figure(of, published, tuple(float(each) for each in ours), why, within, relative)


def numbers(text: str) -> list[float]:
    """Numbers between blanks."""
    return [float(each) for each in text.split()]


def column(values: Sequence[float]) -> Floats:
    """Numbers as the vessels of one series."""
    return np.array([float(each) for each in values]).reshape(-1, 1)


def line(x: Sequence[float], y: Sequence[float], w: Sequence[float] | None = None, sd: float | None = None) -> Fit:
    """The straight line of one series."""
    weights = column(w if w is not None else [1.0] * len(x))
    known = None if sd is None else np.array([sd])
    return fit_lines(column(x), column(y), weights, np.ones_like(weights), known).of(0)


def tests_of(x: Sequence[float], y: Sequence[float]) -> Straightness:
    """Whether the points of one series are straight."""
    return straightness(column(x), column(y), np.ones((len(x), 1)))


def without_covariance(fit: Fit) -> float:
    """The uncertainty of the content if intercept and slope were independent, which they are not."""
    relative = (fit.intercept_uncertainty / fit.intercept) ** 2 + (fit.slope_uncertainty / fit.slope) ** 2
    return float(fit.content * relative**0.5)
