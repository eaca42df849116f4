"""What the parts of a rule file say of each other: the third layer, after syntax and shape."""

from __future__ import annotations

import codecs
from collections.abc import Mapping, Sequence
from datetime import datetime
from typing import Any
from zoneinfo import ZoneInfo, available_timezones

import re2

from spikeward.daemon.rule_file.folders import check_decisions, check_folders
from spikeward.daemon.rule_file.names import check_names, groups_of
from spikeward.daemon.rule_file.preparations import analytes_of, check_preparations, levels_of, told_elsewhere
from spikeward.daemon.rule_file.problems import ERROR, WARNING
from spikeward.daemon.rule_file.responses import check_responses
from spikeward.daemon.rule_file.samples import check_samples, result_dimensions
from spikeward.daemon.rule_file.signals import check_signals
from spikeward.daemon.rule_file.walk import Walker, near
from spikeward.parsers.registry import formats
from spikeward.rules.naming import number_of
from spikeward.rules.quantities import UNITS
from spikeward.rules.records import SERIES_ROLES
from spikeward.rules.schema_kinds import one_of

Values = Mapping[str, Any]


def check_meaning(value: Values, walker: Walker) -> None:
    """Look at everything whose parts are sound enough to be looked at."""
    check_folders(value, walker)
    _check_units(value, walker)
    check_decisions(value["decisions"], walker)
    _check_watches(value, walker)
    for name, reader in (value["readers"] or {}).items():
        if reader is not None and walker.sound(f"readers.{name}"):
            _check_reader(reader, f"readers.{name}", value, walker)
    _check_bench(value, walker)
    check_names(value, walker)
    _check_standards(value, walker)
    check_preparations(value, walker)
    check_samples(value, walker)
    check_responses(value, walker)
    check_signals(value, walker)
    _check_applies(value, walker)
    _check_levels(value, walker)
    _check_roles(value, walker)
    _check_analytes(value, walker)
    _check_references(value, walker)


_PARTS_OF = {
    "ppm": {"mass per volume": "mg/L", "mass per mass": "mg/kg"},
    "ppb": {"mass per volume": "ug/L", "mass per mass": "ug/kg"},
    "ppt": {"mass per volume": "ng/L", "mass per mass": "ng/kg"},
}


def _check_units(value: Values, walker: Walker) -> None:
    """What ppm may stand for: a millionth of mass in mass, or what that is in a litre of water."""
    for name, unit in (value["units"] or {}).items():
        possible = _PARTS_OF[name]
        if unit is None:
            continue
        dimension, factor = UNITS[unit]
        if dimension not in possible or factor != UNITS[possible[dimension]][1]:
            expected = one_of(tuple(possible.values()))
            walker.at(f"units.{name}", "R015", f"{unit} is not what {name} stands for", expected)


def _check_watches(value: Values, walker: Walker) -> None:
    readers = value["readers"] or {}
    if not walker.sound("watch", "readers"):
        return
    if not readers:
        walker.at("readers", "R010", "there is no reader", "", "add one, with the columns of the export")
    watches = value["watch"]
    if not watches:
        walker.at("watch", "R010", "no folder is watched", "", "add folder: inbox")
    for number, watch in enumerate(watches):
        for position, name in enumerate(watch["reader"] or ()):
            if name not in readers:
                meant = near(name, readers)
                hint = f"did you mean {meant}?" if meant else f"possible here: {one_of(tuple(readers))}"
                walker.at(f"watch[{number}].reader[{position}]", "R030", f"there is no reader '{name}'", "", hint)
        if watch["reader"] == []:
            walker.at(f"watch[{number}].reader", "R013", "no reader is named", "", "name one, or delete the key")
    used = {name for watch in watches for name in watch["reader"] or readers}
    for name in readers:
        if name not in used and walker.sound("watch"):
            walker.at(f"readers.{name}", "R041", f"no watched folder uses the reader '{name}'", "",
                      "name it under watch, or delete it", WARNING)  # fmt: skip


