"""Whether a stated 95 % holds: many invented series of known content, solved by the functions that the daemon runs.

``python -m tests.external.coverage`` writes the page ``daemon/guide/coverage.md`` and its pictures anew, always to the
same bytes.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Sequence
from itertools import product
from pathlib import Path

from tests.external.coverage_cells import FAMILY, WITHIN, Family, beyond, bounds, by_chance, families
from tests.external.coverage_draws import CONTENT, COVERAGE, DRAWS, KINDS, NOISE, VESSELS, Cell, measured
from tests.external.coverage_pictures import of_cells, of_refusals, of_ways, of_widths
from tests.external.coverage_ways import WAYS, compared

GUIDE = Path(__file__).parents[2] / "daemon" / "guide"
PAGE = GUIDE / "coverage.md"

_HEAD = """\
# Does a stated 95 % hold?

This page and its pictures are written by `python -m tests.external.coverage` in the source tree, in a few minutes; do
not edit them. The same command gives the same bytes again.

An interval that is stated with 95 % should hold the true content in 95 of 100 series. Here the true content is known,
because the series are invented: for every *cell*, a set-up with its design, number of vessels, noise and content,
{draws} series were drawn and solved by the very functions that solve yours. *Noise* is the standard deviation of a
vessel's signal in per cent of the highest signal of the series; *content* is in multiples of the highest addition.
A series whose slope does not differ from zero gets no number. It counts as covered, since nothing false is said of it,
and is counted apart as well.
"""

_HELD = """\
## Where the model holds

{draws} draws find 95 % only to within chance: half a percentage point is 2.3 standard deviations, and {rare} % of sound
cells lie further away. The worst of many lies further still. So each cell is held to {low} to {high} %, the exact
binomial limits within which all {cells} cells of this table stay with a probability of {sure} %: with refusals a cell
must not cover less, and without them not more. The mean is over the cells in which no series was refused; ± is three
standard deviations of it. Straight lines with constant noise should cover exactly 95 %, all others nearly.
"""

_REFUSED = """\
## Series that get no number

With few vessels and much noise the slope of a line does not differ from zero, and an interval with two ends does not
exist. Such series are refused. The 95 % are a promise about all series, those refused among them. Where most of a kind
are refused, the few that get a number are those in which chance made the noise look small, and their intervals hold the
truth less often. The remedy is more vessels, larger additions, or a noise that is declared or pooled.
"""

_KINDS = """\
## Noise that differs between vessels

With its own precision a series is fitted as if the noise of all signals were the same. Where it grows with the signal
the interval is then wider than it need be, and on the safe side: the top of the line scatters, and the content lies at
its bottom. Declared noise gives each vessel its weight, taken at the fitted line. That line is not the true one, so the
weights are not known exactly, and at a proportional noise of 10 % a few tenths of a percentage point are lost.
"""

_WIDE = """\
## What few vessels cost

Two degrees of freedom make t 4.30. Noise that is declared, or pooled over a night, has many and makes it 2.0. The
picture is of flasks with a content of the highest addition and a noise of 1 %.
"""

_WRONG = """\
## What goes wrong otherwise

Each line is one wrong way of calculating, on the same draws as the right way beside it. *Truth above* is how often the
true content lies above the interval: near 2.5 % is right. *Error* is that of the middle series.
"""

_FIGURES = """\
Some need no chance to be wrong. The truth is 1 unless it is said, and the signals are exact:

- **Two runs as one line.** The instrument loses 20 % between the second and the third of four levels 0, 1, 2 and 3: one
  line through all gives 1.57. With a slope for each run it is 1.
- **More matrix in one vessel than in another.** The vessel with most matrix loses 30 % of its signal, the others less.
  Level 0 read as it is against one addition of 1 made up to the double volume gives 0.739. Additions to 1.5 into one
  vessel that grows by 15 % give 0.932, with r 0.99995. Aliquots from 10 down to 8.5 mL in 25 mL give 0.925. Equal
  aliquots made up to one volume give 1.
- **The background subtracted after the volumes.** Truth 0.500, flasks with 10 mL in 25 mL, additions to 0.75 and a
  background of a sixteenth of the net top signal: 0.547. Subtracted first it is 0.500.
- **The process blank subtracted as a signal.** The matrix suppresses 40 % and the blank, which is not suppressed, is a
  fifth of what the sample holds beside it: the result is 13 % too low.
- **The buffer forgotten.** 50 mL of sample with 50 mL of buffer, and an addition that triples the content: the formula
  that takes the first volume as 50 mL gives 0.40.
