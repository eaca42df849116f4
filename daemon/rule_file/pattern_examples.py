"""Names that a pattern takes, made up from the pattern itself: to see whether one naming rule shadows another."""

from __future__ import annotations

import re
from dataclasses import dataclass

import re2

_LONGEST = 500  # characters of a pattern
_DEEPEST = 30
_CLASSES = {
    "d": "07", "w": "Az", "s": " ", "D": "Az", "W": "-", "S": "Az", "t": "\t", "n": "\n", "b": "", "B": "", "A": "",
    "z": "", "Z": "",
}  # fmt: skip


class _Unknown(Exception):
    """A part of a pattern that no example is made for."""


@dataclass(slots=True)
class _Maker:
    """Reads a pattern once; ``full`` takes optional parts, ``last`` the last of what is possible."""

    pattern: str
    full: bool
    last: bool
    at: int = 0

    def alternatives(self, depth: int) -> str:
        if depth > _DEEPEST:
            raise _Unknown
        found = [self._sequence(depth)]
        while self._next() == "|":
            self.at += 1
            found.append(self._sequence(depth))
        return found[-1 if self.last else 0]

    def _next(self) -> str:
        return self.pattern[self.at] if self.at < len(self.pattern) else ""

    def _sequence(self, depth: int) -> str:
        made = ""
        while self._next() not in ("", "|", ")"):
            made += self._repeated(self._atom(depth))
        return made

    def _atom(self, depth: int) -> str:
        character = self._next()
        self.at += 1
        if character == "(":
            return self._group(depth)
        if character == "[":
            return self._class()
        if character == "\\":
            escaped = self._next()
            self.at += 1
            if escaped in _CLASSES:
                return self._pick(_CLASSES[escaped])
            if escaped.isalnum():
                raise _Unknown
            return escaped
        if character in "^$":
            return ""
        return self._pick("Az") if character == "." else character

    def _pick(self, possible: str) -> str:
        return possible[-1 if self.last else 0] if possible else ""

    def _group(self, depth: int) -> str:
        head = re.compile(r"\?P?<\w+>|\?:").match(self.pattern, self.at)
        if head is not None:
            self.at = head.end()
        elif self._next() == "?":
            raise _Unknown
        made = self.alternatives(depth + 1)
        if self._next() != ")":
            raise _Unknown
        self.at += 1
        return made

    def _class(self) -> str:
        body = re.compile(r"(\^?)(\]?(?:\\.|[^\]\\])*)\]").match(self.pattern, self.at)
        if body is None or "[:" in body[2]:
            raise _Unknown
        self.at = body.end()
        if body[1]:
            taken = re2.compile(f"[{body[2]}]")
            return self._pick("".join(each for each in "A0z-_" if not taken.fullmatch(each)))
        parts: list[str] = re.findall(r"\\.|.", body[2], re.DOTALL)
        first, last = parts[0], parts[-1]
        chosen = last if self.last else first
        if chosen.startswith("\\"):
            return self._pick(_CLASSES[chosen[1]]) if chosen[1] in _CLASSES else chosen[1]
        return chosen

    def _repeated(self, atom: str) -> str:
        counted = re.compile(r"\{(\d+)(,(\d*))?\}").match(self.pattern, self.at)
        if self._next() in ("*", "?", "+"):
            optional = self._next() != "+"
            self.at += 1
            made = atom if self.full or not optional else ""
        elif counted is not None:
            self.at = counted.end()
            low = int(counted[1])
            made = atom * min(max(low, 1) if self.full else low, 1000)
        else:
            return atom
        if self._next() == "?":  # lazy: it takes the same names
            self.at += 1
        return made


def examples(pattern: str) -> tuple[str, ...]:
    """Some names that a pattern takes whole; none where the pattern is beyond this small reader."""
    if len(pattern) > _LONGEST:
        return ()
    compiled = re2.compile(pattern)
    found: dict[str, None] = {}
    for full in (True, False):
        for last in (False, True):
            maker = _Maker(pattern, full, last)
            try:
                made = maker.alternatives(0)
            except _Unknown:
                return ()
            if maker.at == len(pattern) and made and compiled.fullmatch(made):
                found[made] = None
    return tuple(found)