def _check_reader(reader: Values, path: str, value: Values, walker: Walker) -> None:
    _check_time_zone(reader["time_zone"], f"{path}.time_zone", walker)
    _check_encoding(reader["encoding"], f"{path}.encoding", walker)
    for number, pattern in enumerate(reader["date_patterns"]):
        _check_date_pattern(pattern, f"{path}.date_patterns[{number}]", walker)
    _check_format(reader["format"], f"{path}.format", walker)
    columns, wide = reader["columns"], reader["wide"]
    if reader["format"] != _DELIMITED:
        return  # other formats name their own fields
    if not columns.get("signal") and not wide:
        walker.at(f"{path}.columns", "R010", "no column of signals is named", "", "add signal: and its heading")
    if columns.get("signal") and wide:
        walker.at(
            f"{path}.wide",
            "R031",
            "signals stand in one column and in one for each analyte",
            "",
            "delete one of the two",
        )
    _check_scatter(columns, wide, path, walker)
    if not walker.sound("names", "standards"):
        return
    sources = {rule["from"] for rule in value["names"] or () if rule}
    if "solution" not in columns and sources == {"solution"}:
        told = "no column of solutions is named, and no rule under names reads the name of the file"
        walker.at(f"{path}.columns", "R010", told, "", "add solution: and its heading")
    groups = {group for rule in value["names"] or () if rule for group in groups_of(rule["match"])}
    if "analyte" not in columns and not wide and "analyte" not in groups and len(analytes_of(value)) != 1:
        hint = "add analyte: and its heading, or (?P<analyte>…) to the patterns under names"
        walker.at(f"{path}.columns", "R010", "nothing says the analyte, and the standards hold several", "", hint)


_SCATTER = ("signal_rsd", "signal_sd")
_REPEATED_ROWS = "for repeated rows use reading: for their number, or series: same_name: reading"


def _check_scatter(columns: Values, wide: Values, path: str, walker: Walker) -> None:
    """A scatter without the count behind it, the other way about, and one scatter for several analytes."""
    places = {f"{path}.columns": columns, **{f"{path}.wide.{heading}": own for heading, own in wide.items()}}
    scattered = {where: any(each.get(spread) for spread in _SCATTER) for where, each in places.items()}
    for where, each in places.items():
        for spread in _SCATTER:
            if each.get(spread) and not (each.get("readings") or columns.get("readings")):
                told = f"{spread} is the scatter of single readings, whose number is not given"
                walker.at(f"{where}.{spread}", "R010", told, "", "add readings: and its heading")
        # A common count goes with the scatter of any column, an own count with its own or a common one.
        used = any(scattered.values()) if each is columns else scattered[where] or scattered[f"{path}.columns"]
        if each.get("readings") and not used:
            told = "readings is the count behind a mean, and no column holds the scatter of the mean"
            walker.at(f"{where}.readings", "R031", told, "", f"add signal_sd or signal_rsd; {_REPEATED_ROWS}")
    for spread in _SCATTER:
        if spread in columns and len(wide) > 1:
            told = f"one column of {spread} for {len(wide)} columns of signals"
            hint = f"write {spread} beside each analyte under wide, such as {{analyte: Cd, {spread}: Cd SD}}"
            walker.at(f"{path}.columns.{spread}", "R031", told, "", hint)


_DELIMITED = "delimited"


def _check_format(name: str, path: str, walker: Walker) -> None:
    if name == _DELIMITED or name in (installed := formats()):  # looking for plug-ins takes a while
        return
    meant = near(name, installed)
    hint = f"did you mean {meant}?" if meant else "install the package that reads it"
    walker.at(path, "R030", f"no reader is called '{name}'", one_of(installed), hint)


def _check_time_zone(name: str, path: str, walker: Walker) -> None:
    if not name:
        return
    try:
        ZoneInfo(name)
    except (ValueError, OSError, LookupError):
        meant = near(name, available_timezones())
        hint = f"did you mean {meant}?" if meant else ""
        walker.at(path, "R017", f"'{name}' is not a time zone", "a name such as Europe/Lisbon, or UTC", hint)


def _check_encoding(name: str, path: str, walker: Walker) -> None:
    try:
        known = name == "auto" or bool(codecs.lookup(name)) and "\n".encode(name) is not None
    except (LookupError, ValueError):
        known = False
    if not known:
        walker.at(path, "R017", f"'{name}' is not a character set", "auto, utf-8, utf-16, cp1252 or another name")


