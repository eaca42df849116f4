"""What a check looks at, and how a number is held against the limits of the rule file."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

from spikeward.rules.outcomes import FAIL, NOT_EVALUATED, PASS, WARN, Check
from spikeward.rules.records import Batch, Reading, SeriesKey
from spikeward.rules.rounding import figure, percent, percent_apart
from spikeward.rules.rulebook import Limits, Rulebook
from spikeward.rules.solve.calibration import Calibration, CalibrationKey
from spikeward.rules.solve.drift import Bracket
from spikeward.rules.solve.pooling import Pooling
from spikeward.rules.solve.solved import Background, Solved
from spikeward.rules.words import line_words

LineKey = tuple[str, str]  # analyte, line


@dataclass(frozen=True, slots=True)
class Context:
    """What the rest of the batch tells about a line.

    ``solved`` holds every line of the batch by role and line, process blanks subtracted; ``waiting`` the series that
    are neither complete nor lapsed; ``runs`` the same lines by the sample that they are runs of; ``failed`` the lines
    of blanks and references that failed their own checks; ``untimed`` the lines on which acquisition times or order are
    not all known; ``calibrations`` the plain standards of the batch; ``pooling`` what was pooled where the rules ask
    for a pooled precision and the batch has closed.
    """

    batch: Batch
    rules: Rulebook
    solved: Mapping[tuple[str, LineKey], tuple[Solved, ...]] = field(default_factory=dict)
    runs: Mapping[tuple[str, LineKey, str], tuple[Solved, ...]] = field(default_factory=dict)
    waiting: frozenset[SeriesKey] = frozenset()
    failed: frozenset[tuple[SeriesKey, LineKey]] = frozenset()
    backgrounds: Mapping[LineKey, Background] = field(default_factory=dict)
    brackets: Mapping[LineKey, tuple[Bracket, ...]] = field(default_factory=dict)
    untimed: frozenset[LineKey] = frozenset()
    calibrations: Mapping[CalibrationKey, Calibration] = field(default_factory=dict)
    pooling: Mapping[LineKey, Pooling] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Subject:
    """One solved line of one series, within its batch."""

    solved: Solved
    context: Context

    @property
    def role(self) -> str:
        """The role of the series."""
        return self.solved.prepared.key.role

    @property
    def name(self) -> str:
        """The line as sentences name it."""
        return line_words(*self.line_key)

    @property
    def line_key(self) -> LineKey:
        """Analyte and line."""
        return self.solved.prepared.analyte, self.solved.prepared.line

    @property
    def readings(self) -> tuple[Reading, ...]:
        """The readings of all vessels that are not excluded."""
        return tuple(r for vessel in self.solved.prepared.vessels if not vessel.excluded for r in vessel.readings)


BLANK_ROLES = ("process_blank", "reagent_blank")
"""Series that are expected near zero."""


def series_words(key: SeriesKey) -> str:
    """A series of the batch as a sentence of another one names it."""
    role = "check sample" if key.role == "check" else key.role.replace("_", " ")
    return f"{role} {key.sample}"


def not_straight(subject: Subject) -> str:
    """Why what is asked of straight lines cannot be asked here, or an empty text."""
    return _NOT_STRAIGHT.get(subject.solved.prepared.response, "")


_NOT_STRAIGHT = {
    "log": "an electrode answers to the logarithm of the content",
    "curve": "the response was fitted as a curve",
    "overlap": "lines that overlap were solved together",
}


def capital(text: str) -> str:
    """A sentence with a capital letter, unless it begins with a file's or a solution's name."""
    return text[:1].upper() + text[1:] if text.split(" ", 1)[0].isalpha() else text


CheckOfLine = Callable[[Subject, Limits], Check]

NO_LIMITS = Limits({}, {})


def number(limits: Limits, name: str) -> float | None:
    """A limit that is a single number, or None where the rule file does not ask for it."""
    value = limits.values.get(name)
    return value if isinstance(value, (int, float)) else None


def span_of(limits: Limits, name: str) -> tuple[float, float] | None:
    """A limit that is a range, or None where the rule file does not ask for it."""
    value = limits.values.get(name)
    return value if isinstance(value, tuple) else None


def not_evaluated(
    name: str, reason: str, remedy: str = "", observed: float | None = None, unit: str = ""
) -> Check:
    """A check that says why it could not speak, and in ``remedy`` what would let it.

    Parameters
    ----------
    reason : completes ``Not evaluated: …``
    """
    return Check(name, NOT_EVALUATED, f"Not evaluated: {reason}.", observed, unit, remedy=remedy)


def plain(name: str, verdict: str, sentence: str, remedy: str = "", source: str = "") -> Check:
    """A check that does not compare a number with a limit."""
    return Check(name, verdict, sentence, source=source, remedy="" if verdict == PASS else remedy)


def near_limits(value: float, limits: Limits, digits: int = 2) -> str:
    """A fraction in per cent, told apart from the limits that it is held against."""
    bounds: list[float] = []
    for name in _WORDS:
        bound = limits.values.get(name)
        if bound is not None:
            bounds += bound if isinstance(bound, tuple) else (bound,)
    return percent_apart(value, bounds, digits)


def source_of(limits: Limits, limit: str, check: str) -> str:
    """Where a limit comes from, and under which key of the rule file it is changed."""
    return "; ".join(part for part in (limits.sources.get(limit, ""), f"key checks: {check}") if part)


def as_percent(value: float) -> str:
    """A fraction as limits show it."""
    return percent(value, 3)


def graded(
    name: str,
    observed: float,
    limits: Limits,
    sentence: str,
    remedy: str,
    *,
    show: Callable[[float], str] = figure,
    unit: str = "1",
) -> Check:
    """Hold a number against the limits ``fail_…`` and ``warn_…``, each with the ending above, below or outside.

    Parameters
    ----------
    sentence : what was observed, without a full stop; the limits are appended
    show : how a limit is written
    """
    broken = [
        limit for limit in ("fail_above", "fail_below", "fail_outside", "warn_above", "warn_below", "warn_outside")
        if _beyond(observed, limits, limit)
    ]  # fmt: skip
    asked = [limit for limit in limits.values if limit in _WORDS and limits.values[limit] is not None]
    if not asked:
        return not_evaluated(name, f"the rules ask for no limit; {_lower_first(sentence)}", "", observed, unit)
    verdict = PASS if not broken else FAIL if broken[0].startswith("fail") else WARN
    source = source_of(limits, broken[0] if broken else asked[0], name)
    told = "; ".join(f"{_WORDS[limit]} {_shown(limits, limit, show)}" for limit in sorted(asked, reverse=True))
    return Check(
        name, verdict, f"{sentence} ({told}).", observed, unit, told, source, "" if verdict == PASS else remedy
    )


_WORDS = {
    "warn_above": "warns above", "warn_below": "warns below", "warn_outside": "warns outside",
    "fail_above": "fails above", "fail_below": "fails below", "fail_outside": "fails outside",
}  # fmt: skip


def _beyond(observed: float, limits: Limits, name: str) -> bool:
    value = limits.values.get(name)
    if value is None:
        return False
    if isinstance(value, tuple):
        return not value[0] <= observed <= value[1]
    return not observed <= value if name.endswith("above") else not observed >= value


def _shown(limits: Limits, name: str, show: Callable[[float], str]) -> str:
    value = limits.values[name]
    if isinstance(value, tuple):
        return f"{show(value[0])} to {show(value[1])}"
    return show(value) if value is not None else ""


def _lower_first(text: str) -> str:
    return text[:1].lower() + text[1:]
