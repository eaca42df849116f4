"""Opening a station: rule file, state folder, locks, ledger and journal, in the order in which each may refuse."""

from __future__ import annotations

import os
import socket
import sys
from collections.abc import Iterator
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass, field

from spikeward.daemon.disk import Disk, RealDisk
from spikeward.daemon.journal import Journal, JournalRefused, JournalUnavailable
from spikeward.daemon.ledger import Ledger, LedgerDamaged, RuleTexts, history_lost
from spikeward.daemon.lock import Held, Identity, Locked, acquire, acquire_stations
from spikeward.daemon.log import Log
from spikeward.daemon.mounts import network_kind, read_mounts
from spikeward.daemon.names import shown
from spikeward.daemon.pipeline import Pipeline
from spikeward.daemon.records import Records
from spikeward.daemon.station import Places, RuleFile, read_rule_file, usable, wall_clock
from spikeward.daemon.trouble import Trouble


@dataclass(slots=True)
class Opened:
    """A station that this process alone works on."""

    rule_file: RuleFile
    pipeline: Pipeline
    journal: Journal
    ledger: Ledger
    log: Log
    locks: tuple[Held, ...]
    sentences: list[str] = field(default_factory=list)  # what a person should know of the opening
    _told: int = field(init=False)
    _told_of_ledger: int = field(init=False)

    def __post_init__(self) -> None:
        self._told, self._told_of_ledger = len(self.journal.sentences), len(self.ledger.sentences)

    def new_sentences(self) -> list[str]:
        """What the state folder has to say since the last call: a journal begun anew, a lock that was taken away."""
        told, self._told = self._told, len(self.journal.sentences)
        told_of_ledger, self._told_of_ledger = self._told_of_ledger, len(self.ledger.sentences)
        lost = [
            f"The lock {shown(lock.path)} was taken away: a second daemon could start. Start this one again."
            for lock in self.locks
            if lock.lost()
        ]
        return self.journal.sentences[told:] + self.ledger.sentences[told_of_ledger:] + lost


@contextmanager
def open_station(config: str, json_log: bool = False, disk: Disk | None = None) -> Iterator[Opened]:
    """Open a station for as long as the context lasts.

    Raises
    ------
    Trouble : the rule file cannot be used, another daemon holds a lock, or the state cannot be opened
    """
    rule_file = read_rule_file(config)
    rules = usable(rule_file)
    places = Places(rule_file.path.absolute().parent, config)
    log = Log(sys.stderr, wall_clock, as_json=json_log)
    disk = disk or RealDisk()
    state = str(places.state(rules))
    with ExitStack() as stack:
        try:
            disk.mkdirs(state)
            identity = Identity(os.getpid(), socket.gethostname(), " ".join(sys.argv[:2]), wall_clock())
            lock = acquire(f"{state}/lock", identity, f"the state folder {shown(state)}")
            stack.callback(lock.release)
            for watch in rules.watches:
                if watch.output:
                    disk.mkdirs(places.outputs(watch))
            folders = {places.inputs(watch) for watch in rules.watches} | {places.outputs(w) for w in rules.watches}
            held, warnings = acquire_stations(folders, identity)
            for each in held:
                stack.callback(each.release)
            if kind := network_kind(state, read_mounts()):
                warnings.append(
                    f"The state folder {shown(state)} lies on a network file system ({kind}), where its journal is not "
                    "safe; give 'state' a folder of this machine."
                )
            journal = Journal(f"{state}/journal.sqlite")
            stack.callback(journal.close)
            ledger = Ledger(disk, f"{state}/ledger.jsonl")
            warnings += history_lost(disk, f"{state}/ledger.jsonl", {places.outputs(watch) for watch in rules.watches})
            texts = RuleTexts(disk, f"{state}/rules")
            texts.keep(rules.digest, rule_file.text)
            pipeline = Pipeline(places, rules, disk, ledger, texts, Records(disk, journal), wall_clock)
        except (Locked, LedgerDamaged, JournalRefused, JournalUnavailable) as refused:
            raise Trouble(str(refused)) from None
        except OSError as error:
            said = f"{shown(str(error.filename or state))}: {error.strerror}"
            raise Trouble(f"{said}; state, watched and output folders must be folders that can be written") from None
        sentences = [*warnings, *journal.sentences, *ledger.sentences]
        for sentence in sentences:
            log.warning("opened", note=sentence)
        yield Opened(rule_file, pipeline, journal, ledger, log, (lock, *held), sentences)
