"""The page that compares what is published with what comes out.

``python -m tests.external.published`` writes ``daemon/guide/published.md`` anew.
"""

from __future__ import annotations

import tempfile
from collections.abc import Iterable, Iterator, Mapping, Sequence
from decimal import Decimal
from pathlib import Path

from spikeward.rules.outcomes import FAIL, WARN
from tests.external import published_additions, published_lines
from tests.external.published_arithmetic import recomputed
from tests.external.published_files import (
    Case,
    Document,
    Printed,
    cases,
    digits_agreed,
    number,
    result_of,
    through_files,
)
from tests.external.published_sheets import Figure, Sheet

PAGE = Path(__file__).parents[2] / "daemon" / "guide" / "published.md"

Row = tuple[str, ...]

_HEAD = """\
# Published series

This page is written by `python -m tests.external.published` in the source tree; do not edit it. It compares what
textbooks, courses, standards and reference data print with what comes out.

A printed number counts as agreed to a digit when ours is not further away than half a unit of that digit. *None* stands
where the publication prints no answer, or one that was not seen or does not hold; ours is then compared with the same
arithmetic by other means, or with the number from which a series was constructed. *From memory* means that the
publication was not read again for this page.

## Export files through the running watch

Each is an export with a layout of its own and a short rule file (both under `tests/external/cases`). A watch ran over
their folders while the exports arrived; *ours* was read from the `result.json` that it left beside them.
"""
_FUNCTIONS = """\
## Figures through the functions of the calculation

What is no series of one sample: lines, tests, designs and critical values. *Ours* is what the functions return that
solve and check every series.
"""
_WRONG = """\
## Wrong answers that are not returned

They stand in print or in copies, or follow from a formula in use, and rest on a mistake or a simplification.
"""
_VERDICTS = """\
## Verdicts

What the general pack says of the same series. Textbook data are no model of a good series: some carry few vessels,
small additions, a bent line or a strange point, and that is said of them. An electrode's slope that is declared without
an uncertainty is taken as known: the two series that declare a wrong one are flagged for their steps, not for it.
"""
_OUTSIDE_HEAD = "## Not compared\n"
_NOT_YET = "not yet: {} is part of this version"
_OUTSIDE = (
    (
        "Isotope dilution, Harvey, Modern Analytical Chemistry (2000), chapter 13",
        "no standard addition, and not solved by this program: the content comes from one activity before and after, "
        "and no line is drawn",
    ),
    (
        "Budgets: Eurachem/CITAC Guide, examples A1, A3 and A5; JCGM 100:2008, H.1 and H.2; JCGM 101:2008, clause 9; "
        "NIST TN 1297",
        _NOT_YET.format("no uncertainty budget"),
    ),
    ("Lines with errors in both coordinates, ISO/TS 28037:2010", "not yet: added amounts count as known"),
    ("Limits of glassware, ISO 8655-2, ISO 1042, ISO 648; density of water", _NOT_YET.format("no table")),
    ("Critical values of Grubbs and of Dixon", "neither test is part of this version"),
    ("Limits of Horwitz, AOAC and Westgard", _NOT_YET.format("no rule for the course of many nights")),
)


def sheets() -> tuple[Sheet, ...]:
    """All figures that go through functions."""
    return (*published_additions.sheets(), *published_lines.sheets())


def page(chosen: Sequence[Case], documents: Mapping[str, Document], figures: Sequence[Sheet]) -> str:
    """The page that compares print and result."""
    compared = ("quantity", "published", "ours", "digits agreed", "how it was run")
    of_files = [(case, documents[case.name]) for case in chosen]
    wrong = [_not_returned(*each) for each in of_files] + [_not_found(sheet) for sheet in figures if sheet.wrong]
    parts = [
        _table(_HEAD, ("series", "source", *compared), (_agreed(*each) for each in of_files), 2),
        _table(_FUNCTIONS, ("figures", "source", *compared), (_found(sheet) for sheet in figures), 2),
        _table(_WRONG, ("series", "quantity", "wrong answer", "ours", "what is wrong with it"), wrong, 1),
        _table(_VERDICTS, ("series", "verdict", "because of these checks"), (_verdict(*each) for each in of_files), 0),
        _table(_OUTSIDE_HEAD, ("publication", "why"), (iter([row]) for row in _OUTSIDE), 0),
    ]
    return "\n".join(parts)


