"""Bytes become text by rule: byte-order mark, then the pattern of NUL bytes, then strict UTF-8, then Windows-1252."""

from __future__ import annotations

import codecs
import unicodedata

from spikeward.rules.records import Unreadable

_MARKS = (
    (codecs.BOM_UTF8, "utf-8"),
    (codecs.BOM_UTF16_LE, "utf-16-le"),
    (codecs.BOM_UTF16_BE, "utf-16-be"),
)


def decode(content: bytes, encoding: str = "auto") -> tuple[str, str]:
    """Decode an export; a byte that does not fit refuses the file, nothing is replaced.

    Returns
    -------
    the text with ``\\n`` as its only line end, and the name of the encoding that was used

    Raises
    ------
    Unreadable : the bytes do not fit the declared encoding, or no rule fits
    """
    for mark, name in _MARKS:
        if content.startswith(mark) and encoding in ("auto", name, "utf-8", "utf-16"):
            return _strict(content[len(mark) :], name), name
    name = _by_content(content) if encoding == "auto" else encoding
    text = _strict(content, name)
    return text, name


def folded(text: str) -> str:
    """A heading or unit as it is compared: compatibility form, blanks folded, one micro sign, capitals ignored."""
    return " ".join(unicodedata.normalize("NFKC", text).replace("μ", "µ").split()).casefold()


def _by_content(content: bytes) -> str:
    sample = content[:4096]
    even, odd = sample[0::2].count(0), sample[1::2].count(0)
    if even + odd:
        # Text of Latin letters in UTF-16 has a NUL in every second byte.
        if odd > 0.4 * len(sample) / 2 and even < odd / 8:
            return "utf-16-le"
        if even > 0.4 * len(sample) / 2 and odd < even / 8:
            return "utf-16-be"
        raise Unreadable("it holds NUL bytes and is no text; export it as text again")
    try:
        content.decode("utf-8")
    except UnicodeDecodeError:
        return "cp1252"
    return "utf-8"


def _strict(content: bytes, name: str) -> str:
    try:
        text = content.decode(name)
    except LookupError:
        raise Unreadable(f"the encoding '{name}' is not known; correct 'encoding' of the reader") from None
    except UnicodeDecodeError as error:
        row = content[: error.start].count(b"\n") + 1
        raise Unreadable(
            f"byte {error.start + 1} does not fit the encoding {name}; declare the right 'encoding' of the reader", row
        ) from None
    if "\0" in text:
        row = text[: text.index("\0")].count("\n") + 1
        raise Unreadable("it holds NUL characters; export it as text again, or declare its 'encoding'", row)
    return text.replace("\r\n", "\n").replace("\r", "\n")
