"""The cells for which the stated coverage should hold, and how far chance may take them from it."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from itertools import product

from scipy.stats import binom

from tests.external.coverage_draws import (
    CONTENT,
    COVERAGE,
    DESIGNS,
    DRAWS,
    KINDS,
    MODELS,
    NOISE,
    VESSELS,
    Cell,
    Found,
)

WITHIN = 0.005
"""Half a percentage point: what 10,000 draws allow in a single cell, 2.3 standard deviations."""
FAMILY = 0.01
"""Probability that any cell of a family lies beyond its bounds though the stated coverage is right."""
MODEL_NOISE = {"blocks": (0.005, 0.02), "curve": (0.001, 0.005), "log": (0.1, 0.3)}
MODEL_CONTENT = {"blocks": (0.0, 0.3, 1.0), "curve": (0.0, 0.1, 0.3), "log": (0.1, 0.3, 1.0)}


@dataclass(frozen=True)
class Family:
    """Cells for which the stated coverage should hold."""

    name: str
    cells: tuple[Cell, ...]


def grid(design: str, kind: str = "constant", precision: str = "own") -> tuple[Cell, ...]:
    """All cells of one design with one straight line."""
    return tuple(
        Cell(design, n, noise, content, kind, precision) for n, noise, content in product(VESSELS, NOISE, CONTENT)
    )


def families() -> tuple[Family, ...]:
    """Where the model holds: exactly for straight lines with constant noise, nearly for the others."""
    single = tuple(Cell("flasks", 2, noise, c, "constant", "declared") for noise, c in product(NOISE, CONTENT))
    straight = [Family(words, grid(design)) for design, words in DESIGNS.items()]
    known = [
        Family(f"flasks, declared noise: {words}", grid("flasks", kind, "declared")) for kind, words in KINDS.items()
    ]
    models = [
        Family(words, tuple(Cell(d, n, *rest) for n, *rest in product((4, 6, 12), MODEL_NOISE[d], MODEL_CONTENT[d])))
        for d, words in MODELS.items()
    ]
    return (*straight, Family("one addition, declared noise", single), *known, *models)


@cache
def bounds(cells: int) -> tuple[int, int]:
    """Covered draws of a cell between which all of so many cells lie, but for a probability of ``FAMILY``.

    Exact quantiles of the binomial distribution, at ``FAMILY`` over twice the number of cells on either side.
    """
    side = FAMILY / (2 * cells)
    return int(binom.ppf(side, DRAWS, COVERAGE)), int(binom.isf(side, DRAWS, COVERAGE))


def beyond(found: Found, cells: int) -> bool:
    """Whether a cell covers too little with its refusals, or too much without them."""
    least, most = bounds(cells)
    return found.covered + found.refused < least or found.covered > most


def by_chance() -> float:
    """Probability that a cell of the stated coverage lies more than ``WITHIN`` away from it."""
    least, most = round(DRAWS * (COVERAGE - WITHIN)), round(DRAWS * (COVERAGE + WITHIN))
    return float(binom.cdf(least - 1, DRAWS, COVERAGE) + binom.sf(most, DRAWS, COVERAGE))
