"""`vet`: what is wrong in a rule file, how real names are read, and everything in force with its defaults."""

from __future__ import annotations

from collections.abc import Iterator

from spikeward.daemon.claims import Claims
from spikeward.daemon.config_effective import effective
from spikeward.daemon.disk import RealDisk
from spikeward.daemon.names import shown
from spikeward.daemon.station import Places, RuleFile, read_rule_file
from spikeward.daemon.survey import survey
from spikeward.daemon.workers import ReadJob, read_one
from spikeward.rules.naming import Namer, Understood
from spikeward.rules.records import Layout
from spikeward.rules.rulebook import Rulebook, Watch

_FILES = 40  # read to show names; more would tell nothing new
_NAMES = 60


def vet(config: str, short: bool) -> int:
    """Print what is to be said of a rule file; the exit code: 0 usable, 1 it has an error.

    Raises
    ------
    Trouble : the file cannot be opened
    """
    rule_file = read_rule_file(config)
    for problem in rule_file.problems:
        print(problem.line_text() if short else problem.block_text(rule_file.text))
    if rule_file.rules is None or rule_file.errors:
        count = len(rule_file.errors)
        print(f"{rule_file.path}: {count} {'error' if count == 1 else 'errors'}; the rule file cannot be used as it is.")
        return 1
    if not short:
        for line in (*_names(rule_file, rule_file.rules), "", "In force, with every default:", effective(rule_file.rules)):
            print(line)
    warnings = len(rule_file.problems)
    print(f"{rule_file.path}: usable" + (f", {warnings} warning{'s' if warnings > 1 else ''}." if warnings else "."))
    return 0


def _names(rule_file: RuleFile, rules: Rulebook) -> Iterator[str]:
    """How the files that lie in the watched folders now would be read."""
    places = Places(rule_file.path.absolute().parent)
    claims, namer = Claims(rules), Namer(rules.names)
    for watch in rules.watches:
        listing = survey(RealDisk(), places.inputs(watch))
        if listing.away:
            yield f"{watch.folder}: {listing.away}; no real names can be shown"
            continue
        yield f"{watch.folder}: {len(listing.files)} files"
        names: dict[tuple[str, str], None] = {}
        for path in sorted(listing.files)[:_FILES]:
            claim = claims.of(path, watch)
            if claim is None:
                yield f"  {shown(path)}: no pattern under files of a reader takes it"
            elif claim.layout is not None:
                yield from _solutions(f"{places.inputs(watch)}/{path}", path, claim.layout, watch, names)
        for solution, path in list(names)[:_NAMES]:
            yield f"  {_told(namer, solution, path)}"
        if len(listing.files) > _FILES or len(names) > _NAMES:
            yield "  and more of the same folder, not shown"


def _solutions(
    place: str, path: str, layout: Layout, watch: Watch, names: dict[tuple[str, str], None]
) -> Iterator[str]:
    """Collect the names in one file; a file that cannot be read says so."""
    reply = read_one(ReadJob(place, (watch.folder, path, ""), layout))
    if reply.sentence:
        yield f"  {shown(path)}: {reply.sentence}"
    for entry in reply.table.entries if reply.table else ():
        names.setdefault((entry.solution, path if not entry.solution else ""), None)


def _told(namer: Namer, solution: str, path: str) -> str:
    understood = namer.understand(solution, path)
    name = f"'{shown(solution or path)}'"
    if understood is None:
        return f"{name}: no naming rule takes it"
    takers = namer.takers(solution, path)
    also = f"; also taken by the rule in line {takers[1].line}, the first one counts" if len(takers) > 1 else ""
    return f"{name}: {_meaning(understood)}{also}"


def _meaning(understood: Understood) -> str:
    groups = ", ".join(f"{group} {value}" for group, value in understood.groups.items())
    return f"{understood.rule.role}, {groups}" if groups else understood.rule.role
