"""The journal may be lost, never wrong: damaged, deleted, locked, older, newer, on a full disk."""

from __future__ import annotations

import contextlib
import os
import random
import shutil
import signal
import sqlite3
import subprocess
import sys
from pathlib import Path

import pytest

from spikeward.daemon.journal import MIGRATIONS, FileRecord, Journal, JournalRefused, JournalUnavailable
from spikeward.daemon.settle import Stamp, Waited


def record(path: str, root: str = "in", payload: str = "[null,[],[]]") -> FileRecord:
    return FileRecord(root, path, Stamp(10, 1_700_000_000_000_000_000, 42), "ab" * 32, "cd" * 32, "table", payload)


@pytest.fixture
def path(tmp_path: Path) -> str:
    return str(tmp_path / "journal.sqlite3")


@contextlib.contextmanager
def opened(path: str, **how: object):
    journal = Journal(path, **how)
    try:
        yield journal
    finally:
        journal.close()


def test_what_was_recorded_is_there_after_a_restart(path: str) -> None:
    waiting = [
        Waited(("in", "b.csv"), Stamp(0, -1, 2**64 - 1), 1.5),
        Waited(("in", "\udcff\n.csv"), Stamp(1, 2**80, 3), 0.0),
    ]
    with opened(path) as journal:
        journal.record_files([record("b.csv"), record("a.csv"), record("\udcff.csv", root="é")])
        journal.record_waiting(waiting)
        journal.record_idle({"in||MD1": 12.25})
        journal.intend_outputs("/data/\udcff", {"MD1_07.result.json": "aa"})
        assert journal.sentences == []
    with opened(path) as journal:
        assert [each.path for each in journal.load_files()] == ["a.csv", "b.csv", "\udcff.csv"]
        assert journal.load_files()[1] == record("b.csv")
        assert sorted(journal.load_waiting()) == sorted(waiting)
        assert journal.load_idle() == {"in||MD1": 12.25}
        assert journal.load_outputs() == {("/data/\udcff", "MD1_07.result.json"): {"aa"}}


def test_a_file_that_was_read_replaces_itself_and_waits_no_longer(path: str) -> None:
    with opened(path) as journal:
        journal.record_waiting(
            [Waited(("in", "a.csv"), Stamp(1, 1, 1), 0.0), Waited(("in", "b.csv"), Stamp(1, 1, 1), 0.0)]
        )
        journal.record_files([record("a.csv", payload="old")])
        journal.record_files([record("a.csv", payload="new")])
        assert [each.payload for each in journal.load_files()] == ["new"]
        assert [each.place for each in journal.load_waiting()] == [("in", "b.csv")]
        journal.forget([("in", "a.csv"), ("in", "b.csv"), ("in", "never.csv")])
        assert journal.load_files() == []
        assert journal.load_waiting() == []


def test_what_waits_is_replaced_as_a_whole(path: str) -> None:
    with opened(path) as journal:
        journal.record_waiting([Waited(("in", "a.csv"), Stamp(1, 1, 1), 0.5)])
        journal.record_waiting([])
        journal.record_idle({"x": 1.0})
        journal.record_idle({"y": 2.0})
        assert journal.load_waiting() == []
        assert journal.load_idle() == {"y": 2.0}


def test_outputs_remember_what_was_intended_until_it_is_done(path: str) -> None:
    with opened(path) as journal:
        journal.intend_outputs("/d", {"a": "1", "b": "1"})
        journal.record_outputs("/d", {"a": "1", "b": "1"})
        journal.intend_outputs("/d", {"a": "2"})
        assert journal.load_outputs()[("/d", "a")] == {"1", "2"}
        journal.record_outputs("/d", {"a": "2"})
        assert journal.load_outputs() == {("/d", "a"): {"2"}, ("/d", "b"): {"1"}}


def test_what_is_recorded_together_stands_or_falls_together(path: str) -> None:
    with opened(path) as journal:
        with contextlib.suppress(KeyError), journal.together():
            journal.record_files([record("a.csv")])
            raise KeyError
        assert journal.load_files() == []
        with journal.together():
            journal.record_files([record("a.csv")])
            journal.record_idle({"x": 1.0})
        assert len(journal.load_files()) == 1


