"""Bytes become text by rule, never by likelihood: mark, NUL pattern, UTF-8, Windows-1252. Nothing is ever replaced."""

from __future__ import annotations

import codecs
import re
from typing import NamedTuple

from spikeward.rules.records import Unreadable

# The longer marks stand first: that of UTF-32 begins with that of UTF-16.
_MARKS = (
    (codecs.BOM_UTF32_LE, "utf-32-le"),
    (codecs.BOM_UTF32_BE, "utf-32-be"),
    (codecs.BOM_UTF8, "utf-8"),
    (codecs.BOM_UTF16_LE, "utf-16-le"),
    (codecs.BOM_UTF16_BE, "utf-16-be"),
)

# How files of other kinds begin.
_OTHERS = (
    (b"PK\x03\x04", "a workbook or another archive"),
    (b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1", "a workbook of the old binary kind"),
    (b"CDF\x01", "a netCDF file"),
    (b"CDF\x02", "a netCDF file"),
    (b"\x89HDF\r\n\x1a\n", "an HDF5 file"),
    (b"%PDF-", "a PDF document"),
    (b"\x1f\x8b", "a compressed file"),
)

_LINE_END = re.compile(r"\r\n|\r|\n")
_SAMPLE = 4096  # bytes in which NULs are counted
_SHOWN = {"utf-8": "UTF-8", "utf-16-le": "UTF-16 (little end first)", "utf-16-be": "UTF-16 (big end first)"}


class Decoded(NamedTuple):
    """The text of a file, and the character set that it was read in."""

    text: str
    encoding: str


def decode(content: bytes, encoding: str = "auto") -> Decoded:
    """Read bytes as text.

    Parameters
    ----------
    encoding : ``auto``, or the name of a character set as the rule file declares it

    Raises
    ------
    Unreadable : the bytes do not fit the character set, contradict the declared one, or are no text
    """
    for beginning, kind in _OTHERS:
        if content.startswith(beginning):
            raise Unreadable(f"this is {kind}, not text; export as text, or declare the format that it has")
    mark, marked = next(((mark, name) for mark, name in _MARKS if content.startswith(mark)), (b"", ""))
    body = content[len(mark) :]
    if encoding.strip().casefold() == "auto":
        decoded = _strictly(body, marked) if marked else _by_rule(body)
    else:
        decoded = _strictly(body, _declared(body, encoding.strip(), marked))
    position = decoded.text.find("\0")
    if position >= 0:
        raise Unreadable(
            "a NUL character stands inside the text, so the file is damaged or no text; export it again",
            len(lines_of(decoded.text[:position] + "x")),
        )
    return decoded


def lines_of(text: str) -> list[str]:
    """The lines of a text, whichever of CR, LF and CRLF ends each; a last line end begins no further line."""
    lines = _LINE_END.split(text)
    if not lines[-1]:
        lines.pop()
    return lines


def _by_rule(body: bytes) -> Decoded:
    pattern = _nul_pattern(body)
    if pattern:
        return _strictly(body, pattern)
    try:
        return Decoded(body.decode("utf-8"), "UTF-8")
    except UnicodeDecodeError as error:
        try:
            return Decoded(body.decode("cp1252"), "cp1252")
        except UnicodeDecodeError:
            raise Unreadable(
                "the characters are neither UTF-8 nor Windows-1252; declare the encoding of this instrument",
                _row(body, error.start),
            ) from None


def _nul_pattern(body: bytes) -> str:
    """UTF-16 without a mark: nearly every second byte of Latin text is NUL, on one side only."""
    sample = body[:_SAMPLE]
    pairs = len(sample) // 2
    if not pairs:
        return ""
    first, second = sample[0 : 2 * pairs : 2].count(0), sample[1 : 2 * pairs : 2].count(0)
    if second >= 0.4 * pairs and first <= 0.05 * pairs:
        return "utf-16-le"
    if first >= 0.4 * pairs and second <= 0.05 * pairs:
        return "utf-16-be"
    return ""


def _declared(body: bytes, encoding: str, marked: str) -> str:
    """The character set to read in, by the declaration and the mark, which must not contradict each other."""
    try:
        declared = codecs.lookup(encoding).name
    except (LookupError, ValueError):
        raise Unreadable(
            f"encoding: '{encoding}' is not a known character set; write auto, utf-8, utf-16 or cp1252"
        ) from None
    if declared == "utf-8-sig":
        declared = "utf-8"
    if marked and declared not in (marked, marked.removesuffix("-le").removesuffix("-be")):
        raise Unreadable(
            f"the file begins with the mark of {_SHOWN.get(marked, marked)}, but its encoding is declared as "
            f"{encoding}; correct the declaration, or write auto"
        )
    if declared in ("utf-16", "utf-32"):
        # Without a mark Python would take the byte order of this computer.
        return marked or _nul_pattern(body) or f"{declared}-le"
    return declared


def _strictly(body: bytes, encoding: str) -> Decoded:
    shown = _SHOWN.get(encoding, encoding)
    try:
        return Decoded(body.decode(encoding), shown)
    except UnicodeDecodeError as error:
        raise Unreadable(
            f"a character is not valid in {shown}, or the file ends in the middle of one; export it again, or declare "
            "another encoding",
            None if encoding.startswith(("utf-16", "utf-32")) else _row(body, error.start),
        ) from None
    except (UnicodeError, LookupError):
        raise Unreadable(f"the text cannot be read as {shown}; declare another encoding") from None


def _row(body: bytes, position: int) -> int:
    return len(lines_of(body[:position].decode("latin-1") + "x"))