def _table(head: str, titles: Row, groups: Iterable[Iterator[Row]], columns: int) -> str:
    rows = [row for group in groups for row in _once(group, columns)]
    return f"{head}\n" + "".join(f"| {' | '.join(row)} |\n" for row in (titles, ("---",) * len(titles), *rows))


def _once(rows: Iterator[Row], columns: int) -> Iterator[Row]:
    """The rows of one series, what its first columns say only in the first of them."""
    for position, row in enumerate(rows):
        yield row if position == 0 else ("",) * columns + row[columns:]


def _source(source: str, memory: str) -> str:
    return f"{source} ({memory})" if memory else source


# ---- series as files -----------------------------------------------------------------------------------------------


def _agreed(case: Case, document: Document) -> Iterator[Row]:
    for printed in (*case.printed, *case.computed, *_exactly(case)):
        ours = number(result_of(document, printed.analyte), printed.of)
        assert ours is not None
        agreed, digits = digits_agreed(printed.value, ours)
        told = f"{_plain(printed.value)} {case.unit_of(printed)}".rstrip()
        yield (
            case.title,
            _source(case.source, case.memory),
            _words(printed),
            f"none; {printed.why} {told}" if printed.why else told,
            f"{ours:.{min(digits + 2, 12)}g}",
            f"{agreed} of {digits}",
            "export file",
        )


def _exactly(case: Case) -> tuple[Printed, ...]:
    """The content by other arithmetic, where nothing else is there to compare."""
    found = recomputed(case)
    if case.printed or case.computed or case.outcome == "refused" or not found:
        return ()
    how = "in fractions" if case.response == "linear" else "by another search"
    return (Printed("content", Decimal(f"{found['content']:.{12 if case.response == 'linear' else 9}g}"), how),)


def _not_returned(case: Case, document: Document) -> Iterator[Row]:
    for wrong in case.wrong:
        ours = number(result_of(document, wrong.analyte), wrong.of)
        digits = len(wrong.value.as_tuple().digits) + 1
        shown = "no number" if ours is None else f"{ours:.{digits}g}"
        yield case.title, _words(wrong), f"{_plain(wrong.value)} {case.unit_of(wrong)}", shown, wrong.why


def _verdict(case: Case, document: Document) -> Iterator[Row]:
    checks = [check for result in document["results"] for check in result["checks"]] + document["checks"]
    told = dict.fromkeys(check["name"].replace("_", " ") for check in checks if check["verdict"] in (WARN, FAIL))
    yield case.title, document["verdict"], ", ".join(told)


def _words(printed: Printed) -> str:
    words = printed.of.replace("parameter ", "").replace("_", " ")
    words = words.replace("low", "lower limit, 95 %").replace("high", "upper limit, 95 %")
    return f"{words} of {printed.analyte}" if printed.analyte and "parameter" not in printed.of else words


def _plain(value: Decimal) -> str:
    return str(value).lower()


# ---- figures through functions -------------------------------------------------------------------------------------


def _found(sheet: Sheet) -> Iterator[Row]:
    for each in sheet.figures:
        pairs = list(zip(each.values, each.ours, strict=True))
        digits = [digits_agreed(value, ours) for value, ours in pairs]
        agreed = f"{sum(one for one, _ in digits)} of {sum(whole for _, whole in digits)}"
        told = f"none; {each.why} {each.published}" if each.why else each.published
        yield sheet.title, _source(sheet.source, sheet.memory), each.of, told, _ours(each), agreed, "functions"


def _not_found(sheet: Sheet) -> Iterator[Row]:
    for each in sheet.wrong:
        yield sheet.title, each.of, each.published, _ours(each), each.why


def _ours(each: Figure) -> str:
    """Our numbers, a digit more than are published, or as many where the calculation can have no more."""
    return " ".join(
        f"{ours:.{min(len(value.as_tuple().digits) + 1, 13)}g}"
        for value, ours in zip(each.values, each.ours, strict=True)
    )


def main() -> None:
    """Write the page."""
    chosen = cases()
    with tempfile.TemporaryDirectory() as work:
        documents = through_files(chosen, Path(work))
    PAGE.write_text(page(chosen, documents, sheets()), encoding="utf-8")


if __name__ == "__main__":
    main()
