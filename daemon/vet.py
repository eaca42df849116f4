"""`vet`: what is wrong in a rule file, how real names are read, and everything in force with its defaults."""

from __future__ import annotations

from collections.abc import Iterator

from spikeward.daemon.claims import Claims
from spikeward.daemon.disk import RealDisk
from spikeward.daemon.names import shown
from spikeward.daemon.reading import ReadJob, read_file
from spikeward.daemon.rule_file.effective import effective
from spikeward.daemon.station import Places, RuleFile, read_rule_file
from spikeward.daemon.survey import survey
from spikeward.rules.naming import GROUPS, Namer, Understood
from spikeward.rules.records import Layout
from spikeward.rules.rulebook import Rulebook, Watch

_FILES = 60  # read to show names; more would tell nothing new
_EXAMPLES = 3  # names shown for each rule


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
        print(f"{rule_file.path}: {count} {'error' if count == 1 else 'errors'}; it cannot be used as it is.")
        return 1
    if not short:
        for line in _names(rule_file, rule_file.rules):
            print(line)
        print("\nIn force, with every default:")
        print(effective(rule_file.rules))
    warnings = len(rule_file.problems)
    print(f"{rule_file.path}: usable" + (f", {warnings} warning{'s' if warnings > 1 else ''}." if warnings else "."))
    return 0


def _names(rule_file: RuleFile, rules: Rulebook) -> Iterator[str]:
    """How the files that lie in the watched folders now would be read."""
    places = Places(rule_file.path.absolute().parent)
    claims = Claims(rules)
    for watch in rules.watches:
        listing = survey(RealDisk(), places.inputs(watch))
        if listing.away:
            yield f"{watch.folder}: {listing.away}; no real names can be shown"
            continue
        paths = sorted(listing.files)
        some = paths[:: max(1, len(paths) // _FILES)]
        looked = f", {len(some)} of them looked at" if len(some) < len(paths) else ""
        yield f"{watch.folder}: {len(paths)} files{looked}"
        names: dict[tuple[str, str], None] = {}
        for path in some:
            claim = claims.of(path, watch)
            if claim is None:
                yield f"  {shown(path)}: no pattern under files of a reader takes it"
            elif claim.layout is not None:
                yield from _solutions(f"{places.inputs(watch)}/{path}", path, claim.layout, watch, names)
        yield from _by_rule(Namer(rules.names), list(names))


def _solutions(
    place: str, path: str, layout: Layout, watch: Watch, names: dict[tuple[str, str], None]
) -> Iterator[str]:
    """Collect the names in one file; a file that cannot be read says so."""
    reply = read_file(ReadJob(place, (watch.folder, path, ""), layout))
    if reply.sentence:
        yield f"  {shown(path)}: {reply.sentence}"
    for entry in reply.table.entries if reply.table else ():
        names.setdefault((entry.solution, path), None)


def _by_rule(namer: Namer, names: list[tuple[str, str]]) -> Iterator[str]:
    """For each naming rule some names that it took, and how; then every name that none takes."""
    taken: dict[int, dict[str, str]] = {}
    for solution, path in names:
        understood = namer.understand(solution, path)
        name = shown(solution or path)
        if understood is None:
            yield f"  '{name}': no naming rule takes it"
            continue
        takers = namer.takers(solution, path)
        also = f" (the rule in line {takers[1].line} would take it too; the first counts)" if len(takers) > 1 else ""
        taken.setdefault(understood.position, {}).setdefault(name, f"{_meaning(understood)}{also}")
    for _, found in sorted(taken.items()):
        for name, meaning in list(found.items())[:_EXAMPLES]:
            yield f"  '{name}': {meaning}"
        if len(found) > _EXAMPLES:
            yield f"    … and {len(found) - _EXAMPLES} more by the same rule"


def _meaning(understood: Understood) -> str:
    groups = ", ".join(f"{group} {understood.groups[group]}" for group in GROUPS if group in understood.groups)
    return f"{understood.rule.role}: {groups}" if groups else understood.rule.role
