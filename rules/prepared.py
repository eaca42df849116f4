"""A series as its preparation understood it: what the solver takes in."""

from __future__ import annotations

from dataclasses import dataclass

from spikeward.rules.records import Reading, SeriesKey
from spikeward.rules.rulebook import Electrode


@dataclass(frozen=True, slots=True)
class PreparedVessel:
    """One vessel of one analyte, in one run (``block``) of its series.

    ``aliquot``, ``addition`` (all standard in it) and ``final`` are in the line's ``aliquot_unit``, ``addition_unit``
    and ``final_unit``, mL or g. ``added`` is the amount added, in the series' content unit times the aliquot's.
    ``others`` is the same of further analytes of the same standards, for lines that overlap. ``internal_amount`` went
    in of the internal standard, in any one unit. ``internal`` are the readings of the internal standard.
    """

    level: str
    vessel: str
    aliquot: float
    addition: float
    final: float
    added: float
    readings: tuple[Reading, ...]  # in force, canonical order; qualifiers kept
    excluded: str = ""
    block: str = ""
    others: tuple[tuple[str, float], ...] = ()  # analyte -> amount
    internal_amount: float = 1.0
    internal: tuple[Reading, ...] = ()


@dataclass(frozen=True, slots=True)
class WayBack:
    """From the test solution to the sample: content_in_sample = content * factor - blank, in ``unit``.

    ``digest_ml`` and ``mass_g`` (dry, where dry matter is given) serve the process blank, which is subtracted as an
    amount: (C V_dig - mean(C_b V_dig_b)) / m. ``words`` tells the chain for a report. ``relative_uncertainty`` is the
    standard uncertainty of a declared recovery over that recovery. ``dilution`` is the product of all dilutions.
    """

    factor: float
    unit: str
    basis: str
    digest_ml: float | None
    mass_g: float | None
    words: str
    relative_uncertainty: float = 0.0
    dilution: float = 1.0
    volume_ml: float | None = None  # of liquid sample, where it was measured by volume


@dataclass(frozen=True, slots=True)
class PreparedLine:
    """One analyte on one spectral line (or isotope) of one series, ready to be solved.

    ``missing`` lists what the series still waits for (a mass of the bench); ``problems`` are sentences that fail it.
    ``entered`` is where the internal standard ``internal`` came in, empty where there is none. ``cannot_tell`` are
    sentences: what this design does not show. ``spiked_amount`` is what a spiked sample received, in the unit of its
    way back times g (or mL) of sample.
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
    response: str = "linear"  # linear, log, curve
    aliquot_unit: str = "mL"
    addition_unit: str = "mL"
    final_unit: str = "mL"
    internal: str = ""
    entered: str = ""
    electrode: Electrode | None = None
    cannot_tell: tuple[str, ...] = ()
    spiked_amount: float | None = None
    spiked_when: str = ""  # before digestion, after digestion
    rerun_of: str = ""
