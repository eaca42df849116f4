"""Where the scatter of a line comes from: its own residuals, those of the whole batch, or a declaration."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from spikeward.rules.prepared import PreparedLine
from spikeward.rules.records import SeriesKey
from spikeward.rules.rulebook import Noise, Rulebook
from spikeward.rules.solve.solved import OWN, Scatter, Solved
from spikeward.rules.solve.weights import Pooled, pool
from spikeward.rules.words import counted, freedom, line_words, listed

LEAST_VESSELS = 4
"""A series with fewer vessels has too little scatter of its own to lend."""


@dataclass(frozen=True, slots=True)
class Pooling:
    """The pooled precision of one line of a batch: what came out, and whose scatter it is, in the same order."""

    pooled: Pooled
    series: tuple[SeriesKey, ...]


def lends(solved: Solved) -> bool:
    """Whether a line has a scatter of its own that can be pooled: a straight line through four or more vessels."""
    return (
        solved.prepared.response == "linear"
        and solved.content is not None
        and solved.slope is not None
        and solved.degrees_of_freedom >= LEAST_VESSELS - 2
        and solved.relative_scatter is not None
    )


def pooling_of(lenders: Sequence[Solved]) -> Pooling | None:
    """Pool the relative residual scatter of some lines; None where fewer than two have any."""
    ordered = sorted(lenders, key=lambda one: one.prepared.key)
    if len(ordered) < 2:
        return None
    pooled = pool(
        [one.relative_scatter or 0.0 for one in ordered],
        [1.0] * len(ordered),
        [float(one.degrees_of_freedom) for one in ordered],
    )
    return Pooling(pooled, tuple(one.prepared.key for one in ordered))


def scatter_by_pool(line: PreparedLine, pooling: Pooling | None) -> Scatter:
    """The scatter of one line where the rules ask for a pooled one and the batch has closed."""
    if line.response not in ("linear", "curve"):
        return Scatter(words="its own scatter, because only the scatter about straight lines is pooled")
    if pooling is None:
        return Scatter(words="its own scatter, because the batch has no two straight lines whose scatter can be pooled")
    if pooling.pooled.outlying:
        names = [pooling.series[place].sample for place in pooling.pooled.outlying]
        return Scatter(
            words=f"its own scatter, because the series of the batch do not scatter alike ({listed(names)} beyond "
            "Cochran's limit at 1 %)"
        )
    if not pooling.pooled.relative_sd > 0.0:
        return Scatter(words="its own scatter, because the series of the batch show none")
    told = f"pooled over {counted(len(pooling.series), 'series').removesuffix('s')} of the batch"
    return Scatter(
        "pooled",
        relative=pooling.pooled.relative_sd,
        degrees_of_freedom=pooling.pooled.dof,
        words=f"{told}, {freedom(int(pooling.pooled.dof))}",
    )


def scatter_before(line: PreparedLine, rules: Rulebook) -> Scatter:
    """The scatter of one line as the rules ask for it, before anything is pooled."""
    if rules.precision.comes_from == "pooled":
        return Scatter(words="its own scatter, until the batch closes and is pooled")
    if rules.precision.comes_from == "own":
        return OWN
    name = line_words(line.analyte, line.line)
    noise = _noise(line, rules)
    if noise is None:
        return Scatter(words=f"its own scatter, because no noise is declared for {name}")
    if noise.unit != line.signal_unit:
        return Scatter(
            problem=f"the noise of {name} is declared in {noise.unit} and its signals are in "
            f"{line.signal_unit or 'no unit'}: declare it in the unit of the signals under precision: noise"
        )
    if line.response == "log" and noise.relative:
        return Scatter(
            problem=f"the noise of {name} is declared with a relative part, and the noise of a potential does not grow "
            "with it: leave relative out under precision: noise"
        )
    return Scatter("declared", noise=noise, words="the declared noise")


def _noise(line: PreparedLine, rules: Rulebook) -> Noise | None:
    declared = rules.precision.noise
    return declared.get(line.line) or declared.get(line_words(line.analyte, line.line)) or declared.get(line.analyte)
