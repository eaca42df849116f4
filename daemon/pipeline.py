"""The way of a file, from its folder to a flag.

    seen → settled → read → named → in force → solved → checked → published
    `intake`         `workers` `holdings`     `solving`          `output`

Nothing flows back: a later file of the same series starts the same way again and makes the next revision. Everything
here may be lost and found again by a new look at the folders; what may not is in the ledger before it has an effect.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from contextlib import suppress
from dataclasses import dataclass, field

from spikeward.daemon.board_output import BoardOutput
from spikeward.daemon.closings import Closings, closing_event, lapse_event
from spikeward.daemon.decisions import DecisionBook
from spikeward.daemon.disk import Disk
from spikeward.daemon.holdings import Holdings, Place
from spikeward.daemon.intake import Intake
from spikeward.daemon.ledger import EventLog, RuleTexts
from spikeward.daemon.names import unread_name
from spikeward.daemon.notices import FEW, MANY, summed
from spikeward.daemon.orphans import Orphans
from spikeward.daemon.output import Output
from spikeward.daemon.pages.facts import Notice
from spikeward.daemon.pages.flag import render_unread
from spikeward.daemon.reading import ReadJob, ReadReply
from spikeward.daemon.records import Records
from spikeward.daemon.refusals import Again
from spikeward.daemon.solving import Solved, Solving
from spikeward.daemon.standing import closed_otherwise, kept_aside, standing_notices
from spikeward.daemon.station import Clock, Places, rules_from
from spikeward.daemon.survey import Listing
from spikeward.rules.outcomes import CALCULATION_VERSION, BatchOutcome
from spikeward.rules.records import BatchKey, SeriesKey
from spikeward.rules.rulebook import Rulebook
from spikeward.rules.series import closing_roles


@dataclass(slots=True)
class Pipeline:
    """All state of a running station, built anew from the ledger and the folders at every start."""

    places: Places
    rules: Rulebook
    disk: Disk
    ledger: EventLog
    texts: RuleTexts
    records: Records
    clock: Clock
    closings: Closings = field(default_factory=Closings)
    touched: set[BatchKey] = field(default_factory=set)
    gone: set[Place] = field(default_factory=set)  # files that are gone, until the journal has forgotten them
    unsaid: set[Place] = field(default_factory=set)  # files whose flag of an unread file may not be right yet
    undecided: set[Place] = field(default_factory=set)  # decisions files that have settled, until they are adopted
    solved: dict[BatchKey, Solved] = field(default_factory=dict)
    rules_notice: Notice | None = None
    board_due: set[BatchKey] = field(default_factory=set)
    _noticed: list[tuple[str, str, Notice]] = field(default_factory=list)
    intake: Intake = field(init=False)
    solving: Solving = field(init=False)
    decisions: DecisionBook = field(init=False)
    output: Output = field(init=False)
    boards: BoardOutput = field(init=False)

    def __post_init__(self) -> None:
        self.decisions = DecisionBook(self.disk, self.ledger, self.clock)
        present = Holdings(self.rules)
        self.solving = Solving(present, self.closings, self.decisions.of)
        self.output = Output(
            self.disk, self.ledger, self._folder_of, self.rules.station, self.clock, self._is_present, self.records
        )
        self.boards = BoardOutput(self.records, self._folder_of, self.rules.station)
        for event in self.ledger.read():
            self.closings.take(event)
            self.output.take(event)
            self.decisions.take(event)
        self._recall_rules()
        self.intake = Intake(self.rules, self.places, self._holdings())

    # ---- the way of a file -------------------------------------------------------------------------------------------

    def see(self, folder: str, listing: Listing, now: float) -> list[ReadJob]:
        """A watched folder was listed: what is gone is dropped, what has settled is to be read."""
        self._tidy(folder, listing)
        seen = self.intake.see(folder, listing, now)
        for place in seen.gone:
            self.touched |= self.intake.gone(place)
        self.gone.update(seen.gone)
        self.unsaid.update(seen.gone)
        self.undecided.update(seen.decisions)
        return seen.jobs

    def take(self, replies: Iterable[ReadReply]) -> None:
        """Files were read: their readings take their places."""
        for reply in replies:
            self.touched |= self.intake.take(reply)
            self.unsaid.add((reply.key[0], reply.key[1]))

    def catch_up(self) -> None:
        """Adopt decisions, and say beside each file whether it could be read.

        Raises
        ------
        OSError : the disk does not take it now; a later call goes on where this one ended
        """
        for place in sorted(self.undecided):
            self.touched |= self._adopt_decisions(place)
            self.undecided.discard(place)
        for place in sorted(self.unsaid):
            self._say_unread(place)
            self.unsaid.discard(place)

    def ready(self) -> set[BatchKey]:
        """The touched batches whose folder has been looked through: what an earlier run remembers waits for that."""
        roots = self.intake.roots
        self.touched = {key for key in self.touched if key.root in roots}
        return {key for key in self.touched if roots[key.root].looked}

    def solve(self, keys: Iterable[BatchKey]) -> list[Solved]:
        """Evaluate some batches, and record the closings that now follow from what is in force."""
        solved = self.solving.solve(keys)
        due = [one for one in solved if not one.outcome.closed and self._closes(one)]
        if due:
            self.close(due)
            again = {one.batch.key for one in due}
            solved = [one for one in solved if one.batch.key not in again] + self.solving.solve(again)
        return sorted(solved, key=lambda one: one.batch.key)

    def publish(self, solved: Iterable[Solved], check_all: bool = False) -> list[SeriesKey]:
        """Write what changed: results, summaries and flags; a series that is refused stands in the refusals.

        Raises
        ------
        OSError : the disk does not take anything now; the batches stay touched and a later call finishes
        """
        written: list[SeriesKey] = []
        for one in solved:
            self.touched.add(one.batch.key)
            if self._stands(one):
                written += self.output.publish(one.outcome, check_all)
            self.solved[one.batch.key] = one
            self.board_due.add(one.batch.key)
            self.touched.discard(one.batch.key)
        return written

    def _stands(self, one: Solved) -> bool:
        """A batch that closed under another calculation keeps what was published then, until it is solved again."""
        closing = self.closings.closed.get(one.batch.key)
        return not one.outcome.closed or closing is None or closing.calculation_version == CALCULATION_VERSION

    def withdraw_orphans(self) -> list[str]:
        """Take back what stands beside the data for series and batches that the present rules do not know."""
        every = self.solving.every()
        self.solved = {key: one for key, one in self.solved.items() if key in every}
        series = {outcome.key for one in self.solved.values() for outcome in one.outcome.outcomes}
        orphans = Orphans(self.disk, self.ledger, self._folder_of, self._is_present, self.clock, self.records.refusals)
        return orphans.withdraw(self._output_places(), series, self.solved)

    def _output_places(self) -> set[tuple[str, str]]:
        """Every root and output folder below it in which something was read."""
        return {(place[0], each.output_folder(place)) for each in self._holdings() for place in each.contents}

    def publish_boards(self) -> None:
        """Write the boards and tables of all batches."""
        for _ in self.board_work(everything=True):
            pass

    def board_work(self, everything: bool = False) -> Iterator[BatchKey]:
        """Write boards and tables where something changed, one batch a step: a daemon does other work between."""
        for _ in range(2):  # a board that is refused stands on the others
            notices = self.notices()
            due = set(self.solved) if everything or notices != self._noticed else self.board_due & set(self.solved)
            self._noticed, self.board_due = notices, due
            for key in sorted(due):
                if key in self.solved:
                    self.boards.publish(self.solved[key].outcome, notices)
                self.board_due.discard(key)  # not before: a full disk ends this
                yield key
            self.boards.publish_folders(notices, self.solving.every(), self._output_places())
            if self.notices() == notices:
                break

    def try_again(self) -> Again:
        """What was refused is due once more; nothing new has arrived for it."""
        again = self.records.refusals.again(self.intake.roots, self.solving.every())
        self.unsaid |= again.files
        self.board_due |= again.boards
        return again

    # ---- what time decides, entered as data --------------------------------------------------------------------------

    def _closes(self, one: Solved) -> bool:
        """With closing members a batch closes by itself once nothing is missing; without, time decides.

        A batch of which only blanks or brackets are named has nothing to close yet.
        """
        return bool(one.outcome.outcomes and closing_roles(one.rules)) and not one.outcome.waiting_for

    def close(self, solved: Iterable[Solved]) -> None:
        """Record closings under the rules that apply to each batch."""
        for one in solved:
            event = closing_event(one.batch, one.rules.digest, CALCULATION_VERSION, self.clock())
            self.ledger.append(event)
            self.closings.take(event)

    def lapse(self, one: Solved, keys: Iterable[SeriesKey]) -> None:
        """Record that series of a batch have waited long enough."""
        for key in keys:
            event = lapse_event(one.batch.members[key], self.clock())
            self.ledger.append(event)
            self.closings.take(event)
            self.touched.add(one.batch.key)

    def time_is_up(self, one: Solved, idle: Callable[[BatchKey | SeriesKey], float]) -> None:
        """Incomplete series of which nothing has arrived for the stated time lapse, and a quiet batch may close.

        ``idle`` gives the seconds for which nothing of a batch or series has arrived. What is recorded is not recorded
        again, also where the files of a batch are gone and nothing can be solved any more.
        """
        longest = one.rules.series.lapses_after
        waiting = [outcome.key for outcome in one.outcome.outcomes if outcome.incomplete]
        over = [key for key in waiting if idle(key) >= longest]
        fresh = [key for key in over if key not in self.closings.lapses_of(one.batch)]
        closes = not waiting and not closing_roles(one.rules) and idle(one.batch.key) >= longest
        if fresh:
            self.lapse(one, fresh)
        elif closes and not self.closings.covers(one.batch.key, one.batch.members):
            self.close([one])
            self.touched.add(one.batch.key)

    def reopen(self, batch: str | None) -> list[Solved]:
        """Solve closed batches (all, or those of one name) again under the present rules: ``sweep --again``."""
        known = {key for key in self.solving.every() if key in self.closings.closed and batch in (None, key.batch)}
        before = {one.batch.key: one for one in self.solving.solve(known)}
        closed = [one for one in before.values() if one.outcome.closed]
        for one in closed:
            closing = self.closings.closed.pop(one.batch.key)
            event = {
                "event": "again",
                "batch": [one.batch.key.root, one.batch.key.folder, one.batch.key.batch],
                "before": closing.rules_digest,
                "after": self.rules.digest,
                "results_before": _digest_of(one.outcome),
                "at": self.clock(),
            }
            self.ledger.append(event)
        renewed = self.solving.solve({one.batch.key for one in closed})
        self.close(renewed)
        return self.solving.solve({one.batch.key for one in closed})

    # ---- rules -------------------------------------------------------------------------------------------------------

    def adopt(self, rules: Rulebook, text: str) -> None:
        """A good edit of the rule file: it applies to every batch that is not closed."""
        self.texts.keep(rules.digest, text)
        self.unsaid.update(self.solving.present.unread())
        self.rules = rules
        earlier = dict(self.solving.earlier)
        old = self.solving.present
        if any(closing.rules_digest == old.rules.digest for closing in self.closings.closed.values()):
            earlier[old.rules.digest] = old
        earlier.pop(rules.digest, None)
        self.solving.present = Holdings(rules)
        self.solving.earlier = earlier
        self.output.station = self.boards.station = rules.station
        self.intake.rule(rules, self._holdings())
        self.touched |= self.solving.every()

    def _recall_rules(self) -> None:
        """The rules under which batches closed earlier, from their kept texts."""
        wanted = {closing.rules_digest for closing in self.closings.closed.values()} - {self.rules.digest}
        for digest in sorted(wanted):
            rules = rules_from(self.texts.get(digest))
            if rules is not None:
                self.solving.earlier[digest] = Holdings(rules)

    def _holdings(self) -> list[Holdings]:
        return [self.solving.present, *self.solving.earlier.values()]

    # ---- small answers -----------------------------------------------------------------------------------------------

    def notices(self) -> list[tuple[str, str, Notice]]:
        """What a person should know besides results, as (root, output folder, notice); many of one kind summed up."""
        return summed(self.intake.notices(), FEW) + summed(self._notices(), MANY)

    def _notices(self) -> list[tuple[str, str, Notice]]:
        found = standing_notices(
            self.solving.present, self.solved.values(), self.solving.unsolved, self.decisions, self.records, self.output
        )
        own = [kept_aside(path) for path in self.records.kept]
        own += [self.rules_notice] if self.rules_notice is not None else []
        return found + [(root, "", notice) for notice in own for root in self.intake.roots]

    def needs_a_person(self) -> list[str]:
        """One line for everything that is neither a result nor in order."""
        quiet = ("duplicate", "no reader")
        every = dict.fromkeys(("", "", notice) for _, _, notice in self.intake.notices() + self._notices())
        return [
            f"{each.kind}: {each.subject}: {each.sentence}"
            for _, _, each in summed(every, FEW)
            if each.kind not in quiet
        ]

    def remedies(self) -> list[str]:
        """How to solve closed batches again that stand under other rules than the present ones."""
        return closed_otherwise(self.closings, self.rules, self.places.rule_file)

    def _folder_of(self, root: str, folder: str) -> str:
        watch = next((watch for watch in self.rules.watches if watch.folder == root), None)
        base = self.places.outputs(watch) if watch else f"{self.places.base}/{root}"
        return f"{base}/{folder}" if folder else base

    def _is_present(self, key: SeriesKey, path: str, digest: str) -> bool:
        content = self.solving.present.contents.get((key.root, path))
        if content is not None and not content.sentence:
            return True
        readings = (reading for holdings in self._holdings() for reading in holdings.readings([key.batch_key]))
        return any(reading.digest == digest for reading in readings)

    def _tidy(self, folder: str, listing: Listing) -> None:
        """Take away temporary files of a run that was cut short; nothing is being published meanwhile."""
        base = self.places.inputs(self.intake.roots[folder].watch)
        for path in listing.leftovers:
            with suppress(OSError):
                self.disk.remove(f"{base}/{path}")

    def _adopt_decisions(self, place: Place) -> set[BatchKey]:
        root, path = place
        if root not in self.intake.roots:
            return set()
        where = self.decisions.see(place, f"{self.places.inputs(self.intake.roots[root].watch)}/{path}")
        if where is None:
            return set()
        return {key for key in self.solving.every() if key.root == root and _below(key.folder, where)}

    def _say_unread(self, place: Place) -> None:
        """Leave or take away the flag that says why a file cannot be read."""
        root, path = place
        if root not in self.intake.roots:
            return
        content = self.solving.present.contents.get(place)
        folder = self._folder_of(root, self.solving.present.output_folder(place))
        name = path.rsplit("/", 1)[-1]
        with self.records.refusals.apart(("unread", root, path), root, self.solving.present.output_folder(place)):
            if content is not None and content.sentence:
                self.records.publish_files(folder, {unread_name(name): render_unread(path, content.sentence)})
            else:
                self.records.withdraw_unread(folder, name)


def _below(folder: str, where: str) -> bool:
    return where in ("", folder) or folder.startswith(where + "/")


def _digest_of(outcome: BatchOutcome) -> list[str]:
    return [one.inputs_digest for one in outcome.outcomes]
