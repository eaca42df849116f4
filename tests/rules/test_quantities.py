"""Units and quantities: exact factors, spellings that mean one thing, and refusals that say what to write."""

from __future__ import annotations

from decimal import Decimal

import pytest
from hypothesis import given
from hypothesis import strategies as st

from spikeward.rules.quantities import (
    UNITS,
    Quantity,
    by_density,
    by_molar_mass,
    in_plain_units,
    parse_dilution,
    parse_quantity,
    per,
    unit_code,
)


# Exact by the definitions of the SI prefixes and of the litre (1 L = 1 dm3), BIPM, The International System of Units.
@pytest.mark.parametrize(
    ("text", "unit", "value"),
    [
        ("0.25 mL", "uL", "250"),
        ("250 uL", "mL", "0.25"),
        ("1 dm3", "mL", "1000"),
        ("501.2 mg", "g", "0.5012"),
        ("0.5012 kg", "g", "501.2"),
        ("1 mg/L", "ug/mL", "1"),
        ("1 ng/mL", "ug/L", "1"),
        ("1 g/m3", "mg/L", "1"),
        ("1 mg/cm3", "g/L", "1"),
        ("2.5 mM", "umol/L", "2500"),
        ("1 mol/m3", "mmol/L", "1"),
        ("1 mg/kg", "ug/g", "1"),
        ("1 ng/g", "ug/kg", "1"),
        ("3 mmol/g", "mol/kg", "3"),
        ("87.5 %", "1", "0.875"),
        ("90 min", "s", "5400"),
        ("1 d", "h", "24"),
        ("500 ms", "s", "0.5"),
    ],
)
def test_conversions_are_exact(text: str, unit: str, value: str):
    assert parse_quantity(text).in_unit(unit) == Decimal(value)
    assert parse_quantity(text).to(unit) == float(Decimal(value))


def test_every_code_is_its_own_spelling_and_has_a_positive_factor():
    for code, (dimension, factor) in UNITS.items():
        assert unit_code(code) == code
        assert factor > 0
        assert Quantity(Decimal(1), code).dimension == dimension


@pytest.mark.parametrize(
    ("spellings", "code"),
    [
        (("µg/L", "μg/L", "ug/L", "ug/l", "ug L-1", "µg·L⁻¹", "μg L⁻¹", "ug.L-1", "mcg/L", "ug / L", "ug/dm3"), "ug/L"),
        (("mg/L", "mg/l", "mg L-1", "mg L^-1", "mg L⁻¹", "mg/dm³", "mg\u00a0L-1", "g/m³", "mg/litre"), "mg/L"),
        (("mL", "ml", "cm3", "cm³", "cc", " mL "), "mL"),
        (("uL", "µL", "μl", "mcL", "mm3"), "uL"),
        (("mol/L", "M", "mol/l", "mol L-1", "mol/dm3"), "mol/L"),
        (("umol/L", "µM", "μmol/l", "uM"), "umol/L"),
        (("mg/kg", "mg kg-1", "mg·kg⁻¹"), "mg/kg"),
        (("Cel", "°C", "degC"), "Cel"),
        (("g/mL", "kg/L", "g/cm³", "kg/dm³"), "g/mL"),
        (("1", "", "x"), "1"),
        (("h", "hour", "hours"), "h"),
    ],
)
def test_spellings(spellings: tuple[str, ...], code: str):
    assert {unit_code(each) for each in spellings} == {code}


@pytest.mark.parametrize(
    "spelling", ["ML", "Mg/L", "mg/l/kg", "mgL", "g/", "/L", "L-1", "zzz", "°F", "mg N/L", "pH", "AU"]
)
def test_other_spellings_are_not_guessed(spelling: str):
    assert unit_code(spelling) is None
    with pytest.raises(ValueError, match="is not known"):
        parse_quantity(f"1 {spelling}")


def test_a_slip_of_capitals_is_named():
    with pytest.raises(ValueError, match="did you mean mL?"):
        parse_quantity("5 ML")


@pytest.mark.parametrize(
    ("spelling", "either"), [("ppm", "mg/L or mg/kg"), ("ppb", "ug/L or ug/kg"), ("PPM", "mg/L or mg/kg")]
)
def test_parts_per_million_are_refused_with_what_to_write(spelling: str, either: str):
    with pytest.raises(ValueError, match=either):
        parse_quantity(f"3 {spelling}")


@pytest.mark.parametrize("text", ["0,25 mL", "1,000 mL", "12,5", "-1,5 g"])
def test_a_comma_is_refused_with_a_hint(text: str):
    with pytest.raises(ValueError, match="decimal sign as a point"):
        parse_quantity(text)


