"""The rule file's schema as data: every key with its kind, default, description and example.

Validation, the example file, the reference page and the tests of misspelt keys all read this one table.
"""

from __future__ import annotations

from spikeward.rules import schema_kinds as kind
from spikeward.rules.naming import QUANTITY_GROUPS
from spikeward.rules.records import ROLES
from spikeward.rules.schema_preparation import PREPARATION, SOME_AMOUNT, SOME_CONTENT, STANDARD, content
from spikeward.rules.schema_shapes import WITH_ITS_DEFAULTS, Block, Field, Limits, ListOf, MapOf

COLUMNS = (
    "solution", "analyte", "line", "signal", "signal_sd", "signal_rsd", "readings", "reading", "block", "unit",
    "measured_at", "processed_at", "order", *QUANTITY_GROUPS,
)  # fmt: skip
"""What a column of an export can mean."""

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
          "the count behind a mean. reading is the number of a repeated row, block the run of a series that was read "
          "in several. "
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

BLANKS = Block((
    Field("background", Block((
        Field("subtract", kind.word("signal"), "What is subtracted.", required=True, example="signal"),
    )), "Solutions of role background: their mean signal is subtracted from every reading, before volumes."),
    Field("process", Block((
        Field("subtract", kind.word("amount"), "What is subtracted.", required=True, example="amount"),
    )), "Series of role process_blank: subtracted as amount, through their own additions."),
    Field("reagent", Block((
        Field("subtract", kind.word("amount"), "What is subtracted.", required=True, example="amount"),
        Field("amounts", MapOf(Block((
            Field("amount", SOME_AMOUNT, "The amount in each vessel.", required=True, example="0.5 ng"),
            Field("uncertainty", SOME_AMOUNT, "Its standard uncertainty.", example="0.1 ng"),
        ), short="amount"), "an analyte", "Cd"),
              "The amounts, where they are known. Left out: from series of role reagent_blank.",
              example="{Cd: 0.5 ng}"),
    )), "What the reagents bring into every vessel: the same amount in each, subtracted as amount.",
          example="{subtract: amount, amounts: {Cd: {amount: 0.5 ng, uncertainty: 0.1 ng}}}", hidden=True),
))  # fmt: skip

_KNOWN_UNCERTAINTY = (
    Field("uncertainty", kind.quantity(*SOME_CONTENT, "fraction", example="0.16 mg/kg or 5 %"),
          "The stated uncertainty; with k.", example="0.16 mg/kg"),
    Field("k", kind.number("2"), "Its coverage factor; 1 for a standard uncertainty.", example="2"),
)  # fmt: skip

KNOWN = Block((
    Field("content", kind.quantity(*SOME_CONTENT, example="2.40 mg/kg"), "The content.", required=True,
          example="31.0 mg/kg"),
    *_KNOWN_UNCERTAINTY,
), short="content")  # fmt: skip

TOP = Block((
    Field("top", kind.number("0.80"), "The largest signal at which the response is still straight.", required=True,
          example="0.80"),
    Field("unit", kind.text("the unit of the signal"), "Its unit, as the export writes it.", required=True,
          example="A"),
))  # fmt: skip

SIGNAL = Block((
    Field("signal", kind.number("0.0008"), "The signal.", required=True, example="0.0008"),
    Field("unit", kind.text("the unit of the signal"), "Its unit, as the export writes it.", required=True,
          example="A"),
))  # fmt: skip

NOISE = Block((
    Field("floor", kind.number("0.0008"), "The noise of a signal near zero.", required=True, example="0.0008"),
    Field("relative", kind.share("1.0 %"), "What comes to it in proportion to the signal, in quadrature.",
          example="1.0 %"),
    Field("unit", kind.text("the unit of the signal"), "The unit of floor, as the export writes it.", required=True,
          example="A"),
))  # fmt: skip

