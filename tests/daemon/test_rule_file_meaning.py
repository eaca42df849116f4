"""What a rule file says against itself: each contradiction with its place, its code and what to do."""

from __future__ import annotations

from pathlib import Path

import pytest

from spikeward.daemon.rule_file import meaning
from spikeward.daemon.rule_file.folders import contains
from spikeward.daemon.rule_file.load import load_rules
from spikeward.daemon.rule_file.names import groups_of
from spikeward.daemon.rule_file.pattern_examples import examples
from spikeward.daemon.rule_file.problems import Problem

EXAMPLE = (Path(__file__).resolve().parents[2] / "config.example.yaml").read_text(encoding="utf-8")

Edit = tuple[str, str]


def problems_of(*edits: Edit) -> tuple[Problem, ...]:
    text = EXAMPLE
    for old, new in edits:
        assert old in text, old
        text = text.replace(old, new)
    return load_rules(text, "rules.yaml")[1]


READER_ENCODING = """encoding: auto                              # The character set. Default: auto.
    delimiter"""
READER_LINE = "  - folder: inbox"
SAMPLE_RULE = "  - role: sample\n"
BEHIND = "  match: '(?P<batch>"
LEVELS = "levels: {0: 0 mL, 1: 0.25 mL, 2: 0.5 mL, 3: 0.75 mL}"
WIDE_COLUMNS = "{solution: Solution, measured_at: Measured}"
MUD = "MUD-1: {Cd: 2.40 mg/kg, uncertainty: 0.16 mg/kg, k: 2}"
COLUMNS = "{solution: Solution, analyte: Element, line: Line, signal: Signal, unit: Unit, measured_at: Measured}"


SINGLE = [("    levels: [0, 1, 2, 3]\n", ""), ("design: flasks", "design: single")]


def second_preparation(text: str) -> Edit:
    return ("\nblanks:", f"  - {{{text}, additions: {{{LEVELS}}}}}\n\nblanks:")