_SOME_TIME = datetime(2027, 3, 31, 21, 45, 59)


def _check_date_pattern(pattern: str, path: str, walker: Walker) -> None:
    try:
        datetime.strptime(_SOME_TIME.strftime(pattern), pattern)
        sound = "%" in pattern
    except ValueError:
        sound = False
    if not sound:
        walker.at(path, "R017", f"'{pattern}' is not a pattern of a date", "one such as '%d.%m.%Y %H:%M:%S'")


def _check_bench(value: Values, walker: Walker) -> None:
    if value["bench"] is None or not walker.sound("bench"):
        return
    if "sample" not in value["bench"]["key"]:
        walker.at("bench.key", "R010", "the heading of the sample is missing", "", "add sample: and its heading")
    if not value["bench"]["columns"]:
        walker.at("bench.columns", "R010", "no column is named", "", "add mass: and its heading")
    _check_encoding(value["bench"]["encoding"], "bench.encoding", walker)


def _check_standards(value: Values, walker: Walker) -> None:
    if value["standards"] == {}:
        walker.at("standards", "R010", "there is no standard", "", "add one: Cd-10: {analyte: Cd, content: 10 mg/L}")
    if value["preparations"] == []:
        walker.at("preparations", "R010", "there is no preparation", "", "add one, with design and additions")
    if value["names"] == []:
        walker.at("names", "R010", "there is no naming rule", "", "add one, with role and match")
    for name, standard in (value["standards"] or {}).items():
        path = f"standards.{name}"
        if standard is None or not walker.sound(path):
            continue
        mix, analyte, content = standard["contents"], standard["analyte"], standard["content"]
        if mix and (analyte or content):
            walker.at(path, "R031", "the standard has contents and a content", "", "delete one of the two")
        elif not mix and not (analyte and content):
            hint = "add analyte and content, or contents: {Cd: 10 mg/L} for a mix"
            walker.at(path, "R010", "the content of the standard is missing", "", hint)


def _check_applies(value: Values, walker: Walker) -> None:
    """Preparations that an earlier one leaves nothing for, and roles that none applies to."""
    if not walker.sound("preparations", "names"):
        return
    preparations = value["preparations"] or []
    for number, each in enumerate(preparations):
        for before in range(number):
            if preparations[before]["for"].items() <= each["for"].items():
                line = walker.places[f"preparations[{before}]"].line
                told = f"the preparation in line {line} applies first to all that this one is for"
                walker.at(f"preparations[{number}]", "R040", told, "", "put the special one first", WARNING)
                break
    roles = {rule["role"]: f"names[{number}].role" for number, rule in enumerate(value["names"] or ())}
    for role, path in roles.items():
        if role in SERIES_ROLES and not any(
            re2.fullmatch(each["for"].get("role", ".*"), role) for each in preparations
        ):
            walker.at(
                path,
                "R030",
                f"no preparation applies to role {role}",
                "",
                "widen the role in a 'for' under preparations",
            )


def _check_levels(value: Values, walker: Walker) -> None:
    """Levels that a series waits for, and that no preparation makes."""
    if not walker.sound("series", "preparations"):
        return
    expected = [number_of(level) for level in value["series"]["expects"]["levels"]]
    path = "series.expects.levels"
    for level in dict.fromkeys(expected):
        if expected.count(level) > 1:
            walker.at(path, "R031", f"level {level} stands there twice", "", "delete one of the two")
    if "addition" in set.union(*told_elsewhere(value).values()):
        return
    made = [levels_of(each) for each in value["preparations"] or ()]
    for number, levels in enumerate(made):
        lacking = [level for level in dict.fromkeys(expected) if level not in levels]
        if not levels or not lacking:
            continue
        # Where another preparation makes them all, series of this one wait in vain, but not every series.
        partly = any(set(expected) <= other for other in made)
        where = walker.line_of(f"preparations[{number}].additions.levels")
        told = f"{_these(lacking)} expected, and the preparation in line {where} says no addition for that"
        hint = "add it under additions: levels, or delete it here; left out, each preparation says its own levels"
        walker.at(path, "R043" if partly else "R031", told, "", hint, WARNING if partly else ERROR)


