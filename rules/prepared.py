"""A series as its preparation understood it: what the solver takes in."""

from __future__ import annotations

from dataclasses import dataclass

from spikeward.rules.records import Reading, SeriesKey


@dataclass(frozen=True, slots=True)
class PreparedVessel:
    """One vessel of one analyte. Volumes in mL; ``added`` is Cs v in content x mL, in the series' content unit x mL."""

    level: str
    vessel: str
    aliquot_ml: float
    addition_ml: float
    final_ml: float
    added: float
    readings: tuple[Reading, ...]  # in force, canonical order; qualifiers kept
    excluded: str = ""


@dataclass(frozen=True, slots=True)
class WayBack:
    """From the test solution to the sample: content_in_sample = content * factor - blank, in ``unit``.

    ``digest_ml`` and ``mass_g`` (dry, where dry matter is given) serve the process blank, which is subtracted as an
    amount: (C V_dig - mean(C_b V_dig_b)) / m. ``words`` tells the chain for a report.
    """

    factor: float
    unit: str
    basis: str
    digest_ml: float | None
    mass_g: float | None
    words: str


@dataclass(frozen=True, slots=True)
class PreparedLine:
    """One analyte on one spectral line (or isotope) of one series, ready to be solved.

    ``missing`` lists what the series still waits for (a mass of the bench); ``problems`` are sentences that fail it.
    """

    key: SeriesKey
    analyte: str
    line: str
    design: str
    unit: str  # of contents in the test solution, UCUM
    signal_unit: str
    vessels: tuple[PreparedVessel, ...]
    way_back: WayBack | None
    standard: str
    expires: str
    missing: tuple[str, ...] = ()
    problems: tuple[str, ...] = ()
