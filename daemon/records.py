"""Publishing with a memory: what we wrote is known, so that a person's edit is kept aside and never taken for ours."""

from __future__ import annotations

import os
from collections import defaultdict
from collections.abc import Mapping

from spikeward.daemon.disk import FILE, Disk
from spikeward.daemon.journal import Journal
from spikeward.daemon.names import VERDICTS, flag_name, unread_name
from spikeward.daemon.publish import Published, digests, publish, publish_files, withdraw_unread
from spikeward.daemon.refusals import Refusals


class Records:
    """Digests of everything that was published, in memory and (where there is one) in the journal.

    ``kept`` collects the edits that were kept aside, as absolute paths; ``refusals`` what could not be written.
    """

    def __init__(self, disk: Disk, journal: Journal | None) -> None:
        self._disk = disk
        self._journal = journal
        self._known: dict[tuple[str, str], set[str]] = defaultdict(set)
        self.kept: list[str] = []
        self.refusals = Refusals()
        if journal is not None:
            for place, found in journal.load_outputs().items():
                self._known[place] |= found

    def publish(self, folder: str, stem: str, files: Mapping[str, bytes], flag: bytes, verdict: str) -> bool:
        """Publish a series; whether anything was written. Raises ``OSError`` as the disk does."""
        flags = [flag_name(stem, each) for each in VERDICTS]
        outputs = {stem + suffix: data for suffix, data in files.items()}
        known = self._intend(folder, {**outputs, flag_name(stem, verdict): flag}, [*outputs, *flags])
        self._disk.mkdirs(folder)
        return self._done(folder, publish(self._disk, folder, stem, files, flag, verdict, known))

    def publish_files(self, folder: str, outputs: Mapping[str, bytes]) -> bool:
        """Publish files that have no flag of their own; whether anything was written."""
        known = self._intend(folder, outputs, list(outputs))
        self._disk.mkdirs(folder)
        return self._done(folder, publish_files(self._disk, folder, outputs, known))

    def withdraw_file(self, folder: str, name: str) -> None:
        """Take away a file that has nothing left to say, if it is there; what is no file is not ours."""
        path = os.path.join(folder, name)
        found = self._disk.look(path)
        if found is not None and found.kind == FILE:
            self._disk.remove(path)
            self._disk.sync_folder(folder)

    def withdraw_unread(self, folder: str, file_name: str) -> bool:
        """Take away the flag of a file that can be read after all."""
        name = unread_name(file_name)
        done = withdraw_unread(self._disk, folder, file_name, self._known.get((folder, name)) or None)
        if done is not None:
            self._note_kept(folder, done)
        return done is not None

    def _intend(self, folder: str, outputs: Mapping[str, bytes], names: list[str]) -> set[str] | None:
        """Enter the new digests before anything is written; what was known before tells edits from our own bytes.

        Where nothing is known the journal was lost, and what stands there counts as ours: a run that is cut short in
        the middle would otherwise know of half of its own files, and take the rest for edits.
        """
        before = {name: self._known.get((folder, name), set()) for name in names}
        known = set().union(*before.values())
        new = digests(outputs)
        if not known:
            before = self._standing(folder, names)
        if self._journal is not None and not known.issuperset(new.values()):
            with self._journal.together():
                for name, earlier in before.items():  # again, for a journal that was lost while this run goes on
                    for digest in earlier:
                        self._journal.intend_outputs(folder, {name: digest})
                self._journal.intend_outputs(folder, new)
        for name, digest in new.items():
            self._known[folder, name].add(digest)
        return known | set(new.values()) if known else None

    def _standing(self, folder: str, names: list[str]) -> dict[str, set[str]]:
        paths = {name: os.path.join(folder, name) for name in names}
        found = {name: self._disk.look(path) for name, path in paths.items()}
        present = {name: self._disk.read(paths[name]) for name, each in found.items() if each and each.kind == FILE}
        return {name: {digest} for name, digest in digests(present).items()}

    def _done(self, folder: str, published: Published) -> bool:
        self._note_kept(folder, published)
        for name, digest in published.files.items():
            self._known[folder, name] = {digest}
        if self._journal is not None and published.written:
            self._journal.record_outputs(folder, published.files)
        return bool(published.written)

    def _note_kept(self, folder: str, published: Published) -> None:
        self.kept += [os.path.join(folder, new) for _, new in published.kept]
