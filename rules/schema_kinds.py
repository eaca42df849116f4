"""The kinds of single values that a rule file holds, and how their text is read.

Each kind reads the text of one value and raises ``ValueError`` with a sentence where it cannot. Nothing is guessed from
the look of a text: ``012``, ``no`` and ``2024-01-02`` stay the names that they are.
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable
from dataclasses import dataclass
from datetime import date
from typing import Any

import re2

from spikeward.rules.quantities import UNITS, Quantity, parse_dilution, parse_quantity, unit_code


@dataclass(frozen=True, slots=True)
class Scalar:
    """One kind of single value.

    Parameters
    ----------
    expected : what is expected, for a sentence, such as ``a volume such as 10 mL``
    convert : text to value; raises ``ValueError`` with what is wrong
    code : of the problem where it cannot be read
    wrong : a text that it refuses, or empty where every text will do
    words : the words that are possible, where there are only some
    """

    expected: str
    convert: Callable[[str], Any]
    code: str
    wrong: str = ""
    words: tuple[str, ...] = ()
    may_be_empty: bool = False


def text(expected: str = "a text", may_be_empty: bool = False) -> Scalar:
    """Any text that is not empty, as it is written."""
    return Scalar(expected, str, "R017", may_be_empty=may_be_empty)


def word(*words: str) -> Scalar:
    """One of some words."""

    def convert(text: str) -> str:
        if text not in words:
            raise ValueError(f"'{text}' is not possible here")
        return text

    return Scalar(one_of(words), convert, "R016", wrong="zzz", words=words)


def one_of(words: tuple[str, ...]) -> str:
    """Words as a sentence lists them: ``auto, native or poll``."""
    return words[0] if len(words) == 1 else f"{', '.join(words[:-1])} or {words[-1]}"


def switch() -> Scalar:
    """``yes`` or ``no``."""

    def convert(text: str) -> bool:
        if text not in ("yes", "no"):
            raise ValueError(f"'{text}' is neither yes nor no")
        return text == "yes"

    return Scalar("yes or no", convert, "R016", wrong="zzz", words=("yes", "no"))


def quantity(*dimensions: str, example: str, zero: bool = False, words: tuple[str, ...] = ()) -> Scalar:
    """A quantity of one of some dimensions, above zero (or from zero on), or one of some words."""

    def convert(text: str) -> Quantity | str:
        if text in words:
            return text
        value = _of_dimension(parse_quantity(text), text, dimensions)
        return _positive(value, text, zero)

    expected = f"a {' or '.join(dimensions)} such as {example}"
    if words:
        expected += f", or where it comes from: {one_of(words)}"
    return Scalar(expected, convert, "R015", wrong="10 zzz", words=words)


def _of_dimension(value: Quantity, text: str, dimensions: tuple[str, ...]) -> Quantity:
    if value.dimension in dimensions:
        return value
    if value.unit == "1" and "fraction" not in dimensions:
        raise ValueError(f"'{text}' has no unit")
    raise ValueError(f"'{text}' is a {value.dimension}")


def _positive(value: Quantity, text: str, zero: bool) -> Quantity:
    if value.value < 0 or (value.value == 0 and not zero):
        raise ValueError(f"'{text}' is {'below zero' if value.value < 0 else 'zero'}")
    return value


def signed_quantity(*dimensions: str, example: str) -> Scalar:
    """A quantity of one of some dimensions, of either sign but not zero."""

    def convert(text: str) -> Quantity:
        value = _of_dimension(parse_quantity(text), text, dimensions)
        if value.value == 0:
            raise ValueError(f"'{text}' is zero")
        return value

    return Scalar(f"a {' or '.join(dimensions)} such as {example}", convert, "R015", wrong="10 zzz")


def dilution(words: tuple[str, ...]) -> Scalar:
    """A dilution as a factor or as parts, or one of some words."""

    def convert(text: str) -> Quantity | str:
        return text if text in words else _positive(parse_dilution(text), text, zero=False)

    expected = f"a dilution such as 1 + 4 or its factor 5, or where it comes from: {one_of(words)}"
    return Scalar(expected, convert, "R015", wrong="1:5", words=words)


def dry_matter(words: tuple[str, ...]) -> Scalar:
    """A fraction above 0 and not above 1, or one of some words."""

    def convert(text: str) -> Quantity | str:
        if text in words:
            return text
        value = _positive(_of_dimension(parse_quantity(text), text, ("fraction",)), text, zero=False)
        if value.in_unit("1") > 1:
            raise ValueError(f"'{text}' is more than the whole")
        return value

    return Scalar(f"a share such as 87.5 %, or where it comes from: {one_of(words)}", convert, "R015", "120 %", words)


def duration() -> Scalar:
    """A time, in seconds."""

    def convert(text: str) -> float:
        return _positive(_of_dimension(parse_quantity(text), text, ("time",)), text, zero=True).to("s")

    return Scalar("a time such as 2 s or 90 min", convert, "R015", wrong="10 zzz")


def unit(*dimensions: str, example: str) -> Scalar:
    """A unit of one of some dimensions, as its UCUM code; of any dimension where none is named."""

    def convert(text: str) -> str:
        code = unit_code(text)
        if code is None:
            parse_quantity(f"1 {text}")  # says what is wrong with the spelling
            raise ValueError(f"the unit '{text}' is not known")
        if dimensions and UNITS[code][0] not in dimensions:
            raise ValueError(f"'{text}' is a unit of {UNITS[code][0]}")
        return code

    kinds = f" of {' or '.join(dimensions)}" if dimensions else ""
    return Scalar(f"a unit{kinds} such as {example}", convert, "R015", wrong="zzz")


_NUMBER = re.compile(r"[+-]?(\d+(\.\d*)?|\.\d+)([eE][+-]?\d{1,3})?", re.ASCII)


def number_of(text: str) -> float:
    """A finite number; ``1e-3`` is one, ``1,5`` and ``1_000`` are not.

    Raises
    ------
    ValueError : a sentence that says what is wrong
    """
    if _NUMBER.fullmatch(text) and math.isfinite(value := float(text)):
        return value
    if re.fullmatch(r"[+-]?[\d.]*,[\d.]+", text, re.ASCII):
        raise ValueError(f"'{text}' has a comma; write the decimal sign as a point")
    raise ValueError(f"'{text}' is not a number")


def number(example: str) -> Scalar:
    """A number above zero."""

    def convert(text: str) -> float:
        value = number_of(text)
        if value <= 0:
            raise ValueError(f"'{text}' is not above zero")
        return value

    return Scalar(f"a number such as {example}", convert, "R014", wrong="1,5")


def count() -> Scalar:
    """A whole number from 1 on."""

    def convert(text: str) -> int:
        if not re.fullmatch(r"[0-9]{1,6}", text) or int(text) < 1:
            raise ValueError(f"'{text}' is not a whole number from 1 on")
        return int(text)

    return Scalar("a whole number such as 2", convert, "R014", wrong="2.5")


def signed_count() -> Scalar:
    """A whole number of either sign, not zero."""

    def convert(text: str) -> int:
        if not re.fullmatch(r"[+-]?[1-9]", text):
            raise ValueError(f"'{text}' is not a charge")
        return int(text)

    return Scalar("a charge such as -1 or 2", convert, "R014", wrong="2.5")


def fraction_of(text: str) -> float:
    """A number, or a percentage as a fraction: ``10 %`` is 0.1.

    Raises
    ------
    ValueError : a sentence that says what is wrong
    """
    stripped = text.strip()
    if not stripped.endswith("%"):
        return number_of(stripped)
    number_of(stripped[:-1].strip())
    return parse_quantity(stripped).to("1")


def share(example: str) -> Scalar:
    """A share between 0 and 1, as a percentage or a fraction."""

    def convert(text: str) -> float:
        value = fraction_of(text)
        if not 0 < value < 1:
            raise ValueError(f"'{text}' is not between 0 and 100 %")
        return value

    return Scalar(f"a percentage such as {example}", convert, "R014", wrong="120 %")


def limit(whole: bool) -> Scalar:
    """A limit of a check: a number, a percentage as a fraction, or ``none`` where no limit is asked for."""

    def convert(text: str) -> float | None:
        if text in ("none", "null", "~"):
            return None
        value = number_of(text) if whole else fraction_of(text)
        if value < 0 or (whole and value != int(value)):
            raise ValueError(f"'{text}' is not {'a whole number from 0 on' if whole else 'a limit'}")
        return int(value) if whole else value

    expected = "a whole number such as 4" if whole else "a number or a percentage such as 10 %"
    return Scalar(f"{expected}, or none", convert, "R014", wrong="1,5")


def day() -> Scalar:
    """A date, ISO 8601."""

    def convert(text: str) -> str:
        try:
            if not re.fullmatch(r"\d{4}-\d{2}-\d{2}", text, re.ASCII):
                raise ValueError
            return date.fromisoformat(text).isoformat()
        except ValueError:
            raise ValueError(f"'{text}' is not a date of the form year-month-day") from None

    return Scalar("a date such as 2027-03-31", convert, "R017", wrong="31.3.2027")


_DELIMITERS = {"comma": ",", "semicolon": ";", "tab": "\t", "pipe": "|", "space": " "}


def delimiter() -> Scalar:
    """The character between the columns, or its name."""

    def convert(text: str) -> str:
        if text == "auto" or (len(text) == 1 and not text.isalnum() and text not in "\r\n\"'"):
            return text
        if text not in _DELIMITERS:
            raise ValueError(f"'{text}' is no delimiter")
        return _DELIMITERS[text]

    words = ("auto", *_DELIMITERS)
    return Scalar(f"{one_of(words)}, or the character itself in quotes", convert, "R016", wrong="zzz", words=words)


def character() -> Scalar:
    """One character."""

    def convert(text: str) -> str:
        if len(text) != 1:
            raise ValueError(f"'{text}' is not one character")
        return text

    return Scalar("one character in quotes", convert, "R017", wrong="zzz")


_LONGEST_PATTERN = 1000  # characters
_FRUGAL = re2.Options()
_FRUGAL.log_errors = False
# An eighth of what the engine has when names are read: a pattern that is accepted here stays fast there.
_FRUGAL.max_mem = 1 << 20

_OTHER_ENGINES = (
    (r"\(\?<?[=!]", "looks ahead or behind, which patterns here cannot; write a special rule before the general one"),
    (r"\\[1-9]|\(\?P=|\\k", "refers back to a group, which patterns here cannot; write the text out"),
    (r"\(\?>|[*+?}]\+", "holds an atomic or possessive part, which patterns here do not need; leave it out"),
)


def pattern() -> Scalar:
    """A pattern that must match a whole name, for the linear-time engine."""

    def convert(text: str) -> str:
        if len(text) > _LONGEST_PATTERN:
            raise ValueError(f"the pattern has more than {_LONGEST_PATTERN} characters")
        try:
            re2.compile(text, _FRUGAL)
        except re2.error as error:
            for construct, told in _OTHER_ENGINES:
                if re.search(construct, text):
                    raise ValueError(f"the pattern '{text}' {told}") from None
            reason = error.args[0].decode("utf-8", "replace") if error.args else "it cannot be read"
            raise ValueError(f"the pattern '{text}' cannot be used ({reason})") from None
        return text

    return Scalar("a pattern in single quotes", convert, "R020", wrong="(zzz")
