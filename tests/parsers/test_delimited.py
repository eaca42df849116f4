"""Exports as invented instruments write them, well and badly: every entry in its place, every fault with its cell."""

import csv
import hashlib
import io
import time
from dataclasses import replace

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from spikeward.parsers.cells import QUANTITIES
from spikeward.parsers.delimited import READER
from spikeward.rules.naming import QUANTITY_GROUPS
from spikeward.rules.records import (
    FAULTY,
    MEASURED,
    MISSING,
    NOT_DETECTED,
    OVER_RANGE,
    Entry,
    Layout,
    Table,
    Unreadable,
    WideColumn,
)

LONG = Layout(
    "bench",
    columns={
        "solution": "Solution", "analyte": "Element", "line": "Line", "signal": "Signal", "unit": "Unit",
        "measured_at": "Measured",
    },
    time_zone="Europe/Lisbon",
    not_detected=("< DL", "n.d."),
    over_range=("OVER",),
)  # fmt: skip
HEAD = "Solution,Element,Line,Signal,Unit,Measured\n"
ROW = "MD1_7_A0,Cd,Cd 214.4,0.0125,A,2026-03-04 21:15:07\n"
SMALL = Layout("small", columns={"solution": "Solution", "signal": "Signal"}, unit="A")


def read(text: str, layout: Layout = LONG) -> Table:
    return READER.read(text.encode(), layout)


def refused(text: str, layout: Layout = LONG) -> Unreadable:
    with pytest.raises(Unreadable) as caught:
        read(text, layout)
    return caught.value


def only(text: str, layout: Layout = LONG) -> Entry:
    (entry,) = read(text, layout).entries
    return entry


# ---- what is read ----------------------------------------------------------------------------------------------------


def test_a_long_table_is_read():
    table = read(HEAD + ROW + "0012,Pb,Pb 220.3,-3,A,2026-07-04T21:15:08Z\n")
    assert table.whole is None
    assert table.notes == ("read as UTF-8",)
    assert table.entries[0] == Entry(
        2, "MD1_7_A0", "Cd", "Cd 214.4", "A", 0.0125, "0.0125", MEASURED, 1, None, "2026-03-04T21:15:07Z",
        digest=table.entries[0].digest,
    )  # fmt: skip
    assert table.entries[1].solution == "0012"
    assert table.entries[1].signal == -3.0
    assert table.entries[1].measured_at == "2026-07-04T21:15:08Z"


def test_the_digest_is_of_the_cells_and_the_heading_and_not_of_the_place():
    one, other = only(HEAD + ROW), only("Preamble\n\n" + HEAD + ROW)
    assert (one.row, other.row) == (2, 4)
    cells = "\0".join(ROW.strip().split(","))
    assert one.digest == other.digest == hashlib.sha256(f"{cells}\0\0Signal".encode()).hexdigest()
    changed = only(HEAD + ROW.replace("0.0125", "0.01250"))
    assert changed.signal == one.signal
    assert changed.digest != one.digest


@pytest.mark.parametrize("identity", ["0012", "12E5", "NA", "1-2", "nan", "None", "TRUE", "1/2", "007.50", "=1+1"])
def test_identities_stay_text(identity: str):
    entry = only(HEAD + f"{identity},{identity},{identity},0.5,A,2026-03-04\n")
    assert (entry.solution, entry.analyte, entry.line) == (identity, identity, identity)


@pytest.mark.parametrize(
    ("cell", "qualifier"),
    [
        ("", MISSING), ("   ", MISSING), ("<0.005", NOT_DETECTED), ("< 0.005", NOT_DETECTED), ("<LOD", NOT_DETECTED),
        ("< DL", NOT_DETECTED), ("N.D.", NOT_DETECTED), ("> 5000", OVER_RANGE), ("over", OVER_RANGE),
        ("≥3", OVER_RANGE),
        ("#####", FAULTY), ("#N/A", FAULTY), ("#DIV/0!", FAULTY), ("#NV", FAULTY),
    ],
)  # fmt: skip
def test_what_is_no_number_is_kept_as_what_it_is(cell: str, qualifier: str):
    entry = only(HEAD + f"X,Cd,Cd 214.4,{cell},A,2026-03-04\n")
    assert (entry.signal, entry.qualifier, entry.text) == (None, qualifier, cell.strip())


