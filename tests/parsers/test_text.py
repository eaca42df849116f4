"""Bytes to text: by rule or not at all, and never with a replacement character."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from spikeward.parsers.text import decode, lines_of
from spikeward.rules.records import Unreadable

GERMAN = "Lösung;Gehalt µg/L;Temperatur °C\r\nPrüfprobe Ä;0,125;21\r\n"


@pytest.mark.parametrize(
    ("encoding", "shown"),
    [
        ("utf-8", "UTF-8"),
        ("utf-8-sig", "UTF-8"),
        ("utf-16-le", "UTF-16 (little end first)"),  # without a mark, told by its NULs
        ("utf-16-be", "UTF-16 (big end first)"),
        ("utf-32", "utf-32-le"),
        ("cp1252", "cp1252"),
        ("iso-8859-1", "cp1252"),  # the same bytes, but for control codes
    ],
)
def test_the_rule_finds_the_character_set(encoding: str, shown: str):
    assert decode(GERMAN.encode(encoding)) == (GERMAN, shown)


def test_marks_of_utf_16_are_followed():
    for mark, encoding in ((b"\xff\xfe", "utf-16-le"), (b"\xfe\xff", "utf-16-be")):
        assert decode(mark + GERMAN.encode(encoding)).text == GERMAN


@pytest.mark.parametrize("encoding", ["cp850", "cp1250", "iso-8859-7", "utf-8", "UTF8", "utf-16", "utf-16-be"])
def test_a_declared_character_set_is_taken(encoding: str):
    text = "Probe;Signal\n" if encoding == "iso-8859-7" else "Lösung ä;1\n"
    assert decode(text.encode(encoding), encoding).text == text


def test_declared_utf_16_without_a_mark_does_not_depend_on_this_computer():
    assert decode("a;b\n1;2\n".encode("utf-16-be"), "utf-16").text == "a;b\n1;2\n"


@pytest.mark.parametrize(
    ("content", "encoding", "says", "row"),
    [
        (b"a;b\n1;\x81\n", "auto", "neither UTF-8 nor Windows-1252", 2),
        (b"a;b\r\n\r\n\xe4;1\n", "utf-8", "not valid in UTF-8", 3),
        (b"a;b\n1\x00;2\n", "auto", "NUL", 2),
        ("a;b\n1;2\n".encode("utf-16-le")[:-1], "auto", "ends in the middle of one", None),
        (b"\xef\xbb\xbfa;b\n", "cp1252", "begins with the mark of UTF-8", None),
        (b"\xff\xfea\x00", "utf-8", "begins with the mark of UTF-16", None),
        (b"a;b\n", "latin-17", "'latin-17' is not a known character set", None),
        (b"a;b\n", "hex", "declare another encoding", None),
        (b"PK\x03\x04\x14\x00", "auto", "a workbook or another archive", None),
        (b"CDF\x01\x00", "auto", "a netCDF file", None),
        (b"\x89HDF\r\n\x1a\n", "auto", "an HDF5 file", None),
        (b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1", "cp1252", "a workbook of the old binary kind", None),
    ],
)
def test_what_is_no_text_is_refused(content: bytes, encoding: str, says: str, row: int | None):
    with pytest.raises(Unreadable) as caught:
        decode(content, encoding)
    assert says in caught.value.sentence
    assert caught.value.row == row


def test_line_ends_may_be_mixed_and_nothing_else_ends_a_line():
    assert lines_of("a\r\nb\rc\n\nd\x0b\x0c\x85\u2028e") == ["a", "b", "c", "", "d\x0b\x0c\x85\u2028e"]
    assert lines_of("a\r\n") == ["a"]
    assert lines_of("") == []


@given(st.binary(max_size=400), st.sampled_from(["auto", "utf-8", "utf-16", "cp1252", "ascii", "utf-7", "punycode"]))
def test_any_bytes_are_read_or_refused(content: bytes, encoding: str):
    try:
        text = decode(content, encoding).text
    except Unreadable:
        return
    assert "\0" not in text


@given(st.text(st.characters(codec="utf-8", exclude_characters="\0\ufeff"), max_size=200))
def test_utf_8_text_comes_back_as_it_was(text: str):
    try:
        assert decode(text.encode()).text == text
    except Unreadable as refused:
        assert "this is" in refused.sentence  # noqa: PT017  (a text that begins like another kind of file)
