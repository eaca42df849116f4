"""Every sample carries beside it what must be read from it, under which layout; one test walks them all."""

import json
from pathlib import Path

import pytest

from spikeward.parsers.delimited import READER
from spikeward.rules.records import Layout, Unreadable, WideColumn

SAMPLES = Path(__file__).parent / "samples"
CASES = [
    pytest.param(path.with_suffix(".csv"), case, id=f"{path.stem}-{number}")
    for path in sorted(SAMPLES.glob("*.json"))
    for number, case in enumerate(json.loads(path.read_text("utf-8")), start=1)
]


def layout_of(options: dict) -> Layout:
    made = {name: tuple(value) if isinstance(value, list) else value for name, value in options.items()}
    if "wide" in made:
        made["wide"] = {heading: WideColumn(*meaning) for heading, meaning in made["wide"].items()}
    return Layout("sample", **made)


def test_every_sample_says_what_is_expected_of_it():
    assert {path.stem for path in SAMPLES.glob("*.csv")} == {path.stem for path in SAMPLES.glob("*.json")}


@pytest.mark.parametrize(("path", "case"), CASES)
def test_a_sample_is_read_as_stands_beside_it(path: Path, case: dict):
    layout = layout_of(case["layout"])
    if "refused" in case:
        with pytest.raises(Unreadable) as caught:
            READER.read(path.read_bytes(), layout)
        refused = case["refused"]
        assert refused["says"] in caught.value.sentence
        assert (caught.value.row, caught.value.column) == (refused["row"], refused["column"])
        return
    table = READER.read(path.read_bytes(), layout)
    assert len(table.entries) == len(case["entries"])
    for entry, expected in zip(table.entries, case["entries"], strict=True):
        assert {name: getattr(entry, name) for name in expected} == expected
    for note in case.get("notes", ()):
        assert note in table.notes
