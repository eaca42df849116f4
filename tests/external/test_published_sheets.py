"""Published figures through the functions of the calculation; sources and tolerances stand with each of them."""

from __future__ import annotations

from decimal import Decimal

import pytest

from tests.external.published import sheets
from tests.external.published_sheets import Figure

SHEETS = sheets()


def each(kind: str) -> pytest.MarkDecorator:
    found = [
        pytest.param(figure, id=f"{sheet.title}: {figure.of}") for sheet in SHEETS for figure in getattr(sheet, kind)
    ]
    return pytest.mark.parametrize("figure", found)


def test_every_sheet_has_a_source_and_figures() -> None:
    assert len({sheet.title for sheet in SHEETS}) == len(SHEETS) >= 25
    assert all(sheet.source and sheet.figures for sheet in SHEETS)


@each("figures")
def test_the_figures_come_out(figure: Figure) -> None:
    for value, ours in zip(figure.values, figure.ours, strict=True):
        assert ours == pytest.approx(float(value), abs=figure.tolerance(value), rel=0.0)


@each("wrong")
def test_what_is_wrong_is_not_found(figure: Figure) -> None:
    assert figure.why
    for value, ours in zip(figure.values, figure.ours, strict=True):
        assert abs(Decimal(ours) - value) > 2 * Decimal(1).scaleb(int(value.as_tuple().exponent))


def test_a_tolerance_is_half_a_unit_of_the_last_digit() -> None:
    assert Figure("", "0.0728", (0.0,)).tolerance(Decimal("0.0728")) == pytest.approx(5e-5)
    assert Figure("", "1000.0", (0.0,), relative=1e-3).tolerance(Decimal("1000.0")) == pytest.approx(1.0)
