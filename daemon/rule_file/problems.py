"""What is wrong in a text that people write, with its place and its remedy; one line for tools, a block for people."""

from __future__ import annotations

import re
from dataclasses import dataclass

ERROR, WARNING = "error", "warning"

MOST_PROBLEMS = 100
"""So many are told of one file; more of them help nobody."""

CODES: dict[str, str] = {
    "R001": "the text is not YAML",
    "R002": "the file is too large, too deep, or not UTF-8",
    "R003": "a part of YAML that rule files do not use: tags, anchors, aliases, merge keys, several documents",
    "R004": "a tab",
    "R005": "a key stands twice",
    "R010": "something required is missing",
    "R011": "a value has the wrong shape: a list, a map or a single value is expected",
    "R012": "a key is not known",
    "R013": "a value is empty",
    "R014": "a number, percentage or count cannot be read",
    "R015": "a quantity cannot be read, or its unit measures something else",
    "R016": "a word is not one of those that are possible here",
    "R017": "a text is not of the form that is expected here",
    "R020": "a pattern cannot be used",
    "R021": "a group of a pattern is not known, or stands twice",
    "R022": "a naming rule does not say the sample or the level",
    "R023": "a quantity in a name has no unit, or one that measures something else",
    "R030": "something is named that the file does not hold",
    "R031": "two parts of the file contradict each other",
    "R032": "watched folders overlap",
    "R040": "a rule can never be reached, or takes what a later one is meant for",
    "R041": "something is declared and never used",
    "R042": "some rules name a batch and others do not",
    "R043": "a series waits for levels that its preparation does not make",
}
"""Every code and what it stands for; R04x are warnings."""


@dataclass(frozen=True, slots=True)
class Problem:
    """One thing that is wrong in a file.

    ``line`` and ``column`` count from 1; ``path`` leads to the key, such as ``series.lapses_after``, or is empty.
    ``found`` says what is there, ``expected`` what should be (or is empty), ``hint`` what to do (or is empty).
    """

    code: str
    file: str
    line: int
    column: int
    path: str
    found: str
    expected: str = ""
    hint: str = ""
    severity: str = ERROR

    @property
    def sentence(self) -> str:
        """What is wrong, what is expected and what to do, without the place."""
        parts = [self.found, f"expected {self.expected}" if self.expected else "", self.hint]
        return printable("; ".join(part for part in parts if part))

    def line_text(self) -> str:
        """One line: ``rules.yaml:4:5: series.lapses_afer: R012 …``."""
        place = f"{printable(self.file)}:{self.line}:{self.column}: " + (
            f"{printable(self.path)}: " if self.path else ""
        )
        told = f"{self.code} {self.sentence}"
        return place + (told if self.severity == ERROR else f"warning {told}")

    def block_text(self, source: str) -> str:
        """A block for people: the problem, the line of ``source`` that it stands in, and a caret below its place."""
        lines = lines_of(source)
        if not 1 <= self.line <= len(lines):
            return self.line_text()
        # The caret counts characters; a tab or a control code would move it.
        line = "".join(character if character.isprintable() else " " for character in lines[self.line - 1])
        first = max(0, self.column - 1 - _WIDTH // 2) if len(line) > _WIDTH else 0
        number = f"{self.line} | "
        caret = " " * (len(number) + self.column - 1 - first) + "^"
        return f"{self.line_text()}\n{number}{line[first : first + _WIDTH]}\n{caret}"


_WIDTH = 110
_BREAK = re.compile("\r\n|[\n\r\x85\u2028\u2029]")


def lines_of(text: str) -> list[str]:
    """The lines of a text as YAML counts them."""
    return _BREAK.split(text)


def printable(text: str) -> str:
    """A text for one line of output: what does not print is written as an escape."""
    if text.isprintable():
        return text
    return "".join(each if each.isprintable() else each.encode("unicode_escape").decode("ascii") for each in text)
