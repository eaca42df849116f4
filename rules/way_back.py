"""The preparation factor: from the content of the test solution back to the sample as it came in."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from decimal import Decimal

from spikeward.rules.prepared import WayBack
from spikeward.rules.quantities import UNITS, Quantity, per
from spikeward.rules.rulebook import Preparation, SampleRule
from spikeward.rules.sample import ABSENT, dilutions_of, of_sample, product
from spikeward.rules.sources import Findings, Sources
from spikeward.rules.words import listed, unit_words

_NAMES = ("mass", "volume", "digest", "dry_matter", "moisture")


@dataclass(frozen=True, slots=True)
class Returned:
    """The way back, and by how much one g (or mol) of analyte in a g (or mL) of sample raises the reported content."""

    back: WayBack
    rise: Decimal | None


@dataclass(frozen=True, slots=True)
class _Sample:
    """Everything that is known of one sample."""

    found: Mapping[str, Quantity]
    dilutions: tuple[Decimal, ...]

    @property
    def dry(self) -> Decimal:
        """The share of dry matter; 1 where the result is of the sample as it came."""
        if "moisture" in self.found:
            return 1 - self.found["moisture"].in_unit("1")
        return self.found["dry_matter"].in_unit("1") if "dry_matter" in self.found else Decimal(1)

    @property
    def basis(self) -> str:
        """What a result per mass refers to, where that is not the sample as it came."""
        return "dry matter" if {"moisture", "dry_matter"} & set(self.found) else ""


@dataclass(frozen=True, slots=True)
class _Content:
    """A content on its way: times ``factor``, ``what`` (mass or amount) per ``of`` (volume or mass).

    The factor carries first units of the table into each other: g/L or mol/L, and g/g or mol/g. ``steps`` tell what
    was reckoned; ``problem`` says what it would take to go on.
    """

    factor: Decimal
    what: str
    of: str
    steps: tuple[str, ...] = ()
    problem: str = ""

    def refer_to(self, of: str, density: Quantity | None, whose: str) -> _Content:
        """Per volume instead of per mass, or the other way; ``problem`` where there is no density."""
        if of == self.of:
            return self
        if density is None:
            return replace(self, problem=f"give the density of the {whose}")
        in_g_per_l = density.in_unit("g/L")
        factor = self.factor * in_g_per_l if of == "volume" else self.factor / in_g_per_l
        return replace(self, factor=factor, of=of, steps=(*self.steps, f"density of the {whose} {density}"))

    def count_as(self, what: str, molar_mass: Quantity | None) -> _Content:
        """Mass instead of amount of substance, or the other way; ``problem`` where there is no molar mass."""
        if what == self.what:
            return self
        if molar_mass is None:
            return replace(self, problem="give the molar mass of the analyte under molar_masses")
        in_g_per_mol = molar_mass.in_unit("g/mol")
        factor = self.factor * in_g_per_mol if what == "mass" else self.factor / in_g_per_mol
        return replace(self, factor=factor, what=what, steps=(*self.steps, f"molar mass {molar_mass}"))


def way_back(
    preparation: Preparation, sources: Sources, unit: str, findings: Findings, molar_mass: Quantity | None = None
) -> Returned | None:
    """Dilutions, digest over sample, dry matter, densities, molar mass and a declared recovery as one factor.

    Content in the sample = content in the test solution x dilutions x digest / (sample x dry matter x recovery).

    Parameters
    ----------
    unit : of the content in the test solution; the factor carries it over to ``report_in``
    molar_mass : of the analyte

    Returns
    -------
    None where a quantity is missing (noted as missing) or does not fit (noted as a problem)
    """
    rule = preparation.sample or SampleRule()
    sample = _sample_of(preparation, rule, sources, findings)
    if sample is None:
        return None
    what, _, of = UNITS[unit][0].partition(" per ")
    reached = _to_sample(_Content(Decimal(1), what, of), preparation, sample)
    if reached.problem:
        kind = sample.found["digest"].dimension
        findings.fails(f"the digest is a {kind} and the test solution has its content per {of}; {reached.problem}")
        return None
    report_in = preparation.report_in or _usual_unit(unit, reached.of)
    tail = _to_report(replace(reached, factor=Decimal(1)), report_in, preparation, rule, sample, molar_mass)
    if tail.problem:
        findings.fails(_refusal(tail.problem, unit, report_in, reached, sample))
        return None
    recovery, relative, told = _recovery(preparation)
    factor = reached.factor * tail.factor / recovery
    mass, volume = sample.found.get("mass"), sample.found.get("volume")
    back = WayBack(
        factor=float(factor * UNITS[unit][1] / UNITS[report_in][1]),
        unit=report_in,
        basis=sample.basis,
        digest_ml=_digest_ml(preparation, sample),
        mass_g=float(mass.in_unit("g") * sample.dry) if mass is not None else None,
        words="; ".join((*_done(preparation, sample), *tail.steps, *told)),
        relative_uncertainty=relative,
        dilution=float(product(sample.dilutions)),
        volume_ml=float(volume.in_unit("mL")) if volume is not None else None,
    )
    return Returned(back, _rise(tail, sample, report_in))


def _sample_of(preparation: Preparation, rule: SampleRule, sources: Sources, findings: Findings) -> _Sample | None:
    """The quantities of the whole sample; those that each level has of its own are no part of it."""
    of_levels = ("mass", "volume", "digest") if preparation.spiked == "sample" else ()
    found = {name: of_sample(rule, name, sources, findings) for name in _NAMES if name not in of_levels}
    dilutions = () if of_levels else dilutions_of(rule, sources, findings)
    if dilutions is ABSENT or ABSENT in found.values():
        return None
    return _Sample({name: each for name, each in found.items() if isinstance(each, Quantity)}, dilutions)


def _to_sample(content: _Content, preparation: Preparation, sample: _Sample) -> _Content:
    """From the test solution to the sample, as far as dilutions, digest and dry matter lead."""
    digest = sample.found.get("digest")
    taken = sample.found.get("mass") or sample.found.get("volume")
    if digest is not None and taken is not None:
        content = content.refer_to(digest.dimension, preparation.density, "test solution")
        ratio = _first(digest) / _first(taken)
        content = replace(content, factor=content.factor * ratio, of=taken.dimension)
    factor = content.factor * product(sample.dilutions)
    return replace(content, factor=factor / sample.dry if content.of == "mass" else factor)


def _first(quantity: Quantity) -> Decimal:
    """A volume in L or a mass in g, as contents refer to them."""
    return quantity.in_unit("L" if quantity.dimension == "volume" else "g")


def _to_report(
    content: _Content,
    report_in: str,
    preparation: Preparation,
    rule: SampleRule,
    sample: _Sample,
    molar_mass: Quantity | None,
) -> _Content:
    """From the content of the sample to the unit of the report."""
    what, _, of = UNITS[report_in][0].partition(" per ")
    density, whose = rule.density, "sample"
    direct = "digest" not in sample.found and preparation.spiked != "sample"
    if density is None and preparation.density is not None and direct:
        # What was only diluted by volume is carried over by the density of the test solution as well.
        density, whose = preparation.density, "test solution"
    content = content.refer_to(of, density, whose)
    return content if content.problem else content.count_as(what, molar_mass)


def _usual_unit(unit: str, of: str) -> str:
    """The unit of a report that asks for none: the standard's, or what goes with it."""
    if UNITS[unit][0].endswith(f"per {of}"):
        return unit
    return "mg/kg" if UNITS[unit][0] == "mass per volume" else per(unit, of)