@pytest.mark.parametrize("delimiter", [";", "\t", "|", ","])
@pytest.mark.parametrize("ends", ["\n", "\r\n", "\r"])
@pytest.mark.parametrize("preamble", ["", "Run;7\nOperator, second bench | night\n\nA;B;C;D;E;F\nSignal\n"])
def test_delimiter_and_line_ends_are_found_under_any_preamble(delimiter: str, ends: str, preamble: str):
    text = preamble + (HEAD + 2 * ROW).replace(",", delimiter)
    entries = read(text.replace("\n", ends)).entries
    assert [entry.signal for entry in entries] == [0.0125, 0.0125]
    assert entries[0].row == 2 + preamble.count("\n")


def test_decimal_commas_do_not_pass_for_delimiters():
    text = "Solution;Signal\nX1;0,125\nX2;1,5\n"
    assert [entry.signal for entry in read(text, SMALL).entries] == [0.125, 1.5]
    single = replace(SMALL, columns={"signal": "Signal"})
    assert [entry.signal for entry in read("Signal\n0,125\n1,5\n", single).entries] == [0.125, 1.5]


def test_a_declared_delimiter_and_quote_are_taken():
    layout = replace(SMALL, delimiter=" ", quote_char="'")
    assert only("Solution   Signal\n'X 1'   0.5\n", layout).solution == "X 1"


def test_quotes_hold_delimiters_and_line_breaks():
    entries = read('Solution,Signal\n"X, ""1""\nlate",0.5\nX2,0.7\n', SMALL).entries
    assert [(entry.row, entry.solution) for entry in entries] == [(2, 'X, "1"\nlate'), (4, "X2")]


@pytest.mark.parametrize(
    ("heading", "unit"),
    [
        ("Signal [A]", "A"), ("Signal (mAU)", "mAU"), ("SIGNAL / A", "A"), ("signal\N{NO-BREAK SPACE}[A]", "A"),
        ("Ｓｉｇｎａｌ [A]", "A"), ("Signal [\N{GREEK SMALL LETTER MU}A]", "\N{MICRO SIGN}A"), ("Signal/ A", "A"),
        ("Signal / c/s", "c/s"),
    ],
)  # fmt: skip
def test_a_heading_may_carry_its_unit(heading: str, unit: str):
    assert only(f"Solution;{heading}\nX;0.5\n", replace(SMALL, unit="")).unit == unit


def test_a_heading_declared_in_full_goes_before_one_with_a_unit():
    text = "Solution;Signal (mean) [A];Signal (sd) [A]\nX;0.5;0.1\n"
    layout = replace(
        SMALL, unit="", columns={"solution": "Solution", "signal": "Signal (mean)", "signal_sd": "Signal (sd)"}
    )
    entry = only(text, layout)
    assert (entry.signal, entry.sd, entry.unit) == (0.5, 0.1, "A")
    verbatim = replace(SMALL, columns={"solution": "Solution", "signal": "Signal (mean)"})
    assert only("Solution;Signal (mean)\nX;0.5\n", verbatim).unit == "A"


def test_a_row_of_units_stands_under_the_headings():
    layout = replace(SMALL, unit="", unit_row=True, columns={**SMALL.columns, "mass": "Mass"})
    entry = only("Solution;Mass;Signal\n;[mg];[mA]\nX;501.2;0.5\n", layout)
    assert (entry.unit, entry.values, entry.row) == ("mA", (("mass", "501.2 mg"),), 3)