def _these(levels: Sequence[str]) -> str:
    if len(levels) == 1:
        return f"level {levels[0]} is"
    return f"levels {', '.join(levels[:-1])} and {levels[-1]} are"


def _check_roles(value: Values, walker: Walker) -> None:
    """Roles that something waits for or subtracts, and that no naming rule gives."""
    if not walker.sound("names"):
        return
    named = {rule["role"] for rule in value["names"] or () if rule}
    asked: list[tuple[str, tuple[str, ...]]] = [
        (f"series.closes_with[{number}]", (role,))
        for number, role in enumerate((value["series"] or {}).get("closes_with") or ())
        if role
    ]
    blanks = value["blanks"] or {}
    asked += [("blanks.background", ("background",))] if blanks.get("background") else []
    asked += [("blanks.process", ("process_blank",))] if blanks.get("process") else []
    asked += [("brackets", ("bracket",))] if value["brackets"] and walker.sound("brackets") else []
    asked += [("references", ("reference", "check"))] if value["references"] else []
    for path, roles in asked:
        if not named & set(roles):
            hint = f"add a rule with role: {roles[0]} under names, or delete it here"
            walker.at(path, "R030", f"no naming rule has the role {one_of(roles)}", "", hint)


def _check_analytes(value: Values, walker: Walker) -> None:
    """Analytes of brackets and references that no standard holds."""
    if not walker.sound("standards"):
        return
    analytes = analytes_of(value)
    places = [(f"brackets.contents.{each}", each) for each in (value["brackets"] or {}).get("contents") or {}]
    places += [
        (f"references.{sample}.{each}", each)
        for sample, known in (value["references"] or {}).items()
        for each in known or {}
        if each not in ("uncertainty", "k")
    ]
    for path, analyte in places:
        if analyte not in analytes:
            known = (*analytes, "uncertainty", "k") if path.startswith("references") else analytes
            meant = near(analyte, known)
            hint = f"did you mean {meant}?" if meant else f"possible here: {one_of(tuple(sorted(analytes)))}"
            walker.at(path, "R030", f"no standard holds '{analyte}'", "", hint, key=True)


def _check_references(value: Values, walker: Walker) -> None:
    if not walker.sound("references"):
        return
    reached: set[str] = set()
    if walker.sound("preparations", "standards"):
        reached = {each for one in value["preparations"] or () for each in result_dimensions(one, value)}
    for sample, known in (value["references"] or {}).items():
        path = f"references.{sample}"
        _check_coverage(known, path, walker)
        analytes = {name: each for name, each in known.items() if name not in ("uncertainty", "k")}
        if not analytes:
            walker.at(path, "R010", "no content is known", "", "add an analyte and its content, such as Cd: 2.40 mg/kg")
        for analyte, each in analytes.items():
            where, content = f"{path}.{analyte}", each["content"]
            _check_coverage(each, where, walker)
            stated = each if each["uncertainty"] is not None else known
            if stated["uncertainty"] is not None and stated["uncertainty"].dimension not in (
                content.dimension,
                "fraction",
            ):
                told = f"the uncertainty is a {stated['uncertainty'].dimension}, the content a {content.dimension}"
                walker.at(where, "R015", told, "", "give both in one unit")
            if reached and content.dimension not in reached:
                told = f"{content} is a {content.dimension}; results are {one_of(tuple(sorted(reached)))}"
                walker.at(where, "R015", told, "", "give the content in the unit of the report")


def _check_coverage(stated: Values, path: str, walker: Walker) -> None:
    if stated["uncertainty"] is not None and stated["k"] is None:
        hint = "add k: 2, or what the certificate says; 1 for a standard uncertainty"
        walker.at(f"{path}.uncertainty", "R010", "the coverage factor k is missing", "", hint)
    elif stated["uncertainty"] is None and stated["k"] is not None:
        walker.at(f"{path}.k", "R010", "k has no uncertainty", "", "add uncertainty, or delete k")
