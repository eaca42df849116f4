"""What is known of the sample behind a test solution: mass or volume, digest, dry matter, and its dilutions."""

from __future__ import annotations

from collections.abc import Iterable
from decimal import Decimal
from enum import Enum

from spikeward.rules.quantities import Quantity
from spikeward.rules.rulebook import SampleRule
from spikeward.rules.sources import PLACES, Findings, Sources


class Absent(Enum):
    """A quantity that the rules ask for and that is not there, or not possible; noted as missing or as a problem."""

    ABSENT = "absent"


ABSENT = Absent.ABSENT

_MEASURES = {
    "mass": ("mass",), "volume": ("volume",), "digest": ("volume", "mass"), "dry_matter": ("fraction",),
    "moisture": ("fraction",),
}  # fmt: skip


def of_sample(
    rule: SampleRule, name: str, sources: Sources, findings: Findings, level: str | None = None
) -> Quantity | Absent | None:
    """One quantity of the sample: what is told of it, else what the rule file says.

    Parameters
    ----------
    level : of a sample of its own at each level; None where all levels are one

    Returns
    -------
    None where nobody asks for it
    """
    given: Quantity | str | None = getattr(rule, name)
    before = len(findings.problems)
    quantity = sources.quantity(name, level, findings, *_MEASURES[name]) or given
    if len(findings.problems) > before:
        return ABSENT
    if quantity is None:
        return None
    if isinstance(quantity, str):
        findings.lacks(_wanted(name.replace("_", " "), quantity, sources, level))
        return ABSENT
    return quantity if _possible(name, quantity, findings) else ABSENT


def _wanted(named: str, source: str, sources: Sources, level: str | None) -> str:
    where = f", level {level}," if level else ""
    return f"{named} of {sources.key.sample}{where} from {PLACES[source]}"


def _possible(name: str, quantity: Quantity, findings: Findings) -> bool:
    value = quantity.value
    if quantity.dimension == "fraction":
        share = quantity.in_unit("1")
        sound = 0 < share <= 1 if name == "dry_matter" else 0 <= share < 1
    else:
        sound = value > 0
    if not sound:
        findings.fails(f"{name} is {value:f} {quantity.unit}, which cannot be; correct it")
    return sound


def product(factors: Iterable[Decimal]) -> Decimal:
    """All factors in one; 1 where there is none."""
    total = Decimal(1)
    for factor in factors:
        total *= factor
    return total


def dilutions_of(
    rule: SampleRule, sources: Sources, findings: Findings, level: str | None = None
) -> tuple[Decimal, ...] | Absent:
    """The factors of all dilutions, in the order in which they were made."""
    words = [each for each in rule.dilution if isinstance(each, str)]
    found: list[Decimal] = []
    if not words and sources.find("dilution", level, findings) is not None:
        return _instead(rule, sources, findings, level)
    for each in rule.dilution:
        factor: Quantity | str | None = each
        if isinstance(each, str):
            factor = sources.find("dilution", level, findings, each if len(words) > 1 else "")
            if factor is None:
                findings.lacks(_wanted("dilution", each, sources, level))
                return ABSENT
        if not isinstance(factor, Quantity) or not _is_factor(factor, findings):
            return ABSENT
        found.append(factor.in_unit("1"))
    return tuple(found)


def _instead(rule: SampleRule, sources: Sources, findings: Findings, level: str | None) -> tuple[Decimal, ...] | Absent:
    """A dilution that is told goes before the one of the rule file, not before one of several."""
    told = sources.find("dilution", level, findings)
    if len(rule.dilution) > 1:
        findings.fails(
            f"a dilution of {told} is given for {sources.key.sample} and the rule file has {len(rule.dilution)} in "
            "sequence; write bench, name or column under dilution for the one that is meant"
        )
        return ABSENT
    if not isinstance(told, Quantity) or not _is_factor(told, findings):
        return ABSENT
    return (told.in_unit("1"),)


def _is_factor(factor: Quantity, findings: Findings) -> bool:
    if factor.value > 0:
        return True
    findings.fails(f"dilution is {factor.value:f}, which cannot be; correct it")
    return False