@pytest.mark.parametrize(
    ("edits", "code", "path", "says"),
    [
        # watches and folders
        ([("reader: readings", "reader: reedings")], "R030", "watch[0].reader[0]", "did you mean readings?"),
        ([("reader: readings", "reader: []")], "R013", "watch[0].reader", "name one"),
        ([("spans_folders: no", "spans_folders: yes")], "R031", "watch[0].spans_folders", "output folder"),
        ([("output: beside", "output: inbox/results")], "R032", "watch[0].output", "lies inside 'inbox'"),
        ([("output: beside", "output: .")], "R032", "watch[0].output", "holds 'inbox'"),
        ([(READER_LINE, "  - folder: ./inbox/\n" + READER_LINE)], "R032", "watch[1].folder", "already"),
        ([(READER_LINE, "  - folder: inbox/a\n" + READER_LINE)], "R032", "watch[1].folder", "holds 'inbox/a'"),
        ([("state: .spikeward", "state: inbox/state")], "R032", "state", "lies inside 'inbox'"),
        ([("decisions: decisions.yaml", "decisions: ../decisions.yaml")], "R017", "decisions", "a file name"),
        ([("decisions: decisions.yaml", "decisions: .decisions.yaml")], "R017", "decisions", "hidden"),
        ([("decisions: decisions.yaml", "decisions: x.pass.flag")], "R017", "decisions", "our own"),
        # readers
        ([("signal: Signal, ", "")], "R010", "readers.readings.columns", "signal"),
        ([("solution: Solution, ", "")], "R010", "readers.readings.columns", "solution"),
        ([("analyte: Element, ", "")], "R010", "readers.readings.columns", "analyte"),
        (
            [("unit: Unit, ", "unit: Unit, signal_rsd: RSD, ")],
            "R010",
            "readers.readings.columns.signal_rsd",
            "readings",
        ),
        (
            [("unit: Unit, ", "unit: Unit, readings: Wdh, ")],
            "R031",
            "readers.readings.columns.readings",
            "for repeated rows use reading: for their number, or series: same_name: reading",
        ),
        (
            [(COLUMNS, WIDE_COLUMNS), ("# wide: {Cd 214 (A): {", "wide: {X: {analyte: Cd, signal_sd: X SD}, Y: {")],
            "R010",
            "readers.readings.wide.X.signal_sd",
            "add readings",
        ),
        (
            [(COLUMNS, WIDE_COLUMNS), ("# wide: {", "wide: {X: {analyte: Cd, readings: n}, ")],
            "R031",
            "readers.readings.wide.X.readings",
            "add signal_sd",
        ),
        (
            [(COLUMNS, WIDE_COLUMNS.replace("}", ", signal_sd: SD, readings: N}")), ("# wide: ", "wide: ")],
            "R031",
            "readers.readings.columns.signal_sd",
            "write signal_sd beside each analyte under wide",
        ),
        (
            [(COLUMNS, WIDE_COLUMNS), ("# wide: {", "wide: {X: {analyte: Cd, reading: Wdh}, Y: Pb} # {")],
            "R012",
            "readers.readings.wide.X.reading",
            "it belongs under readers.columns",
        ),
        ([("# wide: ", "wide: ")], "R031", "readers.readings.wide", "delete one"),
        ([("Europe/Lisbon", "Europe/Lisbonn")], "R017", "readers.readings.time_zone", "did you mean Europe/Lisbon?"),
        ([("Europe/Lisbon", "Europe")], "R017", "readers.readings.time_zone", "time zone"),
        ([("Europe/Lisbon", "../etc/passwd")], "R017", "readers.readings.time_zone", "time zone"),
        ([(READER_ENCODING, "encoding: utf-9\n    delimiter")], "R017", "readers.readings.encoding", "character set"),
        ([(READER_ENCODING, "encoding: base64\n    delimiter")], "R017", "readers.readings.encoding", "character set"),
        (
            [("# date_patterns: ['%Y-%m-%d %H:%M:%S']", "date_patterns: ['%Q']")],
            "R017",
            "readers.readings.date_patterns[0]",
            "pattern of a date",
        ),
        (
            [("# date_patterns: ['%Y-%m-%d %H:%M:%S']", "date_patterns: [yyyy-mm-dd]")],
            "R017",
            "readers.readings.date_patterns[0]",
            "pattern of a date",
        ),
        ([("format: delimited", "format: delimitted")], "R030", "readers.readings.format", "did you mean delimited?"),
        # bench
        ([("{batch: Batch, sample: Sample}", "{batch: Batch}")], "R010", "bench.key", "sample"),
        ([("mass: Mass, ", "")], "R030", "preparations[0].sample.mass", "columns under bench"),
        ([("mass: bench", "mass: name")], "R030", "preparations[0].sample.mass", "(?P<mass>…)"),
        ([("mass: bench", "mass: column")], "R030", "preparations[0].sample.mass", "columns of a reader"),
        # names
        ([("(?P<vessel>", "(?P<vesel>")], "R021", "names[4].match", "did you mean vessel?"),
        ([("(?P<vessel>[a-c])", "(?P<level>[a-c])")], "R021", "names[4].match", "twice"),
        ([("_A(?P<level>\\d+)(?P<vessel>", "_A\\d+(?P<vessel>")], "R022", "names[4].match", "the level"),
        ([("_(?P<sample>\\d[A-Za-z0-9-]*)_", "_\\d_")], "R022", "names[4].match", "the sample"),
        ([("(?P<vessel>[a-c])", "(?P<addition>\\d+)")], "R023", "names[4].match", "units: {addition: mL}"),
        (
            [("(?P<vessel>[a-c])", "(?P<addition>\\d+)"), ("# units: {addition: uL}", "units: {addition: mg/L}")],
            "R023",
            "names[4].units.addition",
            "a unit of volume, mass or amount",
        ),
        (
            [("# units: {addition: uL}", "units: {addition: uL}")],
            "R031",
            "names[4].units.addition",
            "no group addition",
        ),
        ([("(?P<vessel>[a-c])?", "(?=[a-c])")], "R020", "names[4].match", "looks ahead or behind"),
        ([("(?P<vessel>[a-c])?", "(?P<vessel>[a-c])(?P=vessel)")], "R020", "names[4].match", "refers back"),
        ([("(?P<vessel>[a-c])?", "(?P<vessel>[a-c]")], "R020", "names[4].match", "cannot be used"),
        ([("(?P<vessel>[a-c])?", "((a{1000}){1000}){1000}")], "R020", "names[4].match", "cannot be used"),
        # series and roles
        ([("levels: [0, 1, 2, 3]", "levels: [0, 1, 2, 3, 4]")], "R031", "series.expects.levels", "level 4"),
        ([("levels: [0, 1, 2, 3]", "levels: [0, 1, 2, 02]")], "R031", "series.expects.levels", "twice"),
        ([("[bracket, process_blank, reference]", "[check]")], "R030", "series.closes_with[0]", "role: check"),
        ([("role: background,   ", "role: calibration,  ")], "R030", "blanks.background", "role: background"),
        (
            [("role: process_blank,", "role: duplicate,"), ("process_blank, reference]", "reference]")],
            "R030",
            "blanks.process",
            "role: process_blank",
        ),
        ([("role: bracket, ", "role: calibration,"), ("[bracket, ", "[")], "R030", "brackets", "role: bracket"),
        ([("role: reference, ", "role: duplicate, "), (", reference]", "]")], "R030", "references", "role: reference"),
        # standards
        ([("# content: 10 mg/L", "content: 10 mg/L")], "R031", "standards.Mix-7", "delete one"),
        ([("contents: {Cd: 10.02 mg/L, Pb: 50.1 mg/L}", "analyte: Cd")], "R010", "standards.Mix-7", "content"),
        (
            [("50.1 mg/L", "50.1 mg/kg")],
            "R010",
            "preparations[0].additions[0].levels.1",
            "add density to the standard",
        ),
        ([("10.02 mg/L", "10.02 mL")], "R015", "standards.Mix-7.contents.Cd", "a volume"),
        ([("10.02 mg/L", "10,02 mg/L")], "R014", "standards.Mix-7.contents.Cd", "point"),
        (
            [("{Cd: 10.02 mg/L, Pb: 50.1 mg/L}", "\n      Cd: 10,02 mg/L")],
            "R015",
            "standards.Mix-7.contents.Cd",
            "point",
        ),
        ([("10.02 mg/L", "10.02 ppm")], "R015", "standards.Mix-7.contents.Cd", "mg/L or mg/kg"),
        ([("10.02 mg/L", "0 mg/L")], "R015", "standards.Mix-7.contents.Cd", "zero"),
        ([("2027-03-31", "2027-02-30")], "R017", "standards.Mix-7.expires", "a date"),
        # preparations
        (
            [("standard: Mix-7", "standard: Mix-8")],
            "R030",
            "preparations[0].additions[0].standard",
            "did you mean Mix-7?",
        ),
        (
            [("standard: Mix-7 ", "# "), ("\npreparations:", "  X: {analyte: Cd, content: 1 mg/L}\n\npreparations:")],
            "R010",
            "preparations[0].additions[0].standard",
            "Mix-7 or X",
        ),
        ([(LEVELS, "levels: {}")], "R010", "preparations[0].additions[0].levels", "addition"),
        ([(LEVELS, "levels: {0: 0 mL, 1: 0 mL}")], "R031", "preparations[0].additions[0].levels", "any standard"),
        ([(LEVELS, "levels: {1: 0.1 mL, 01: 0.2 mL}")], "R031", "preparations[0].additions[0].levels.01", "twice"),
        ([(LEVELS, LEVELS.replace("0.25 mL", "0.25"))], "R015", "preparations[0].additions[0].levels.1", "no unit"),
        ([("aliquot: 10 mL", "# ")], "R010", "preparations[0].aliquot", "add aliquot"),
        ([("aliquot: 10 mL", "aliquot: {levels: {0: 10 mL, 1: 9 mL}}")], "R010", "preparations[0].aliquot", "level 2"),
        ([("aliquot: 10 mL", "aliquot: 24.5 mL")], "R031", "preparations[0].final", "25.25 mL"),
        ([("# diluent: 50 mL", "diluent: 15 mL")], "R031", "preparations[0].final", "25.25 mL"),
        ([("final: 25 mL", "# ")], "R010", "preparations[0]", "add final"),
        ([("design: flasks", "design: successive")], "R031", "preparations[0].final", "delete final"),
        ([("design: flasks", "design: single")], "R031", "preparations[0].additions[0].levels", "say design: flasks"),
        (
            [*SINGLE, (LEVELS, "levels: {A: 0.1 mL, B: 0.2 mL}")],
            "R031",
            "preparations[0].additions[0].levels",
            "give one level 0 mL",
        ),
        (
            [*SINGLE, (LEVELS, "levels: {0: 0.1 mL}")],
            "R031",
            "preparations[0].additions[0].levels",
            "one without and one with",
        ),
        ([("# volume: 5 mL", "volume: 5 mL")], "R031", "preparations[0].sample", "mass and a volume"),
        ([("mass: bench", "# "), ("dry_matter: bench", "# ")], "R010", "preparations[0].sample", "add mass"),
        ([("digest: 50 mL", "# ")], "R010", "preparations[0].sample", "add digest"),
        (
            [("mass: bench", "volume: 1 mL"), ("report_in: mg/kg", "# ")],
            "R031",
            "preparations[0].sample.dry_matter",
            "mass",
        ),
        ([("dry_matter: bench", "dry_matter: 120 %")], "R015", "preparations[0].sample.dry_matter", "whole"),
        ([("# dilution: [1 + 4, 10]", "dilution: 1:5")], "R015", "preparations[0].sample.dilution[0]", "1 + 4"),
        ([("report_in: mg/kg", "report_in: mg/L")], "R015", "preparations[0].report_in", "mass per mass"),
        ([("report_in: mg/kg", "report_in: ppm")], "R015", "preparations[0].report_in", "mg/L or mg/kg"),
        ([("{batch: 'MD\\d+'}", "{role: 'process_blank|reference'}")], "R030", "names[4].role", "role sample"),
        ([("{batch: 'MD\\d+'}", "{batch: '(MD'}")], "R020", "preparations[0].for.batch", "cannot be used"),
        # contents that are known
        ([("contents: {Cd: 20 ug/L, Pb: 100 ug/L}", "Cu: 20 ug/L")], "R012", "brackets.Cu", "contents: {Cu: …}"),
        ([("Cd: 20 ug/L", "Cu: 20 ug/L")], "R030", "brackets.contents.Cu", "no standard holds 'Cu'"),
        (
            [(MUD, MUD.replace("uncertainty", "uncertanty"))],
            "R030",
            "references.MUD-1.uncertanty",
            "did you mean uncertainty?",
        ),
        ([(MUD, "MUD-1: {Cd: 2.40 mg/kg, uncertainty: 0.16 mg/kg}")], "R010", "references.MUD-1.uncertainty", "k: 2"),
        ([(MUD, "MUD-1: {Cd: 2.40 mg/kg, k: 2}")], "R010", "references.MUD-1.k", "delete k"),
        ([(MUD, "MUD-1: {k: 2, uncertainty: 5 %}")], "R010", "references.MUD-1", "no content"),
        ([(MUD, MUD.replace("0.16 mg/kg", "0.16 mg/L"))], "R015", "references.MUD-1.Cd", "one unit"),
        ([(MUD, "MUD-1: {Cd: 2.40 mg/L}")], "R015", "references.MUD-1.Cd", "unit of the report"),
        # checks
        ([("pack:general", "pack:generall")], "R030", "checks.use", "did you mean pack:general?"),
        ([("correlation:", "corelation:")], "R012", "checks.corelation", "did you mean correlation?"),
        (
            [("fail_below: 0.995", "fail_belw: 0.995")],
            "R012",
            "checks.correlation.fail_belw",
            "did you mean fail_below?",
        ),
        ([("fail_below: 0.995", "warn_outside: [1, 2]")], "R012", "checks.correlation.warn_outside", "fail_below"),
        ([("fail_below: 0.995", "fail_below: 0,995")], "R014", "checks.correlation.fail_below", "point"),
        ([("[80 %, 120 %]", "[120 %, 80 %]")], "R031", "checks.reference.fail_outside", "not below"),
        ([("[80 %, 120 %]", "80 %")], "R011", "checks.reference.fail_outside", "two limits"),
        ([("[80 %, 120 %]", "[80 %]")], "R011", "checks.reference.fail_outside", "two limits"),
        (
            [("correlation: {fail_below: 0.995}", "levels: {fail_below: 10 %}")],
            "R014",
            "checks.levels.fail_below",
            "whole",
        ),
        (
            [("correlation: {fail_below: 0.995}", "units: {fail_above: 1}")],
            "R012",
            "checks.units.fail_above",
            "only off",
        ),
        # keys in the wrong place
        ([("language: en", "coverage: 95 %")], "R012", "coverage", "it belongs under report"),
        ([("coverage: 95 %", "coverage: 95")], "R014", "report.coverage", "between 0 and 100 %"),
    ],
)
def test_refused_with_its_place_and_remedy(edits: list[Edit], code: str, path: str, says: str):
    problems = problems_of(*edits)
    errors = [problem for problem in problems if problem.severity == "error"]
    first = next((problem for problem in errors if problem.path == path), None)
    assert first is not None, [problem.line_text() for problem in problems]
    assert first.code == code
    assert says in first.sentence
    assert first.expected or first.hint
    assert len(errors) == 1, [problem.line_text() for problem in errors]