def test_it_is_durable_and_shared_as_stated(path: str) -> None:
    with opened(path) as journal:
        assert journal._run(lambda db: db.execute("pragma journal_mode").fetchone()) == ("wal",)
        assert journal._run(lambda db: db.execute("pragma synchronous").fetchone()) == (2,)
        with contextlib.closing(sqlite3.connect(path)) as other:
            assert other.execute("pragma user_version").fetchone() == (len(MIGRATIONS),)


# ---- damage ---------------------------------------------------------------------------------------------------------


def filled(path: str, count: int = 300) -> None:
    with opened(path) as journal:
        journal.record_files([record(f"{number:05}.csv", payload="x" * 500) for number in range(count)])


def rebuilt(path: str) -> None:
    """It opens, says so, keeps what was left, and works."""
    with opened(path) as journal:
        found = journal.load_files()
        assert found == []
        assert len(journal.sentences) == 1
        assert "a new one was begun" in journal.sentences[0]
        assert os.path.exists(path + ".damaged-1")
        journal.record_files([record("a.csv")])
    with opened(path) as journal:
        assert len(journal.load_files()) == 1
        assert journal.sentences == []


@pytest.mark.parametrize("size", [1, 50, 100, 4096, 8192, 8192 + 17])
def test_truncated(path: str, size: int) -> None:
    filled(path)
    os.truncate(path, size)
    rebuilt(path)


def test_truncated_to_nothing_is_a_new_journal(path: str) -> None:
    filled(path)
    os.truncate(path, 0)
    with opened(path) as journal:
        assert journal.load_files() == []


@pytest.mark.parametrize("page", [0, 1, 2, 5, 20])
@pytest.mark.parametrize("how", ["noise", "zeros"])
def test_a_page_overwritten(path: str, page: int, how: str) -> None:
    filled(path)
    with open(path, "r+b") as file:
        file.seek(4096 * page)
        file.write(random.Random(page).randbytes(4096) if how == "noise" else bytes(4096))
    rebuilt(path)


def test_something_else_altogether(path: str) -> None:
    Path(path).write_bytes(b"this is a letter to the laboratory\n" * 100)
    rebuilt(path)


FALSE = {
    "a size that is no number": "update files set size = 'large'",
    "a time that is no number": "update files set mtime_ns = 'yesterday'",
    "a path that is a number": "update files set path = 7 where path = (select min(path) from files)",
    "a waiting file without a time": "insert into waiting values (x'69', x'7a', 1, 'x', '1', 0.0)",
    "a wait that is a word": "insert into waiting values (x'69', x'7a', 1, '1', '1', 'long')",
    "a quiet time that is a word": "insert into idle values ('x', 'long')",
    "a quiet time without end": "insert into idle values ('x', 9e999)",
    "an output whose name is bytes": "insert into outputs values (x'2f', x'ff', 'ab')",
    "another table of that name": "drop table files; create table files (a)",
    "a version below nothing": "pragma user_version = -5",
    "no version": "pragma user_version = 0",
}


@pytest.mark.parametrize("how", FALSE)
def test_well_formed_but_false_it_is_set_aside(path: str, how: str) -> None:
    filled(path, 2)
    with contextlib.closing(sqlite3.connect(path)) as other:
        other.executescript(FALSE[how])
    with opened(path) as journal:
        assert journal.load_waiting() == []
        assert journal.load_idle() == {}
        assert journal.load_outputs() == {}
        journal.record_files([record("a.csv")])
        journal.load_files()
        assert ["a new one was begun" in sentence for sentence in journal.sentences] == [True]
    with opened(path) as journal:
        journal.record_files([record("b.csv")])
        assert [each.path for each in journal.load_files()][-1] == "b.csv"
        assert journal.sentences == []


def test_a_folder_in_its_place_is_set_aside(path: str) -> None:
    os.mkdir(path)
    with opened(path) as journal:
        journal.record_files([record("a.csv")])
        assert "is a folder" in journal.sentences[0]
        assert os.path.isdir(path + ".damaged-1")


