"""Bench files: quantities with their units by batch, sample and level."""

from typing import NamedTuple

import pytest

from spikeward.parsers.bench import read_bench
from spikeward.rules.records import BenchEntry, Unreadable


class Rule(NamedTuple):
    key: dict
    columns: dict
    encoding: str = "auto"
    delimiter: str = "auto"
    decimal: str = "auto"


RULE = Rule({"batch": "Batch", "sample": "Sample"}, {"mass": "Mass", "dry_matter": "DM", "dilution": "Dilution"})


def read(text: str, rule: Rule = RULE) -> tuple[BenchEntry, ...]:
    return read_bench(text.encode(), rule, "md", "md/bench.csv")


def test_a_bench_file_is_read():
    text = "Balance 2\n\nBatch;Sample;Mass [g];DM;Dilution\nMD1;0012;0,5012;92,3 %;1 + 4\nMD1;7;;;\nMD1;8;0,4998;;2,5\n"
    first, second = read(text)
    assert first == BenchEntry(
        "md", "MD1", "0012", "", (("mass", "0.5012 g"), ("dry_matter", "92.3 %"), ("dilution", "1 + 4")),
        "md/bench.csv", 4, first.digest,
    )  # fmt: skip
    assert (second.sample, second.values, second.row) == ("8", (("mass", "0.4998 g"), ("dilution", "2.5")), 6)
    assert first.digest != second.digest


def test_levels_are_compared_as_numbers_and_a_batch_may_be_absent():
    rule = Rule({"sample": "Sample", "level": "Level"}, {"addition": "Spike", "standard": "Standard"})
    entries = read("Sample,Level,Spike,Standard\n7,02,250 uL,Mix-7\n7,a,0.5 mL,\n", rule)
    assert [(entry.batch, entry.sample, entry.level, entry.values) for entry in entries] == [
        ("", "7", "2", (("addition", "250 uL"), ("standard", "Mix-7"))),
        ("", "7", "a", (("addition", "0.5 mL"),)),
    ]


@pytest.mark.parametrize(
    ("text", "says", "row", "column"),
    [
        ("Batch;Sample;Mass;DM;Dilution\nMD1;7;0,5;;\n", "has no unit", 2, "Mass"),
        ("Batch;Sample;Mass;DM;Dilution\nMD1;7;0,5 g;92;\n", "such as DM [%]", 2, "DM"),
        ("Batch;Sample;Mass;DM;Dilution\nMD1;;0,5 g;;\n", "the sample is missing", 2, "Sample"),
        ("Batch;Sample;Mass;DM\nMD1;7;0,5 g;\n", "lacks 'Dilution'", 1, None),
        ("Batch;Sample;Mass;DM;Dilution\nMD1;7;0,5 g\n", "3 cells where the headings have 5", 2, None),
        ("Batch;Sample;Mass [g];DM;Dilution\nMD1;7;1,234;;\n", "declare decimal", 2, "Mass [g]"),
        ("Batch;Sample;Mass [g];DM;Dilution\n", "followed by no rows", 1, None),
    ],
)
def test_a_fault_is_told_with_its_place(text: str, says: str, row: int, column: str | None):
    with pytest.raises(Unreadable) as caught:
        read(text)
    assert says in caught.value.sentence
    assert (caught.value.row, caught.value.column) == (row, column)