def test_a_unit_column_goes_before_the_heading_and_an_empty_cell_falls_back():
    layout = replace(SMALL, unit="", columns={**SMALL.columns, "unit": "Unit", "analyte": "Element"})
    entries = read("Solution;Element;Signal [A];Unit\nX;Cd;0.5;cps\nX;Pb;0.5;\n", layout).entries
    assert [entry.unit for entry in entries] == ["cps", "A"]


def test_a_cell_without_number_and_unit_takes_the_unit_of_its_line():
    entries = read(HEAD + "X,Cd,Cd 214.4,n.d.,,2026-03-04\n" + ROW).entries
    assert [entry.unit for entry in entries] == ["A", "A"]


def test_a_wide_table_has_a_column_for_each_analyte():
    layout = Layout(
        "wide",
        columns={"solution": "Name", "order": "No"},
        wide={"Cd 214 (A)": WideColumn("Cd", "Cd 214.4"), "Pb": WideColumn("Pb")},
        not_detected=("n.d.",),
    )
    entries = read("No;Name;Pb [A];Cd 214 (A)\n7;X1;n.d.;0.5\n8;X2;0.25;0.7\n", layout).entries
    assert [(e.row, e.order, e.solution, e.analyte, e.line, e.signal, e.qualifier, e.unit) for e in entries] == [
        (2, 7, "X1", "Cd", "Cd 214.4", 0.5, "", "A"),
        (2, 7, "X1", "Pb", "", None, NOT_DETECTED, "A"),
        (3, 8, "X2", "Cd", "Cd 214.4", 0.7, "", "A"),
        (3, 8, "X2", "Pb", "", 0.25, "", "A"),
    ]
    assert len({entry.digest for entry in entries}) == 4


MEANS = replace(
    SMALL,
    columns={"solution": "Solution", "signal": "Mean", "signal_rsd": "RSD", "readings": "N"},
    not_detected=("n.d.",),
)


def test_the_number_of_a_repeated_row_is_kept_as_text():
    layout = replace(SMALL, columns={**SMALL.columns, "reading": "Wdh"})
    entries = read("Solution;Wdh;Signal\nX;01;0.5\nX;b;0.6\nX;;0.7\n", layout).entries
    assert [entry.values for entry in entries] == [(("reading", "01"),), (("reading", "b"),), ()]


def test_the_run_of_a_series_is_kept_as_text_and_needs_no_unit():
    layout = replace(SMALL, columns={**SMALL.columns, "block": "Run", "reading": "Wdh"})
    entries = read("Solution;Run;Wdh;Signal\nX;2;1;0.5\nX; evening ;1;0.6\nX;;2;0.7\n", layout).entries
    assert [entry.values for entry in entries] == [
        (("reading", "1"), ("block", "2")), (("reading", "1"), ("block", "evening")), (("reading", "2"),),
    ]  # fmt: skip


@pytest.mark.parametrize(
    ("meaning", "cell", "read_as"),
    [
        ("volume", "5 mL", "5 mL"), ("digest", "50 mL", "50 mL"), ("moisture", "12.5 %", "12.5 %"),
        ("addition", "2.5 ug", "2.5 ug"), ("internal_standard", "0.1 mL", "0.1 mL"), ("spike", "100 uL", "100 uL"),
        ("content", "5 ug/L", "5 ug/L"),
    ],
)  # fmt: skip
def test_every_quantity_that_rules_know_is_read_from_a_column(meaning: str, cell: str, read_as: str):
    layout = replace(SMALL, columns={**SMALL.columns, meaning: "Q"})
    (entry,) = read(f"Solution;Q;Signal\nX;{cell};0.5\n", layout).entries
    assert entry.values == ((meaning, read_as),)
    with pytest.raises(Unreadable, match="is a time, not a"):
        read("Solution;Q;Signal\nX;5 h;0.5\n", layout)


