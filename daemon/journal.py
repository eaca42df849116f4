"""Working memory that outlives a restart: what was read, what is being waited for, what was published.

Delete the journal and nothing but time is lost. So a damaged one is set aside and a new one begun; ``sentences`` tells.
"""

from __future__ import annotations

import contextlib
import math
import os
import sqlite3
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from typing import Any, NamedTuple, TypeVar

from spikeward.daemon.settle import Stamp, Waited

MIGRATIONS: tuple[str, ...] = (
    """
    create table files (
        root blob not null, path blob not null, size integer not null, mtime_ns text not null, inode text not null,
        sha256 text not null, layout_digest text not null, kind text not null, payload text not null,
        primary key (root, path)
    ) without rowid;
    create table waiting (
        root blob not null, path blob not null, size integer not null, mtime_ns text not null, inode text not null,
        seconds real not null,
        primary key (root, path)
    ) without rowid;
    create table idle (key text primary key, seconds real not null) without rowid;
    create table outputs (
        folder blob not null, name text not null, sha256 text not null,
        primary key (folder, name, sha256)
    ) without rowid;
    """,
)
"""Each script brings the journal from the version of its index to the next; a new journal takes them all."""

_LOST = (sqlite3.SQLITE_CORRUPT, sqlite3.SQLITE_NOTADB)
_MOVED = 1032  # SQLITE_READONLY_DBMOVED: the file was deleted or renamed while it was open
_BUSY_S = 5.0
_BRIEF_S = 0.5  # after the end was asked for
_ENDINGS = ("", "-wal", "-shm", "-journal")  # of the files that belong together

Answer = TypeVar("Answer")


class JournalRefused(Exception):
    """The journal must not be used: one sentence for a person."""


class JournalUnavailable(OSError):
    """The journal cannot be used at the moment (full disk, locked by another program): one sentence with the reason.

    An ``OSError``, because it is met and passes like any other refusal of a disk.
    """

    def __init__(self, path: str, reason: str) -> None:
        super().__init__()
        self.filename = path
        self.strerror = f"the journal cannot be used now ({reason})"

    def __str__(self) -> str:
        remedy = "see that its folder can be written to, has room, and that no other program holds it; then start again"
        return f"{self.filename}: {self.strerror}; {remedy}"


class FileRecord(NamedTuple):
    """One file as it was read: ``layout_digest`` says in which way, ``kind`` and ``payload`` what came out."""

    root: str
    path: str
    stamp: Stamp
    sha256: str
    layout_digest: str
    kind: str
    payload: str


