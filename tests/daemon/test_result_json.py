"""The machine-readable result: its schema, its digits, and texts that are not text."""

from __future__ import annotations

import json
import math
from dataclasses import replace
from pathlib import Path

import jsonschema
import pytest
from hypothesis import given
from hypothesis import strategies as st

from spikeward.daemon.pages.result_json import render_result
from tests.daemon.page_cases import OUTCOMES, reading, series_key

SCHEMA = json.loads((Path(__file__).parents[2] / "daemon/schema/result.schema.json").read_text("utf-8"))
VALIDATOR = jsonschema.Draft202012Validator(SCHEMA)


def _loaded(content: bytes) -> dict[str, object]:
    def refused(word: str) -> object:
        raise AssertionError(f"{word} is no JSON number")

    return json.loads(content.decode("utf-8"), parse_constant=refused)


def _objects(schema: object):
    if isinstance(schema, dict):
        if schema.get("type") == "object":
            yield schema
        for part in schema.values():
            yield from _objects(part)
    elif isinstance(schema, list):
        for part in schema:
            yield from _objects(part)


def test_the_schema_is_a_schema_and_lets_nothing_unknown_through():
    jsonschema.Draft202012Validator.check_schema(SCHEMA)
    for one in _objects(SCHEMA):
        assert one["additionalProperties"] is False
        assert set(one["required"]) == set(one["properties"])


@pytest.mark.parametrize("name", sorted(OUTCOMES))
def test_every_outcome_follows_the_schema(name: str):
    document = _loaded(render_result(OUTCOMES[name]))
    VALIDATOR.validate(document)
    assert document["verdict"] == OUTCOMES[name].verdict
    assert len(document["results"]) == len(OUTCOMES[name].results)


def test_a_field_that_is_not_in_the_contract_is_refused():
    document = _loaded(render_result(OUTCOMES["plain"]))
    document["results"][0]["contents"] = 1.0
    with pytest.raises(jsonschema.ValidationError, match="contents"):
        VALIDATOR.validate(document)


def test_fields_come_in_the_order_of_the_schema():
    document = _loaded(render_result(OUTCOMES["plain"]))
    assert list(document) == SCHEMA["required"]
    result = SCHEMA["$defs"]["result"]["required"]
    assert list(document["results"][0]) == result
    assert list(document["vessels"][0]["readings"][0]) == SCHEMA["$defs"]["reading"]["required"]


def test_numbers_have_twelve_significant_digits():
    plain = OUTCOMES["plain"]
    result = replace(
        plain.results[0], slope=2 / 3, intercept=-0.0, background=1e-310 / 3, residual_sd=123456789012345.6
    )
    content = render_result(replace(plain, results=(result,)))
    assert b'"slope": 0.666666666667,' in content
    assert b'"intercept": 0.0,' in content
    assert b'"residual_sd": 123456789012000.0,' in content
    loaded = _loaded(content)["results"][0]
    assert loaded["background"] == pytest.approx(1e-310 / 3, rel=1e-11, abs=0)


@given(st.floats())
def test_any_number_is_null_or_comes_back_within_its_digits(value: float):
    plain = OUTCOMES["plain"]
    text = render_result(replace(plain, results=(replace(plain.results[0], slope=value),)))
    written = _loaded(text)["results"][0]["slope"]
    if not math.isfinite(value):
        assert written is None
    else:
        # 5e-324 is the distance between the smallest floats, which have fewer than 12 digits
        assert math.isclose(written, value, rel_tol=5.1e-12, abs_tol=5e-324)
        digits = f"{abs(written)!r}".split("e")[0].replace(".", "").strip("0")
        assert len(digits) <= 12


@given(st.text(st.characters(codec=None, categories=None), max_size=40))
def test_any_text_can_be_written_and_read(text: str):
    plain = OUTCOMES["plain"]
    document = _loaded(render_result(replace(plain, sentence=text, notes=(text,))))
    VALIDATOR.validate(document)
    if not any("\ud800" <= character <= "\udfff" for character in text):
        assert document["sentence"] == text


def test_a_reading_says_where_it_stands_and_what_it_is():
    document = _loaded(render_result(OUTCOMES["empty"]))
    first, second = document["vessels"][0]["readings"]
    assert (first["path"], first["row"], first["text"], first["signal"]) == ("aas/MD12.csv", 12, "n.d.", None)
    assert (first["qualifier"], second["qualifier"]) == ("not detected", "over range")
    measured = _loaded(render_result(OUTCOMES["plain"]))["vessels"][0]["readings"][0]
    assert measured["qualifier"] == "measured"
    assert measured["digest"] == reading(series_key("07"), "0", "", 0.1, 1).digest


def test_without_a_way_back_or_an_uncertainty_the_reason_stands_in_its_place():
    result = _loaded(render_result(OUTCOMES["bare"]))["results"][0]
    assert result["in_sample"] is None
    assert result["content"] == 20.0
    assert result["standard_uncertainty"] is None
    assert result["interval"] is None
    assert "no degree of freedom" in result["uncertainty_reason"]


def test_ends_with_one_line_feed():
    assert render_result(OUTCOMES["plain"]).endswith(b"\n}\n")
