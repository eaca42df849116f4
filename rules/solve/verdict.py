"""Why a line gives no number: one sentence for every way in which points cannot carry a content."""

from __future__ import annotations

import math
from collections.abc import Sequence

from spikeward.rules.solve.transform import Row, weights_of

ONE_ADDITION = (
    "one addition leaves no degree of freedom: the scatter is not known, so no uncertainty follows from these readings"
)
EXACT_FIT = (
    "every point lies exactly on the line: the readings show no scatter, and an uncertainty of zero is not a real one"
)
NEGATIVE = "the content is below zero: look for a blank or background that was subtracted too high"
NEGATIVE_AS_READ = "the content is below zero though nothing was subtracted: look at the zero of the instrument"
UNSETTLED = (
    "the weights of the declared noise do not settle on one line: look at the noise under precision, or use own scatter"
)
UNBOUNDED = (
    "the points do not bound the content: the scatter is as large as what the additions change, and the interval has "
    "no end"
)
NOT_FOUND = "no content fits the points: look for swapped levels, a wrong sign of the slope, or a wrong addition"
AMBIGUOUS = (
    "two contents fit these vessels equally well: give the slope of the electrode, or measure one more vessel"
)
NO_NOISE = (
    "these vessels leave no degree of freedom for the scatter: declare the noise under precision, or measure more "
    "vessels"
)
OUT_OF_RANGE = "the result is too large or too small to be calculated with: look for a wrong unit"

def unsolvable(rows: Sequence[Row], fitted: tuple[float, float, float], flat: bool, one_x: bool) -> str:
    """Why no straight line can be extrapolated through the points, or an empty text.

    Parameters
    ----------
    rows : of every vessel that is fitted
    fitted : slope, intercept and content, finite or not
    flat, one_x : as ``Fits`` says them
    """
    if len(rows) < 2:
        usable = "only one vessel" if rows else "no vessel"
        return f"{usable} can be used: a standard addition needs at least two levels"
    refused = unreadable([value for row in rows for value in row])
    if refused:
        return refused
    if not all(weight > 0.0 for weight in weights_of(rows)):
        return OUT_OF_RANGE
    if all(row.x == 0.0 for row in rows):
        return "no vessel received an addition: without one the response is not known"
    if one_x:
        return "all vessels received the same addition: a standard addition needs at least two levels"
    if all(row.signal == rows[0].signal for row in rows):
        return "all vessels give the same signal: the instrument did not respond to the additions"
    if flat:
        return "the signal does not change with the additions: the slope is zero"
    slope = fitted[0]
    return OUT_OF_RANGE if slope == 0.0 or not all(map(math.isfinite, fitted)) else ""


def unreadable(values: Sequence[float]) -> str:
    """Why volumes, additions and signals cannot be calculated with, or an empty text."""
    if any(math.isnan(value) for value in values):
        return "a volume, an addition or a signal is not a number: look at the preparation of this series"
    if any(math.isinf(value) for value in values):
        return "a volume, an addition or a signal is too large to be calculated with: look for a wrong unit"
    return ""


def insignificant(slope: float, g: float | None) -> str:
    """Why a slope does not carry a content, or an empty text.

    Parameters
    ----------
    slope : signal per content
    g : t² u(slope)² / slope², or None where the scatter is not known
    """
    if g is not None and not g < 1.0:
        return (
            "the slope does not differ from zero: the scatter of the points is as large as the response to the "
            "additions, and the interval of the content has no end"
        )
    if slope < 0.0:
        return "the signal falls with the additions: a standard addition needs a signal that rises with the content"
    return ""


def negative(content: float, subtracted: bool) -> tuple[str, ...]:
    """The note that a content below zero carries; none for others.

    Parameters
    ----------
    subtracted : whether a background or blank was taken off
    """
    if content >= 0.0:
        return ()
    return (NEGATIVE if subtracted else NEGATIVE_AS_READ,)
