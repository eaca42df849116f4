"""`vet`: what is wrong in a rule file, how the files that lie there now are read, and everything in force."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

from spikeward.daemon.claims import DECISIONS, Claim, Claims
from spikeward.daemon.decisions import read_decisions
from spikeward.daemon.disk import RealDisk
from spikeward.daemon.names import shown
from spikeward.daemon.reading import ReadJob, read_file
from spikeward.daemon.rule_file.effective import effective
from spikeward.daemon.station import Places, read_rule_file
from spikeward.daemon.survey import survey
from spikeward.rules.naming import GROUPS, Namer, Source, Understood, name
from spikeward.rules.records import SERIES_ROLES, Layout, Reading, Table
from spikeward.rules.rulebook import BenchRule, Rulebook, Watch

_FILES = 60  # exports read to show names; more would tell nothing new
_EXAMPLES = 3  # names shown for each rule
_LARGEST = 1 << 20  # bytes of a decisions file


def vet(config: str, short: bool) -> int:
    """Print what is to be said of a rule file and of the files in its watched folders.

    Returns
    -------
    the exit code: 0 usable; 1 it has an error, or no export of a watched folder can be read with it

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
    looks = [
        _Look(rule_file.rules, Places(rule_file.path.absolute().parent), watch) for watch in rule_file.rules.watches
    ]
    for look in looks:
        for line in look.lines(short):
            print(line)
    if not short:
        print("\nIn force, with every default:")
        print(effective(rule_file.rules))
    warnings = len(rule_file.problems) + sum(look.warnings for look in looks)
    told = f"usable, {warnings} warning{'s' if warnings > 1 else ''}" if warnings else "usable"
    print(f"{rule_file.path}: {'; '.join([told, *(verdict for look in looks if (verdict := look.verdict))])}.")
    return 1 if any(look.hopeless for look in looks) else 0


@dataclass(slots=True)
class _Count:
    looked: int = 0
    unread: int = 0

    @property
    def hopeless(self) -> bool:
        """Whether there were files and none could be read."""
        return 0 < self.looked == self.unread