@pytest.mark.parametrize(
    ("edits", "code", "path", "says"),
    [
        (
            [("\n# What the names", "  spare:\n    columns: {solution: S, analyte: E, signal: A}\n\n# What the names")],
            "R041",
            "readers.spare",
            "delete it",
        ),
        (
            [
                (
                    SAMPLE_RULE,
                    "  - {role: sample, match: '(?P<batch>MD\\d+)_(?P<sample>X)_A(?P<level>\\d)'}\n"
                    "  - {role: duplicate, match: '(?P<batch>MD\\d+)_(?P<sample>X)_A(?P<level>\\d)'}\n" + SAMPLE_RULE,
                )
            ],
            "R040",
            "names[5]",
            "go to the rule for role sample in line",
        ),
        (
            [("_BLK(?P<sample>\\d+)?(_r(?P<reading>\\d+))?", "_PB\\d_A(?P<sample>\\d+)")],
            "R040",
            "names[1]",
            "role process_blank in line",
        ),
        ([("(?P<batch>[A-Z]{2}\\d+)_BLK", "BLK")], "R042", "names[1].match", "batch"),
        (
            [second_preparation("for: {batch: 'MD\\d+', sample: '9'}, design: successive, aliquot: 5 mL")],
            "R040",
            "preparations[1]",
            "put the special one first",
        ),
    ],
)
def test_warned_of_and_still_read(edits: list[Edit], code: str, path: str, says: str):
    problems = problems_of(*edits)
    assert [(p.code, p.path, p.severity) for p in problems] == [(code, path, "warning")]
    assert says in problems[0].sentence
    assert " warning R04" in problems[0].line_text()


