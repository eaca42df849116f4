"""What is true on the invented night: manganese, nickel and zinc in estuary mud, and where things go wrong."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

from spikeward.daemon.demo.chance import Chance

ANALYTES = ("Mn", "Ni", "Zn")
SPIKE = {"Mn": 70.2, "Ni": 3.51, "Zn": 14.04}  # mg/L in the spiking standard
RANGES = {"Mn": (420.0, 760.0), "Ni": (22.0, 40.0), "Zn": (90.0, 170.0)}  # mg/kg dry
CERTIFIED = {"Mn": 540.0, "Ni": 31.0, "Zn": 128.0}  # mg/kg dry, reference MUD-2
CONTROL = {"Mn": 52.0, "Ni": 2.6, "Zn": 10.4}  # mg/L in the control solution CTL-1
BLANK = {"Mn": 0.05, "Ni": 0.0025, "Zn": 0.012}  # mg/L that the preparation itself brings into a digest
BRACKET = {"Mn": 2.0, "Ni": 0.1, "Zn": 0.4}  # mg/L

ALIQUOT, FINAL, DIGEST, CONTROL_TAKEN = 5.0, 25.0, 50.0, 5.0  # mL
FOUR = (0.0, 0.25, 0.5, 0.75)  # mL of standard by level
SEVEN = (0.0, 0.15, 0.3, 0.45, 0.6, 0.75, 0.9)

OVER_RANGE_SAMPLE = ("EM41", "05")  # three times the usual manganese: the largest addition is too much
OVER_RANGE_CONTENT, OVER_RANGE_RESPONSE = 16.2, 0.8  # mg/L, and the share of the response that the matrix leaves
CURVED_SAMPLE = ("EM43", "22")  # its zinc response bends
BENDING = 0.22  # L/mg


@dataclass(frozen=True, slots=True)
class Series:
    """One addition series as it is on the bench. ``contents`` in the test solution, mg/L; ``truth`` in the sample."""

    batch: str
    role: str
    sample: str
    additions: tuple[float, ...]  # mL by level
    contents: Mapping[str, float]
    truth: Mapping[str, float]
    response: Mapping[str, float]  # the share of the response that the matrix leaves
    mass: str = ""  # g, as the balance shows it
    dry_matter: str = ""  # %
    bending: Mapping[str, float] = field(default_factory=dict)  # L/mg

    @property
    def name(self) -> str:
        """What the names of its solutions begin with."""
        parts = {"process_blank": f"PB{self.sample}", "reference": f"REF-{self.sample}", "check": f"CHK-{self.sample}"}
        return f"{self.batch}_{parts.get(self.role, self.sample)}"

    @property
    def stem(self) -> str:
        """What the names of its results begin with."""
        role = "" if self.role == "sample" else f"{self.role.replace('_', '-')}_"
        return f"{self.batch}_{role}{self.sample}"

    def in_vessel(self, analyte: str, level: int) -> float:
        """The content of a vessel as it is measured, mg/L."""
        added = SPIKE[analyte] * self.additions[level]
        return (self.contents[analyte] * ALIQUOT + added) / FINAL


SAMPLES = {
    "EM41": ("01", "02", "03", "04", "05", "06", "07"),
    "EM42": ("08", "09", "10", "11", "12", "13", "14", "15"),
    "EM43": ("21", "22", "23", "24"),
}
PROCESS_BLANKS = ("1", "2")  # of every batch


def series_of(batch: str, chance: Chance) -> dict[str, Series]:
    """All addition series of a batch by the name that their solutions begin with."""
    found = [_blank(batch, sample, chance) for sample in PROCESS_BLANKS]
    found.append(_reference(batch, chance))
    found.append(_control(batch, chance))
    found += [_sample(batch, sample, chance) for sample in SAMPLES[batch]]
    return {series.name: series for series in found}


def _response(chance: Chance, low: float = 0.55, high: float = 0.92) -> dict[str, float]:
    """A matrix takes about the same share from every element, not quite the same."""
    common = chance.between(low, high)
    return {analyte: common * chance.noise(0.02) for analyte in ANALYTES}


def _blank(batch: str, sample: str, chance: Chance) -> Series:
    contents = {analyte: BLANK[analyte] * chance.noise(0.05) for analyte in ANALYTES}
    return Series(batch, "process_blank", sample, FOUR, contents, contents, _response(chance, 0.97, 1.0))


def _control(batch: str, chance: Chance) -> Series:
    contents = {a: CONTROL[a] * CONTROL_TAKEN / DIGEST + BLANK[a] * chance.noise(0.05) for a in ANALYTES}
    return Series(batch, "check", "CTL-1", FOUR, contents, CONTROL, _response(chance, 0.95, 1.0))


def _reference(batch: str, chance: Chance) -> Series:
    truth = {analyte: CERTIFIED[analyte] * chance.noise(0.004) for analyte in ANALYTES}
    return _weighed(batch, "reference", "MUD-2", FOUR, truth, chance)


def _sample(batch: str, sample: str, chance: Chance) -> Series:
    truth = {analyte: chance.between(*RANGES[analyte]) for analyte in ANALYTES}
    series = _weighed(batch, "sample", sample, SEVEN if batch == "EM43" else FOUR, truth, chance)
    if (batch, sample) == CURVED_SAMPLE:
        return replace(series, bending={"Zn": BENDING})
    if (batch, sample) == OVER_RANGE_SAMPLE:
        return replace(
            series,
            contents={**series.contents, "Mn": OVER_RANGE_CONTENT},
            response={**series.response, "Mn": OVER_RANGE_RESPONSE},
            truth={**truth, "Mn": (OVER_RANGE_CONTENT - BLANK["Mn"]) / _dissolved(series.mass, series.dry_matter)},
        )
    return series


def _weighed(
    batch: str,
    role: str,
    sample: str,
    additions: tuple[float, ...],
    truth: Mapping[str, float],
    chance: Chance,
) -> Series:
    mass, dry = f"{chance.between(0.48, 0.52):.4f}", f"{chance.between(92.0, 97.0):.1f}"
    dissolved = _dissolved(mass, dry)
    contents = {a: truth[a] * dissolved + BLANK[a] * chance.noise(0.05) for a in ANALYTES}
    return Series(batch, role, sample, additions, contents, truth, _response(chance), mass, dry)


def _dissolved(mass: str, dry_matter: str) -> float:
    """Dry mud in the digest, kg/L."""
    return float(mass) * float(dry_matter) / 100.0 / DIGEST
