"""The rule file's schema as data: every key with its kind, default, description and example.

Validation, the example file, the reference page and the tests of misspelt keys all read this one table.
"""

from __future__ import annotations

from spikeward.rules import schema_kinds as kind
from spikeward.rules.naming import QUANTITY_GROUPS
from spikeward.rules.records import ROLES
from spikeward.rules.schema_shapes import WITH_ITS_DEFAULTS, Block, Field, Limits, ListOf, MapOf

ELSEWHERE = ("bench", "name", "column")
"""Where a quantity of the sample comes from, when not from the rule file."""

CONTENT = ("mass per volume", "amount per volume")
SAMPLE_CONTENT = (*CONTENT, "mass per mass", "amount per mass")

COLUMNS = (
    "solution", "analyte", "line", "signal", "signal_sd", "signal_rsd", "readings", "reading", "unit", "measured_at",
    "processed_at", "order", *QUANTITY_GROUPS,
)  # fmt: skip
"""What a column of an export can mean."""

_VOLUME = kind.quantity("volume", example="10 mL")
_CONTENT = kind.quantity(*CONTENT, example="10 mg/L")
_TEXTS = ListOf(kind.text(), single=True)
_HEADING = kind.text("a heading")
_ENCODING = "auto, utf-8, utf-16, cp1252 or another name of a character set"

WATCH = Block((
    Field("folder", kind.text("a folder"), "The folder, relative to the folder of this file.", required=True,
          example="inbox"),
    Field("reader", ListOf(kind.text("the name of a reader"), single=True),
          "Which of the readers take its files, in this order. Left out: all of them, in the order of this file.",
          example="readings"),
    Field("events", kind.word("auto", "native", "poll"),
          "How changes are noticed; auto polls where the file system sends no events.", "auto", example="auto"),
    Field("settle", kind.duration(), "A file is read when it has been unchanged for this long.", "2 s", example="2 s"),
    Field("output", kind.text("beside, or a folder"),
          "Where results go: beside the data, or into a folder in which the tree is mirrored, outside every watched "
          "folder.", "beside", example="beside"),
    Field("spans_folders", kind.switch(),
          "Whether one series may come from several sub-folders; its results then need an output folder.", "no",
          example="no"),
))  # fmt: skip

BENCH = Block((
    Field("files", _TEXTS, "Which files are bench files. They are claimed before any reader sees them.", required=True,
          example='"*bench*.csv"'),
    Field("key",
          MapOf(kind.text("a heading"), "batch, sample or level", keys=("batch", "sample", "level"), listed=True),
          "The headings of the columns that say which sample a row is about; sample is needed. A list such as "
          "[batch, sample] stands for headings of the same names.", required=True,
          example="{batch: Batch, sample: Sample}"),
    Field("columns", MapOf(kind.text("a heading"), "a quantity", keys=QUANTITY_GROUPS),
          "Which columns hold which quantities; units stand in the heading or in the cell.", required=True,
          example="{mass: Mass, dry_matter: Dry matter}"),
    Field("encoding", kind.text(_ENCODING), "The character set.", "auto", example="auto"),
    Field("delimiter", kind.delimiter(), "What stands between the columns.", "auto", example="auto"),
    Field("decimal", kind.word("auto", "point", "comma"),
          "The decimal sign; with auto a file whose numbers can be read both ways is refused.", "auto", example="auto"),
))  # fmt: skip