def test_no_quantity_of_the_rules_is_unknown_to_the_reader():
    assert set(QUANTITIES) == set(QUANTITY_GROUPS)


SPREAD = Layout(
    "spread",
    columns={"solution": "Name", "readings": "N"},
    wide={
        "Cd": WideColumn("Cd", "Cd 214.4", signal_sd="Cd SD"),
        "Pb": WideColumn("Pb", signal_rsd="Pb RSD", readings="Pb n"),
        "Zn": WideColumn("Zn"),
    },
    unit="cps",
)


def test_each_column_of_a_wide_table_has_its_own_scatter():
    text = "Name;N;Cd;Cd SD;Pb;Pb RSD;Pb n;Zn\nX;3;100;1,5;200;2 %;5;300\nY;3;100;;-200;2,0;;300\n"
    found = [(entry.analyte, entry.sd, entry.readings) for entry in read(text, SPREAD).entries]
    assert found == [
        ("Cd", 1.5, 3), ("Pb", 4.0, 5), ("Zn", None, 3), ("Cd", None, 3), ("Pb", 4.0, 1), ("Zn", None, 3),
    ]  # fmt: skip


def test_a_scatter_of_a_wide_column_is_looked_for_and_read_with_care():
    lacking = refused("Name;N;Cd;Pb;Pb RSD;Pb n;Zn\nX;3;1;2;2;5;3\n", SPREAD)
    assert "lacks 'Cd SD'" in lacking.sentence
    below = refused("Name;N;Cd;Cd SD;Pb;Pb RSD;Pb n;Zn\nX;3;100;-1,5;200;2;5;300\n", SPREAD)
    assert (below.row, below.column) == (2, "Cd SD")


def test_means_carry_their_relative_standard_deviation_and_number():
    text = "Solution;Mean;RSD [%];N\nX1;-0,200;1,5;3\nX2;n.d.;n.d.;3\nX3;0,3;2,0 %;\nX4;0,4;;5\n"
    entries = read(text, MEANS).entries
    assert [(entry.signal, entry.sd, entry.readings) for entry in entries] == [
        (-0.2, pytest.approx(0.003), 3), (None, None, 1), (0.3, pytest.approx(0.006), 1), (0.4, None, 5),
    ]  # fmt: skip


def test_quantities_keep_their_digits_and_carry_their_unit():
    layout = replace(
        SMALL,
        columns={
            **SMALL.columns, "mass": "Mass", "dry_matter": "DM", "addition": "Spike", "final": "Flask",
            "dilution": "Dilution", "standard": "Standard",
        },
    )  # fmt: skip
    text = (
        "Solution;Signal;Mass [g];DM;Spike / µL;Flask;Dilution;Standard\n"
        "X1;0,5;0,50120;92,3 %;250;25 ml;1 + 4;Mix-7\n"
        "X2;0,6;;;1.000,5;;2,50;\n"
    )
    first, second = read(text, layout).entries
    assert first.values == (
        ("mass", "0.50120 g"), ("dry_matter", "92.3 %"), ("addition", "250 uL"), ("final", "25 mL"),
        ("dilution", "1 + 4"), ("standard", "Mix-7"),
    )  # fmt: skip
    assert second.values == (("addition", "1000.5 uL"), ("dilution", "2.50"))


def test_a_table_without_solutions_is_for_names_from_the_file():
    entry = only("Signal [A]\n0.5\n", Layout("l", columns={"signal": "Signal"}))
    assert (entry.solution, entry.analyte) == ("", "")


# ---- where a table begins and ends -----------------------------------------------------------------------------------


def test_repeated_headings_and_blank_rows_are_skipped_and_footers_are_noted():
    text = f"Run 7\n{HEAD}{ROW}\n,,,,,\n{ROW}\nSection 2\n{HEAD}{ROW}\nprinted by bench 2\n"
    table = read(text)
    assert [entry.row for entry in table.entries] == [3, 6, 10]
    assert table.notes[1:] == (
        "row 8 is not part of the table: Section 2",
        "row 12 is not part of the table: printed by bench 2",
    )


