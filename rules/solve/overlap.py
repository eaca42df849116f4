"""Several analytes that answer at the same sensors: the generalised standard addition.

With aliquots of one test solution every sensor s sees y_s = sum over analytes a of K_as (C0_a + x_a), a plane in the
added contents. Its slopes are the sensitivities K, its height without any addition is K' C0, and C0 follows from the
heights of all sensors together (B. E. H. Saxberg and B. R. Kowalski, Anal. Chem. 51 (1979) 1031). It takes out only
what was itself added.

The height is fitted through all vessels. Taken from the vessels without addition alone, the scatter of those few would
go undiminished into every content; for data without scatter the two agree.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

from scipy.special import fdtrc

from spikeward.rules.solve.factors import Columns, at_unit_length, complement, condition, dot, factors, length
from spikeward.rules.solve.line import DUST
from spikeward.rules.solve.planes import (
    Additions,
    Planes,
    Row,
    Rows,
    additions_of,
    dependent,
    lifted,
    mixed,
    planes_of,
    roots_of,
)
from spikeward.rules.solve.verdict import OUT_OF_RANGE, unreadable
from spikeward.rules.uncertainty.fieller import g_value, t_quantile
from spikeward.rules.words import counted, listed

Table = tuple[Row, ...]

NO_FREEDOM = (
    "there are only as many vessels as the calculation needs: the scatter is not known, so no uncertainty follows from "
    "these readings"
)
NO_SCATTER = (
    "the signals follow the additions exactly: they show no scatter, and an uncertainty of zero is not a real one"
)


@dataclass(frozen=True, slots=True)
class Overlap:
    """Contents of analytes that overlap. Without contents ``no_number`` says why.

    Contents, ``standard_uncertainties`` and ``covariance`` (analytes x analytes) are in the units in which the contents
    were added; where they are None ``no_uncertainty`` says why. ``degrees_of_freedom`` is vessels - analytes - 1, of
    every sensor and every content. ``g`` is per analyte, see ``solve_overlap``.

    ``sensitivities`` (analytes x sensors) are signal per content, ``intercepts`` and ``residual_sds`` signal per
    sensor, the latter in a vessel at V = V0. ``fitted`` and ``residuals`` (vessels x sensors) are volume-corrected
    signals in the order given. ``background_effects`` (analytes x sensors) is the change of a content per unit by which
    the background of a sensor rises.

    Condition numbers are in the 2-norm. ``condition_as_given`` is of the sensitivities in their units and changes with
    these. ``condition_scaled`` has each sensor over its largest signal and each analyte at unit length: how alike the
    analytes look. ``condition_of_additions`` is of the additions around their weighted mean, each analyte at unit
    length: 1 where they were added independently. ``sensors_agree_p`` is the probability of sensors that contradict
    each other so much if they see nothing but the analytes: a small one means that something else overlaps. It is None
    without spare sensors, or without the degrees of freedom to tell.
    """

    analytes: tuple[str, ...]
    sensors: tuple[str, ...]
    degrees_of_freedom: int = 0
    no_number: str = ""
    no_uncertainty: str = ""
    contents: Row = ()
    standard_uncertainties: Row | None = None
    covariance: Table | None = None
    g: Row | None = None
    sensitivities: Table = ()
    intercepts: Row = ()
    residual_sds: Row | None = None
    fitted: Table = ()
    residuals: Table = ()
    background_effects: Table = ()
    condition_as_given: float | None = None
    condition_scaled: float | None = None
    condition_of_additions: float | None = None
    sensors_agree_p: float | None = None


@dataclass(frozen=True, slots=True)
class _Combined:
    """The sensors combined to contents: ``shares`` of heights in contents, per analyte and sensor."""

    contents: Sequence[float]
    shares: Columns
    spare: Columns  # combinations of sensors in which no analyte is seen


def solve_overlap(
    additions: Rows,
    signals: Rows,
    dilutions: Sequence[float],
    analytes: Sequence[str],
    sensors: Sequence[str],
    coverage: float,
    noise: Sequence[float] | None = None,
) -> Overlap:
    """Solve one series for all its analytes together.

    Parameters
    ----------
    additions : content added per aliquot, Cs v / V0, shape (vessels, analytes), each analyte in its own unit
    signals : volume-corrected signals (S - B) V / V0, shape (vessels, sensors)
    dilutions : V / V0 of the vessels; the noise of signals is taken as constant, so weights are (V0 / V)²
    analytes, sensors : names, for sentences
    coverage : of the interval that decides whether a response is lost in the scatter, such as 0.95
    noise : standard deviation of a signal at each sensor, declared or pooled, above zero, in proportion; it weighs the
        sensors where there are more of them than analytes. Without it each counts relative to its largest signal. A
        series' own residuals must not weigh them: at few degrees of freedom intervals of 95 % then hold 85 to 93 %

    Returns
    -------
    with contents, or with the sentence why there are none

    Notes
    -----
    Let A turn heights into contents, d = (1, -C0), X be the additions with a column of ones and R the residuals; then
    cov(C0) = d'(X'WX)^-1 d A R'WR A' / dof (delta method). R'WR holds what sensors that are read in one vessel have in
    common: their covariance is estimated, not taken as zero. A does not depend on R, so t(dof) u is the interval. A
    factor on the added contents of one analyte is the same factor on its content alone.

    The net response A y to an analyte has slope 1 in that analyte and 0 in the others. ``g`` is t² u² of that slope, as
    for a straight line: from 1 on the response is lost in the scatter, and no content is given.
    """
    bare = Overlap(tuple(analytes), tuple(sensors), max(len(additions) - len(analytes) - 1, 0))
    refused = _unusable(additions, signals, dilutions, bare)
    if refused:
        return replace(bare, no_number=refused)
    try:
        return _solved(bare, additions, signals, dilutions, coverage, noise)
    except OverflowError:
        return replace(bare, no_number=OUT_OF_RANGE)


def _unusable(additions: Rows, signals: Rows, dilutions: Sequence[float], bare: Overlap) -> str:
    """Why vessels and sensors cannot carry these analytes whatever they read, or an empty text."""
    names, analytes, sensors = listed(bare.analytes), len(bare.analytes), len(bare.sensors)
    if sensors < analytes:
        read = f"{counted(sensors, 'sensor')} ({listed(bare.sensors)})" if sensors else "no sensor"
        return f"{names} answer together and {read} can be used: at least {analytes} are needed, one for every analyte"
    if len(additions) < analytes + 1:
        return (
            f"{counted(len(additions), 'vessel')} cannot carry {counted(analytes, 'analyte')} ({names}): at least "
            f"{analytes + 1} are needed, one without addition and one more for every analyte"
        )
    refused = unreadable([*(value for rows in (additions, signals) for row in rows for value in row), *dilutions])
    return refused or ("" if all(root * root > 0.0 for root in roots_of(dilutions)) else OUT_OF_RANGE)


def _solved(
    bare: Overlap,
    additions: Rows,
    signals: Rows,
    dilutions: Sequence[float],
    coverage: float,
    noise: Sequence[float] | None,
) -> Overlap:
    added = additions_of(additions, roots_of(dilutions))
    refused = _added_together(added, bare.analytes)
    if refused:
        return replace(bare, no_number=refused)
    planes = planes_of(added, signals)
    drawn = _drawn(bare, planes, signals, min(dilutions))
    refused = _alike(planes, bare.analytes)
    if refused:
        return replace(drawn, no_number=refused)
    combined = _combined(planes, _tuning(planes, noise))
    known = replace(
        drawn,
        contents=lifted(combined.contents, added.powers),
        background_effects=_background_effects(planes, combined, dilutions),
        sensors_agree_p=_agreement(planes, combined, drawn.degrees_of_freedom),
    )
    if not all(math.isfinite(value) for row in (known.contents, *known.background_effects) for value in row):
        return replace(drawn, no_number=OUT_OF_RANGE)
    if known.degrees_of_freedom == 0:
        return replace(known, no_uncertainty=NO_FREEDOM)
    net = [mixed(row, planes.residuals) for row in combined.shares]
    if any(not any(column) for column in net):
        return replace(known, no_uncertainty=NO_SCATTER)
    g = _g(added, net, known.degrees_of_freedom, coverage)
    refused = _lost(g, bare.analytes)
    if refused:
        return replace(drawn, no_number=refused, g=g)
    return _with_uncertainty(replace(known, g=g), planes, combined, net)


def _added_together(added: Additions, analytes: Sequence[str]) -> str:
    """Which analytes were never added by themselves, or an empty text."""
    together = [analytes[a] for a in dependent(added.columns, DUST * math.sqrt(added.weight))]
    if len(together) == 1:
        return (
            f"{together[0]} was added to no vessel, or to all of them alike: what overlaps can be taken out only if it "
            "was added by itself to some vessels"
        )
    if together:
        return (
            f"{listed(together)} were always added together in the same way: at least one vessel must receive one of "
            "them by itself, or their responses cannot be told apart"
        )
    return ""


def _drawn(bare: Overlap, planes: Planes, signals: Rows, least: float) -> Overlap:
    """The planes in the units given, and the condition numbers."""
    added, powers, dof = planes.additions, planes.powers, bare.degrees_of_freedom
    by_vessel = zip(*planes.residuals, strict=True)
    residuals = tuple(lifted([r / root for r in row], powers) for row, root in zip(by_vessel, added.roots, strict=True))
    sds = [length(column) / math.sqrt(dof) / least for column in planes.residuals] if dof > 0 else None
    return replace(
        bare,
        sensitivities=tuple(
            lifted(row, [power - of_x for power in powers])
            for row, of_x in zip(planes.answers, added.powers, strict=True)
        ),
        intercepts=lifted(planes.heights, powers),
        residual_sds=lifted(sds, powers) if sds is not None else None,
        residuals=residuals,
        fitted=tuple(
            tuple(signal - r for signal, r in zip(*rows, strict=True)) for rows in zip(signals, residuals, strict=True)
        ),
        condition_as_given=_condition_as_given(planes),
        condition_scaled=_known(condition(at_unit_length(planes.tuned(_tuning(planes, None))))),
        condition_of_additions=_known(condition(at_unit_length(added.columns))),
    )


def _condition_as_given(planes: Planes) -> float | None:
    powers = [[p - of_x for p in planes.powers] for of_x in planes.additions.powers]
    highest = max(max(row) for row in powers)  # a common factor changes no condition number
    together = [[power - highest for power in row] for row in powers]
    return _known(condition([lifted(*rows) for rows in zip(planes.answers, together, strict=True)]))


def _known(value: float) -> float | None:
    return value if math.isfinite(value) else None


def _tuning(planes: Planes, noise: Sequence[float] | None) -> list[float]:
    """What a sensor counts: one over its noise, or over its largest signal."""
    if noise is None:
        return [1.0 / largest if largest > 0.0 else 0.0 for largest in planes.largest]
    least = min(noise)
    highest = max(planes.powers)
    return [math.ldexp(least / one, power - highest) for one, power in zip(noise, planes.powers, strict=True)]


def _alike(planes: Planes, analytes: Sequence[str]) -> str:
    """Which analytes the sensors cannot tell apart, or an empty text."""
    added = planes.additions
    step = added.factors.values[-1] / math.sqrt(added.weight)  # by which additions move a signal for a response of 1
    alike = [analytes[a] for a in dependent(planes.tuned(_tuning(planes, None)), DUST / step)]
    if len(alike) == 1:
        return f"no sensor responds to the additions of {alike[0]}: read it at a sensor that does"
    if alike:
        return (
            f"all sensors respond to {listed(alike)} in one proportion, so they cannot be told apart: read another "
            "sensor, at which they differ"
        )
    return ""


def _combined(planes: Planes, tuning: Sequence[float]) -> _Combined:
    """Least squares over the sensors, K' C0 = heights, each sensor times its tuning."""
    found = factors(planes.tuned(tuning))
    contents = found.solve([t * height for t, height in zip(tuning, planes.heights, strict=True)])
    unit = [[t * float(s == at) for at in range(len(tuning))] for s, t in enumerate(tuning)]
    by_sensor = [found.solve(one) for one in unit]
    spare = [[t * part for t, part in zip(tuning, one, strict=True)] for one in complement(found.left)]
    return _Combined(contents, [list(row) for row in zip(*by_sensor, strict=True)], spare)


