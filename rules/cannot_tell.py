"""What a design does not show, a sentence each, for the analyst who reads the result."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from spikeward.rules.prepared import PreparedVessel
from spikeward.rules.rulebook import Preparation

_EVEN = 1.02  # shares of test solution nearer to each other are as good as equal
_ROLES_WITHOUT_SAMPLE = ("process_blank", "reagent_blank")


def cannot_tell(preparation: Preparation, role: str, vessels: Sequence[PreparedVessel]) -> tuple[str, ...]:
    """Sentences about what no series of this design can show.

    Parameters
    ----------
    vessels : of one line, as they were prepared
    """
    counted = [vessel for vessel in vessels if not vessel.excluded]
    return (*_of_design(preparation, counted), *_of_matrix(preparation, counted), *_of_sample(preparation, role))


def _of_design(preparation: Preparation, vessels: Sequence[PreparedVessel]) -> Iterator[str]:
    if len({vessel.added / vessel.aliquot for vessel in vessels if vessel.aliquot > 0}) == 2:
        yield "Two levels do not show whether the response is a straight line."
    if preparation.design == "single" and len(vessels) <= 2:
        yield "Two vessels show no scatter of their own; the uncertainty needs a declared or pooled precision."
    if preparation.design == "successive":
        yield "All levels are one vessel: an error of its aliquot is in every level and does not show as scatter."


def _of_matrix(preparation: Preparation, vessels: Sequence[PreparedVessel]) -> Iterator[str]:
    if preparation.response == "log":
        yield "What the electrode answers to besides the analyte counts as analyte; additions do not correct it."
    else:
        yield (
            "Standard addition corrects a matrix effect in proportion to the content only; a constant shift of the "
            "signal is not corrected."
        )
    shares = [vessel.aliquot / vessel.final for vessel in vessels if vessel.final > 0]
    if preparation.spiked == "sample" or not shares or min(shares) <= 0 or max(shares) <= _EVEN * min(shares):
        return
    if preparation.level_0 == "undiluted":
        yield (
            "Level 0 was read undiluted and the others diluted: a matrix effect that depends on it is not corrected."
        )
    else:
        yield "The vessels hold unequal shares of test solution: a matrix effect that depends on them is not corrected."


def _of_sample(preparation: Preparation, role: str) -> Iterator[str]:
    if role in _ROLES_WITHOUT_SAMPLE:
        return
    if preparation.spiked == "sample":
        yield "Whether what the sample holds behaves as the added standard does is not shown."
    elif preparation.sample is not None and preparation.sample.digest is not None:
        yield (
            "The standard was added after the digestion: its recovery, and the form in which the sample held the "
            "analyte, are not shown."
        )
    else:
        yield (
            "The standard was added to the test solution: losses before that, and the form in which the sample held "
            "the analyte, are not shown."
        )
    if preparation.recovery is not None:
        yield "The recovery that the result was divided by is declared; this series does not show it."
