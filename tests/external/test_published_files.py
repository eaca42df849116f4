"""Published series from an export in a watched folder to the numbers in ``result.json``.

Sources stand in each case's folder. Tolerances against print: half a unit of the last printed digit, or what the case
says where the publication rounded on its way.
"""

from __future__ import annotations

import re
from decimal import Decimal

import pytest

from spikeward.rules.outcomes import FAIL, PASS
from tests.external.published import PAGE, page, sheets
from tests.external.published_arithmetic import recomputed
from tests.external.published_files import Case, Document, cases, digits_agreed, number, result_of, through_files

CHOSEN = cases()
each_case = pytest.mark.parametrize("case", CHOSEN, ids=lambda case: case.name)


@pytest.fixture(scope="module")
def documents(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Document]:
    return through_files(CHOSEN, tmp_path_factory.mktemp("published"))


def test_there_are_enough_of_them() -> None:
    assert len(CHOSEN) >= 40
    assert len([case for case in CHOSEN if case.printed]) >= 18
    assert {case.outcome for case in CHOSEN} == {"solved", "refused", "flagged"}
    assert {case.response for case in CHOSEN} == {"linear", "log", "curve"}


@each_case
def test_the_printed_numbers_come_out(case: Case, documents: dict[str, Document]) -> None:
    for printed in (*case.printed, *case.computed):
        ours = number(result_of(documents[case.name], printed.analyte), printed.of)
        assert ours == pytest.approx(float(printed.value), abs=printed.tolerance, rel=0.0), printed.of


@each_case
def test_it_is_what_follows_from_the_printed_digits(case: Case, documents: dict[str, Document]) -> None:
    """Twelve digits stand in the file; a minimum of squares is found to nine of them by either way."""
    expected = recomputed(case)
    if case.outcome == "refused" or not expected:
        return
    result = result_of(documents[case.name])
    assert result["unit"] == case.unit
    assert (result["in_sample"] or {"unit": ""})["unit"] == case.sample_unit
    exact = case.response == "linear"
    perfect = expected.get("standard_uncertainty", 1.0) < 1e-10 * expected["content"]  # then it is rounding only
    for of, value in expected.items():
        if of.startswith("content"):
            assert number(result, of) == pytest.approx(value, rel=1e-11 if exact else 1e-9), of
        elif not perfect:
            assert number(result, of) == pytest.approx(value, rel=1e-9), of
    if exact and "standard_uncertainty" not in expected:
        assert number(result, "standard_uncertainty") is None
        assert "one addition" in result["uncertainty_reason"]


@each_case
def test_a_case_that_is_to_be_refused_has_no_number(case: Case, documents: dict[str, Document]) -> None:
    for result in documents[case.name]["results"]:
        assert (number(result, "content") is None) == (case.outcome == "refused")
        assert case.says in result["no_number"]
    if case.outcome == "refused":
        assert case.says
        assert documents[case.name]["verdict"] == FAIL


@each_case
def test_what_is_wrong_in_print_is_not_returned(case: Case, documents: dict[str, Document]) -> None:
    for wrong in case.wrong:
        ours = number(result_of(documents[case.name], wrong.analyte), wrong.of)
        assert ours is None or abs(Decimal(ours) - wrong.value) > 2 * wrong.one, wrong.why


@each_case
def test_a_case_that_is_to_be_flagged_does_not_pass(case: Case, documents: dict[str, Document]) -> None:
    if case.outcome != "solved":
        assert documents[case.name]["verdict"] != PASS


@each_case
def test_the_source_stands_in_the_rule_file_too(case: Case) -> None:
    text = (case.folder / "rules.yaml").read_text(encoding="utf-8")
    assert case.source in re.sub(r"\s*\n#\s*", " ", text)


def test_the_page_is_up_to_date(documents: dict[str, Document]) -> None:
    """``python -m tests.external.published`` writes it."""
    assert PAGE.read_text(encoding="utf-8") == page(CHOSEN, documents, sheets())


@pytest.mark.parametrize(
    ("printed", "ours", "agreed"),
    [
        ("17.3", 17.2605, (3, 3)),
        ("0.749", 0.74787, (2, 3)),
        ("50.2", 50.336, (2, 3)),
        ("0.900", 0.89961, (3, 3)),
        ("4", 4.0, (1, 1)),
        ("1332", 1.332, (0, 4)),
    ],
)
def test_digits_agreed(printed: str, ours: float, agreed: tuple[int, int]) -> None:
    assert digits_agreed(Decimal(printed), ours) == agreed