RULE_FILE = Block((
    Field("station", kind.text("a name"), "The name of this bench, as pages show it.", "", example="Estuary bench"),
    Field("units", MapOf(kind.unit(example="mg/L"), "ppm, ppb or ppt", keys=("ppm", "ppb", "ppt")),
          "What ppm, ppb and ppt mean in this file; they are refused where it does not say.",
          example="{ppm: mg/L}", hidden=True),
    Field("molar_masses", MapOf(kind.quantity("mass per amount", example="112.414 g/mol"), "an analyte", "Cd"),
          "Molar masses, where contents go from mass to amount of substance or back.",
          example="{Cd: 112.414 g/mol}", hidden=True),
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
        Field("contents", MapOf(content(), "an analyte", "Cd"), "Its contents.", required=True,
              example="{Cd: 20 ug/L, Pb: 100 ug/L}"),
        Field("drift", kind.word("check", "correct"),
              "check: a drift of the sensitivity is only told. correct: each reading is divided by the sensitivity at "
              "its time, between the brackets on both sides.", "check", example="check"),
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
    Field("calibration", Block((
        Field("contents", MapOf(MapOf(content(), "an analyte", "Cd"), "a calibration solution's name", "S1"),
              "The contents of each solution of role calibration by the sample that its name gives. Left out: the "
              "group content of the name.", example="{S0: {Cd: 0 ug/L}, S1: {Cd: 5 ug/L}, S2: {Cd: 10 ug/L}}"),
    )), "Plain standards in the same run: their slope is set beside that of the additions, and the content that they "
        "would have given beside the result.",
        example="{contents: {S0: {Cd: 0 ug/L}, S1: {Cd: 5 ug/L}, S2: {Cd: 10 ug/L}}}", hidden=True),
    Field("lines", MapOf(Block((
        Field("report", kind.text("a line"), "The line or isotope that is reported.", required=True,
              example="Cd 214.4"),
        Field("agree", kind.share("10 %"),
              "How near the others must be. Left out: as near as the scatter of their fits lets expect.",
              example="10 %"),
    ), short="report"), "an analyte", "Cd"),
          "Where an analyte is read at several lines or isotopes: each is solved, one is reported.",
          example="{Cd: {report: Cd 214.4, agree: 10 %}}", hidden=True),
    Field("overlap", ListOf(Block((
        Field("method", kind.word("generalised", "h_point"),
              "generalised: every analyte was added on its own, and as many lines or more are read. h_point: two lines "
              "at which one interferent answers equally.", required=True, example="generalised"),
        Field("analytes", ListOf(kind.text("an analyte"), single=True), "The analytes that are solved.", required=True,
              example="[Cd, As]"),
        Field("at", ListOf(kind.text("an analyte with its line")), "The lines that are read.", required=True,
              example="[Cd 228.8, As 228.8]"),
        Field("interferent", kind.text("a name"), "The interferent of h_point.", "", example="humic matter"),
    ))), "Analytes whose signals overlap, solved together.",
          example="[{method: h_point, analytes: [Cd], at: [Cd 226.5, Cd 228.8], interferent: humic matter}]",
          hidden=True),
    Field("below_detection", Block((
        Field("use", kind.word("refuse", "leave out", "substitute"),
              "What a vessel is taken for whose signal was not detected, never zero: the series is refused, the vessel "
              "is left out of the line, or the signal under signals stands for it.", "refuse", example="leave out"),
        Field("signals", MapOf(SIGNAL, "an analyte or line", "Cd 214.4"), "The signals that stand for it.",
              example="{Cd 214.4: {signal: 0.0008, unit: A}}"),
    ), short="use"), "Vessels below detection.", WITH_ITS_DEFAULTS,
          example="{use: substitute, signals: {Cd 214.4: {signal: 0.0008, unit: A}}}", hidden=True),
    Field("precision", Block((
        Field("from", kind.word("own", "pooled", "declared"),
              "own: the scatter of each series. pooled: that of the batch, once it closes and if the series agree. "
              "declared: the noise that stands here.", "own", example="own"),
        Field("noise", MapOf(NOISE, "an analyte or line", "Cd 214.4"),
              "The standard deviation of the signal of one vessel, each made and read anew, for declared.",
              example="{Cd 214.4: {floor: 0.0008, relative: 1.0 %, unit: A}}", hidden=True),
        Field("weights", kind.word("signal", "equal"),
              "signal: signals of all vessels are equally noisy, and a point counts less the more its signal was "
              "scaled up for its volume. equal: every point counts the same.", "signal", example="signal"),
    ), short="from"), "Where the scatter comes from that the uncertainty is made of.", WITH_ITS_DEFAULTS),
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