def test_a_level_that_one_preparation_does_not_make_is_told_with_its_line():
    fewer = "levels: {0: 0 mL, 1: 0.25 mL}"
    special = (
        "  # Which series it applies to, as patterns",
        f"  - for: {{sample: '9'}}\n    design: flasks\n    aliquot: 10 mL\n    final: 25 mL\n"
        f"    additions: {{standard: Mix-7, {fewer}}}\n    report_in: mg/L\n"
        "  # Which series it applies to, as patterns",
    )
    (problem,) = problems_of(special)
    assert (problem.code, problem.path, problem.severity) == ("R043", "series.expects.levels", "warning")
    text = EXAMPLE.replace(*special)
    line = 1 + text[: text.index(fewer)].count("\n")
    assert f"levels 2 and 3 are expected, and the preparation in line {line} " in problem.sentence
    (none,) = problems_of(("levels: [0, 1, 2, 3]", "levels: [A, B]"))
    assert (none.code, none.severity) == ("R031", "error")
    assert "levels A and B are expected" in none.sentence


def test_levels_may_have_any_names():
    letters = (LEVELS, "levels: {A: 0 mL, B: 0.25 mL}")
    assert problems_of(letters, ("levels: [0, 1, 2, 3]", "levels: [A, B]"), ("design: flasks", "design: single")) == ()


