"""Units: a closed table of spellings with exact factors. An unknown spelling is refused, never guessed.

Codes are those of UCUM. Texts keep their decimal digits until a calculation asks for a float.
"""

from __future__ import annotations

import re
import unicodedata
from dataclasses import dataclass
from decimal import Decimal

# code -> (dimension, factor to the dimension's first unit)
UNITS: dict[str, tuple[str, Decimal]] = {
    "L": ("volume", Decimal(1)),
    "mL": ("volume", Decimal("1e-3")),
    "uL": ("volume", Decimal("1e-6")),
    "kg": ("mass", Decimal("1e3")),
    "g": ("mass", Decimal(1)),
    "mg": ("mass", Decimal("1e-3")),
    "ug": ("mass", Decimal("1e-6")),
    "g/L": ("mass per volume", Decimal(1)),
    "mg/L": ("mass per volume", Decimal("1e-3")),
    "ug/L": ("mass per volume", Decimal("1e-6")),
    "ng/L": ("mass per volume", Decimal("1e-9")),
    "ug/mL": ("mass per volume", Decimal("1e-3")),
    "ng/mL": ("mass per volume", Decimal("1e-6")),
    "mol/L": ("amount per volume", Decimal(1)),
    "mmol/L": ("amount per volume", Decimal("1e-3")),
    "umol/L": ("amount per volume", Decimal("1e-6")),
    "nmol/L": ("amount per volume", Decimal("1e-9")),
    "g/kg": ("mass per mass", Decimal("1e-3")),
    "mg/kg": ("mass per mass", Decimal("1e-6")),
    "ug/kg": ("mass per mass", Decimal("1e-9")),
    "mg/g": ("mass per mass", Decimal("1e-3")),
    "ug/g": ("mass per mass", Decimal("1e-6")),
    "%": ("fraction", Decimal("1e-2")),
    "1": ("fraction", Decimal(1)),
    "s": ("time", Decimal(1)),
    "min": ("time", Decimal(60)),
    "h": ("time", Decimal(3600)),
    "d": ("time", Decimal(86400)),
}

# other spellings -> code
SPELLINGS: dict[str, str] = {
    "l": "L", "ml": "mL", "ul": "uL", "µL": "uL", "µl": "uL", "mcL": "uL", "cm3": "mL", "dm3": "L",
    "µg": "ug", "g/l": "g/L", "mg/l": "mg/L", "mg L-1": "mg/L", "mg/dm3": "mg/L", "ug/l": "ug/L", "µg/L": "ug/L",
    "µg/l": "ug/L", "ug L-1": "ug/L", "µg L-1": "ug/L", "ng/l": "ng/L", "µg/mL": "ug/mL", "µg/ml": "ug/mL",
    "ug/ml": "ug/mL", "ng/ml": "ng/mL", "M": "mol/L", "mM": "mmol/L", "uM": "umol/L", "µM": "umol/L", "mol/l": "mol/L",
    "mmol/l": "mmol/L", "µmol/L": "umol/L", "µmol/l": "umol/L", "umol/l": "umol/L", "nM": "nmol/L",
    "µg/kg": "ug/kg", "µg/g": "ug/g", "sec": "s", "second": "s", "seconds": "s", "minute": "min", "minutes": "min",
    "hour": "h", "hours": "h", "day": "d", "days": "d", "x": "1", "": "1",
}  # fmt: skip

_NUMBER = re.compile(r"([+-]?(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][+-]?\d{1,3})?)\s*(.*)", re.ASCII | re.DOTALL)


@dataclass(frozen=True, slots=True)
class Quantity:
    """A number with its unit: exact decimal value in ``unit``, a UCUM code of the table."""

    value: Decimal
    unit: str

    @property
    def dimension(self) -> str:
        """The kind of quantity, such as ``volume`` or ``mass per volume``."""
        return UNITS[self.unit][0]

    def to(self, unit: str) -> float:
        """The value in another unit of the same dimension, as a float.

        Raises
        ------
        ValueError : the two units measure different things
        """
        if UNITS[unit][0] != self.dimension:
            raise ValueError(f"{self.unit} is a {self.dimension}, {unit} a {UNITS[unit][0]}")
        return float(self.value * UNITS[self.unit][1] / UNITS[unit][1])

    def __str__(self) -> str:
        return f"{self.value:f} {self.unit}" if self.unit != "1" else f"{self.value:f}"


def unit_code(spelling: str) -> str | None:
    """The UCUM code of a unit as people write it, or None where the table does not hold it."""
    folded = " ".join(unicodedata.normalize("NFKC", spelling).replace("μ", "µ").split())
    if folded in UNITS:
        return folded
    return SPELLINGS.get(folded)


def parse_quantity(text: str) -> Quantity:
    """Read ``0.25 mL``. The decimal sign is a point; the unit must stand in the table.

    Raises
    ------
    ValueError : a sentence that says what is wrong
    """
    match = _NUMBER.fullmatch(text.strip())
    if match is None:
        raise ValueError(f"'{text}' is not a number with a unit, such as 0.25 mL")
    code = unit_code(match[2])
    if code is None:
        raise ValueError(f"the unit '{match[2].strip()}' is not known")
    return Quantity(Decimal(match[1]), code)
