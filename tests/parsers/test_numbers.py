"""Numbers: by declaration, or where every cell of the file agrees; a doubtful one is refused with its cell."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from spikeward.parsers.numbers import Cell, Numbers, numbers_of
from spikeward.rules.records import Unreadable


def cells(*texts: str) -> list[Cell]:
    return [Cell(text, row, "Signal") for row, text in enumerate(texts, start=2)]


def values(declared: str, *texts: str) -> list[float]:
    numbers = numbers_of(cells(*texts), declared)
    return [numbers.value(cell) for cell in cells(*texts)]


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("12.5", 12.5), ("+12.5", 12.5), ("-0.25", -0.25), ("\N{MINUS SIGN}0.25", -0.25), (" 7 ", 7.0), (".5", 0.5),
        ("5.", 5.0), ("0012", 12.0), ("1.5e-3", 0.0015), ("1.5E+03", 1500.0), ("4e3", 4000.0), ("1 234.5", 1234.5),
        ("1\N{NO-BREAK SPACE}234 567".replace(" ", "\N{NO-BREAK SPACE}"), 1234567.0),
        ("12\N{NARROW NO-BREAK SPACE}345.6", 12345.6), ("1'234.5", 1234.5),
        ("1\N{RIGHT SINGLE QUOTATION MARK}234", 1234.0),
        ("5e-324", 5e-324), ("1.7976931348623157e308", 1.7976931348623157e308), ("0e400", 0.0),
    ],
)  # fmt: skip
def test_numbers_with_a_declared_point(text: str, value: float):
    assert values("point", text) == [value]


@pytest.mark.parametrize(
    ("text", "value"), [("12,5", 12.5), (",5", 0.5), ("1 234,5", 1234.5), ("1,5E-3", 0.0015), ("1,234", 1.234)]
)
def test_numbers_with_a_declared_comma(text: str, value: float):
    assert values("comma", text) == [value]


def test_minus_nought_is_nought():
    for text in ("-0", "-0.0", "\N{MINUS SIGN}0"):
        assert math.copysign(1.0, values("point", text)[0]) == 1.0


@pytest.mark.parametrize("declared", ["point", "comma", "auto"])
@pytest.mark.parametrize(
    "text",
    [
        "1_000", "nan", "NaN", "inf", "-Infinity", "١٢٣", "12٫5", "１２", "0x1F", "1e", "e5", "--1", "1 2", "12 34",
        "1.2.3", "1,2,3", "1,23,456", "1.234,5.6", "n.d.", "12a", "-", "+", ".", ",", "1" * 61, "½", "1e12345",
        "1 234'567", "",
    ],
)  # fmt: skip
def test_what_is_no_number_is_refused_with_its_cell(declared: str, text: str):
    with pytest.raises(Unreadable) as caught:
        values(declared, text)
    assert (caught.value.row, caught.value.column) == (2, "Signal")


@pytest.mark.parametrize("text", ["1e400", "-1e400", "1e-400", "9" * 50 + "e300"])
def test_a_number_that_the_computer_cannot_hold_is_refused(text: str):
    with pytest.raises(Unreadable, match="too large or too small"):
        values("point", text)


@pytest.mark.parametrize(
    ("declared", "text"),
    [("comma", "1.5"), ("comma", "1.234,5"), ("point", "1,5"), ("point", "1,234.5"), ("point", "1,234")],
)
def test_the_other_sign_contradicts_the_declaration(declared: str, text: str):
    with pytest.raises(Unreadable, match=f"decimal sign is the {declared}") as caught:
        values(declared, text)
    assert (caught.value.row, caught.value.column) == (2, "Signal")


@pytest.mark.parametrize(
    ("texts", "expected"),
    [
        (("0,123", "1,5"), [0.123, 1.5]),
        (("1.234,5", "1.234"), [1234.5, 1234.0]),
        (("1,234", "1,234.5"), [1234.0, 1234.5]),
        (("1.234", "0.5"), [1.234, 0.5]),
        (("12", "1234"), [12.0, 1234.0]),
        (("1 234", "12,345", "0,5"), [1234.0, 12.345, 0.5]),
        (("1.234e2", "5.678"), [123.4, 5.678]),
        (("1,234,567",), [1234567.0]),
        (("0.123",), [0.123]),
        (("1234.567",), [1234.567]),
    ],
)
def test_a_file_whose_cells_agree_is_read(texts: tuple[str, ...], expected: list[float]):
    assert values("auto", *texts) == expected
    assert values("auto", *reversed(texts)) == expected[::-1]


@pytest.mark.parametrize("texts", [("1,234",), ("12", "1.234", "5.678"), ("-123,456", "1 000")])
def test_a_file_that_can_be_read_both_ways_is_refused(texts: tuple[str, ...]):
    with pytest.raises(Unreadable, match="declare decimal: point or decimal: comma") as caught:
        values("auto", *texts)
    doubtful = next(cell for cell in cells(*texts) if "," in cell.text or "." in cell.text)
    assert caught.value.row == doubtful.row


@pytest.mark.parametrize("texts", [("0.5", "0,5"), ("0,5", "12", "1.25"), ("1.234,5", "1,234.5")])
def test_two_signs_in_one_file_are_refused_and_both_cells_told(texts: tuple[str, ...]):
    with pytest.raises(Unreadable, match="a file has one decimal sign") as caught:
        values("auto", *texts)
    assert caught.value.row == len(texts) + 1
    assert f"'{texts[0]}' in row 2" in caught.value.sentence


def test_a_count_is_whole():
    numbers = Numbers(".")
    assert numbers.count(Cell("3", 2, "N")) == 3
    for text in ("2.5", "-1"):
        with pytest.raises(Unreadable, match="whole number"):
            numbers.count(Cell(text, 2, "N"))


@given(st.floats(allow_nan=False, allow_infinity=False), st.sampled_from([".", ","]))
def test_numbers_come_back_as_they_were_written(value: float, sign: str):
    text = repr(value).replace(".", sign)
    assert Numbers(sign).value(Cell(text, 1, "x")) == value


@given(st.integers(0, 10**12), st.integers(0, 999), st.sampled_from([(",", "."), (".", ","), ("'", "."), (" ", ",")]))
def test_grouped_numbers_come_back(whole: int, part: int, marks: tuple[str, str]):
    group, sign = marks
    text = f"{whole:,}".replace(",", group) + f"{sign}{part:03d}5"
    assert numbers_of(cells(text), "auto").value(cells(text)[0]) == float(f"{whole}.{part:03d}5")


@given(st.text(max_size=70))
def test_any_text_is_a_number_or_refused(text: str):
    for declared in ("point", "comma", "auto"):
        try:
            (value,) = values(declared, text)
        except Unreadable:
            continue
        assert math.isfinite(value)
        assert any(digit in text for digit in "0123456789")