class Journal:
    """The journal at ``path``, whose folder exists. One connection; used from the thread that opened it.

    Raises ``JournalRefused`` for a journal of a newer version of this program, ``JournalUnavailable`` where it cannot
    be opened now. Every method may raise ``JournalUnavailable``; then nothing of its call was recorded.
    """

    def __init__(self, path: str, migrations: Sequence[str] = MIGRATIONS, busy_s: float = _BUSY_S) -> None:
        self.sentences: list[str] = []
        self._path = path
        self._migrations = migrations
        self._busy_s = busy_s
        self._depth = 0
        self._connection = self._open_or_rebuild()

    def hurry(self) -> None:
        """From now on another program that locks the journal is waited for only briefly: the end was asked for."""
        self._busy_s = min(self._busy_s, _BRIEF_S)
        with contextlib.suppress(sqlite3.Error):
            self._connection.execute(f"pragma busy_timeout = {self._busy_s * 1000:.0f}")

    def close(self) -> None:
        """Fold the log into the journal and close it."""
        with contextlib.suppress(sqlite3.Error):
            self._connection.close()

    @contextlib.contextmanager
    def together(self) -> Iterator[None]:
        """All that is recorded inside stands or falls as one."""
        if self._depth:
            yield
            return
        self._run(lambda db: db.execute("begin immediate"))
        self._depth = 1
        try:
            yield
        except BaseException:
            self._depth = 0
            with contextlib.suppress(sqlite3.Error):
                self._connection.execute("rollback")
            raise
        self._depth = 0
        self._run(lambda db: db.execute("commit") if db.in_transaction else None)

    def load_files(self) -> list[FileRecord]:
        """Every file that was read, in the order of root and path."""
        return self._load("select * from files order by root, path", _file_record)

    def record_files(self, records: Iterable[FileRecord]) -> None:
        """Remember files as read, in place of what was known of the same paths; they are no longer waited for."""
        rows = [(*_place(each.root, each.path), *_numbers(each.stamp), *each[3:]) for each in records]
        with self.together():
            self._many("insert or replace into files values (?, ?, ?, ?, ?, ?, ?, ?, ?)", rows)
            self._many("delete from waiting where root = ? and path = ?", [row[:2] for row in rows])

    def forget(self, places: Iterable[tuple[str, str]]) -> None:
        """Forget files (root, path) that are gone."""
        rows = [_place(root, path) for root, path in places]
        with self.together():
            self._many("delete from files where root = ? and path = ?", rows)
            self._many("delete from waiting where root = ? and path = ?", rows)

    def load_waiting(self) -> list[Waited[tuple[str, str]]]:
        """The files that were being waited for, as ``Settling`` takes them."""
        return self._load("select * from waiting order by root, path", _waited)

    def record_waiting(self, waiting: Iterable[Waited[tuple[str, str]]]) -> None:
        """Remember these files, and only these, as being waited for."""
        rows = [(*_place(*each.place), *_numbers(each.stamp), each.seconds) for each in waiting]
        with self.together():
            self._many("delete from waiting", [()])
            self._many("insert into waiting values (?, ?, ?, ?, ?, ?)", rows)

    def load_idle(self) -> dict[str, float]:
        """Seconds for which nothing has arrived, by the key's text."""
        return dict(self._load("select key, seconds from idle", _quiet))

    def record_idle(self, idle: Mapping[str, float]) -> None:
        """Remember these times, and only these."""
        with self.together():
            self._many("delete from idle", [()])
            self._many("insert into idle values (?, ?)", list(idle.items()))

    def load_outputs(self) -> dict[tuple[str, str], set[str]]:
        """Digests of what may stand under each output (folder, name) by our own hand."""
        found: dict[tuple[str, str], set[str]] = {}
        for folder, name, sha256 in self._load("select * from outputs", _output):
            found.setdefault((folder, name), set()).add(sha256)
        return found

    def intend_outputs(self, folder: str, files: Mapping[str, str]) -> None:
        """Remember digests by name *before* they are published: a run cut short leaves nothing that looks foreign."""
        rows = [(os.fsencode(folder), name, sha256) for name, sha256 in files.items()]
        self._many("insert or ignore into outputs values (?, ?, ?)", rows)

    def record_outputs(self, folder: str, files: Mapping[str, str]) -> None:
        """These were published: what stood under the names before is forgotten."""
        rows = [(os.fsencode(folder), name, sha256) for name, sha256 in files.items()]
        with self.together():
            self._many("delete from outputs where folder = ? and name = ? and sha256 <> ?", rows)
            self._many("insert or ignore into outputs values (?, ?, ?)", rows)

    def _load(self, query: str, meaning: Callable[[Sequence[Any]], Answer]) -> list[Answer]:
        """What the rows of a query mean; a journal with a row that means nothing is no better than a damaged one."""
        try:
            return [meaning(row) for row in self._run(lambda db: db.execute(query).fetchall())]
        except (TypeError, ValueError):
            self._rebuild("holds something that no journal holds")
            return []

    def _many(self, statement: str, rows: Sequence[Sequence[Any]]) -> None:
        def work(db: sqlite3.Connection) -> None:
            db.executemany(statement, rows)

        if not rows:
            return
        with self.together():
            self._run(work)

    def _run(self, work: Callable[[sqlite3.Connection], Answer]) -> Answer:
        """Do one thing with the journal; where it turns out to be lost, once more with a new one."""
        if not self._in_place():
            self._rebuild("was deleted or replaced while it was in use")
        try:
            return work(self._connection)
        except sqlite3.DatabaseError as error:
            if not _is_lost(error) and " columns but " not in str(error):
                raise JournalUnavailable(self._path, str(error)) from error
            self._rebuild(f"is damaged ({error})")
        try:
            return work(self._connection)
        except sqlite3.DatabaseError as error:
            raise JournalUnavailable(self._path, str(error)) from error

    def _in_place(self) -> bool:
        try:
            return os.stat(self._path).st_ino == self._inode
        except FileNotFoundError:
            return False
        except OSError as error:
            raise JournalUnavailable(self._path, str(error)) from error

    def _open_or_rebuild(self) -> sqlite3.Connection:
        if os.path.isdir(self._path):
            self._set_aside("is a folder and no file")
        try:
            return self._open()
        except sqlite3.DatabaseError as error:
            if not _is_lost(error):
                raise JournalUnavailable(self._path, str(error)) from error
            self._set_aside(f"is damaged ({error})")
        try:
            return self._open()
        except sqlite3.DatabaseError as error:
            raise JournalUnavailable(self._path, str(error)) from error

    def _open(self) -> sqlite3.Connection:
        db = sqlite3.connect(self._path, timeout=self._busy_s, isolation_level=None)
        try:
            _check(db)
            stands = os.path.getsize(self._path) > 0  # after the check, which takes back what was never finished
            if _version(db) < 0 or (stands and not _version(db)):
                raise _lost("what is left of it is no journal")
            self._migrate(db)
            db.execute("pragma journal_mode = wal")
            db.execute("pragma synchronous = full")
            self._inode = os.stat(self._path).st_ino
        except BaseException:
            db.close()
            raise
        return db

    def _migrate(self, db: sqlite3.Connection) -> None:
        version = _version(db)
        newest = len(self._migrations)
        if version > newest:
            raise JournalRefused(
                f"The journal {self._path} was written by a newer version of spikeward (its version is {version}; this "
                f"program knows up to {newest}). Use the newer version, or move the file away: only time is lost."
            )
        if 0 < version < newest:
            copy = f"{self._path}.version-{version}"
            with contextlib.closing(sqlite3.connect(copy)) as target:
                db.backup(target)
            self.sentences.append(f"The journal was brought to version {newest}; the old one is kept as {copy}.")
        for number in range(version, newest):
            db.executescript(f"begin; {self._migrations[number]}; pragma user_version = {number + 1}; commit;")

    def _rebuild(self, why: str) -> None:
        """Begin anew; whatever transaction was open begins anew with it, without what was recorded in it so far."""
        with contextlib.suppress(sqlite3.Error):
            self._connection.close()
        try:
            os.makedirs(os.path.dirname(self._path) or ".", exist_ok=True)
        except OSError as error:
            raise JournalUnavailable(self._path, str(error)) from error
        self._set_aside(why)
        self._connection = self._open_or_rebuild()
        if self._depth:
            self._connection.execute("begin immediate")

    def _set_aside(self, why: str) -> None:
        number = 1
        while os.path.lexists(f"{self._path}.damaged-{number}"):
            number += 1
        aside = f"{self._path}.damaged-{number}"
        try:
            for ending in _ENDINGS:
                with contextlib.suppress(FileNotFoundError):
                    os.replace(self._path + ending, aside + ending)
        except OSError as error:
            raise JournalUnavailable(self._path, str(error)) from error
        where = f" What was left of it is kept as {aside}." if os.path.exists(aside) else ""
        self.sentences.append(f"The journal {self._path} {why}; a new one was begun, all files are read again.{where}")


