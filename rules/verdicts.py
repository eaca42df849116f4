"""When a verdict stands: fail at once, pass and warn only when nothing that is expected can change them."""

from __future__ import annotations

from spikeward.rules.outcomes import FAIL, WAITING
from spikeward.rules.rulebook import Rulebook
from spikeward.rules.series import closing_roles

_COMPANIONS = ("calibration", "duplicate", "spiked_sample")
"""What a result is compared with, if it is measured."""


def depends_on_batch(rules: Rulebook) -> bool:
    """Whether what the rest of the batch still brings can change a series: blanks, brackets, references, companions."""
    return bool(
        closing_roles(rules)
        or rules.brackets
        or rules.references
        or rules.precision.comes_from == "pooled"
        or any(rule.role in _COMPANIONS or "(?P<rerun_of>" in rule.pattern for rule in rules.names)
    )


def settled(closed: bool, incomplete: bool, rules: Rulebook) -> bool:
    """Whether nothing that is expected can change a series any more.

    Parameters
    ----------
    closed : its batch is closed
    incomplete : it lacks something and has not lapsed
    """
    return closed or not (incomplete or depends_on_batch(rules))


def published(so_far: str, is_settled: bool) -> str:
    """What the flag says: a fail at once, pass and warn when they stand, else waiting."""
    return so_far if is_settled or so_far == FAIL else WAITING