def test_a_value_that_stands_alone_is_called_so():
    problem = next(each for each in problems_of((MUD, "MUD-1: 2.40 mg/kg")) if each.path == "references.MUD-1")
    assert problem.found == "a single value"
    (problem,) = problems_of(("aliquot: 10 mL", "aliquot: [10 mL]"))
    assert problem.found == "a list"
    assert problem.expected.startswith("a volume or mass such as 10 mL, or a map with the keys volume")


def test_a_special_rule_before_a_general_one_is_no_shadow():
    general = (
        "  - role: sample\n",
        "  - {role: check, match: '(?P<batch>[A-Z]{2}\\d+)_(?P<sample>1)_A(?P<level>\\d+)'}\n  - role: sample\n",
    )
    assert problems_of(general) == ()


def test_what_other_sources_give_need_not_stand_in_the_rule_file():
    told = (
        "{mass: Mass, dry_matter: Dry matter}",
        "{mass: Mass, dry_matter: DM, aliquot: V, addition: Spike, final: Vf}",
    )
    assert problems_of(told, ("aliquot: 10 mL", "# "), ("final: 25 mL", "# "), (LEVELS, "levels: {}")) == ()


def test_a_file_name_can_say_what_the_columns_do_not():
    named = [("solution: Solution, ", ""), ("from: solution", "from: file")]
    assert problems_of(*named) == ()
    assert problems_of(("analyte: Element, ", ""), ("(?P<vessel>[a-c])", "(?P<analyte>Cd|Pb)")) == ()


