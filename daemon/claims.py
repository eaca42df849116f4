"""Which reader takes a file."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator
from dataclasses import dataclass, field
from fnmatch import fnmatchcase

from spikeward.rules.records import Layout
from spikeward.rules.rulebook import BenchRule, Rulebook, Watch


@dataclass(frozen=True, slots=True)
class Claim:
    """What a file is to be read as: a layout, a bench rule, or the decisions of a folder.

    ``key`` identifies the way of reading across rule files: equal keys read equal bytes equally.
    """

    key: str
    layout: Layout | None = field(default=None, compare=False)
    bench: BenchRule | None = field(default=None, compare=False)


DECISIONS = Claim("decisions")


class Claims:
    """The claims of one rule book: decisions and bench files first, then each watch's readers in their order."""

    def __init__(self, rules: Rulebook) -> None:
        self._decisions = rules.decisions
        self._bench = (rules.bench.files, Claim(_key("bench", rules.bench), bench=rules.bench)) if rules.bench else None
        self._layouts = {
            name: (layout.files, Claim(_key("layout", layout), layout=layout)) for name, layout in rules.layouts.items()
        }

    def of(self, path: str, watch: Watch) -> Claim | None:
        """Who takes the file at ``path`` below a watched folder; None where nobody does."""
        if path.rsplit("/", 1)[-1] == self._decisions:
            return DECISIONS
        for patterns, claim in self._in_order(watch):
            if _matches(path, patterns):
                return claim
        return None

    def _in_order(self, watch: Watch) -> Iterator[tuple[tuple[str, ...], Claim]]:
        if self._bench is not None:
            yield self._bench
        for name in watch.readers:
            yield self._layouts[name]


def _key(kind: str, rule: Layout | BenchRule) -> str:
    return f"{kind}:{hashlib.sha256(repr(rule).encode()).hexdigest()}"


def _matches(path: str, patterns: tuple[str, ...]) -> bool:
    """Match the file's name, or the whole path where the pattern names folders; capitals do not matter."""
    folded = path.casefold()
    name = folded.rsplit("/", 1)[-1]
    return any(fnmatchcase(folded if "/" in pattern else name, pattern.casefold()) for pattern in patterns)