def test_a_declared_word_ends_the_table():
    layout = replace(SMALL, ends_at=("Mean",))
    table = read("Solution;Signal\nX1;0.5\nmean;0.6\nRSD;1.2\n", layout)
    assert [entry.solution for entry in table.entries] == ["X1"]
    assert table.notes[1:] == ("row 4 is not part of the table: RSD 1.2",)


def test_comment_lines_are_left_out_and_rows_still_count():
    layout = replace(SMALL, comment_prefix="//")
    assert only("// Signal;Solution\nSolution;Signal\n // late\nX1;0.5\n", layout).row == 4


def test_the_end_marker_tells_whether_a_file_is_whole():
    layout = replace(SMALL, end_marker="End of run")
    whole = read("Solution;Signal\nX1;0.5\nEnd of run 21:15\n\n", layout)
    assert whole.whole is True
    assert len(whole.entries) == 1
    for text in ("Solution;Signal\nX1;0.5\n", "Solution;Sig", "", "End of run\nSolution;Signal\n"):
        unfinished = read(text, layout)
        assert (unfinished.whole, unfinished.entries) == (False, ())
        assert "'End of run'" in unfinished.notes[-1]


def test_headings_may_be_declared_apart_from_the_columns():
    layout = replace(SMALL, header_contains=("Signal", "Flag"))
    assert only("Solution;Signal\nX1;7\n\nSolution;Signal [A];Flag\nX2;0.5;ok\n", layout).solution == "X2"


# ---- what is refused, and where --------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "says", "row", "column"),
    [
        # missing, duplicate, shifted and ragged
        (HEAD.replace("Unit,", "") + ROW, "comes nearest and lacks 'Unit'", 1, None),
        (HEAD.replace("Line", "Signal [A]") + ROW, "lacks 'Line'", 1, None),
        (HEAD.replace("Measured", "Measured,Signal") + ROW, "stands over columns 4 and 7", 1, "Signal"),
        (HEAD + ROW + "X,Cd,Cd 214.4,A,2026-03-04,\n", "'A' is not a number", 3, "Signal"),
        (HEAD + ROW + "X,Cd,0.5,A,2026-03-04\n", "5 cells where the headings have 6", 3, None),
        (HEAD + ROW + "X,Cd,Cd 214,4,0.5,A,2026-03-04\n", "7 cells where the headings have 6", 3, None),
        (HEAD + ROW + "X,Cd", "the file may be torn", 3, None),
        (HEAD + ROW + '"X,Cd,Cd 214.4,0.5,A,2026-03-04\n' + ROW, "opened in this row and never closed", 3, None),
        (HEAD + ROW + '"X"1,Cd,Cd 214.4,0.5,A,2026-03-04\n', "must be doubled", 3, None),
        (HEAD, "followed by no rows", 1, None),
        (HEAD + "\n,,,,,\n", "followed by no rows", 1, None),
        (HEAD + ROW + "Element,Solution,Line,Signal,Unit,Measured\n" + ROW, "again in another order", 3, None),
        ("\n \n", "holds no text", None, None),
        ("a,b\n1,2\n", "no row holds the headings 'Solution', 'Element'", None, None),
        # cells
        (HEAD + ROW.replace("0.0125", "1_000"), "'1_000' is not a number", 2, "Signal"),
        (HEAD + ROW.replace("0.0125", '"0,0125"') + ROW, "a file has one decimal sign", 3, "Signal"),
        (HEAD + ROW.replace("0.0125", '"1,234"'), "can be read with a decimal point or", 2, "Signal"),
        (HEAD + ROW.replace("MD1_7_A0", ""), "the solution is missing", 2, "Solution"),
        (HEAD + ROW.replace("Cd,Cd", ",Cd"), "the analyte is missing", 2, "Element"),
        (HEAD + ROW.replace("2026-03-04 ", "4.3.2026 "), "declare its form under date_patterns", 2, "Measured"),
        (HEAD + ROW.replace("2026-03-04 21", "2026-10-25 01"), "occurs twice in Europe/Lisbon", 2, "Measured"),
        (HEAD + ROW.replace("2026", "1926"), "before 1970", 2, "Measured"),
        # units
        (HEAD + ROW.replace(",A,", ",,"), "the signal has no unit", 2, "Signal"),
        (HEAD + ROW + ROW.replace(",A,", ",mA,"), "changes from A (row 2) to mA", 3, None),
        (HEAD + ROW.replace("0.0125,A", "n.d.,"), "the signal has no unit", 2, None),
    ],
)
def test_a_fault_is_told_with_its_place(text: str, says: str, row: int | None, column: str | None):
    error = refused(text)
    assert says in error.sentence
    assert (error.row, error.column) == (row, column)


