"""The first half of a file's way: seen, settled, read, and taken into the holdings."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field

from spikeward.daemon.claims import DECISIONS, Claim, Claims
from spikeward.daemon.holdings import Content, Holdings, Place
from spikeward.daemon.names import shown
from spikeward.daemon.pages.facts import Notice
from spikeward.daemon.settle import Settling, Stamp
from spikeward.daemon.station import Places
from spikeward.daemon.survey import Listing, Presence, compare
from spikeward.daemon.workers import ReadJob, ReadReply
from spikeward.rules.records import BatchKey
from spikeward.rules.rulebook import Rulebook, Watch

Key = tuple[str, str, str]  # root, path, key of the claim


@dataclass(slots=True)
class FileState:
    """One file that was seen: how it looked when it was read, and what it holds by way of reading."""

    stamp: Stamp
    contents: dict[str, Content] = field(default_factory=dict)
    trouble: str = ""  # why it cannot be read now; it is tried again


@dataclass(slots=True)
class Root:
    """What is remembered of one watched folder."""

    watch: Watch
    settling: Settling[Place]
    presence: Presence = field(default_factory=Presence)
    away: str = ""
    listing: Listing | None = None
    unclaimed: list[str] = field(default_factory=list)


class Intake:
    """Files of all watched folders. ``holdings`` are fed with what was read, each by its own rules' way of reading."""

    def __init__(self, rules: Rulebook, places: Places, holdings: Iterable[Holdings]) -> None:
        self.places = places
        self.files: dict[Place, FileState] = {}
        self.inflight: set[Key] = set()
        self.roots: dict[str, Root] = {}
        self.feed: list[tuple[Holdings, Claims]] = []
        self.rule(rules, holdings)

    def rule(self, rules: Rulebook, holdings: Iterable[Holdings]) -> None:
        """Set the rules in force: the watched folders are theirs; what was read already is fed to new holdings."""
        known = {id(each): claims for each, claims in self.feed}
        self.feed = [(each, known.get(id(each)) or Claims(each.rules)) for each in holdings]
        self.roots = {watch.folder: Root(watch, Settling(watch.settle)) for watch in rules.watches} | {
            folder: root for folder, root in self.roots.items() if root.watch in rules.watches
        }
        for place, state in self.files.items():
            self._feed(place, state)

    def claims(self, place: Place) -> list[Claim]:
        """Every way in which a file is to be read; none where nobody takes it."""
        root = self.roots.get(place[0])
        if root is None:
            return []
        found = {claim.key: claim for _, claims in self.feed if (claim := claims.of(place[1], root.watch)) is not None}
        return list(found.values())

    def see(self, folder: str, listing: Listing, now: float) -> tuple[list[ReadJob], list[Place]]:
        """Compare a listing with what is known.

        Returns
        -------
        the files to read now, and those that are gone
        """
        root = self.roots[folder]
        known = {path: state.stamp for (where, path), state in self.files.items() if where == folder}
        root.listing = listing
        root.away = root.presence.away(listing, held_files=bool(known))
        if root.away:
            return [], []
        changes = compare(listing, known)
        unclaimed, jobs = [], []
        for path in (*changes.new, *changes.changed, *self._unfinished(folder, listing, known)):
            place = (folder, path)
            claims = self.claims(place)
            if not claims:
                unclaimed.append(path)
            elif root.settling.look(place, listing.files[path], now):
                jobs += self._jobs(place, claims)
        root.unclaimed = unclaimed
        root.settling.keep_only({(folder, path) for path in listing.files})
        return jobs, [(folder, path) for path in changes.vanished]

    def _unfinished(self, folder: str, listing: Listing, known: dict[str, Stamp]) -> Iterator[str]:
        """Files that look as before but could not be read, or lack a reading under some rules."""
        for path, stamp in known.items():
            state = self.files[folder, path]
            if listing.files.get(path) == stamp and (
                state.trouble or any(claim.key not in state.contents for claim in self.claims((folder, path)))
            ):
                yield path

    def _jobs(self, place: Place, claims: list[Claim]) -> Iterator[ReadJob]:
        for claim in claims:
            key = (*place, claim.key)
            if claim is not DECISIONS and key not in self.inflight:
                self.inflight.add(key)
                root = self.roots[place[0]]
                yield ReadJob(f"{self.places.inputs(root.watch)}/{place[1]}", key, claim.layout or claim.bench)

    def take(self, reply: ReadReply) -> set[BatchKey]:
        """Take in what a reader answered; the batches whose evaluation may change."""
        root, path, claim_key = reply.key
        place = (root, path)
        self.inflight.discard(reply.key)
        claim = next((each for each in self.claims(place) if each.key == claim_key), None)
        if claim is None:
            return set()  # the rules changed meanwhile
        state = self.files.get(place)
        if reply.temporary:
            if state is not None:
                state.trouble = reply.sentence
            return set()
        return self.hold(place, reply.stamp, claim_key, content_of(reply, claim, self._folder(place)))

    def hold(self, place: Place, stamp: Stamp, claim_key: str, content: Content) -> set[BatchKey]:
        """Enter the content of a file, and feed it to the holdings that read it this way."""
        state = self.files.get(place)
        if state is None or state.stamp != stamp:
            state = self.files[place] = FileState(stamp)
        state.contents[claim_key] = content
        state.trouble = ""
        if place[0] in self.roots:
            self.roots[place[0]].settling.forget(place)
        return self._feed(place, state)

    def _feed(self, place: Place, state: FileState) -> set[BatchKey]:
        touched: set[BatchKey] = set()
        root = self.roots.get(place[0])
        for holdings, claims in self.feed if root else ():
            claim = claims.of(place[1], root.watch) if root else None
            content = state.contents.get(claim.key) if claim else None
            if content is not None and holdings.contents.get(place) is not content:
                touched |= holdings.put(place, content)
        return touched

    def gone(self, place: Place) -> set[BatchKey]:
        """A file was deleted or renamed."""
        self.files.pop(place, None)
        touched: set[BatchKey] = set()
        for holdings, _ in self.feed:
            touched |= holdings.drop(place)
        return touched

    def _folder(self, place: Place) -> str:
        return self.feed[0][0].output_folder(place)

    def notices(self) -> list[tuple[str, str, Notice]]:
        """What a person should know of files and folders, as (root, folder, notice)."""
        found = []
        for folder, root in self.roots.items():
            if root.away:
                found.append((folder, "", Notice("share away", folder, f"{root.away}; nothing counts as deleted", "")))
            if root.listing is not None:
                found += [
                    (folder, "", Notice("not opened", odd.path, odd.sentence, "")) for odd in root.listing.oddities
                ]
                found += [
                    (folder, "", Notice("not listed", path or folder, f"{why}; what it holds is not known", ""))
                    for path, why in root.listing.unlisted.items()
                ]
            if root.unclaimed:
                told = ", ".join(shown(path) for path in root.unclaimed[:3])
                more = f" and {len(root.unclaimed) - 3} more" if len(root.unclaimed) > 3 else ""
                found.append((folder, "", Notice("no reader", told + more, "no reader's files pattern takes them", "")))
            found += [
                (folder, "", Notice("still being written", shown(waited.place[1]), "waits until it stops changing", ""))
                for waited in root.settling.waiting()
            ]
        for (folder, path), state in self.files.items():
            if state.trouble and folder in self.roots:
                found.append(
                    (folder, "", Notice("cannot be read now", shown(path), f"{state.trouble}; tried again", ""))
                )
        return found


def content_of(reply: ReadReply, claim: Claim, folder: str) -> Content:
    """What a reader's answer means for the holdings."""
    if reply.sentence:
        return Content(reply.sha256, sentence=reply.sentence)
    return Content(reply.sha256, reply.table, tuple(reply.bench or ()), layout=claim.layout)
