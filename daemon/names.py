"""The names of our own files, those that are never read, and how any name is shown to a person."""

from __future__ import annotations

import hashlib
import re
import unicodedata
from collections import defaultdict
from collections.abc import Iterable
from dataclasses import replace

from spikeward.daemon.disk import TEMPORARY
from spikeward.rules.outcomes import FAIL, PASS, WAITING, WARN
from spikeward.rules.records import BatchKey, SeriesKey

VERDICTS = (FAIL, WAITING, WARN, PASS)
SUMMARY, RESULT, BOARD, TABLE = ".summary.html", ".result.json", ".board.html", ".results.csv"
UNREAD = ".unread.flag"
HOLD = "HOLD.flag"
STATION = ".spikeward-station"
LONGEST_STEM = 120  # bytes; with the longest suffix and a temporary prefix a name stays below the usual 255

_SUFFIXES = (SUMMARY, RESULT, BOARD, TABLE, UNREAD, *(f".{verdict}.flag" for verdict in VERDICTS))
_KEPT = re.compile(r"\.kept-[0-9]+$")
_UNSAFE_PART = re.compile(rb"[^A-Za-z0-9.-]")
_UNSAFE_NAME = re.compile(rb"[^A-Za-z0-9._-]")

IGNORED_ENDINGS = {
    ".part": "a download or copy that is not finished",
    ".partial": "a download or copy that is not finished",
    ".filepart": "a download or copy that is not finished",
    ".crdownload": "a download or copy that is not finished",
    ".tmp": "a temporary file",
    ".temp": "a temporary file",
    ".swp": "an editor's working file",
    ".swo": "an editor's working file",
    ".bak": "a backup copy",
    "~": "an editor's backup copy",
}
IGNORED_NAMES = {
    "thumbs.db": "a picture cache of the desktop",
    "ehthumbs.db": "a picture cache of the desktop",
    "desktop.ini": "settings of the desktop",
    "__macosx": "side files of an archive program",
    "@eadir": "an index of a file server",
    "$recycle.bin": "a waste basket",
    "system volume information": "a folder of the operating system",
    "lost+found": "a folder of the operating system",
}

_IGNORED_ENDINGS = tuple(IGNORED_ENDINGS)


def flag_name(stem: str, verdict: str) -> str:
    """The name of a series' flag file."""
    return f"{stem}.{verdict}.flag"


def unread_name(file_name: str) -> str:
    """The name of the flag beside a file that cannot be read."""
    return _limited(_led(_escaped(file_name, _UNSAFE_NAME)), (file_name,)) + UNREAD


def series_stem(key: SeriesKey) -> str:
    """What the names of a series' files begin with.

    Everything outside ``A-Z a-z 0-9 . -`` is written %XX by its UTF-8 bytes; the parts are joined with ``_``. The role
    is left out for a sample of a named batch. A long stem is cut and ends with a hash of batch, role and sample.
    """
    role = key.role.replace("_", "-")
    parts = [role, key.sample] if not key.batch else [key.batch, key.sample]
    if key.batch and key.role != "sample":
        parts.insert(1, role)
    stem = "_".join(_escaped(part, _UNSAFE_PART) for part in parts)
    return _limited(_led(stem), (key.batch, key.role, key.sample))


def batch_stem(key: BatchKey) -> str:
    """What the names of a batch's files begin with; ``folder`` where the batch is the folder itself."""
    if not key.batch:
        return "folder"
    return _limited(_led(_escaped(key.batch, _UNSAFE_PART)), (key.batch,))


def batch_words(key: BatchKey) -> str:
    """A batch as a sentence names it: by its own name, else by its folder."""
    return shown(key.batch or key.folder or key.root)


def stems(keys: Iterable[SeriesKey]) -> tuple[dict[SeriesKey, str], set[SeriesKey]]:
    """The stem of each series, and the series whose files a folder could not tell apart.

    Two series of one folder clash when their names differ only in capitals or in Unicode form, or not at all.
    """
    by_name: dict[tuple[str, str, str], list[SeriesKey]] = defaultdict(list)
    found = {}
    for key in set(keys):
        found[key] = series_stem(key)
        alike = series_stem(replace(key, batch=folded(key.batch), sample=folded(key.sample)))
        by_name[key.root, key.folder, alike.lower()].append(key)
    return found, {key for several in by_name.values() if len(several) > 1 for key in several}


def folded(name: str) -> str:
    """A name as it is compared: Unicode form C, capitals folded."""
    if name.isascii():
        return name.lower()
    return unicodedata.normalize("NFC", unicodedata.normalize("NFC", name).casefold())


def is_ours(name: str) -> bool:
    """Whether a file's name is reserved for what the daemon writes; such files are never read as data."""
    if name.startswith((TEMPORARY, STATION)):
        return True
    if ".kept-" in name:
        name = _KEPT.sub("", name)
    return name.endswith(_SUFFIXES) or name == HOLD


def ignored(name: str) -> str | None:
    """Why a file or folder of this name is never read, or None: the listed rule that takes it."""
    if name.startswith("."):
        return "hidden"
    if name.startswith("~$"):
        return "the lock file of an office program"
    if name.startswith("#") and name.endswith("#"):
        return "an editor's working file"
    lowered = name.lower()
    if lowered in IGNORED_NAMES:
        return IGNORED_NAMES[lowered]
    if not lowered.endswith(_IGNORED_ENDINGS):
        return None
    return next(reason for ending, reason in IGNORED_ENDINGS.items() if lowered.endswith(ending))


def shown(name: str) -> str:
    """A name or path for a sentence: what does not print, or turns the direction of writing, is escaped."""
    if name.isascii() and name.isprintable() and "\\" not in name:
        return name
    return "".join(_shown(character) for character in name)


def _shown(character: str) -> str:
    code = ord(character)
    if character == "\\":
        return "\\\\"
    if character.isprintable():
        return character
    if 0xDC80 <= code <= 0xDCFF:  # a byte that is not valid UTF-8
        return f"\\x{code - 0xDC00:02x}"
    return f"\\u{code:04x}" if code <= 0xFFFF else f"\\U{code:08x}"


def _bytes(text: str) -> bytes:
    try:
        return text.encode("utf-8", "surrogateescape")
    except UnicodeEncodeError:  # lone surrogates that no file name can carry, out of a file's content
        return text.encode("utf-8", "surrogatepass")


def _escaped(text: str, unsafe: re.Pattern[bytes]) -> str:
    return unsafe.sub(lambda match: b"%%%02X" % match[0][0], _bytes(text)).decode("ascii")


def _led(stem: str) -> str:
    """No stem is hidden, and none looks like an option of a command."""
    return f"%{ord(stem[0]):02X}{stem[1:]}" if stem[:1] in (".", "-") else stem


def _limited(stem: str, identity: tuple[str, ...]) -> str:
    if len(stem) <= LONGEST_STEM:
        return stem
    cut = stem[:LONGEST_STEM]
    torn = cut.rfind("%", LONGEST_STEM - 2)
    digest = hashlib.sha256(b"\0".join(_bytes(part) for part in identity)).hexdigest()
    return f"{cut if torn < 0 else cut[:torn]}_{digest[:12]}"