def test_cut_short_while_it_was_made_for_the_first_time(path: str, tmp_path: Path) -> None:
    """What a kill leaves then: pages of a transaction that was never finished, and the log to take them back."""
    begun = str(tmp_path / "begun")
    with contextlib.closing(sqlite3.connect(begun, isolation_level=None)) as db:
        db.execute("pragma cache_size = 1")
        db.executescript(f"begin; {MIGRATIONS[0]}")
        for number in range(200):
            db.execute("insert into idle values (?, 1.0)", (f"{number}" * 100,))
        assert os.path.getsize(begun) > 0
        for ending in ("", "-journal"):
            shutil.copy(begun + ending, path + ending)
    with opened(path) as journal:
        assert journal.sentences == []
        journal.record_files([record("a.csv")])
        assert len(journal.load_files()) == 1
        assert journal.load_idle() == {}


def test_its_whole_folder_deleted_while_it_runs(tmp_path: Path) -> None:
    path = str(tmp_path / "state" / "journal.sqlite")
    os.mkdir(tmp_path / "state")
    with opened(path) as journal:
        journal.record_files([record("a.csv")])
        shutil.rmtree(tmp_path / "state")
        journal.record_files([record("b.csv")])
        assert [each.path for each in journal.load_files()] == ["b.csv"]
        assert "was deleted" in journal.sentences[0]


def test_several_damaged_ones_are_all_kept(path: str) -> None:
    for number in (1, 2, 3):
        Path(path).write_bytes(b"no journal" * 100)
        with opened(path):
            assert os.path.exists(f"{path}.damaged-{number}")