READER = Block((
    Field("format", kind.text("the name of a format"), "The format, or the name of an installed plug-in.", "delimited",
          example="delimited"),
    Field("files", _TEXTS, "Which files it takes. Files that this program writes are never read.", ("*.csv",),
          example='"*.csv"'),
    Field("encoding", kind.text(_ENCODING), "The character set.", "auto", example="auto"),
    Field("delimiter", kind.delimiter(), "What stands between the columns.", "auto", example="auto"),
    Field("quote_char", kind.character(), "What stands around a text that holds the delimiter.", '"', example="'\"'"),
    Field("comment_prefix", kind.text(may_be_empty=True), "Lines that begin with this are left out.", "",
          example="'#'", hidden=True),
    Field("decimal", kind.word("auto", "point", "comma"),
          "The decimal sign; with auto a file whose numbers can be read both ways is refused.", "auto", example="auto"),
    Field("header_contains", _TEXTS, "The table starts at the first row that holds these.", (),
          example="[Solution, Signal]"),
    Field("columns", MapOf(kind.text("a heading"), "a meaning", keys=COLUMNS),
          "What each column means. signal holds single readings, or means with signal_rsd or signal_sd and readings, "
          "the count behind a mean. reading is the number of a repeated row. "
          "Without measured_at or order, checks of order are not evaluated. processed_at decides between two exports "
          "of one reading. A quantity may stand in a column too.",
          example="{solution: Solution, analyte: Element, line: Line, signal: Signal, unit: Unit, "
                  "measured_at: Measured}"),
    Field("wide", MapOf(Block((
        Field("analyte", kind.text("an analyte"), "The analyte.", required=True, example="Cd"),
        Field("line", kind.text("a line"), "Its line or isotope.", "", example="Cd 214.4"),
        Field("signal_sd", _HEADING, "The column of its standard deviation.", "", example="Cd 214 SD"),
        Field("signal_rsd", _HEADING, "The column of its relative standard deviation.", "", example="Cd 214 RSD"),
        Field("readings", _HEADING, "The column of the count behind its mean.", "", example="Cd 214 n"),
    ), short="analyte"), "the heading of a signal column"),
          "Where each analyte has a column of its own: its heading, and the analyte, with the columns of its own "
          "scatter if there are any.",
          example="{Cd 214 (A): {analyte: Cd, line: Cd 214.4, signal_sd: Cd SD, signal_rsd: Cd RSD, readings: N}, "
                  "Pb (A): Pb}", hidden=True),
    Field("unit", kind.text(may_be_empty=True), "The unit of signals, where the file does not say it.", "",
          example="A", hidden=True),
    Field("unit_row", kind.switch(), "Whether the row under the headings holds units.", "no", example="no"),
    Field("ends_at", _TEXTS, "The table ends at a row whose first cell, the whole of it, is one of these.", (),
          example="[Mean, RSD]", hidden=True),
    Field("time_zone", kind.text("a time zone such as Europe/Lisbon"),
          "The zone of times that name none.", "", example="Europe/Lisbon"),
    Field("date_patterns", _TEXTS,
          "Patterns of dates such as '%d.%m.%Y %H:%M:%S', tried in order. Left out: year-month-day.", (),
          example="['%Y-%m-%d %H:%M:%S']", hidden=True),
    Field("already", ListOf(kind.word("blank", "internal_standard", "drift"), single=True),
          "What the instrument has corrected; it is never corrected twice.", (), example="[]"),
    Field("not_detected", _TEXTS, "What a cell says where nothing was detected.", (), example='["< DL", n.d.]'),
    Field("over_range", _TEXTS, "What a cell says where the signal was too large.", (), example="[OVER]"),
    Field("end_marker", kind.text(may_be_empty=True),
          "A file is whole when its last line begins with this; until then it is waited for.", "",
          example="End of run", hidden=True),
))  # fmt: skip

NAME = Block((
    Field("role", kind.word(*ROLES), "What the solution is.", required=True, example="sample"),
    Field("from", kind.word("solution", "file", "path"),
          "Which name is taken: of the solution, of the file, or its path below the watched folder, both without the "
          "last ending.", "solution", example="solution"),
    Field("match", kind.pattern(),
          "The pattern that the whole name must match. Its groups say what the parts mean: batch, sample, level, "
          "vessel, injection, reading, analyte, line, or a quantity.", required=True,
          example=r"'(?P<batch>[A-Z]{2}\d+)_(?P<sample>\d[A-Za-z0-9-]*)_A(?P<level>\d+)'"),
    Field("units", MapOf(kind.unit(example="mL"), "a group that is a quantity", keys=QUANTITY_GROUPS),
          "The units of groups that are quantities.", example="{addition: uL}", hidden=True),
))  # fmt: skip

SERIES = Block((
    Field("expects", Block((
        Field("levels", ListOf(kind.text("a level"), single=True),
              "The levels that a series needs. Left out: those that its preparation declares.", (),
              example="[0, 1, 2, 3]"),
        Field("readings", kind.count(), "How many readings every vessel needs.", "1", example="2"),
    )), "What a series needs to be complete.", WITH_ITS_DEFAULTS),
    Field("same_name", kind.word("refuse", "reading"),
          "A vessel that is met again at another time: refuse it, or take it as a repeated reading.", "refuse",
          example="refuse"),
    Field("lapses_after", kind.duration(),
          "A series that is not complete is given up this long after the last arrival.", "90 min", example="90 min"),
    Field("lapsed", kind.word("warn", "fail"), "The verdict of a series that was given up.", "warn", example="warn"),
    Field("closes_with", ListOf(kind.word(*ROLES), single=True),
          "Pass and warn wait until these are in, a bracket after the last vessel.", (),
          example="[bracket, process_blank, reference]"),
))  # fmt: skip

