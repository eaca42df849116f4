"""Units: a closed table of codes with exact factors and their spellings. An unknown spelling is refused, never guessed.

Codes are those of UCUM. Values keep their decimal digits until a calculation asks for a float. Units of signals are not
in this table: they are the instrument's own.
"""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Mapping
from dataclasses import dataclass
from decimal import Decimal

# code -> (dimension, factor to the dimension's first unit)
UNITS: dict[str, tuple[str, Decimal]] = {
    code: (dimension, Decimal(factor))
    for dimension, factors in {
        "volume": {"L": "1", "mL": "1e-3", "uL": "1e-6", "nL": "1e-9"},
        "mass": {"g": "1", "kg": "1e3", "mg": "1e-3", "ug": "1e-6", "ng": "1e-9"},
        "mass per volume": {
            "g/L": "1", "mg/L": "1e-3", "ug/L": "1e-6", "ng/L": "1e-9", "pg/L": "1e-12",
            "g/mL": "1e3", "mg/mL": "1", "ug/mL": "1e-3", "ng/mL": "1e-6", "pg/mL": "1e-9",
        },
        "amount per volume": {
            "mol/L": "1", "mmol/L": "1e-3", "umol/L": "1e-6", "nmol/L": "1e-9", "pmol/L": "1e-12",
            "mmol/mL": "1", "umol/mL": "1e-3", "nmol/mL": "1e-6",
        },
        "mass per mass": {
            "g/kg": "1e-3", "mg/kg": "1e-6", "ug/kg": "1e-9", "ng/kg": "1e-12", "pg/kg": "1e-15",
            "g/g": "1", "mg/g": "1e-3", "ug/g": "1e-6", "ng/g": "1e-9", "pg/g": "1e-12",
        },
        "amount per mass": {
            "mol/kg": "1e-3", "mmol/kg": "1e-6", "umol/kg": "1e-9", "nmol/kg": "1e-12", "pmol/kg": "1e-15",
            "mmol/g": "1e-3", "umol/g": "1e-6", "nmol/g": "1e-9",
        },
        "amount": {"mol": "1", "mmol": "1e-3", "umol": "1e-6", "nmol": "1e-9", "pmol": "1e-12"},
        "mass per amount": {"g/mol": "1", "kg/mol": "1e3", "mg/mmol": "1"},
        "potential": {"mV": "1e-3", "V": "1", "uV": "1e-6"},
        "temperature": {"Cel": "1"},
        "fraction": {"1": "1", "%": "1e-2"},
        "time": {"s": "1", "ms": "1e-3", "min": "60", "h": "3600", "d": "86400"},
    }.items()
    for code, factor in factors.items()
}  # fmt: skip

# Other spellings of a whole unit -> code.
_WHOLE: dict[str, str] = {
    "": "1", "x": "1", "degC": "Cel", "\N{DEGREE SIGN}C": "Cel", "kg/L": "g/mL", "kg/dm3": "g/mL", "g/cm3": "g/mL",
    "kg/m3": "g/L", "M": "mol/L", "mM": "mmol/L", "uM": "umol/L", "nM": "nmol/L", "pM": "pmol/L",
    "mol/m3": "mmol/L", "mmol/m3": "umol/L", "g/m3": "mg/L", "mg/m3": "ug/L",
    "sec": "s", "second": "s", "seconds": "s", "minute": "min", "minutes": "min", "hour": "h", "hours": "h",
    "day": "d", "days": "d",
}  # fmt: skip

# Other spellings of the parts of a unit, on either side of the stroke.
_PARTS: dict[str, str] = {
    "l": "L", "ml": "mL", "ul": "uL", "nl": "nL", "dm3": "L", "cm3": "mL", "mm3": "uL", "cc": "mL", "ccm": "mL",
    "mcL": "uL", "mcl": "uL", "mcg": "ug", "mcmol": "umol", "liter": "L", "litre": "L", "gram": "g",
}  # fmt: skip

_AMBIGUOUS = {"ppm": "mg/L or mg/kg", "ppb": "ug/L or ug/kg", "ppt": "ng/L or ng/kg"}

_NUMBER = re.compile(r"([+-]?(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][+-]?\d{1,3})?)\s*(.*)", re.ASCII | re.DOTALL)
_COMMA = re.compile(r"[+-]?\d+,\d", re.ASCII)
_PER = re.compile(r"([A-Za-z]+)[ .]([A-Za-z0-9]+?)\^?-1")
_LONGEST = 60  # characters of a quantity
_LARGEST = 30  # powers of ten


@dataclass(frozen=True, slots=True)
class Quantity:
    """A number with its unit: exact decimal value in ``unit``, a UCUM code of the table."""

    value: Decimal
    unit: str

    @property
    def dimension(self) -> str:
        """The kind of quantity, such as ``volume`` or ``mass per volume``."""
        return UNITS[self.unit][0]

    def in_unit(self, unit: str) -> Decimal:
        """The value in another unit of the same dimension; exact, but for the 28 digits of a division by 60.

        Raises
        ------
        ValueError : the two units measure different things
        """
        dimension, factor = UNITS[unit]
        if dimension != self.dimension:
            raise ValueError(f"{self} is a {self.dimension}, not a {dimension}")
        return self.value * UNITS[self.unit][1] / factor

    def to(self, unit: str) -> float:
        """The value in another unit of the same dimension, as a float.

        Raises
        ------
        ValueError : the two units measure different things
        """
        return float(self.in_unit(unit))

    def __str__(self) -> str:
        return f"{self.value:f} {self.unit}" if self.unit != "1" else f"{self.value:f}"