@dataclass(slots=True)
class _Look:
    """One watched folder: how the files that lie in it now are read under a rule file."""

    rules: Rulebook
    places: Places
    watch: Watch
    warnings: int = 0
    _exports: _Count = field(default_factory=_Count)
    _others: _Count = field(default_factory=_Count)
    _names: dict[tuple[str, str], None] = field(default_factory=dict)

    @property
    def verdict(self) -> str:
        """How many of the files could be read; empty where there are none."""
        looked, unread = self._exports.looked + self._others.looked, self._exports.unread + self._others.unread
        if not looked:
            return ""
        files = f"{looked} file{'' if looked == 1 else 's'} in {self.watch.folder}"
        return f"{unread} of {files} could not be read" if unread else f"{files} could be read"

    @property
    def hopeless(self) -> bool:
        """Whether the rule file reads none of the exports, or nothing else where there are no exports."""
        return self._exports.hopeless or (not self._exports.looked and self._others.hopeless)

    def lines(self, short: bool) -> Iterator[str]:
        """What is wrong in the files; unless ``short`` also how many there are, and how their names are read."""
        folder = self.watch.folder
        listing = survey(RealDisk(), self.places.inputs(self.watch))
        if listing.away:
            yield f"{folder}: {listing.away}; no real names can be shown"
            return
        claims = Claims(self.rules)
        claimed = {path: claims.of(path, self.watch) for path in sorted(listing.files)}
        # Bench and decisions files are few, and every one counts.
        few = [path for path, claim in claimed.items() if claim is not None and claim.layout is None]
        exports = [path for path in claimed if path not in few]
        some = exports[:: max(1, len(exports) // _FILES)]
        if not short:
            looked = f", {len(few) + len(some)} of them looked at" if len(some) < len(exports) else ""
            yield f"{folder}: {len(claimed)} file{'' if len(claimed) == 1 else 's'}{looked}"
        namer = Namer(self.rules.names)
        for path in (*few, *some):
            yield from (f"{folder}/{line}" if short else f"  {line}" for line in self._file(path, claimed[path], namer))
        if not short:
            yield from _by_rule(namer, list(self._names))

    def _file(self, path: str, claim: Claim | None, namer: Namer) -> Iterator[str]:
        """Everything that is wrong in one file."""
        if claim is None:
            yield f"{shown(path)}: no pattern under files of a reader takes it"
        elif claim == DECISIONS:
            yield from self._decisions(path)
        elif claim.layout is None:
            self._others.looked += 1
            yield from self._read(path, claim.bench, self._others)[1]
        else:
            self._exports.looked += 1
            table, wrong = self._read(path, claim.layout, self._exports)
            yield from wrong
            if table is not None:
                self._names.update({(entry.solution, path): None for entry in table.entries})
                yield from self._repeats(table, Source(self.watch.folder, path, "", claim.layout), namer)

    def _read(self, path: str, how: Layout | BenchRule | None, count: _Count) -> tuple[Table | None, list[str]]:
        """What a reader found, or why there is nothing."""
        reply = read_file(ReadJob(f"{self.places.inputs(self.watch)}/{path}", (self.watch.folder, path, ""), how))
        wrong = reply.sentence
        if reply.table is not None and reply.table.whole is False:
            wrong = f"it is not finished: {reply.table.notes[-1]}" if reply.table.notes else "it is not finished"
        count.unread += bool(wrong)
        return reply.table, [f"{shown(path)}: {wrong}"] if wrong else []

    def _decisions(self, path: str) -> Iterator[str]:
        self._others.looked += 1
        try:
            text = RealDisk().read(f"{self.places.inputs(self.watch)}/{path}", _LARGEST).decode("utf-8")
            wrong = read_decisions(text, shown(path))[1]
        except UnicodeDecodeError:
            wrong = [f"{shown(path)}: it is not UTF-8; save it as UTF-8"]
        except OSError as error:
            wrong = [f"{shown(path)}: {error.strerror}; make it readable"]
        self._others.unread += bool(wrong)
        yield from wrong

    def _repeats(self, table: Table, source: Source, namer: Namer) -> Iterator[str]:
        """Rows of one vessel that nothing tells apart, where the rules refuse a vessel that is met again."""
        if self.rules.series.same_name != "refuse":
            return
        met: dict[tuple[object, ...], list[Reading]] = defaultdict(list)
        for reading in name(table, source, namer, self.rules).readings:
            if reading.series.role in SERIES_ROLES:
                met[_identity(reading)].append(reading)
        several = [readings for readings in met.values() if len(readings) > 1]
        if not several:
            return
        self.warnings += 1
        first, count = several[0], len({readings[0].solution for readings in several})
        others = f", and {count - 1} more such solution{'s' if count > 2 else ''}" if count > 1 else ""
        yield (
            f"{shown(source.path)}: warning: '{shown(first[0].solution)}' stands {len(first)} times (rows "
            f"{_listed(first)}){others}, and nothing tells these readings apart; if they are repeated readings, say "
            "same_name: reading under series, or declare the column of their number as reading: under columns"
        )


def _identity(reading: Reading) -> tuple[object, ...]:
    return (
        reading.series, reading.level, reading.vessel, reading.injection, reading.reading, reading.analyte,
        reading.line, reading.when, reading.processed_at,
    )  # fmt: skip


def _listed(readings: Sequence[Reading]) -> str:
    rows = [str(reading.row) for reading in readings]
    return f"{', '.join(rows[:-1])} and {rows[-1]}" if len(rows) <= 5 else f"{', '.join(rows[:5])} …"


def _by_rule(namer: Namer, names: list[tuple[str, str]]) -> Iterator[str]:
    """For each naming rule some names that it took, and how; then every name that none takes."""
    taken: dict[int, dict[str, str]] = {}
    for solution, path in names:
        understood = namer.understand(solution, path)
        called = shown(solution or path)
        if understood is None:
            yield f"  '{called}': no naming rule takes it"
            continue
        takers = namer.takers(solution, path)
        also = f" (the rule in line {takers[1].line} would take it too; the first counts)" if len(takers) > 1 else ""
        taken.setdefault(understood.position, {}).setdefault(called, f"{_meaning(understood)}{also}")
    for _, found in sorted(taken.items()):
        for called, meaning in list(found.items())[:_EXAMPLES]:
            yield f"  '{called}': {meaning}"
        if len(found) > _EXAMPLES:
            yield f"    … and {len(found) - _EXAMPLES} more by the same rule"


def _meaning(understood: Understood) -> str:
    groups = ", ".join(f"{group} {understood.groups[group]}" for group in GROUPS if group in understood.groups)
    return f"{understood.rule.role}: {groups}" if groups else understood.rule.role