def test_other_formats_name_their_own_fields(monkeypatch: pytest.MonkeyPatch):
    monkeypatch.setattr(meaning, "formats", lambda: ("andi", "delimited"))
    assert problems_of(("format: delimited", "format: andi"), (COLUMNS, "{}")) == ()


@pytest.mark.parametrize(
    ("outer", "inner", "inside"),
    [
        ("inbox", "inbox", True), ("inbox", "./inbox/", True), ("inbox", "inbox/a", True), ("inbox", "inbox2", False),
        ("inbox", "a/../inbox/b", True), (".", "inbox", True), ("..", "inbox", True), ("../a", "../a/b", True),
        ("../a", "b", False), ("../..", "../a", True), ("/data", "/data/a", True), ("/", "/data", True),
        ("/data", "inbox", False), ("inbox/a", "inbox", False), ("//data", "/data/a", True), ("Inbox", "inbox", False),
        ("C:\\data", "C:\\data\\a", False),
    ],
)  # fmt: skip
def test_folders_are_compared_as_they_are_written(outer: str, inner: str, inside: bool):
    assert contains(outer, inner) is inside


def test_groups_are_found_and_brackets_in_classes_are_not():
    assert groups_of(r"(?P<a>x)(?<b>y)(?:z)[(?P<c>]\(?P<d>(?P<a>q)") == ["a", "b", "a"]


@pytest.mark.parametrize(
    ("pattern", "some"),
    [
        (r"(?P<batch>[A-Z]{2}\d+)_A(?P<level>\d+)(x)?", {"AA0_A0", "ZZ7_A7x"}),
        (r"a|b", {"a", "b"}),
        (r"[^_]+\.csv", {"A.csv"}),
        (r"a.*b", {"ab", "aAb"}),
        (r"\[\d\]{2,}?", {"[0]]"}),
        (r"(?i)abc", set()),  # beyond the small reader: no example, no false alarm
        (r"\pN+", set()),
        ("", set()),
        ("(" * 100 + "a" + ")" * 100, set()),
        ("a" * 501, set()),
    ],
)
def test_examples_are_names_that_the_pattern_takes(pattern: str, some: set[str]):
    assert some <= set(examples(pattern))
    assert bool(some) == bool(examples(pattern))