def test_a_unit_other_than_the_declared_one_is_refused():
    error = refused("Solution;Signal [mA]\nX;0.5\n", SMALL)
    assert "the signal is in mA, but its unit is declared as A" in error.sentence
    assert (error.row, error.column) == (2, "Signal [mA]")


def test_units_may_differ_between_lines_of_one_file():
    entries = read(HEAD + ROW + ROW.replace("Cd", "Pb").replace(",A,", ",cps,")).entries
    assert [entry.unit for entry in entries] == ["A", "cps"]


def test_a_unit_row_that_changes_is_refused():
    layout = replace(SMALL, unit="", unit_row=True)
    error = refused("Solution;Signal\n;A\nX;0.5\nSolution;Signal\n;mA\nX;0.5\n", layout)
    assert "units under the repeated headings differ" in error.sentence
    assert error.row == 5


@pytest.mark.parametrize(
    ("heading", "cell", "says"),
    [
        ("Mass", "0.5", "'0.5' has no unit; write it in the heading, such as Mass [g]"),
        ("Mass [g]", "0.5 mg", "name different units"),
        ("Mass [stone]", "0.5", "the unit 'stone' is not known"),
        ("Mass [mL]", "0.5", "is a volume, not a mass"),
        ("Mass", "half a gram", "is not a number"),
        ("Mass", "0.5 ppm", "per volume or per mass"),
    ],
)
def test_a_quantity_without_a_clear_unit_is_refused(heading: str, cell: str, says: str):
    layout = replace(SMALL, columns={**SMALL.columns, "mass": "Mass"})
    error = refused(f"Solution;Signal;{heading}\nX;0.5;{cell}\n", layout)
    assert says in error.sentence
    assert (error.row, error.column) == (2, heading)


@pytest.mark.parametrize(
    ("row", "says", "column"),
    [
        ("X1;0.5;-1;3", "below nought", "RSD"),
        ("X1;0.5;x;3", "'x' is not a number", "RSD"),
        ("X1;0.5;1;0", "at least one reading", "N"),
        ("X1;0.5;1;2.5", "not a whole number", "N"),
    ],
)
def test_a_spread_that_cannot_be_is_refused(row: str, says: str, column: str):
    error = refused(f"Solution;Mean;RSD;N\n{row}\n", MEANS)
    assert says in error.sentence
    assert (error.row, error.column) == (2, column)


def test_a_layout_without_a_signal_is_refused():
    assert (
        "declare columns: signal, or wide"
        in refused(HEAD + ROW, Layout("l", columns={"solution": "Solution"})).sentence
    )


def test_many_blank_rows_cost_no_more_than_their_number():
    text = "Solution;Signal\n" + "X;1\n\n\n" * 20_000
    begun = time.process_time()
    assert len(read(text, SMALL).entries) == 20_000
    assert time.process_time() - begun < 10.0