_SUCH = {
    "mass per volume": "mg/L", "mass per mass": "mg/kg", "amount per volume": "mmol/L", "amount per mass": "mmol/kg",
}  # fmt: skip


def _refusal(problem: str, unit: str, report_in: str, reached: _Content, sample: _Sample) -> str:
    given = [name for name in ("mass", "volume", "digest") if name in sample.found]
    block = f"it gives {listed(given)}" if given else "it gives neither mass nor digest"
    asked, leads = UNITS[report_in][0], f"{reached.what} per {reached.of}"
    remedies = [f"report in a unit such as {_SUCH[leads]}"]
    if not asked.endswith(reached.of):
        per_mass = asked.endswith("mass")
        way = (
            "give mass and digest for a content per mass" if per_mass else "take the mass out for a content per volume"
        )
        remedies.append(way)
    remedies.append(problem)
    return (
        f"report_in asks for {unit_words(report_in)}, {_kind(asked)}, but from a standard in {unit_words(unit)} the "
        f"sample block leads to {_kind(leads)} ({block}); {listed(remedies, 'or')}"
    )


def _kind(dimension: str) -> str:
    return f"{'an' if dimension.startswith('a') else 'a'} {dimension}"


def _recovery(preparation: Preparation) -> tuple[Decimal, float, tuple[str, ...]]:
    """The declared recovery, its relative standard uncertainty, and how it is told."""
    if preparation.recovery is None:
        return Decimal(1), 0.0, ()
    recovery, uncertainty = (Decimal(str(each)) for each in preparation.recovery)
    told = f"divided by the declared recovery {recovery:f} (standard uncertainty {uncertainty:f})"
    return recovery, float(uncertainty / recovery), (told,)


def _digest_ml(preparation: Preparation, sample: _Sample) -> float | None:
    """The volume of test solution that the whole digest would have made."""
    digest = sample.found.get("digest")
    if digest is None:
        return None
    if digest.dimension == "volume":
        return float(digest.in_unit("mL") * product(sample.dilutions))
    if preparation.density is None:
        return None
    return float(digest.in_unit("g") / preparation.density.in_unit("g/mL") * product(sample.dilutions))


def _rise(tail: _Content, sample: _Sample, report_in: str) -> Decimal | None:
    if not {"mass", "volume"} & set(sample.found):
        return None
    per_ml = 1 if "mass" in sample.found else 1000  # contents refer to litres
    return tail.factor * per_ml / UNITS[report_in][1]


def _done(preparation: Preparation, sample: _Sample) -> list[str]:
    """What was done to the sample, in the order in which it was done."""
    parts = []
    digest, taken = sample.found.get("digest"), sample.found.get("mass") or sample.found.get("volume")
    if preparation.spiked == "sample":
        parts.append("spiked before its preparation, each level a digest of its own")
    if digest is not None:
        parts.append(f"{_shown(taken)} made up to {_shown(digest)}" if taken else f"made up to {_shown(digest)}")
    if sample.dilutions:
        parts.append(f"diluted by a factor {', then '.join(f'{each.normalize():f}' for each in sample.dilutions)}")
    if sample.basis:
        parts.append(f"dry matter {(sample.dry * 100).normalize():f} %")
    return parts


def _shown(quantity: Quantity) -> str:
    unit = "mL" if quantity.dimension == "volume" else "g"
    return f"{quantity.in_unit(unit).normalize():f} {unit}"
