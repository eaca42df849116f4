"""What has been read so far, under one rule book: files, readings, bench entries, and which batch each touches."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Collection, Iterable, Mapping
from dataclasses import dataclass, field, replace

from spikeward.rules.naming import Named, Namer, Source, name
from spikeward.rules.records import BatchKey, BenchEntry, Layout, Reading, Table
from spikeward.rules.rulebook import Rulebook

Place = tuple[str, str]  # watched folder as the rule file names it, path below it


@dataclass(frozen=True, slots=True)
class Content:
    """What one file turned out to hold. ``sentence`` says why it could not be read; then the rest is empty."""

    file_digest: str
    table: Table | None = None
    bench: tuple[BenchEntry, ...] = ()
    sentence: str = ""
    layout: Layout | None = None


@dataclass(slots=True)
class Holdings:
    """All files read under one rule book.

    ``put`` and ``drop`` return the batches whose evaluation may change.
    """

    rules: Rulebook
    namer: Namer = field(init=False)
    contents: dict[Place, Content] = field(default_factory=dict)
    named: dict[Place, Named] = field(default_factory=dict)
    _places: dict[BatchKey, set[Place]] = field(default_factory=lambda: defaultdict(set))
    _bench: dict[Place, tuple[BenchEntry, ...]] = field(default_factory=dict)

    def __post_init__(self) -> None:
        self.namer = Namer(self.rules.names)

    def put(self, place: Place, content: Content) -> set[BatchKey]:
        """A file's content replaces all that this path said before."""
        touched = self.drop(place)
        self.contents[place] = content
        if content.bench:
            folder = self.output_folder(place)  # the results' folder, which the reader of the file does not know
            self._bench[place] = tuple(replace(entry, folder=folder) for entry in content.bench)
        if content.table is not None and content.layout is not None:
            root, path = place
            source = Source(root, path, self.output_folder(place), content.layout, content.file_digest)
            found = name(content.table, source, self.namer, self.rules)
            self.named[place] = found
            for key in {reading.series.batch_key for reading in found.readings}:
                self._places[key].add(place)
                touched.add(key)
        return touched | self._fed_by(place, content.bench)

    def drop(self, place: Place) -> set[BatchKey]:
        """A path is gone, or is about to be replaced."""
        content = self.contents.pop(place, None)
        found = self.named.pop(place, None)
        self._bench.pop(place, None)
        touched = {reading.series.batch_key for reading in found.readings} if found else set()
        for key in touched:
            self._places[key].discard(place)
        return touched | (self._fed_by(place, content.bench) if content else set())

    def _fed_by(self, place: Place, entries: Iterable[BenchEntry]) -> set[BatchKey]:
        wanted = {entry.batch for entry in entries}
        return {key for key in self.batch_keys() if key.root == place[0] and (key.batch in wanted or "" in wanted)}

    def batch_keys(self) -> list[BatchKey]:
        """The batches that readings are at hand for."""
        return sorted(key for key, places in self._places.items() if places)

    def readings(self, keys: Iterable[BatchKey]) -> list[Reading]:
        """All readings of some batches, in no particular order."""
        wanted = set(keys)
        places = {place for key in wanted for place in self._places.get(key, ())}
        return [
            reading
            for place in sorted(places)
            for reading in self.named[place].readings
            if reading.series.batch_key in wanted
        ]

    def bench(self, key: BatchKey) -> tuple[BenchEntry, ...]:
        """The bench entries that apply to a batch: of its own folder and the folders above it."""
        entries = [
            entry
            for place, found in self._bench.items()
            if place[0] == key.root
            for entry in found
            if entry.folder in ("", key.folder) or key.folder.startswith(entry.folder + "/")
        ]
        return tuple(sorted(entries, key=lambda entry: (entry.path, entry.row, entry.level)))

    def idle_bench(self, lacking: Mapping[BatchKey, Collection[str]]) -> list[tuple[BatchKey, BenchEntry]]:
        """Bench entries that reach no series, of batches in which a series still lacks something from the bench."""
        found = []
        for key, samples in lacking.items():
            for entry in self.bench(key):
                if entry.batch in ("", key.batch) and entry.sample not in samples:
                    found.append((key, entry))
        return found

    def output_folder(self, place: Place) -> str:
        """Where results of a file's series go, below the output root of its watched folder."""
        root, path = place
        watch = next(watch for watch in self.rules.watches if watch.folder == root)
        return "" if watch.spans_folders or "/" not in path else path.rsplit("/", 1)[0]

    def unread(self) -> Mapping[Place, str]:
        """The files that could not be read, with the sentence."""
        return {place: content.sentence for place, content in self.contents.items() if content.sentence}