- **A curve fitted to corrected points.** S = c - 0.08 c², additions to 1.5 into a vessel that grows by half: a
  parabola through the corrected points gives 1.047. Fitted as a function of the content in the vessel it is 1.
- **Drift in the order of the levels.** 1 % less sensitivity from vessel to vessel, four vessels, additions to 1.5 or
  more: 5 to 6 % too much, with r 0.99996.
- **Not detected taken as zero.** Truth 0.020, additions of 0.05, 0.10 and 0.15: with zero for level 0 it is 0.0054.
- **A pipette that delivers 8 µL too much.** Truth 0.5 mg/L in 10 mL, standard of 10 mg/L. Flasks with 0.25, 0.5 and
  0.75 mL: 0.5 % too low. Three deliveries of 0.25 mL in succession: 2.7 % too low, and 3.1 % where the final volumes
  are measured.
- **One effect counted twice.** Additions of 0.5, 1 and 1.5 scatter by 0.015 each, and nothing else does: the content
  scatters by 0.015. The residuals show the deliveries already; with them declared beside it seems 0.027.
- **A wrong electrode slope.** 59.16 for 57.3 mV gives 18 % too much, 55 gives 22 % too little, and the points of Gran's
  plot still have r 0.9999.
- **Factor 2 at two degrees of freedom.** Two sound results whose uncertainties have two degrees of freedom each differ
  by more than twice their combined uncertainty in 11.6 % of pairs; |zeta| above 3 happens to 9.5 % of sound references.
- **Ten tests at 5 %** find something in 40 % of good series.
- **A curve that four points cannot show.** S = c / (1 + 0.08 c), additions to 1.5, noise of 1 % of each signal: the
  content is 22 % too high, r is 0.9995, and Mandel's test at 5 % notices it in 11 % of the series.
- **Four vessels and 2 % of noise**, of the signal without addition, additions to 1.5: 61 % of good series have an
  expanded uncertainty above 10 %. With a noise of 1 % the half-width is 7.1 %, and 3.3 % with 40 pooled degrees of
  freedom.