def _check(db: sqlite3.Connection) -> None:
    answer = db.execute("pragma quick_check(1)").fetchone()[0]
    if answer != "ok":
        raise _lost(str(answer).replace("\n", " "))


def _version(db: sqlite3.Connection) -> int:
    version: int = db.execute("pragma user_version").fetchone()[0]
    return version


def _lost(why: str) -> sqlite3.DatabaseError:
    error = sqlite3.DatabaseError(why)
    error.sqlite_errorcode = sqlite3.SQLITE_CORRUPT
    return error


def _is_lost(error: sqlite3.DatabaseError) -> bool:
    code = getattr(error, "sqlite_errorcode", None)
    missing_table = code == sqlite3.SQLITE_ERROR and "no such" in str(error)
    return code is not None and (code == _MOVED or code & 0xFF in _LOST or missing_table)


def _place(root: str, path: str) -> tuple[bytes, bytes]:
    return os.fsencode(root), os.fsencode(path)


def _numbers(stamp: Stamp) -> tuple[int, str, str]:
    """Times of files far in the future and inodes of network shares exceed the integers of the journal."""
    return stamp.size, str(stamp.mtime_ns), str(stamp.inode)


def _file_record(row: Sequence[Any]) -> FileRecord:
    _must_be(row, bytes, bytes, int, str, str, str, str, str, str)
    return FileRecord(os.fsdecode(row[0]), os.fsdecode(row[1]), _stamp(row[2:5]), row[5], row[6], row[7], row[8])


def _waited(row: Sequence[Any]) -> Waited[tuple[str, str]]:
    _must_be(row, bytes, bytes, int, str, str, float)
    return Waited((os.fsdecode(row[0]), os.fsdecode(row[1])), _stamp(row[2:5]), row[5])


def _quiet(row: Sequence[Any]) -> tuple[str, float]:
    _must_be(row, str, float)
    return row[0], row[1]


def _output(row: Sequence[Any]) -> tuple[str, str, str]:
    _must_be(row, bytes, str, str)
    return os.fsdecode(row[0]), row[1], row[2]


def _stamp(row: Sequence[Any]) -> Stamp:
    return Stamp(row[0], int(row[1]), int(row[2]))


def _must_be(row: Sequence[Any], *types: type) -> None:
    """Columns take values of any type, whatever they were declared as; times are finite."""
    if tuple(map(type, row)) != types or not all(math.isfinite(each) for each in row if type(each) is float):
        raise TypeError
