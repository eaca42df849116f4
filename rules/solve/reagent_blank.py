"""The reagent blank: analyte that the reagents bring into every vessel, an amount that counts with the additions.

It comes from series of their own, reagents and additions without a sample, or it is declared. With n_b in every vessel
the points lie on y = k (C0 + x) with x = (Cs v + n_b) / V0.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from decimal import Decimal

from spikeward.rules.prepared import PreparedLine
from spikeward.rules.quantities import UNITS, Quantity
from spikeward.rules.rounding import figure
from spikeward.rules.rulebook import Rulebook
from spikeward.rules.solve.common import with_drift
from spikeward.rules.solve.solved import Reagent, Solved
from spikeward.rules.solve.vessel_signal import mean_of
from spikeward.rules.uncertainty.interval import Component, effective_degrees_of_freedom
from spikeward.rules.words import unit_words

ROLE = "reagent_blank"
UNKNOWN = "how well it is known is not in the uncertainty"


def reagent_of(blanks: Sequence[Solved], line: PreparedLine, rules: Rulebook) -> Reagent | None:
    """The amount that reagents bring into every vessel of a line.

    Several reagent blanks give their mean, with s/sqrt(n) for its uncertainty and never less than their fits say; one
    gives its own, with that of its fit.

    Parameters
    ----------
    blanks : the solved series of role reagent_blank of the same batch, analyte and line, in any order

    Returns
    -------
    None where the rules do not ask for it, and for a reagent blank itself. An amount of zero without an uncertainty
    says in ``note`` why nothing was subtracted
    """
    if not rules.blanks.reagent or line.key.role == ROLE:
        return None
    declared = rules.blanks.reagent_amounts.get(line.analyte)
    molar_mass = rules.molar_masses.get(line.analyte)
    if declared is not None:
        return _declared(declared.content, declared.standard_uncertainty, line, molar_mass)
    ordered = sorted(blanks, key=lambda one: one.prepared.key)
    factors = [_factor(one, line, molar_mass) for one in ordered]
    left_out = [factor for factor in factors if isinstance(factor, str)]
    used = [(one, factor) for one, factor in zip(ordered, factors, strict=True) if not isinstance(factor, str)]
    if not used:
        why = "; ".join(left_out) or "the batch has none that is solved"
        return Reagent(0.0, None, 0, note=f"No reagent blank was subtracted: {why}")
    return _measured(used, left_out, line)


def _declared(amount: Quantity, uncertainty: float | None, line: PreparedLine, molar_mass: Quantity | None) -> Reagent:
    unit = _amount_unit(line)
    scale = _between(unit, (amount.dimension, UNITS[amount.unit][1]), molar_mass) if unit is not None else None
    if scale is None:
        told = f"the reagent amount of {line.analyte} is given as {amount}, and contents are in {unit_words(line.unit)}"
        return Reagent(0.0, None, 0, problem=f"{told}: give it in a unit that goes with them, or the molar mass")
    value = float(amount.value * scale)
    told = f"Reagents bring {amount} into every vessel, as declared; it was counted with the additions"
    if uncertainty is None:
        return Reagent(value, None, 0, note=f"{told}, and {UNKNOWN}")
    return Reagent(value, uncertainty * float(scale), math.inf, note=told)


def _measured(used: Sequence[tuple[Solved, float]], left_out: Sequence[str], line: PreparedLine) -> Reagent:
    amounts = [one.content.content * factor for one, factor in used if one.content is not None]
    mean, n = mean_of(amounts, [1] * len(amounts)), len(amounts)
    effects = [factor * (one.background_effect or 0.0) for one, factor in used]
    through = mean_of(effects, [1] * len(effects))
    fits = [
        Component(factor * with_drift(one), one.scatter_degrees_of_freedom)
        for one, factor in used
        if one.fit_uncertainty is not None and one.scatter_degrees_of_freedom > 0
    ]
    floor = math.hypot(*(fit.standard_uncertainty for fit in fits)) / math.sqrt(len(fits) * n) if fits else 0.0
    between = math.hypot(*(amount - mean for amount in amounts)) / math.sqrt((n - 1) * n) if n > 1 else 0.0
    u, dof = (between, float(n - 1)) if n > 1 and between >= floor else (floor, _dof(fits))
    source = f"the mean of {n} reagent blanks" if n > 1 else "one reagent blank"
    told = f"Reagents bring {_in_words(mean, line)} into every vessel, {source}; it was counted with the additions"
    told = told if u > 0.0 else f"{told}, and {UNKNOWN}"
    note = "; ".join([told, *left_out])
    if u > 0.0:
        return Reagent(mean, u, dof, note=note, background_effect=through)
    return Reagent(mean, None, 0, note=note, background_effect=through)


def _dof(fits: Sequence[Component]) -> float:
    return effective_degrees_of_freedom(fits) if fits else 0


def _factor(blank: Solved, line: PreparedLine, molar_mass: Quantity | None) -> float | str:
    """From the content of a reagent blank to the amount in a vessel of the line, or why it cannot be used."""
    name = f"reagent blank {blank.prepared.key.sample}".rstrip()
    if blank.content is None:
        return f"{name} gives no number ({blank.no_number})"
    aliquots = {vessel.aliquot for vessel in blank.prepared.vessels if not vessel.excluded}
    if len(aliquots) != 1:
        return f"the aliquots of {name} differ: the same amount in every vessel is then no content that they share"
    own, wanted = _amount_unit(blank.prepared), _amount_unit(line)
    scale = _between(wanted, own, molar_mass) if own is not None and wanted is not None else None
    if scale is None:
        told = f"{name} is in {unit_words(blank.prepared.unit)} and the sample in {unit_words(line.unit)}"
        return f"{told}: spike both with one standard, or declare the molar mass"
    return aliquots.pop() * float(scale)


_Unit = tuple[str, Decimal]  # dimension, and factor to its first unit


def _amount_unit(line: PreparedLine) -> _Unit | None:
    """The unit of amounts in the vessels of a line: that of its content times that of its aliquot."""
    if line.unit not in UNITS:
        return None
    dimension, factor = UNITS[line.unit]
    aliquot, size = UNITS[line.aliquot_unit]
    kind, _, per = dimension.partition(" per ")
    return (kind, factor * size) if per == aliquot else None


def _between(wanted: _Unit, given: _Unit, molar_mass: Quantity | None) -> Decimal | None:
    """What an amount is multiplied by to come from one unit into another; None where they do not go together."""
    scale = given[1] / wanted[1]
    if given[0] == wanted[0]:
        return scale
    if molar_mass is None or {given[0], wanted[0]} != {"mass", "amount"}:
        return None
    per_amount = molar_mass.in_unit("g/mol")
    return scale / per_amount if wanted[0] == "amount" else scale * per_amount


def _in_words(amount: float, line: PreparedLine) -> str:
    """An amount in the unit that keeps it between 1 and 1000, as far as the table goes."""
    unit = _amount_unit(line)
    if unit is None:
        return f"{figure(amount)} {unit_words(line.unit)} {line.aliquot_unit}"
    codes = ("g", "mg", "ug", "ng") if unit[0] == "mass" else ("mol", "mmol", "umol", "nmol", "pmol")
    shown = [(amount * float(unit[1] / UNITS[code][1]), code) for code in codes]
    value, code = next(((value, code) for value, code in shown if abs(value) >= 1.0), shown[-1])
    return f"{figure(value)} {unit_words(code)}"
