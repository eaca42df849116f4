"""The page on coverage: its figures are made again, cells keep to their limits, and wrong ways would be seen."""

from __future__ import annotations

import re

import numpy as np
import pytest
from scipy.stats import norm

from spikeward.rules.prepared import PreparedLine, PreparedVessel
from spikeward.rules.records import Reading, SeriesKey
from spikeward.rules.solve.job import Job
from spikeward.rules.solve.lines import solve_lines
from tests.external.coverage import GUIDE, PAGE, flasks, held_rows, table, wrong
from tests.external.coverage_cells import beyond, bounds, by_chance, families
from tests.external.coverage_draws import (
    COVERAGE,
    DESIGNS,
    DRAWS,
    MODELS,
    Cell,
    bench,
    drawn,
    measured,
    normals,
    solved,
)
from tests.external.coverage_pictures import of_refusals, of_ways
from tests.external.coverage_ways import WAYS, compared

TEXT = PAGE.read_text(encoding="utf-8")
CELLS = sum(len(family.cells) for family in families())


def test_the_flasks_and_the_wrong_ways_are_made_again():
    assert flasks() in TEXT
    assert wrong() in TEXT
    assert (GUIDE / "coverage-refused.svg").read_text(encoding="utf-8") == of_refusals()
    assert (GUIDE / "coverage-wrong.svg").read_text(encoding="utf-8") == of_ways()


def test_the_first_line_of_what_holds_is_made_again():
    (row,) = held_rows(families()[:1], CELLS)
    assert table(row, ()).splitlines()[0] in TEXT


def test_every_line_of_what_holds_keeps_to_its_limits():
    rows = [line.split(" | ") for line in TEXT.split("## Where the model holds")[1].split("\n## ")[0].splitlines()]
    rows = [[cell.strip("| ") for cell in row] for row in rows if row[0].startswith("| ") and row[0][2:].isdigit()]
    assert [row[1] for row in rows] == [family.name for family in families()]
    assert [int(row[2]) for row in rows] == [len(family.cells) for family in families()]
    assert {row[7] for row in rows} == {"0"}
    for row in rows:
        mean, sure = (float(each) for each in row[4].split(" ± "))
        assert abs(mean - 95.0) <= sure
    assert f"all {CELLS:,} cells" in TEXT
    least, most = bounds(CELLS)
    assert f"{100 * least / DRAWS:.1f} to {100 * most / DRAWS:.1f} %" in TEXT


def test_pictures_and_page_belong_together():
    shown = set(re.findall(r"!\[[^]]+\]\((coverage-\w+\.svg)\)", TEXT))
    assert shown == {path.name for path in GUIDE.glob("coverage-*.svg")}
    for name in shown:
        svg = (GUIDE / name).read_text(encoding="utf-8")
        assert "<title" in svg
        assert "<desc" in svg
        assert "prefers-color-scheme:dark" in svg


def test_limits_are_those_of_the_binomial_distribution():
    """A single cell: half a point is 2.3 standard deviations. Many cells: nearly the normal approximation."""
    assert by_chance() == pytest.approx(2 * norm.sf(50.5 / np.sqrt(DRAWS * 0.95 * 0.05)), rel=0.02)
    least, most = bounds(1000)
    reach = norm.isf(0.005 / 1000) * np.sqrt(0.95 * 0.05 / DRAWS)
    assert (least / DRAWS, most / DRAWS) == pytest.approx((0.95 - reach, 0.95 + reach), abs=5e-4)


@pytest.mark.parametrize("design", DESIGNS)
def test_a_design_covers_what_it_states(design):
    for cell in (Cell(design, 4, 0.01, 0.3), Cell(design, 12, 0.05, 1.0), Cell(design, 3, 0.1, 3.0)):
        assert not beyond(measured(cell), CELLS)


@pytest.mark.parametrize("design", MODELS)
def test_another_response_covers_what_it_states(design):
    (cell,) = {"blocks": [Cell("blocks", 6, 0.005, 0.3)], "curve": [Cell("curve", 6, 0.001, 0.1)],
               "log": [Cell("log", 6, 0.1, 0.3)]}[design]  # fmt: skip
    assert cell in [each for family in families() for each in family.cells]
    assert not beyond(measured(cell), CELLS)


@pytest.mark.parametrize("way", WAYS, ids=lambda way: f"{way.name}, {way.setup}")
def test_a_wrong_way_would_be_seen(way):
    """But for the symmetric interval, whose misses lie on one side."""
    one = compared(way)
    assert one.right.covered + one.right.refused >= bounds(CELLS)[0]
    if way.name.startswith("content ± t u"):
        assert one.wrong.above / DRAWS > 0.035
    else:
        assert beyond(one.wrong, CELLS)


def test_draws_are_normal_and_belong_to_their_words():
    draws = normals("some words", 12)
    assert draws.mean() == pytest.approx(0.0, abs=0.015)
    assert draws.std() == pytest.approx(1.0, abs=0.01)
    assert np.array_equal(draws, normals("some words", 12))
    assert abs(np.corrcoef(draws[0], normals("other words", 12)[0])[0, 1]) < 0.04


@pytest.mark.parametrize("design", DESIGNS)
def test_the_door_of_the_solver_gives_the_same_intervals(design):
    """The way that a night takes, reading by reading, for the first draws of a cell."""
    cell = Cell(design, 4, 0.01, 0.3)
    one, made, found = drawn(cell), bench(design, 4), solved(cell)
    for column in range(3):
        key = SeriesKey("", "", "B", "sample", f"{column}")
        vessels = tuple(
            PreparedVessel(
                str(level), "", float(made.aliquot[level]), 0.0, float(made.final[level]),
                float(made.x[level] * made.aliquot[level]),
                (
                    Reading(
                        key, str(level), "", "", "", f"S{level}", "Cd", "", "A", float(one.signals[level, column]), "",
                        "", 1, None, "", "", None, (), (), "run.csv", level + 2, "",
                    ),
                ),
            )
            for level in range(4)
        )  # fmt: skip
        line = PreparedLine(key, "Cd", "", design, "mg/L", "A", vessels, None, "mix", "")
        (result,) = solve_lines([Job(line)], COVERAGE)
        assert result.content is not None
        assert result.content.interval == pytest.approx((found.low[column], found.high[column]), rel=1e-9)