def per(code: str, kind: str) -> str:
    """The unit of content that goes with another one, or with an amount: ``mg/L`` and ``mg/kg``, ``ug`` and ``ug/L``.

    Parameters
    ----------
    code : a unit of content, mass or amount of substance
    kind : ``volume`` or ``mass``, of what the content is taken
    """
    top, _, below = ("g" if code == "kg" else code).partition("/")
    small = below in ("mL", "g")
    if kind == "volume":
        return f"{top}/{'mL' if small else 'L'}"
    return f"{top}/{'g' if small else 'kg'}"


def by_density(quantity: Quantity, kind: str, density: Quantity | None) -> Quantity | None:
    """A volume as a mass, or a mass as a volume; None where that takes a density and there is none.

    Parameters
    ----------
    kind : ``volume`` or ``mass``, what it shall be
    """
    if quantity.dimension == kind:
        return quantity
    unit = _FIRST[kind]
    if not quantity.value:
        return Quantity(Decimal(0), unit)
    if density is None:
        return None
    in_g_per_ml = density.in_unit("g/mL")
    if kind == "mass":
        return Quantity(quantity.in_unit("mL") * in_g_per_ml, unit)
    return Quantity(quantity.in_unit("g") / in_g_per_ml, unit)


def by_molar_mass(quantity: Quantity, kind: str, molar_mass: Quantity | None) -> Quantity | None:
    """A mass as an amount of substance, or the other way; None where that takes a molar mass and there is none.

    Parameters
    ----------
    kind : ``mass`` or ``amount``, what it shall be
    """
    if quantity.dimension == kind:
        return quantity
    if molar_mass is None:
        return None
    in_g_per_mol = molar_mass.in_unit("g/mol")
    if kind == "mass":
        return Quantity(quantity.in_unit("mol") * in_g_per_mol, "g")
    return Quantity(quantity.in_unit("g") / in_g_per_mol, "mol")


_FIRST = {"volume": "mL", "mass": "g"}


def unit_code(spelling: str) -> str | None:
    """The UCUM code of a unit as people write it, or None where the table does not hold it.

    Both code points of µ, superscripts, ``mg L-1`` and ``mg·L⁻¹`` are understood; capitals are kept.
    """
    folded = _folded(spelling)
    if folded in UNITS:
        return folded
    if folded in _WHOLE:
        return _WHOLE[folded]
    per = _PER.fullmatch(folded)
    parts = per.groups() if per else folded.split("/")
    code = "/".join(_PARTS.get(part.strip(), part.strip()) for part in parts)
    return code if code in UNITS else None


def _folded(spelling: str) -> str:
    text = unicodedata.normalize("NFKC", spelling).translate({0x3BC: "u", 0x2212: "-", 0xB7: " ", 0x22C5: " "})
    return " ".join(text.split())


def parse_quantity(text: str) -> Quantity:
    """Read ``0.25 mL``. The decimal sign is a point; the unit must stand in the table.

    Raises
    ------
    ValueError : a sentence that says what is wrong
    """
    stripped = text.strip().replace("\N{MINUS SIGN}", "-")
    match = _NUMBER.fullmatch(stripped) if len(stripped) <= _LONGEST else None
    if match is None:
        raise ValueError(f"'{text[:_LONGEST]}' is not a number with a unit, such as 0.25 mL")
    if _COMMA.match(stripped):
        raise ValueError(f"'{text}' has a comma in its number; write the decimal sign as a point, such as 0.25 mL")
    value = Decimal(match[1])
    if value and abs(value.adjusted()) > _LARGEST:
        raise ValueError(f"'{text}' is too large or too small to be a quantity")
    return Quantity(value, _unit_of(match[2].strip()))


def in_plain_units(text: str, meanings: Mapping[str, str]) -> str:
    """A quantity or a unit in which ppm, ppb and ppt stand for what was declared."""
    match = re.fullmatch(r"([-+\d.eE\s\u2212]*)(pp[mbt])\s*", text)
    if match is None or match[2] not in meanings:
        return text
    return match[1] + meanings[match[2]]


def _unit_of(spelling: str) -> str:
    code = unit_code(spelling)
    if code is not None:
        return code
    folded = _folded(spelling)
    if folded.lower() in _AMBIGUOUS:
        raise ValueError(
            f"the unit '{spelling}' does not say whether it is per volume or per mass; "
            f"write {_AMBIGUOUS[folded.lower()]}"
        )
    near = sorted(known for known in (*UNITS, *_WHOLE) if known.lower() == folded.lower())
    raise ValueError(f"the unit '{spelling}' is not known" + (f"; did you mean {near[0]}?" if near else ""))


def parse_dilution(text: str) -> Quantity:
    """Read a dilution: a factor such as ``5``, or ``1 + 4`` for one part made up with four, which is the factor 5.

    Raises
    ------
    ValueError : a sentence that says what is wrong; ``1:5`` is refused, since it is written for 1 + 4 and for 1 + 5
    """
    if re.fullmatch(r"\s*[\d.]+\s*[:/]\s*[\d.]+\s*", text, re.ASCII):
        raise ValueError(f"'{text}' is written for two different dilutions; write 1 + 4, or the factor 5")
    parts = [parse_quantity(part) for part in text.split("+")]
    if len(parts) > 2 or any(part.dimension != "fraction" for part in parts):
        raise ValueError(f"'{text}' is not a dilution; write the factor, such as 5, or parts, such as 1 + 4")
    if len(parts) == 1:
        return Quantity(parts[0].in_unit("1"), "1")
    taken, added = (part.value for part in parts)
    if taken <= 0 or added < 0:
        raise ValueError(f"'{text}' is not a dilution; write parts, such as 1 + 4")
    return Quantity((taken + added) / taken, "1")
