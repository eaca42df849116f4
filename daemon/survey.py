"""What a watched folder holds now, and how that differs from what is known: the one way by which files are found."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field

from spikeward.daemon.disk import FILE, FOLDER, LINK, TEMPORARY, Disk, Listed
from spikeward.daemon.names import folded, ignored, is_ours, shown
from spikeward.daemon.settle import Stamp

DEEPEST = 200  # folders below the watched one
MOST = 2_000_000  # files


@dataclass(frozen=True, slots=True)
class Oddity:
    """Something in the tree that a person should know of, by its path below the watched folder."""

    path: str
    sentence: str


@dataclass(slots=True)
class Listing:
    """The regular files below ``start``, by path relative to the watched folder, with ``/`` between the parts.

    ``unlisted`` holds the folders that could not be listed, with the reason: nothing is known of what they hold.
    ``away`` says why the watched folder itself could not be listed. ``leftovers`` are temporary files of an earlier
    run that was cut short; they may be removed before anything is published.
    """

    start: str = ""
    files: dict[str, Stamp] = field(default_factory=dict)
    folders: list[str] = field(default_factory=list)
    oddities: list[Oddity] = field(default_factory=list)
    unlisted: dict[str, str] = field(default_factory=dict)
    leftovers: list[str] = field(default_factory=list)
    away: str = ""
    root_inode: int = 0


@dataclass(frozen=True, slots=True)
class Changes:
    """How a listing differs from what is known; every part in the order of its paths."""

    new: tuple[str, ...]
    changed: tuple[str, ...]
    vanished: tuple[str, ...]


def survey(disk: Disk, root: str, start: str = "", deepest: int = DEEPEST, most: int = MOST) -> Listing:
    """List the regular files of a watched folder, or of its folder ``start``, with all folders below.

    Links are not followed, nothing is opened, our own files and those that a listed rule ignores are left out. A folder
    that cannot be listed is no error: the rest is listed, and the listing says so.
    """
    listing = Listing(start)
    try:
        top = disk.look(root)
    except OSError as error:
        top, listing.away = None, _reason(error)
    if top is None:
        listing.away = listing.away or "the folder is not there"
        return listing
    listing.root_inode = top.inode
    left = [(start, start.count("/") + 1 if start else 0)]
    while left:
        folder, depth = left.pop()
        try:
            found = disk.entries(f"{root}/{folder}" if folder else root, _Skip(listing, folder))
        except OSError as error:
            if not folder:
                listing.away = _reason(error)
            listing.unlisted[folder] = _reason(error)
            continue
        below = _sort_out(found, folder, listing)
        if depth >= deepest:
            _too_deep(below, deepest, listing)
        else:
            left += [(each, depth + 1) for each in below]
        if len(listing.files) > most:
            for each, _ in left:
                listing.unlisted[each] = f"more than {most} files in the watched folder"
            break
    return listing


def compare(listing: Listing, known: Mapping[str, Stamp]) -> Changes:
    """What is new, changed and gone below ``listing.start``; nothing is gone that could not be looked for."""
    new = [path for path in listing.files if path not in known]
    changed = [path for path, stamp in listing.files.items() if path in known and known[path] != stamp]
    vanished: Iterable[str] = ()
    if not listing.away:
        vanished = [path for path in known if path not in listing.files and _was_listed(path, listing)]
    return Changes(tuple(sorted(new)), tuple(sorted(changed)), tuple(sorted(vanished)))


class Presence:
    """Whether a watched folder's share is away; then no file of it counts as gone.

    A share that is not mounted often looks like an empty folder. An empty listing of a folder that held files is
    believed when it is seen twice, and only of the folder that held them: an empty mount point is another one.
    """

    def __init__(self) -> None:
        self._inode: int | None = None
        self._empty = 0

    def away(self, listing: Listing, held_files: bool) -> str:
        """Why the share counts as away, or nothing; ``held_files``: whether any file of it is known."""
        if listing.away:
            self._empty = 0
            return listing.away
        if listing.start:
            return ""
        if listing.files or listing.unlisted or not held_files:
            self._inode = listing.root_inode
            self._empty = 0
            return ""
        self._empty += 1
        if self._inode is not None and listing.root_inode != self._inode:
            return "the folder is empty and is not the one that held files before; perhaps a share is not mounted"
        return "the folder held files and is empty now" if self._empty < 2 else ""


class _Skip:
    """Names that need no look at the disk; a temporary file of our own is noted on the way."""

    def __init__(self, listing: Listing, folder: str) -> None:
        self._listing = listing
        self._folder = folder

    def __call__(self, name: str) -> bool:
        if name.startswith(TEMPORARY):
            self._listing.leftovers.append(_join(self._folder, name))
            return True
        return is_ours(name) or ignored(name) is not None


def _sort_out(found: list[Listed], folder: str, listing: Listing) -> list[str]:
    """Enter files and oddities of one folder; the folders in it are returned."""
    below = []
    prefix = f"{folder}/" if folder else ""
    for name, kind, size, mtime_ns, inode in found:
        path = prefix + name
        if kind == FILE:
            listing.files[path] = Stamp(size, mtime_ns, inode)
        elif kind == FOLDER:
            below.append(path)
        else:
            listing.oddities.append(Oddity(path, _unopened(path, kind)))
    listing.folders += below
    if len({folded(each.name) for each in found}) < len(found):
        listing.oddities += _twins(folder, found)
    return below


def _unopened(path: str, kind: str) -> str:
    if kind == LINK:
        return f"{shown(path)} is a link; links are not followed. Copy the file or folder itself here."
    return f"{shown(path)} is not a regular file (a pipe, socket or device) and is never opened. Take it away."


def _twins(folder: str, found: list[Listed]) -> list[Oddity]:
    alike: dict[str, list[str]] = defaultdict(list)
    for each in found:
        alike[folded(each.name)].append(each.name)
    where = shown(folder) or "the watched folder"
    oddities = []
    for names in sorted(sorted(names) for names in alike.values() if len(names) > 1):
        listed = " and ".join(shown(name) for name in names)
        sentence = f"{listed} in {where} differ only in capitals or in Unicode form. Both are read; rename one of them."
        oddities.append(Oddity(_join(folder, names[0]), sentence))
    return oddities


def _too_deep(below: list[str], deepest: int, listing: Listing) -> None:
    for path in below:
        listing.unlisted[path] = f"more than {deepest} folders deep"


def _join(folder: str, name: str) -> str:
    return f"{folder}/{name}" if folder else name


def _was_listed(path: str, listing: Listing) -> bool:
    if listing.start and not path.startswith(listing.start + "/"):
        return False
    if not listing.unlisted:
        return True
    folder = path
    while "/" in folder:
        folder = folder.rsplit("/", 1)[0]
        if folder in listing.unlisted:
            return False
    return True


def _reason(error: OSError) -> str:
    return error.strerror or type(error).__name__