def _background_effects(planes: Planes, combined: _Combined, dilutions: Sequence[float]) -> Table:
    """A background that rises by one lowers y by V / V0 at its sensor; what that plane does to the contents."""
    height, slopes, _ = planes.additions.plane(dilutions)
    fall = height - dot(slopes, combined.contents)
    return tuple(
        lifted([-share * fall for share in row], [of_x - power for power in planes.powers])
        for row, of_x in zip(combined.shares, planes.additions.powers, strict=True)
    )


def _agreement(planes: Planes, combined: _Combined, dof: int) -> float | None:
    """Hotelling's T² of the combinations in which no analyte is seen, which must then be zero."""
    spare, columns = len(combined.spare), [mixed(one, planes.residuals) for one in combined.spare]
    if not 0 < spare <= dof:
        return None
    found = factors(columns)
    if found.values[-1] == 0.0:
        return None
    off = [dot(one, planes.heights) for one in combined.spare]
    t_squared = dof * found.inverse_product(off, off) / planes.additions.reach(combined.contents)
    return float(fdtrc(spare, dof - spare + 1, t_squared * (dof - spare + 1) / (dof * spare)))


def _g(added: Additions, net: Columns, dof: int, coverage: float) -> Row:
    t, axes = t_quantile(dof, coverage), range(len(net))
    own = [added.factors.inverse_product(unit, unit) for unit in ([float(a == b) for b in axes] for a in axes)]
    return tuple(g_value(t, 1.0, length(column) * math.sqrt(one / dof)) for column, one in zip(net, own, strict=True))


def _lost(g: Row, analytes: Sequence[str]) -> str:
    """Which analytes' responses the scatter hides, or an empty text."""
    lost = [name for name, one in zip(analytes, g, strict=True) if not one < 1.0]
    if not lost:
        return ""
    return (
        f"what the sensors show of {listed(lost)} by itself does not differ from zero: the scatter of the points is as "
        "large as the response to the additions, and the interval of the contents has no end"
    )


def _with_uncertainty(known: Overlap, planes: Planes, combined: _Combined, net: Columns) -> Overlap:
    factor = planes.additions.reach(combined.contents) / known.degrees_of_freedom
    powers = planes.additions.powers
    covariance = tuple(
        lifted([factor * dot(one, other) for other in net], [power + of_x for of_x in powers])
        for one, power in zip(net, powers, strict=True)
    )
    sds = lifted([math.sqrt(factor) * length(column) for column in net], powers)
    return replace(known, standard_uncertainties=sds, covariance=covariance)
