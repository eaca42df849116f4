"""Texts of unknown origin, fit for a line, a page or a file: encodable, and unable to move what stands around them.

Names of files and solutions come from outside. A file name may hold bytes that are no text, a cell may hold line
breaks, control codes or marks that turn the direction of writing around.
"""

from __future__ import annotations

import re

# Codes that end a line, ring a bell or reorder what stands beside them; tab and line feed included.
_UNSEEN = re.compile("[\x00-\x1f\x7f-\x9f\u061c\u200e\u200f\u2028\u2029\u202a-\u202e\u2066-\u2069\ufeff\ufffe\uffff]")
_LONE = re.compile("[\ud800-\udfff]")
_SHORT = {"\n": "\\n", "\r": "\\r", "\t": "\\t"}


def encodable(text: str) -> str:
    r"""The text with bytes that are no text written as ``\xff``, so that UTF-8 can always hold it."""
    return text if text.isascii() else _LONE.sub(_lone, text)


def one_line(text: str) -> str:
    r"""The text on one line: control codes, line breaks and marks of direction as ``\n``, ``\x07``, ``\u202e``."""
    return _UNSEEN.sub(_escaped, encodable(text))


def visible(text: str) -> str:
    """The text for a page: line breaks and tabs as spaces, other control codes and marks of direction by number."""
    if text.isascii() and text.isprintable():
        return text  # nearly every text there is, and pages ask hundreds of times
    return _UNSEEN.sub(_named, encodable(text))


def _lone(match: re.Match[str]) -> str:
    code = ord(match[0])
    return f"\\x{code - 0xDC00:02x}" if 0xDC80 <= code <= 0xDCFF else f"\\u{code:04x}"


def _escaped(match: re.Match[str]) -> str:
    code = ord(match[0])
    return _SHORT.get(match[0]) or (f"\\x{code:02x}" if code < 0x100 else f"\\u{code:04x}")


def _named(match: re.Match[str]) -> str:
    return " " if match[0] in _SHORT else f"⟨U+{ord(match[0]):04X}⟩"
