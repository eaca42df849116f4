"""Chance whose digits are the same on every machine: uniform numbers from the seed, and nothing but sums of them."""

from __future__ import annotations

import math
import random
from collections.abc import Sequence


class Chance:
    """Random numbers of one night; the same seed gives the same night, digit for digit."""

    def __init__(self, seed: int) -> None:
        self._random = random.Random(seed)

    def between(self, low: float, high: float) -> float:
        """A number from ``low`` to ``high``, all equally likely."""
        return low + (high - low) * self._random.random()

    def noise(self, relative: float) -> float:
        """A factor near one with the relative standard deviation ``relative``.

        Twelve uniform numbers have a variance of one; a logarithm or a cosine would differ between machines.
        """
        total = 0.0
        for _ in range(12):
            total += self._random.random()
        return 1.0 + relative * (total - 6.0)


def mean(values: Sequence[float]) -> float:
    """The mean, added up in order."""
    total = 0.0
    for value in values:
        total += value
    return total / len(values)


def relative_sd(values: Sequence[float]) -> float:
    """Standard deviation over mean, in per cent."""
    middle, squares = mean(values), 0.0
    for value in values:
        squares += (value - middle) * (value - middle)
    return 100.0 * math.sqrt(squares / (len(values) - 1)) / middle