STANDARD = Block((
    Field("contents", MapOf(_CONTENT, "an analyte", "Cd"), "The content of each analyte of a mix.",
          example="{Cd: 10.02 mg/L, Pb: 50.1 mg/L}"),
    Field("analyte", kind.text("an analyte"), "The analyte, where there is only one; with content.", example="Cd",
          hidden=True),
    Field("content", _CONTENT, "Its content.", example="10 mg/L", hidden=True),
    Field("lot", kind.text(), "The lot.", "", example="EB-24-017"),
    Field("expires", kind.day(), "The last day on which it may be used; compared with the time of measurement.", "",
          example="2027-03-31"),
))  # fmt: skip

SAMPLE = Block((
    Field("mass", kind.quantity("mass", example="0.5 g", words=ELSEWHERE), "The mass of sample.", example="bench"),
    Field("volume", kind.quantity("volume", example="5 mL", words=ELSEWHERE), "The volume of a liquid sample.",
          example="5 mL", hidden=True),
    Field("digest", kind.quantity("volume", example="50 mL", words=ELSEWHERE),
          "The volume to which it was made up; the test solution.", example="50 mL"),
    Field("dry_matter", kind.dry_matter(ELSEWHERE), "The share of dry matter; the result is then of dry matter.",
          example="bench"),
    Field("dilution", kind.dilution(ELSEWHERE),
          "The dilution between digest and test solution: 1 + 4, or its factor 5.",
          example="1 + 4", hidden=True),
))  # fmt: skip

PREPARATION = Block((
    Field("for", MapOf(kind.pattern(), "batch, sample, role or analyte", keys=("batch", "sample", "role", "analyte")),
          "Which series it applies to, as patterns that match the whole word. Left out: all. The first one that "
          "applies counts.", example=r"{batch: 'MD\d+'}"),
    Field("design", kind.word("single", "flasks", "successive"),
          "single: one level without and one with an addition. flasks: every level made up to the same final volume. "
          "successive: standard added again and again to one vessel.", required=True, example="flasks"),
    Field("aliquot", Block((
        Field("volume", _VOLUME, "The same volume at every level.", example="10 mL"),
        Field("levels", MapOf(_VOLUME, "a level", "0"), "A volume for each level.", example="{0: 10 mL, 1: 9.5 mL}"),
    ), short="volume"),
          "The test solution that goes into each vessel; {levels: {0: 10 mL, 1: 9.5 mL}} where it differs.",
          WITH_ITS_DEFAULTS,
          example="10 mL"),
    Field("final", Block((Field("volume", _VOLUME, "The volume.", required=True, example="25 mL"),), short="volume"),
          "The volume to which each vessel is made up.", example="25 mL"),
    Field("additions", Block((
        Field("standard", kind.text("the name of a standard"),
              "The spiking standard. Left out: the only one of this file.", example="Mix-7"),
        Field("deliveries", kind.word("each", "total"),
              "What the volumes mean: each is added on top of the earlier ones, total is all that a level holds. "
              "Left out: each for successive, else total.", example="total"),
        Field("levels", MapOf(kind.quantity("volume", example="0.25 mL", zero=True), "a level", "1"),
              "The volume of standard by level.", example="{0: 0 mL, 1: 0.25 mL, 2: 0.5 mL, 3: 0.75 mL}"),
    )), "The standard additions.", WITH_ITS_DEFAULTS),
    Field("level_0", kind.word("as the others", "undiluted"),
          "undiluted: the level without addition was read on the test solution as it is.", "as the others",
          example="as the others"),
    Field("diluent", kind.quantity("volume", example="50 mL"), "A buffer or solvent that every vessel holds.",
          example="50 mL", hidden=True),
    Field("sample", SAMPLE,
          "The way from the test solution back to the sample. A value may be a word for where it comes from: bench (a "
          "bench file), name (of the solution) or column (of the export)."),
    Field("report_in", kind.unit(*SAMPLE_CONTENT, example="mg/kg"), "The unit of the reported result.", "",
          example="mg/kg"),
))  # fmt: skip

BLANKS = Block((
    Field("background", Block((
        Field("subtract", kind.word("signal"), "What is subtracted.", required=True, example="signal"),
    )), "Solutions of role background: their mean signal is subtracted from every reading, before volumes."),
    Field("process", Block((
        Field("subtract", kind.word("amount"), "What is subtracted.", required=True, example="amount"),
    )), "Series of role process_blank: subtracted as amount, through their own additions."),
))  # fmt: skip

_KNOWN_UNCERTAINTY = (
    Field("uncertainty", kind.quantity(*SAMPLE_CONTENT, "fraction", example="0.16 mg/kg or 5 %"),
          "The stated uncertainty; with k.", example="0.16 mg/kg"),
    Field("k", kind.number("2"), "Its coverage factor; 1 for a standard uncertainty.", example="2"),
)  # fmt: skip

