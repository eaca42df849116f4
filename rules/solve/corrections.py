"""What is corrected before a line is drawn, and what a report says of it: done or not, a sentence each."""

from __future__ import annotations

from dataclasses import dataclass

from spikeward.rules.prepared import PreparedLine
from spikeward.rules.rounding import figure, percent
from spikeward.rules.rulebook import Censored
from spikeward.rules.solve.drift import Drift
from spikeward.rules.solve.internal_standard import ENTERED
from spikeward.rules.solve.solved import Background, Reagent

NO_BACKGROUND = (
    "No background was subtracted; a constant shift of the signal, such as the sample's own background, is in the "
    "result."
)


@dataclass(frozen=True, slots=True)
class Corrections:
    """What the rules ask to correct on one line; None where they ask for nothing.

    ``weights``: signal, a point counts by how far its signal was scaled up; equal, every point counts the same.
    """

    background: Background | None = None
    drift: Drift | None = None
    reagent: Reagent | None = None
    censored: Censored = Censored()
    weights: str = "signal"


def corrected(
    line: PreparedLine,
    exported: frozenset[str],
    background: Background | None,
    reagent: Reagent | None,
    drift: Drift | None,
    not_drifted: str,
) -> tuple[str, ...]:
    """What was corrected on one line and what was not, in the order in which it is done.

    Parameters
    ----------
    exported : what the export says that it corrected
    drift : as it was used
    not_drifted : why it was not although the rules ask for it, as the end of a sentence
    """
    told = [_background(line, exported, background), _internal(line, exported)]
    if drift is not None:
        told.append(_drift(drift))
    elif not_drifted:
        told.append(f"The drift was not corrected: {not_drifted}.")
    elif "drift" in exported:
        told.append("The export had the drift corrected already.")
    if reagent is not None:
        told.append(reagent.problem or reagent.note)
    return tuple(f"{sentence[:1].upper()}{sentence[1:].rstrip('.')}." for sentence in told if sentence)


def _background(line: PreparedLine, exported: frozenset[str], background: Background | None) -> str:
    if line.response == "log":
        return "The potentials were taken as they were read: a background is no part of a potential."
    if background is not None and not background.problem:
        unit = line.signal_unit
        return f"A background of {figure(background.mean)} {unit} was subtracted from every reading, before volumes."
    if "blank" in exported:
        return "The export had its blank taken off already, and no background was subtracted here."
    return NO_BACKGROUND


def _internal(line: PreparedLine, exported: frozenset[str]) -> str:
    if line.response == "log":
        return ""
    if "internal_standard" in exported:
        where = f"; {line.internal} {ENTERED[line.entered]}" if line.entered else ""
        return f"The export had the internal standard applied already, and signals were not divided again{where}."
    if not line.entered:
        return ""
    return (
        f"Every signal was divided by that of the internal standard {line.internal}, which {ENTERED[line.entered]}; "
        "the background of the internal standard itself was not subtracted."
    )


def _drift(drift: Drift) -> str:
    known = [one.value for one in drift.sensitivities if one.value is not None]
    first = drift.sensitivities[0].value or 1.0
    how = "in time" if drift.start else "in the declared order, since not every reading has a time"
    low, high = percent(min(known) / first, 3), percent(max(known) / first, 3)
    return (
        f"The drift was corrected: every reading was divided by the sensitivity at its place, interpolated {how}. "
        f"Brackets read from {low} to {high} of the first."
    )
