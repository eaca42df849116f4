"""What holds for a batch as a whole: its references, blanks and brackets, line by line."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from spikeward.rules.checks.brackets import drift
from spikeward.rules.checks.subject import NO_LIMITS, Context, capital, plain
from spikeward.rules.outcomes import FAIL, NOT_EVALUATED, PASS, WARN, Check, Outcome, Result
from spikeward.rules.series import closing_roles
from spikeward.rules.words import line_words, listed

_CLOSES = "the rule file; key series: closes_with"


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
                found += [
                    _of_control(check, result, outcome)
                    for result in outcome.results
                    for check in result.checks
                    if check.name == name
                ]
    return (*found, *_brackets(context))


def _of_control(check: Check, result: Result, outcome: Outcome) -> Check:
    """What was recovered of a control; one that failed its own checks controls nothing, whatever it recovered."""
    if result.verdict != FAIL or check.verdict == FAIL:
        return check
    told = f"{outcome.key.role.replace('_', ' ').replace('check', 'check sample')} {outcome.key.sample}"
    name = line_words(result.analyte, result.line)
    recovered = capital(check.sentence.removeprefix("Not evaluated: ").removesuffix("."))
    sentence = f"{recovered}; {name} of {told} failed its own checks."
    return replace(check, verdict=FAIL, sentence=sentence, remedy=f"Look at the summary of {told}", source="theory")


def _closing(context: Context, lacking: Sequence[str]) -> list[Check]:
    if not closing_roles(context.rules):
        return []
    told = listed(lacking)
    if not lacking:
        return [plain("closing", PASS, "Blanks, references and brackets that the rules ask for are in.")]
    if not context.batch.closed:
        return [Check("closing", NOT_EVALUATED, f"Not evaluated: still expected: {told}.")]
    return [plain("closing", WARN, f"The batch was closed without {told}.", "Measure what is missing", _CLOSES)]


def _brackets(context: Context) -> list[Check]:
    if "brackets" not in context.rules.checks:
        return []
    limits = context.rules.checks.get("brackets", NO_LIMITS)
    checks = []
    potentials = {
        line for (_, line), every in context.solved.items() if any(one.prepared.response == "log" for one in every)
    }
    for analyte, line in sorted(set(context.brackets) - potentials):
        visits = context.brackets[analyte, line]
        check = drift(visits, visits, limits) if len(visits) > 1 else None
        if check is not None:
            checks.append(replace(check, sentence=f"{line_words(analyte, line)}: {check.sentence}"))
    return checks