def test_ten_million_lines_are_refused_at_once():
    begun = time.process_time()
    assert "more than 200000 lines" in refused("Solution;Signal\n" + "X;1\n" * 10_000_000, SMALL).sentence
    assert time.process_time() - begun < 5.0


def test_a_cell_without_end_is_refused():
    assert (
        "a cell is longer than 131072 characters"
        in refused('Solution;Signal\n"' + "X" * 140_000 + '";1\n', SMALL).sentence
    )


def test_a_row_of_another_width_is_quoted_and_blames_no_column():
    text = HEAD + ROW + "Mittelwerte siehe Protokoll\n"
    told = refused(text, replace(LONG, ends_at=("Mittelwerte",)))
    assert (told.row, told.column) == (3, None)
    assert "1 cell where the headings have 6, and its first cell is 'Mittelwerte siehe Protokoll'" in told.sentence
    assert "add the whole first cell under ends_at" in told.sentence
    assert len(read(text, replace(LONG, ends_at=("Mittelwerte siehe Protokoll",))).entries) == 1
    assert "its first cell is empty" in refused(HEAD + ROW + ",x\n").sentence


# ---- whatever comes --------------------------------------------------------------------------------------------------

LAYOUTS = [
    LONG, SMALL, MEANS, replace(SMALL, unit_row=True, ends_at=("Mean",)), replace(SMALL, end_marker="End"),
    replace(SMALL, columns={**SMALL.columns, "mass": "Mass", "dilution": "Dilution"}, comment_prefix="#"),
    Layout("wide", wide={"Signal": WideColumn("Cd"), "Mean": WideColumn("Pb", "x", signal_rsd="RSD")}, unit="A"),
]  # fmt: skip
PIECES = st.sampled_from([
    "Solution", "Signal", "Mean", "RSD", "N", "Mass", "Mass [g]", "Dilution", "Element", "Line", "Unit", "Measured",
    ";", ";", ",", ",", "\t", "|", "\n", "\n", "\r", "\r\n", '"', "'", "0,5", "1.234", "12", "1 + 4", "<1", "#", "n.d.",
    "OVER", "A", "2026-03-04", "\0", "\ufeff", "µ", "End", " ", "[", "(", "/",
])  # fmt: skip


@settings(max_examples=300)
@given(st.one_of(st.binary(max_size=200), st.lists(PIECES, max_size=40).map(lambda each: "".join(each).encode())),
       st.sampled_from(LAYOUTS))  # fmt: skip
def test_any_file_is_read_or_refused(content: bytes, layout: Layout):
    try:
        table = READER.read(content, layout)
    except Unreadable:
        return
    assert table.entries or table.whole is False
    for entry in table.entries:
        assert entry.unit
        assert (entry.signal is None) == (entry.qualifier != MEASURED)


NAMES = (
    st.text(st.characters(codec="utf-8", exclude_categories=("Cc", "Cs")), min_size=1, max_size=20)
    .map(str.strip)
    .filter(bool)
)
SIGNALS = st.floats(-1e6, 1e6, allow_subnormal=False).filter(lambda value: value == 0 or abs(value) > 1e-12)


@given(
    st.lists(st.tuples(NAMES, SIGNALS), min_size=1, max_size=20),
    st.sampled_from([";", "\t", "|"]),
    st.sampled_from([".", ","]),
)
def test_what_an_instrument_wrote_is_what_is_read(rows: list[tuple[str, float]], delimiter: str, sign: str):
    stream = io.StringIO()
    writer = csv.writer(stream, delimiter=delimiter, lineterminator="\r\n", quoting=csv.QUOTE_ALL)
    writer.writerow(["Solution", "Signal"])
    writer.writerows([name, repr(value).replace(".", sign)] for name, value in rows)
    layout = replace(SMALL, decimal="comma" if sign == "," else "point", not_detected=(), over_range=())
    entries = read(stream.getvalue(), layout).entries
    assert [(entry.solution, entry.signal) for entry in entries] == [(name, value + 0.0) for name, value in rows]
