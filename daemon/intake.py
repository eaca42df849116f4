"""The first half of a file's way: seen, settled, read, and taken into the holdings."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field

from spikeward.daemon.claims import DECISIONS, Claim, Claims
from spikeward.daemon.holdings import Content, Holdings, Place
from spikeward.daemon.names import shown
from spikeward.daemon.pages.facts import Notice
from spikeward.daemon.reading import ReadJob, ReadReply
from spikeward.daemon.settle import Settling, Stamp, Waited
from spikeward.daemon.station import Places
from spikeward.daemon.survey import Listing, Oddity, Presence, compare
from spikeward.rules.records import BatchKey
from spikeward.rules.rulebook import Rulebook, Watch

Key = tuple[str, str, str]  # root, path, key of the claim


@dataclass(slots=True)
class FileState:
    """One file that was read: how it looked then, and what it holds by way of reading."""

    stamp: Stamp
    contents: dict[str, Content] = field(default_factory=dict)


@dataclass(slots=True)
class Root:
    """What is remembered of one watched folder: what was read, what still waits, and what nobody takes."""

    watch: Watch
    settling: Settling[Place]
    presence: Presence = field(default_factory=Presence)
    away: str = ""
    looked: bool = False  # whether it has been looked through since the start
    stamps: dict[str, Stamp] = field(default_factory=dict)
    unclaimed: set[str] = field(default_factory=set)
    oddities: list[Oddity] = field(default_factory=list)
    unlisted: dict[str, str] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class _Trouble:
    """A file that cannot be read now: why, when it is tried again, and the pause after that.

    ``stamp`` is how an unfinished file looked; one that looks otherwise has gone on, and its pause is over.
    """

    sentence: str
    due: float
    pause: float
    stamp: Stamp | None


@dataclass(slots=True)
class Seen:
    """What a look at a folder asks for: files to read, files that are gone, and decisions files that settled."""

    jobs: list[ReadJob] = field(default_factory=list)
    gone: list[Place] = field(default_factory=list)
    decisions: list[Place] = field(default_factory=list)


class Intake:
    """Files of all watched folders. ``holdings`` are fed with what was read, each by its own rules' way of reading."""

    def __init__(self, rules: Rulebook, places: Places, holdings: Iterable[Holdings]) -> None:
        self.places = places
        self.files: dict[Place, FileState] = {}
        self.roots: dict[str, Root] = {}
        self._inflight: set[Key] = set()
        self._troubles: dict[Place, _Trouble] = {}
        self._lacking: set[Place] = set()  # read, but not the way that rules in use ask for
        self._feed: list[tuple[Holdings, Claims]] = []
        self._now = 0.0
        self.rule(rules, holdings)

    def rule(self, rules: Rulebook, holdings: Iterable[Holdings]) -> None:
        """Set the rules in force: the watched folders are theirs; what was read already is fed to new holdings."""
        known = {id(each): claims for each, claims in self._feed}
        self._feed = [(each, known.get(id(each)) or Claims(each.rules)) for each in holdings]
        standing = {folder: root for folder, root in self.roots.items() if root.watch in rules.watches}
        self.roots = {
            watch.folder: standing.get(watch.folder) or Root(watch, Settling(watch.settle)) for watch in rules.watches
        }
        for root in self.roots.values():
            root.unclaimed.clear()
        for place in [place for place in self.files if place[0] not in self.roots]:
            del self.files[place]
        for place, state in self.files.items():
            self.roots[place[0]].stamps[place[1]] = state.stamp
            self._feed_all(place, state)

    def carry(self, waiting: Iterable[Waited[Place]]) -> None:
        """Waiting that an earlier run had counted: a restart makes a file later by the pause only."""
        by_root: dict[str, list[Waited[Place]]] = {}
        for each in waiting:
            by_root.setdefault(each.place[0], []).append(each)
        for folder, root in self.roots.items():
            root.settling = Settling(root.watch.settle, by_root.get(folder, ()))

    def claims(self, place: Place) -> list[Claim]:
        """Every way in which a file is to be read; none where nobody takes it."""
        if place[0] not in self.roots:
            return []
        watch = self.roots[place[0]].watch
        found = {claim.key: claim for _, claims in self._feed if (claim := claims.of(place[1], watch)) is not None}
        return list(found.values())

    def see(self, folder: str, listing: Listing, now: float) -> Seen:
        """Compare a listing of a watched folder, or of a part of it, with what is known."""
        root = self.roots[folder]
        self._now = now
        root.away = root.presence.away(listing, held_files=bool(root.stamps))
        if root.away:
            return Seen()
        if not listing.start:
            root.looked = True
            root.oddities, root.unlisted = listing.oddities, listing.unlisted
            root.unclaimed.intersection_update(listing.files)
        changes = compare(listing, root.stamps)
        seen = Seen(gone=[(folder, path) for path in changes.vanished])
        for path in (*changes.new, *changes.changed):
            if path not in root.unclaimed:
                self._look(root, path, listing.files[path], seen)
        seen.jobs += self._lacking_jobs(folder, listing)
        self._forget_gone(root, listing)
        return seen

    def _look(self, root: Root, path: str, stamp: Stamp, seen: Seen) -> None:
        place = (root.watch.folder, path)
        trouble = self._troubles.get(place)
        if trouble is not None and trouble.stamp not in (None, stamp):
            del self._troubles[place]
        elif trouble is not None and self._now < trouble.due:
            return
        claims = self.claims(place)
        if not claims:
            root.unclaimed.add(path)
        elif root.settling.look(place, stamp, self._now):
            seen.jobs += self._jobs(place, claims)
            if DECISIONS in claims:
                seen.decisions.append(place)
                root.stamps[path] = stamp
                root.settling.forget(place)

    def _lacking_jobs(self, folder: str, listing: Listing) -> list[ReadJob]:
        jobs: list[ReadJob] = []
        for place in sorted(place for place in self._lacking if place[0] == folder and place[1] in listing.files):
            state = self.files.get(place)
            jobs += self._jobs(
                place, [each for each in self.claims(place) if not state or each.key not in state.contents]
            )
        return jobs

    def _forget_gone(self, root: Root, listing: Listing) -> None:
        """Files that vanished while they were being waited for."""
        below = listing.start + "/" if listing.start else ""
        for waited in root.settling.waiting():
            path = waited.place[1]
            if path.startswith(below) and path not in listing.files:
                root.settling.forget(waited.place)
                self._troubles.pop(waited.place, None)

    def _jobs(self, place: Place, claims: Iterable[Claim]) -> Iterator[ReadJob]:
        for claim in claims:
            key = (*place, claim.key)
            if claim is not DECISIONS and key not in self._inflight:
                self._inflight.add(key)
                yield ReadJob(
                    f"{self.places.inputs(self.roots[place[0]].watch)}/{place[1]}", key, claim.layout or claim.bench
                )

    def take(self, reply: ReadReply) -> set[BatchKey]:
        """Take in what a reader answered; the batches whose evaluation may change."""
        root, path, claim_key = reply.key
        place = (root, path)
        self._inflight.discard(reply.key)
        if root not in self.roots:
            return set()  # the rules changed meanwhile
        claim = next((each for each in self.claims(place) if each.key == claim_key), None)
        if claim is None:
            return set()
        unfinished = reply.table is not None and reply.table.whole is False
        if reply.temporary or unfinished:
            before = self._troubles.get(place)
            pause = min(60.0, before.pause * 2) if before else 1.0
            sentence = f"waits for the end of the file; {_notes(reply)}" if unfinished else reply.sentence
            self._troubles[place] = _Trouble(
                sentence, self._now + pause, pause, None if reply.temporary else reply.stamp
            )
            return set()
        return self.hold(place, reply.stamp, claim_key, content_of(reply, claim))

    def hold(self, place: Place, stamp: Stamp, claim_key: str, content: Content) -> set[BatchKey]:
        """Enter the content of a file, and feed it to the holdings that read it this way."""
        state = self.files.get(place)
        if state is None or state.stamp != stamp:
            state = self.files[place] = FileState(stamp)
        state.contents[claim_key] = content
        root = self.roots[place[0]]
        root.stamps[place[1]] = stamp
        root.settling.forget(place)
        self._troubles.pop(place, None)
        return self._feed_all(place, state)

    def _feed_all(self, place: Place, state: FileState) -> set[BatchKey]:
        touched: set[BatchKey] = set()
        lacking = False
        for holdings, claims in self._feed:
            claim = claims.of(place[1], self.roots[place[0]].watch)
            content = state.contents.get(claim.key) if claim else None
            if content is not None and holdings.contents.get(place) is not content:
                touched |= holdings.put(place, content)
            elif content is None and claim is None:
                touched |= holdings.drop(place)
            lacking |= claim is not None and claim is not DECISIONS and content is None
        (self._lacking.add if lacking else self._lacking.discard)(place)
        return touched

    def gone(self, place: Place) -> set[BatchKey]:
        """A file was deleted or renamed."""
        self.files.pop(place, None)
        self._lacking.discard(place)
        self._troubles.pop(place, None)
        self.roots[place[0]].stamps.pop(place[1], None)
        touched: set[BatchKey] = set()
        for holdings, _ in self._feed:
            touched |= holdings.drop(place)
        return touched

    @property
    def reads_again(self) -> bool:
        """Whether files still have to be read in the way that edited rules ask for."""
        return bool(self._lacking)

    def settles_in(self, folder: str) -> float | None:
        """Seconds until a file of a watched folder can settle; those being read or tried again are left aside."""
        paused = {place for place, trouble in self._troubles.items() if trouble.due > self._now}
        aside = {(root, path) for root, path, _ in self._inflight} | paused
        return self.roots[folder].settling.due_in(aside)

    def due_in(self, folder: str, now: float) -> float | None:
        """Seconds until a look at a watched folder is worth it: a file can settle, or is tried again."""
        settles = self.settles_in(folder)
        troubles = [trouble for (root, _), trouble in self._troubles.items() if root == folder]
        waits = [trouble.due - now for trouble in troubles if trouble.due > self._now]  # others had their look
        waits += [] if settles is None else [settles]
        return max(0.0, min(waits)) if waits else None

    def waiting(self) -> list[Waited[Place]]:
        """All files that are being waited for, to be carried over a restart."""
        return [waited for root in self.roots.values() for waited in root.settling.waiting()]

    def notices(self) -> list[tuple[str, str, Notice]]:
        """What a person should know of files and folders, as (root, folder, notice)."""
        return [(folder, "", notice) for folder, root in self.roots.items() for notice in self._of(folder, root)]

    def _of(self, folder: str, root: Root) -> Iterator[Notice]:
        if root.away:
            yield Notice("share away", folder, f"{root.away}; nothing counts as deleted")
        for odd in root.oddities:
            yield Notice("not opened", shown(odd.path), odd.sentence)
        for path, why in root.unlisted.items():
            yield Notice("not listed", shown(path or folder), f"{why}; what it holds is not known")
        if root.unclaimed:
            told = ", ".join(shown(path) for path in sorted(root.unclaimed)[:3])
            more = f" and {len(root.unclaimed) - 3} more" if len(root.unclaimed) > 3 else ""
            yield Notice(
                "no reader", told + more, "no pattern under files of a reader takes this name; nothing was read"
            )
        for waited in root.settling.waiting():
            if waited.place not in self._troubles:
                yield Notice("still being written", shown(waited.place[1]), "waits until it stops changing")
        for (where, path), trouble in self._troubles.items():
            if where == folder:
                yield Notice("cannot be read now", shown(path), f"{trouble.sentence}; tried again")


def _notes(reply: ReadReply) -> str:
    return "; ".join(reply.table.notes) if reply.table is not None else ""


def content_of(reply: ReadReply, claim: Claim) -> Content:
    """What a reader's answer means for the holdings."""
    if reply.sentence:
        return Content(reply.sha256, sentence=reply.sentence)
    return Content(reply.sha256, reply.table, tuple(reply.bench or ()), layout=claim.layout)
