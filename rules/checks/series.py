"""Checks of a series as a whole: that it is complete, free of contradictions, and prepared as the rules say."""

from __future__ import annotations

from collections.abc import Sequence

from spikeward.rules.checks.subject import not_evaluated, plain
from spikeward.rules.outcomes import FAIL, PASS, WARN, Check
from spikeward.rules.prepared import PreparedLine
from spikeward.rules.records import Members
from spikeward.rules.rulebook import Rulebook


def completeness(missing: Sequence[str], lines: Sequence[PreparedLine], over: bool, rules: Rulebook) -> Check:
    """Whether the series is complete, and what it means if nothing more is expected.

    Parameters
    ----------
    missing : what the series still lacks
    over : the series lapsed, or its batch is closed: nothing more is expected
    """
    told = ", ".join(missing)
    if not missing:
        return plain("completeness", PASS, "Every level and every reading is there.")
    if not over:
        return not_evaluated("completeness", f"still expected: {told}")
    required = required_missing(lines)
    verdict = FAIL if required or rules.series.lapsed == FAIL else WARN
    source = "the rule file, series: lapsed" if verdict == WARN or not required else "what the design needs"
    sentence = f"The series is not complete; it lacks {told}."
    if required:
        sentence = f"{sentence[:-1]}; without {', '.join(required)} there is no result."
    remedy = "Measure or enter what is missing; late files are still read"
    return plain("completeness", verdict, sentence, remedy, source)


def required_missing(lines: Sequence[PreparedLine]) -> tuple[str, ...]:
    """What no result can do without: quantities of the preparation, and the vessels that the design needs."""
    required: list[str] = []
    for line in lines:
        required += line.missing
        needed = 2 if line.design == "single" else 3
        vessels = [vessel for vessel in line.vessels if not vessel.excluded]
        if not line.problems and len(vessels) < needed:
            required.append(f"{needed} vessels of {line.line or line.analyte}")
    return tuple(dict.fromkeys(required))


def troubles(members: Members, lines: Sequence[PreparedLine]) -> tuple[Check, ...]:
    """Contradictions and problems of preparation, which fail, and doubts, which warn; a pass where there are none."""
    problems = tuple(dict.fromkeys(problem for line in lines for problem in line.problems))
    return (
        *_one_each("conflict", members.conflicts, FAIL, "No source contradicts another.", "Decide which one is right"),
        *_one_each("preparation", problems, FAIL, "Volumes and standard are known.", "Correct the rules or the bench"),
        *_one_each("identity", members.warnings, WARN, "The origin of every reading is clear.", "Look at these files"),
    )


def _one_each(name: str, sentences: Sequence[str], verdict: str, good: str, remedy: str) -> tuple[Check, ...]:
    if not sentences:
        return (plain(name, PASS, good),)
    return tuple(plain(name, verdict, _sentence(text), remedy) for text in sentences)


def _sentence(text: str) -> str:
    # a sentence that begins with a file's name keeps it as it is written
    text = text[:1].upper() + text[1:] if text.split(" ", 1)[0].isalpha() else text
    return text if text.endswith(".") else f"{text}."