@pytest.mark.parametrize(
    "text",
    [
        "",
        "mL",
        "nan mL",
        "inf mL",
        "1_000 mL",
        "٣ mL",
        "1e400 mL",
        "1e99 mL",
        "1e-99 mL",
        "0x10 mL",
        "5² mL",
        "1 2 mL",
        "." * 99,
    ],
)
def test_what_is_no_quantity(text: str):
    with pytest.raises(ValueError, match="."):
        parse_quantity(text)


def test_digits_are_kept():
    assert parse_quantity("0.250 mL").value.as_tuple().digits == (2, 5, 0)
    assert str(parse_quantity("0.250 mL")) == "0.250 mL"
    assert parse_quantity("−3 mL").value == -3
    assert parse_quantity("1e-3 mol/L").value == Decimal("0.001")


def test_other_dimensions_are_refused():
    with pytest.raises(ValueError, match="mass, not a volume"):
        parse_quantity("5 g").in_unit("mL")


@pytest.mark.parametrize(
    ("text", "factor"),
    [("1 + 4", "5"), ("1+4", "5"), ("2 + 3", "2.5"), ("5", "5"), ("1", "1"), ("12.5 x", "12.5"), ("1 + 0", "1")],
)
def test_dilutions(text: str, factor: str):
    assert parse_dilution(text) == Quantity(Decimal(factor), "1")


@pytest.mark.parametrize("text", ["1:5", "1 : 5", "1/5"])
def test_a_ratio_means_two_things(text: str):
    with pytest.raises(ValueError, match=r"write 1 \+ 4, or the factor 5"):
        parse_dilution(text)


@pytest.mark.parametrize("text", ["", "+", "1 +", "1 + 4 + 5", "0 + 1", "1 + -2", "5 mL", "1,5", "1 mL + 4 mL"])
def test_what_is_no_dilution(text: str):
    with pytest.raises(ValueError, match="."):
        parse_dilution(text)


@given(st.text())
def test_any_text_is_read_or_refused_in_a_sentence(text: str):
    for read in (parse_quantity, parse_dilution):
        try:
            unit = read(text).unit
        except ValueError as refused:
            unit, told = "", str(refused)
        assert unit in UNITS or told


@given(
    st.decimals(min_value=-(10**9), max_value=10**9, allow_nan=False, allow_infinity=False, places=6),
    st.sampled_from(sorted(UNITS)),
)
def test_a_written_quantity_reads_back(value: Decimal, unit: str):
    quantity = Quantity(value, unit)
    assert parse_quantity(str(quantity)) == quantity


@given(st.sampled_from(sorted(UNITS)), st.sampled_from(sorted(UNITS)))
def test_there_and_back(one: str, other: str):
    if UNITS[one][0] == UNITS[other][0]:
        there = Quantity(Quantity(Decimal("2.5"), one).in_unit(other), other)
        assert abs(there.in_unit(one) - Decimal("2.5")) < Decimal("1e-25")


def test_every_content_has_its_counterpart_per_volume_and_per_mass():
    for code, (dimension, _) in UNITS.items():
        what, _, of = dimension.partition(" per ")
        if of in ("volume", "mass") and what in ("mass", "amount"):
            assert per(code, of) == code
            other = "mass" if of == "volume" else "volume"
            assert UNITS[per(code, other)][0] == f"{what} per {other}"
            assert per(per(code, other), of) == code
        if dimension in ("mass", "amount"):
            assert UNITS[per(code, "volume")][0] == f"{dimension} per volume"


def test_a_density_and_a_molar_mass_lead_there_and_back():
    density, molar_mass = parse_quantity("1.25 kg/L"), parse_quantity("112.414 g/mol")
    assert by_density(parse_quantity("8 mL"), "mass", density) == parse_quantity("10.00 g")
    assert by_density(parse_quantity("10 g"), "volume", density) == parse_quantity("8 mL")
    assert by_density(parse_quantity("8 mL"), "volume", None) == parse_quantity("8 mL")
    assert by_density(parse_quantity("8 mL"), "mass", None) is None
    assert by_density(parse_quantity("0 mL"), "mass", None) == parse_quantity("0 g")
    assert by_molar_mass(parse_quantity("1 mmol"), "mass", molar_mass) == parse_quantity("0.112414 g")
    assert by_molar_mass(parse_quantity("112.414 g"), "amount", molar_mass) == parse_quantity("1 mol")
    assert by_molar_mass(parse_quantity("1 g"), "amount", None) is None


@pytest.mark.parametrize(
    ("text", "read"),
    [("10 ppm", "10 mg/L"), ("1e-3 ppm", "1e-3 mg/L"), ("ppm", "mg/L"), ("10 ppb", "10 ppb"), ("10 xppm", "10 xppm")],
)
def test_parts_per_million_stand_for_what_was_declared(text: str, read: str):
    assert in_plain_units(text, {"ppm": "mg/L"}) == read