def test_a_page_overwritten_while_it_runs(path: str) -> None:
    """Found when the damaged page is met; from then on a new journal is used, and no call fails."""
    filled(path, 3000)
    with opened(path) as journal:
        with open(path, "r+b") as file:
            for page in range(1, os.path.getsize(path) // 4096):
                file.seek(4096 * page)
                file.write(b"\x55" * 4096)
        journal._connection.execute("pragma cache_size = 0")
        found = journal.load_files()
        journal.record_files([record("a.csv")])
        assert found == []
        assert "is damaged" in journal.sentences[0]
        assert len(journal.load_files()) == 1


@pytest.mark.parametrize("with_log", [True, False])
def test_deleted_while_it_runs(path: str, with_log: bool) -> None:
    with opened(path) as journal:
        journal.record_files([record("a.csv")])
        for ending in ("", "-wal", "-shm") if with_log else ("",):
            os.unlink(path + ending)
        journal.record_files([record("b.csv")])
        assert [each.path for each in journal.load_files()] == ["b.csv"]
        assert "was deleted" in journal.sentences[0]
    with opened(path) as journal:
        assert [each.path for each in journal.load_files()] == ["b.csv"]


def test_replaced_while_it_runs(path: str, tmp_path: Path) -> None:
    filled(str(tmp_path / "other"), 2)
    with opened(path) as journal:
        journal.record_files([record("a.csv")])
        os.replace(tmp_path / "other", path)
        journal.record_files([record("b.csv")])
        assert [each.path for each in journal.load_files()] == ["b.csv"]


def test_deleted_in_the_middle_of_something(path: str) -> None:
    with opened(path) as journal:
        with journal.together():
            journal.record_files([record("a.csv")])
            os.unlink(path)
            journal.record_files([record("b.csv")])
        journal.record_files([record("c.csv")])
        assert [each.path for each in journal.load_files()] == ["b.csv", "c.csv"]


def test_deleted_in_the_middle_of_something_that_fails(path: str) -> None:
    with opened(path) as journal:
        with contextlib.suppress(KeyError), journal.together():
            os.unlink(path)
            journal.record_files([record("b.csv")])
            raise KeyError
        assert journal.load_files() == []


# ---- other programs, other versions, a full disk ---------------------------------------------------------------------


def test_locked_by_another_program_is_said_and_passes(path: str) -> None:
    with opened(path, busy_s=0.0) as journal, contextlib.closing(sqlite3.connect(path, isolation_level=None)) as other:
        other.execute("begin exclusive")
        with pytest.raises(JournalUnavailable, match="locked") as refused:
            journal.record_files([record("a.csv")])
        assert refused.value.filename == path
        other.execute("rollback")
        journal.record_files([record("a.csv")])
        assert len(journal.load_files()) == 1
        assert journal.sentences == []


def test_a_reader_that_copies_it_disturbs_nothing(path: str) -> None:
    with opened(path, busy_s=0.0) as journal, contextlib.closing(sqlite3.connect(path, isolation_level=None)) as other:
        journal.record_files([record("a.csv")])
        other.execute("begin")
        assert other.execute("select count(*) from files").fetchone() == (1,)
        journal.record_files([record("b.csv")])
        assert other.execute("select count(*) from files").fetchone() == (1,)


def test_from_a_newer_version_it_is_refused_and_left_alone(path: str) -> None:
    filled(path, 2)
    with contextlib.closing(sqlite3.connect(path)) as other:
        other.execute("pragma user_version = 99")
    before = Path(path).read_bytes()
    with pytest.raises(JournalRefused, match="newer version"):
        Journal(path)
    assert Path(path).read_bytes() == before


def test_from_an_older_version_it_is_migrated_after_a_copy(path: str) -> None:
    filled(path, 2)
    with opened(path, migrations=(*MIGRATIONS, "alter table idle add column since text")) as journal:
        assert len(journal.load_files()) == 2
        assert "is kept as" in journal.sentences[0]
    with contextlib.closing(sqlite3.connect(path)) as other:
        assert other.execute("pragma user_version").fetchone() == (len(MIGRATIONS) + 1,)
    with opened(path + ".version-1") as copy:
        assert len(copy.load_files()) == 2


def test_a_migration_that_fails_changes_nothing(path: str) -> None:
    filled(path, 2)
    with pytest.raises(JournalUnavailable):
        Journal(path, migrations=(*MIGRATIONS, "create table more (x); insert into idle values (1, 2, 3)"))
    with opened(path) as journal:
        assert len(journal.load_files()) == 2
        assert journal.sentences == []


def test_a_full_disk_is_said_and_passes(path: str) -> None:
    with opened(path) as journal:
        journal.record_files([record("a.csv")])
        journal._run(lambda db: db.execute("pragma max_page_count = 20"))
        with pytest.raises(JournalUnavailable, match="full"):
            journal.record_files([record(f"{number}.csv", payload="x" * 4000) for number in range(100)])
        assert [each.path for each in journal.load_files()] == ["a.csv"]
        journal._run(lambda db: db.execute("pragma max_page_count = 100000"))
        journal.record_files([record("b.csv")])
        assert len(journal.load_files()) == 2
        assert journal.sentences == []


def test_without_its_folder_it_cannot_be_opened_now(tmp_path: Path) -> None:
    with pytest.raises(JournalUnavailable, match="unable to open"):
        Journal(str(tmp_path / "nowhere" / "journal.sqlite3"))


def test_killed_while_writing_it_is_whole(path: str) -> None:
    """A writer is killed at moments that chance picks; what it said it had recorded is there."""
    program = (
        "import sys\n"
        "from spikeward.daemon.journal import *\n"
        "journal = Journal(sys.argv[1])\n"
        "for number in range(100_000):\n"
        "    row = FileRecord('in', f'{number:06}', Stamp(1, 1, 1), 'a', 'b', 'table', 'x' * 3000)\n"
        "    journal.record_files([row])\n"
        "    print(number, flush=True)\n"
    )
    for lines in (1, 7, 60):
        writer = subprocess.Popen([sys.executable, "-c", program, path], stdout=subprocess.PIPE, text=True)
        assert writer.stdout is not None
        for _ in range(lines):
            said = int(writer.stdout.readline())
        writer.send_signal(signal.SIGKILL)
        said = max([said, *(int(line) for line in writer.stdout.read().splitlines() if line)])
        writer.stdout.close()
        writer.wait()
        with opened(path) as journal:
            assert journal.sentences == []
            assert len(journal.load_files()) >= said + 1
