"""Standards and preparations of a rule file become records."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from spikeward.daemon.rule_file.walk import defaults
from spikeward.rules.naming import number_of
from spikeward.rules.quantities import Quantity
from spikeward.rules.rulebook import Addition, Electrode, InternalStandard, Preparation, SampleRule, Spike, Standard
from spikeward.rules.schema_preparation import ADDITION

Values = Mapping[str, Any]


def standard(name: str, each: Values) -> Standard:
    """A spiking standard, of a mix or of one analyte."""
    contents = each["contents"] or {each["analyte"]: each["content"]}
    return Standard(name, contents, each["lot"], each["expires"], each["density"])


def preparation(each: Values, standards: tuple[str, ...], line: int) -> Preparation:
    """How vessels were made; ``standards`` are the names of all, in the order of the file."""
    recovery, spike, within = each["recovery"], each["spike"], each["internal_standard"]
    return Preparation(
        applies=each["for"],
        design=each["design"],
        aliquot=_vessels(each["aliquot"]),
        final=_vessels(each["final"]) if each["final"] else {},
        additions=tuple(
            _addition(one, each["design"], standards) for one in each["additions"] or (defaults(ADDITION),)
        ),
        response=each["response"],
        spiked=each["spiked"],
        level_0=each["level_0"],
        diluent=each["diluent"],
        density=each["density"],
        internal_standard=InternalStandard(within["for"], within["entered"], within["amount"]) if within else None,
        electrode=_electrode(each["electrode"]) if each["electrode"] else None,
        # Another unit of report is reached by a way back on which nothing was done.
        sample=_sample(each["sample"] or {}) if each["sample"] or each["report_in"] or recovery else None,
        recovery=(recovery["factor"], recovery["uncertainty"]) if recovery else None,
        spike=Spike(spike["standard"], spike["delivered"], spike["added"]) if spike else None,
        report_in=each["report_in"],
        line=line,
    )


def _vessels(each: Values) -> dict[str, Quantity]:
    found = _by_level(each["levels"])
    common = each["volume"] if each["volume"] is not None else each["mass"]
    if common is not None:
        found[""] = common
    return found


def _by_level(levels: Values) -> dict[str, Quantity]:
    return {number_of(level): quantity for level, quantity in levels.items()}


def _addition(each: Values, design: str, standards: tuple[str, ...]) -> Addition:
    deliveries = each["deliveries"] or ("each" if design == "successive" else "total")
    if each["amounts"]:
        return Addition("", _by_level(each["amounts"]), deliveries)
    return Addition(each["standard"] or standards[0], _by_level(each["levels"]), deliveries)


def _electrode(each: Values) -> Electrode:
    slope, uncertainty = each["slope"], each["uncertainty"]
    return Electrode(
        charge=each["charge"],
        temperature=each["temperature"].to("Cel"),
        slope=slope.to("mV") if slope is not None else None,
        uncertainty=uncertainty.to("mV") if uncertainty is not None else None,
    )


def _sample(each: Values) -> SampleRule:
    return SampleRule(**{**each, "dilution": tuple(each.get("dilution") or ())})
