"""The history tells what became of a result in the digits that a report shows."""

from __future__ import annotations

from typing import Any

from spikeward.daemon.changes import what_changed


def revision(content: float | None, spread: float = 6.02, verdict: str = "pass") -> dict[str, Any]:
    in_sample = {"content": content, "unit": "ug/kg", "expanded_uncertainty": spread, "basis": "dry matter"}
    line = {"analyte": "Cu", "line": "327.395", "content": 0.1, "unit": "ug/L", "in_sample": in_sample}
    return {"rules_digest": "r", "calculation_version": "1", "verdict": verdict, "results": [line]}


def test_a_content_is_told_rounded_with_its_uncertainty():
    _, changes = what_changed(revision(43.0412345678), revision(42.7987654321))
    assert changes == ("Cu 327.395: 43.0 ± 6.0 µg/kg dry matter became 42.8 ± 6.0 µg/kg dry matter",)


def test_a_number_that_goes_or_comes():
    _, changes = what_changed(revision(None), revision(42.8))
    assert changes == ("Cu 327.395: no number became 42.8 ± 6.0 µg/kg dry matter",)


def test_a_change_below_the_digits_that_are_shown_is_told_as_one():
    _, changes = what_changed(revision(43.0412345678), revision(43.0412345679))
    assert changes == ("Cu 327.395: 43.0 ± 6.0 µg/kg dry matter changed, but in no digit that is shown",)


def test_the_same_numbers_are_no_change():
    assert what_changed(revision(43.0), revision(43.0, verdict="warn"))[1] == ("verdict pass became warn",)
