"""What every report says about its own limits."""

from __future__ import annotations

CAUTIONS = (
    "A qualified analyst reviews and releases every result; this report does not release anything by itself.",
    "Local regulations and the laboratory's accredited methods come first.",
    "Standards and acids are handled as their safety data sheets say.",
    "This is not a clinical decision and not a decision on compliance.",
    "Standard addition corrects matrix effects that are proportional to the signal, and no others: "
    "a constant shift of the background is not corrected.",
)
