"""What holds for a batch as a whole: its references, blanks and brackets, line by line."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from spikeward.rules.checks.brackets import drift
from spikeward.rules.checks.subject import NO_LIMITS, Context, line_words, plain
from spikeward.rules.outcomes import NOT_EVALUATED, PASS, WARN, Check, Outcome
from spikeward.rules.series import closing_roles


def check_batch(context: Context, outcomes: Sequence[Outcome], lacking: Sequence[str]) -> tuple[Check, ...]:
    """The checks of a batch, each once, in a fixed order.

    Parameters
    ----------
    outcomes : of all its series; references and check samples carry their own recovery
    lacking : what the batch would still wait for
    """
    found = [*_closing(context, lacking)]
    for role, name in (("reference", "reference"), ("check", "check_sample")):
        for outcome in outcomes:
            if outcome.key.role == role:
                found += [check for result in outcome.results for check in result.checks if check.name == name]
    return (*found, *_brackets(context))


def _closing(context: Context, lacking: Sequence[str]) -> list[Check]:
    if not closing_roles(context.rules):
        return []
    told = ", ".join(lacking)
    if not lacking:
        return [plain("closing", PASS, "Blanks, references and brackets that the rules ask for are in.")]
    if not context.batch.closed:
        return [Check("closing", NOT_EVALUATED, f"Not evaluated: still expected: {told}.")]
    return [plain("closing", WARN, f"The batch was closed without {told}.", "Measure what is missing", "the rule file")]


def _brackets(context: Context) -> list[Check]:
    if "brackets" not in context.rules.checks:
        return []
    limits = context.rules.checks.get("brackets", NO_LIMITS)
    checks = []
    for analyte, line in sorted(context.brackets):
        visits = context.brackets[analyte, line]
        check = drift(visits, visits, limits) if len(visits) > 1 else None
        if check is not None:
            checks.append(replace(check, sentence=f"{line_words(analyte, line)}: {check.sentence}"))
    return checks
