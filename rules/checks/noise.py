"""Where the scatter comes from: the residuals against a declared noise, and who shares a pooled precision."""

from __future__ import annotations

from scipy import special

from spikeward.rules.checks.subject import Subject, not_evaluated, number, series_words, source_of
from spikeward.rules.outcomes import NOT_EVALUATED, PASS, WARN, Check
from spikeward.rules.rounding import figure, percent
from spikeward.rules.rulebook import Limits
from spikeward.rules.solve.pooling import Pooling
from spikeward.rules.words import freedom, listed

_POOLED = "pooled_precision"


def noise(subject: Subject, limits: Limits) -> Check:
    """The residuals against the declared noise: the sum of their squares over its variances follows chi-squared.

    Judged on both sides: too much scatter, and too little, which tells of a noise that was declared too large.
    """
    solved = subject.solved
    if solved.scatter.kind != "declared":
        return not_evaluated("noise", "no noise is declared for this line", "Declare it under precision")
    left, warn_p = solved.degrees_of_freedom, number(limits, "warn_p")
    if solved.chi_squared is None or left < 1:
        return not_evaluated("noise", "no degree of freedom is left for residuals", "Measure more levels")
    above, below = (float(tail(left, solved.chi_squared)) for tail in (special.chdtrc, special.chdtr))
    p = min(1.0, 2.0 * min(above, below))
    told = "" if warn_p is None else f"warns below p {figure(warn_p)}"
    broken = warn_p is not None and p < warn_p
    how = "scatter as the declared noise lets expect"
    if broken:
        how = f"scatter {'more' if above < below else 'less'} than the declared noise"
    sentence = f"The vessels {how}: chi-squared is {figure(solved.chi_squared)} with {freedom(left)}, p {figure(p, 2)}"
    remedy = "Look for a slip or a curve" if above < below else "Declare a smaller noise, from readings of many vessels"
    verdict = WARN if broken else PASS if told else NOT_EVALUATED
    return Check(
        "noise", verdict, f"{sentence} ({told})." if told else f"{sentence}.", solved.chi_squared, "1", told,
        source_of(limits, "warn_p", "noise"), remedy if broken else "",
    )  # fmt: skip


def pooled_precision(subject: Subject, limits: Limits) -> Check:
    """Whose scatter was pooled, and which series Cochran's test refuses; if it refuses one, each keeps its own."""
    context = subject.context
    if context.rules.precision.comes_from != "pooled":
        return not_evaluated(_POOLED, "the rules ask for no pooled precision", "Declare it under precision")
    pooling = context.pooling.get(subject.line_key)
    if pooling is None and not context.batch.closed:
        return not_evaluated(_POOLED, "the precision is pooled when the batch closes")
    if pooling is None or len(pooling.series) < 2:
        return not_evaluated(_POOLED, "no two series of this line have scatter to pool", "Measure four or more vessels")
    found = pooling.pooled
    source = "Cochran's test at 1 %"
    if found.outlying:
        return Check(
            _POOLED, WARN, f"{_refused(pooling)}; each series keeps its own precision.", found.relative_sd, "1",
            "no series beyond its share", source, "Look for a slip in that series; repeat it",
        )  # fmt: skip
    sentence = (
        f"{len(pooling.series)} series share one scatter, {percent(found.relative_sd)} of the largest signal with "
        f"{freedom(int(found.dof))}; Cochran's test finds them alike."
    )
    return Check(_POOLED, PASS, sentence, found.relative_sd, "1", "no series beyond its share", source)


def _refused(pooling: Pooling) -> str:
    """Which series scatter more than the others, with their share in the sum of squares."""
    found = pooling.pooled
    told = [
        f"{series_words(pooling.series[place])} ({percent(found.shares[place])} of all squares, chance allows "
        f"{percent(found.limits[place])})"
        for place in found.outlying
    ]
    return f"The scatter of {len(pooling.series)} series cannot be pooled, because of {listed(told)}"