"""


def percent(share: float, digits: int = 1) -> str:
    """A share in per cent, without its sign."""
    return f"{100.0 * share:.{digits}f}"


def part_of_draws(count: int) -> str:
    """A share of the draws in per cent; what is there is not called none."""
    return "< 0.1" if 0 < count < DRAWS / 2000 else percent(count / DRAWS)


def table(titles: Sequence[str], rows: Iterable[Sequence[str]]) -> str:
    """A table of the page."""
    return "".join(f"| {' | '.join(row)} |\n" for row in (titles, ("---",) * len(titles), *rows))


def held_rows(chosen: Sequence[Family], cells: int) -> Iterator[tuple[str, ...]]:
    """One line for each family."""
    for nth, family in enumerate(chosen, 1):
        found = [measured(cell) for cell in family.cells]
        clean = [one.coverage for one in found if one.refused == 0]
        mean = math.fsum(clean) / len(clean)
        sure = 3.0 * math.sqrt(COVERAGE * (1.0 - COVERAGE) / (DRAWS * len(clean)))
        far = sum(abs(one - COVERAGE) > WITHIN for one in clean)
        yield (
            str(nth), family.name, f"{len(found)}", f"{len(clean)}", f"{percent(mean, 2)} ± {percent(sure, 2)}",
            f"{percent(min(clean), 2)} to {percent(max(clean), 2)}", f"{far} ({by_chance() * len(clean):.1f})",
            f"{sum(beyond(one, cells) for one in found)}",
        )  # fmt: skip


def flasks_rows() -> Iterator[tuple[str, ...]]:
    """Coverage, and refusals where there are any, of flasks with their own precision."""
    for n, noise in product(VESSELS, NOISE):
        found = [measured(Cell("flasks", n, noise, content)) for content in CONTENT]
        told = (f" ({part_of_draws(one.refused)})" if one.refused else "" for one in found)
        yield f"{n}", percent(noise), *(percent(one.coverage) + more for one, more in zip(found, told, strict=True))


def refused_rows() -> Iterator[tuple[str, ...]]:
    """How the printed intervals fare where many series are refused."""
    for n, noise in product((3, 4, 6), (0.02, 0.05, 0.1)):
        one = measured(Cell("flasks", n, noise, 1.0))
        yield f"{n}", percent(noise), part_of_draws(one.refused), percent(one.coverage), percent(one.of_printed)


def kinds_rows() -> Iterator[tuple[str, ...]]:
    """Own and declared precision under each kind of noise."""
    for kind, content in product(KINDS, (0.1, 1.0)):
        own_one, known = (measured(Cell("flasks", 6, 0.05, content, kind, each)) for each in ("own", "declared"))
        widths = (percent(one.half / content, 0) for one in (own_one, known))
        yield f"{kind}: {KINDS[kind]}", f"{content:g}", percent(own_one.coverage), percent(known.coverage), *widths


def wrong_rows() -> Iterator[tuple[str, ...]]:
    """One line for each wrong way."""
    for nth, way in enumerate(WAYS, 1):
        one, cell = compared(way), way.cell
        setup = f"{cell.vessels} vessels, content {cell.content:g}, noise {percent(cell.noise)} %"
        yield (
            str(nth), way.name, f"{way.setup}; {setup}" if way.setup else setup, percent(one.right.coverage),
            percent(one.wrong.coverage), percent(one.wrong.above / DRAWS),
            *(f"± {percent(each.half / cell.content, 0)}" for each in (one.right, one.wrong)),
            f"{shift:+d}" if (shift := round(100 * one.error[1])) else "0",
        )  # fmt: skip


def held(chosen: Sequence[Family]) -> str:
    """The first section."""
    cells = sum(len(family.cells) for family in chosen)
    least, most = bounds(cells)
    words = _HELD.format(
        draws=f"{DRAWS:,}", rare=percent(by_chance()), low=percent(least / DRAWS), high=percent(most / DRAWS),
        cells=f"{cells:,}", sure=percent(1.0 - FAMILY, 0),
    )  # fmt: skip
    titles = (
        "", "design, own precision unless it says declared", "cells", "of them without refusals", "mean coverage, %",
        "lowest to highest, %", "further than 0.5 from 95 (expected)", "beyond the limits",
    )  # fmt: skip
    return f"{words}\n{table(titles, held_rows(chosen, cells))}"


def flasks() -> str:
    """The flasks in full."""
    head = (
        "## Flasks made up to one volume, every cell\n\nCoverage in %, by content in multiples of the highest "
        "addition; in brackets the series that get no number, in %.\n"
    )
    return f"{head}\n{table(('vessels', 'noise, %', *(f'content {c:g}' for c in CONTENT)), flasks_rows())}"


def wrong() -> str:
    """The wrong ways."""
    titles = (
        "", "wrong way", "set-up", "right: coverage, %", "wrong: coverage, %", "truth above, %", "right: half-width, %",
        "wrong: half-width, %", "wrong: error, %",
    )  # fmt: skip
    return f"{_WRONG}\n{table(titles, wrong_rows())}"


def picture(name: str, alternative: str) -> str:
    """A picture of the page."""
    return f"![{alternative}](coverage-{name}.svg)\n"


def page(chosen: Sequence[Family]) -> str:
    """The whole page."""
    refused = ("vessels", "noise, %", "refused, %", "covered or refused, %", "of the printed intervals, %")
    kinds = (
        "noise", "content", "own: coverage, %", "declared: coverage, %", "own: half-width, %",
        "declared: half-width, %",
    )  # fmt: skip
    return "\n".join((
        _HEAD.format(draws=f"{DRAWS:,}"),
        held(chosen),
        picture("designs", "Coverage of every cell, a row of dots for each line of the table; nearly all lie in the "
                "band of chance around 95 %. Rings: cells in which series were refused."),
        flasks(),
        f"{_REFUSED}\n{table(refused, refused_rows())}",
        picture("refused", "Share of series that get no number against the noise, for 3 to 8 vessels."),
        f"{_KINDS}\n{table(kinds, kinds_rows())}",
        _WIDE,
        picture("width", "Median half-width against the number of vessels, for own and declared precision."),
        wrong(),
        picture("wrong", "Coverage of each wrong way, a ring, and of the right way, a dot near 95 %."),
        _FIGURES,
    ))  # fmt: skip


def main() -> None:
    """Write the page and its pictures."""
    chosen = families()
    cells = sum(len(family.cells) for family in chosen)
    pictures = {
        "designs": of_cells(chosen, cells), "refused": of_refusals(), "width": of_widths(), "wrong": of_ways(),
    }  # fmt: skip
    for name, svg in pictures.items():
        (GUIDE / f"coverage-{name}.svg").write_text(svg, encoding="utf-8")
    PAGE.write_text(page(chosen), encoding="utf-8")


if __name__ == "__main__":
    main()