KNOWN = Block((
    Field("content", kind.quantity(*SAMPLE_CONTENT, example="2.40 mg/kg"), "The content.", required=True,
          example="31.0 mg/kg"),
    *_KNOWN_UNCERTAINTY,
), short="content")  # fmt: skip

TOP = Block((
    Field("top", kind.number("0.80"), "The largest signal at which the response is still straight.", required=True,
          example="0.80"),
    Field("unit", kind.text("the unit of the signal"), "Its unit, as the export writes it.", required=True,
          example="A"),
))  # fmt: skip

RULE_FILE = Block((
    Field("station", kind.text("a name"), "The name of this bench, as pages show it.", "", example="Estuary bench"),
    Field("language", kind.word("en"), "The language of pages and sentences.", "en", example="en"),
    Field("state", kind.text("a folder"), "The folder of journal, ledger, rule texts and lock.", ".spikeward",
          example=".spikeward"),
    Field("watch", ListOf(WATCH, single=True), "The folders that are watched.", required=True),
    Field("bench", BENCH, "What the bench knows of a sample and the instrument does not."),
    Field("readers", MapOf(READER, "a reader's name", "readings"), "How each instrument writes its exports.",
          required=True),
    Field("names", ListOf(NAME),
          "What the names of solutions mean. The first rule that takes the whole name wins, so the special ones stand "
          "first. A name that none takes is reported, never dropped.", required=True,
          example=r"""
- {role: process_blank, match: '(?P<batch>[A-Z]{2}\d+)_PB(?P<sample>\d+)_A(?P<level>\d+)'}
- {role: background,    match: '(?P<batch>[A-Z]{2}\d+)_BLK(?P<sample>\d+)?(_r(?P<reading>\d+))?'}
- {role: reference,     match: '(?P<batch>[A-Z]{2}\d+)_REF-(?P<sample>[A-Za-z0-9-]+)_A(?P<level>\d+)'}
- {role: bracket,       match: '(?P<batch>[A-Z]{2}\d+)_BR(?P<sample>\d+)(_r(?P<reading>\d+))?'}
- role: sample
  from: solution
  match: '(?P<batch>[A-Z]{2}\d+)_(?P<sample>\d[A-Za-z0-9-]*)_A(?P<level>\d+)(?P<vessel>[a-c])?(_r(?P<reading>\d+))?'
  # units: {addition: uL}                       # The units of groups that are quantities.
"""),
    Field("series", SERIES, "When a series is complete.", WITH_ITS_DEFAULTS),
    Field("standards", MapOf(STANDARD, "a standard's name", "Mix-7"),
          "The spiking standards. A mix spikes several analytes with one delivery.", required=True),
    Field("preparations", ListOf(PREPARATION, single=True), "How the vessels were made.", required=True),
    Field("blanks", BLANKS, "Which blanks are subtracted, and how.", WITH_ITS_DEFAULTS),
    Field("brackets", Block((
        Field("contents", MapOf(_CONTENT, "an analyte", "Cd"), "Its contents.", required=True,
              example="{Cd: 20 ug/L, Pb: 100 ug/L}"),
    )), "The solution that is measured again and again to see whether the sensitivity holds."),
    Field("references", MapOf(Block(_KNOWN_UNCERTAINTY, others=MapOf(KNOWN, "an analyte", "Cd")), "a sample's name",
                              "MUD-1"),
          "Known contents of reference materials and check samples. uncertainty and k hold for each analyte, or stand "
          "with one.",
          example="""
MUD-1: {Cd: 2.40 mg/kg, uncertainty: 0.16 mg/kg, k: 2}
MUD-2: {Cd: {content: 0.71 mg/kg, uncertainty: 5 %, k: 2}, Pb: 31.0 mg/kg}
"""),
    Field("range", MapOf(TOP, "an analyte or line", "Cd 214.4"), "How far the response is straight."),
    Field("report", Block((
        Field("coverage", kind.share("95 %"), "The coverage of intervals.", "95 %", example="95 %"),
    )), "How results are reported.", WITH_ITS_DEFAULTS),
    Field("checks", Block((
        Field("use", kind.text("the name of a rule pack"), "The rule pack whose limits hold.", "pack:general",
              example="pack:general"),
    ), others=MapOf(Limits(), "the name of a check", "correlation")),
          "Limits that differ from those of the pack, by check; off leaves a check out.", WITH_ITS_DEFAULTS,
          example="""
use: pack:general
correlation: {fail_below: 0.995}
expanded_uncertainty: {warn_above: 20 %, fail_above: 40 %}
reference: {fail_outside: [80 %, 120 %]}
"""),
    Field("decisions", kind.text("a file name"), "The file beside the data in which people write what they decide.",
          "decisions.yaml", example="decisions.yaml"),
))  # fmt: skip

