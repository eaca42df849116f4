"""Reader processes, with real ones: whatever a reader or a file does, only that file is reported and others go on."""

import errno
import hashlib
import os
import signal
import socket
import time
from collections.abc import Iterator
from contextlib import contextmanager
from multiprocessing.connection import wait
from pathlib import Path

import pytest

from spikeward.daemon import reading, workers
from spikeward.daemon.reading import ReadJob, read_file
from spikeward.daemon.settle import Stamp
from spikeward.daemon.workers import Readers
from spikeward.rules.records import Layout
from spikeward.rules.rulebook import BenchRule

COLUMNS = {"solution": "Solution", "signal": "Signal"}
LAYOUT = Layout("bench", columns=COLUMNS, unit="A")
GOOD = b"Solution,Signal\nX1_A0,0.125\n"

PLUGIN = """
import os, signal, subprocess, sys, time
from spikeward.rules.records import Entry, Table

class Reader:
    def read(self, content, layout):
        what = content.decode().strip()
        if what == "raises": raise ValueError("no such thing")
        if what == "leaves": sys.exit(3)
        if what == "hangs":
            while True: time.sleep(0.01)
        if what == "computes for ever":
            while True: pass
        if what == "is slow": time.sleep(1.2)
        if what == "hangs without timer":
            for number in (signal.SIGALRM, signal.SIGPROF): signal.signal(number, signal.SIG_IGN)
            while True: time.sleep(0.01)
        if what.startswith("starts another"):
            program = subprocess.Popen(["sleep", "600"])
            with open(layout.encoding, "a") as note: print(program.pid, file=note)
        if what == "starts another and hangs":
            while True: time.sleep(0.01)
        if what == "copies itself" and os.fork() == 0: time.sleep(0.05)
        if what == "kills itself": os.kill(os.getpid(), signal.SIGKILL)
        if what == "eats": bytearray(1 << 40)
        if what == "eats slowly":
            kept = []
            while True: kept.append(bytearray(1 << 24))
        if what == "exits": os._exit(7)
        if what == "crashes": os.kill(os.getpid(), signal.SIGSEGV)
        if what == "closes": os.closerange(3, 100)
        if what == "scribbles":
            for number in range(3, 20):
                try: os.write(number, b"hello" * 1000)
                except OSError: pass
            os._exit(0)
        if what == "interrupts":
            for number in range(3, 20):
                try: os.write(number, b"\\0\\0\\0\\5junk!")
                except OSError: pass
        if what == "writes":
            print("x" * 100000, flush=True); sys.stderr.write("y" * 100000); os.write(1, b"z" * 100000)
        if what == "is killed once" and not os.path.exists(layout.encoding):
            open(layout.encoding, "w").close()
            os.kill(os.getpid(), signal.SIGKILL)
        if what == "nothing": return None
        if what == "not a number": return Table((Entry(1, "X", "", "", "A", float("nan"), "nan"),))
        return Table((Entry(1, "X1_A0", "Cd", "", "A", 0.5, "0.5"),))

READER = Reader()
READS_NOTHING = object()
"""


@pytest.fixture
def plugin(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A package with a reader that does what its file says, as an installed one is found."""
    site = tmp_path / "site"
    (site / "wild-1.0.dist-info").mkdir(parents=True)
    (site / "wild_reader.py").write_text(PLUGIN)
    (site / "leaving_reader.py").write_text("import sys; sys.exit(4)")
    (site / "wild-1.0.dist-info" / "METADATA").write_text("Metadata-Version: 2.1\nName: wild\nVersion: 1.0\n")
    (site / "wild-1.0.dist-info" / "entry_points.txt").write_text(
        "[spikeward.readers]\nwild = wild_reader:READER\nmissing = wild_reader:NOWHERE\n"
        "idle = wild_reader:READS_NOTHING\ndelimited = wild_reader:READER\nleaving = leaving_reader:READER\n"
    )
    monkeypatch.setenv("PYTHONPATH", str(site))
    return tmp_path


def job_of(folder: Path, name: str, content: bytes, how: Layout | BenchRule = LAYOUT) -> ReadJob:
    path = folder / name
    path.write_bytes(content)
    return ReadJob(str(path), ("in", name, "way"), how)


def wild(folder: Path, what: str, number: int = 0) -> ReadJob:
    return job_of(folder, f"{what} {number}.wild", what.encode(), Layout("wild", "wild", encoding=str(folder / "once")))


def by_name(replies: list) -> dict:
    assert len({reply.key for reply in replies}) == len(replies)
    return {reply.key[1]: reply for reply in replies}


# ---- what a reply says -----------------------------------------------------------------------------------------------


@pytest.mark.parametrize("count", [0, 1, 2])
def test_files_are_hashed_and_read_the_same_with_any_number_of_workers(tmp_path: Path, count: int):
    jobs = [job_of(tmp_path, f"{number}.csv", GOOD.replace(b"0.125", b"%d.5" % number)) for number in range(100)]
    with Readers(count) as readers:
        found = by_name(readers.read_many(jobs))
        assert not readers.busy
    assert len(found) == 100
    for number in range(100):
        reply = found[f"{number}.csv"]
        assert reply.table.entries[0].signal == number + 0.5
        status = os.stat(tmp_path / f"{number}.csv")
        assert reply.stamp == Stamp(status.st_size, status.st_mtime_ns, status.st_ino)
        assert reply.sha256 == hashlib.sha256((tmp_path / f"{number}.csv").read_bytes()).hexdigest()
        assert (reply.sentence, reply.temporary) == ("", False)


def test_an_unreadable_file_is_told_with_its_place(tmp_path: Path):
    reply = read_file(job_of(tmp_path, "x.csv", b"Solution,Signal\nX1_A0,n.d.\n"))
    assert reply.sentence.startswith("row 2, column Signal: 'n.d.' is not a number")
    assert not reply.temporary
    assert reply.sha256
    assert reply.stamp.size == 27


def test_bench_entries_quote_the_path_and_hold_for_its_folder(tmp_path: Path):
    rule = BenchRule(("*",), {"sample": "Sample"}, {"mass": "Mass"})
    job = job_of(tmp_path, "b.csv", b"Sample,Mass\n7,0.5 g\n", rule)._replace(key=("in", "md/late/b.csv", "way"))
    with Readers(1) as readers:
        (reply,) = readers.read_many([job])
    assert [(entry.folder, entry.path, entry.sample, entry.values) for entry in reply.bench] == [
        ("md/late", "md/late/b.csv", "7", (("mass", "0.5 g"),))
    ]


# ---- what is never opened, and what is tried again -------------------------------------------------------------------


def test_links_pipes_sockets_and_folders_are_never_opened(tmp_path: Path):
    (tmp_path / "data.csv").write_bytes(GOOD)
    (tmp_path / "link.csv").symlink_to(tmp_path / "data.csv")
    os.mkfifo(tmp_path / "pipe.csv")
    (tmp_path / "folder.csv").mkdir()
    with socket.socket(socket.AF_UNIX) as server:
        server.bind(str(tmp_path / "s.csv"))
        for name in ("link.csv", "pipe.csv", "folder.csv", "s.csv"):
            reply = read_file(ReadJob(str(tmp_path / name), ("in", name, "way"), LAYOUT))
            assert "never opened" in reply.sentence, name
            assert not reply.temporary
            assert reply.stamp.inode == os.lstat(tmp_path / name).st_ino


def test_a_huge_file_is_refused_without_being_read(tmp_path: Path, monkeypatch: pytest.MonkeyPatch):
    with open(tmp_path / "huge.csv", "wb") as file:
        file.truncate(2 << 30)
    begun = time.monotonic()
    reply = read_file(ReadJob(str(tmp_path / "huge.csv"), ("in", "huge.csv", "way"), LAYOUT))
    assert "2048 MiB" in reply.sentence
    assert "64 MiB" in reply.sentence
    assert reply.sha256 == ""
    assert reply.stamp.size == 2 << 30
    assert time.monotonic() - begun < 1.0


def test_an_empty_file_is_waited_for(tmp_path: Path):
    reply = read_file(job_of(tmp_path, "x.csv", b""))
    assert reply.temporary
    assert "empty" in reply.sentence


def test_a_vanished_file_is_tried_again(tmp_path: Path):
    reply = read_file(ReadJob(str(tmp_path / "gone.csv"), ("in", "gone.csv", "way"), LAYOUT))
    assert reply.temporary
    assert os.strerror(errno.ENOENT) in reply.sentence


@pytest.mark.parametrize("number", [errno.EACCES, errno.EIO, errno.ESTALE, errno.EMFILE, errno.EAGAIN])
def test_trouble_of_the_disk_is_temporary_and_told(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, number: int):
    job = job_of(tmp_path, "x.csv", GOOD)

    def fails(*_: object) -> int:
        raise OSError(number, os.strerror(number), job.path)

    monkeypatch.setattr(reading.os, "open", fails)
    reply = read_file(job)
    assert reply.temporary
    assert os.strerror(number) in reply.sentence


def test_a_file_that_changes_while_it_is_read_is_tried_again(tmp_path: Path, monkeypatch: pytest.MonkeyPatch):
    job = job_of(tmp_path, "x.csv", GOOD)
    real, looks = os.fstat, []

    def grows(handle: int) -> os.stat_result:
        if looks:
            with open(job.path, "ab") as file:
                file.write(b"X1_A1,0.2\n")
        looks.append(handle)
        return real(handle)

    with monkeypatch.context() as patched:
        patched.setattr(reading.os, "fstat", grows)
        reply = read_file(job)
    assert len(looks) == 2
    assert reply.temporary
    assert "being written" in reply.sentence


def test_a_name_that_is_not_unicode_reaches_the_worker(tmp_path: Path):
    name = os.fsdecode(b"caf\xe9\n.csv")
    with Readers(1) as readers:
        (reply,) = readers.read_many([job_of(tmp_path, name, GOOD)])
    assert reply.key[1] == name
    assert reply.table is not None


# ---- readers from outside --------------------------------------------------------------------------------------------

ODD = {
    "raises": "ValueError: no such thing",
    "leaves": "SystemExit",
    "computes for ever": "did not come to an end within 0.5 s of work",
    "eats": "more memory than a reader may have",
    "eats slowly": "more memory than a reader may have",
    "exits": "with code 7",
    "crashes": "by SIGSEGV",
    "closes": "ended its process",
    "scribbles": "ended its process",
    "interrupts": "disturbed what its process answers",
    "nothing": "gave back something that is no table",
    "not a number": "gave back something that is no table",
}


def test_a_reader_that_misbehaves_costs_its_file_only(plugin: Path):
    jobs = [wild(plugin, what) for what in ODD]
    jobs += [wild(plugin, "writes"), wild(plugin, "fine")]
    jobs += [job_of(plugin, f"{number}.csv", GOOD) for number in range(60)]
    with Readers(2, seconds=0.5, memory=96 << 20) as readers:
        found = by_name(readers.read_many(jobs))
    assert len(found) == len(jobs)
    for what, said in ODD.items():
        reply = found[f"{what} 0.wild"]
        assert said in reply.sentence, what
        assert not reply.temporary
        # The content that did it is named, so that it is not read again and again.
        assert reply.sha256 == hashlib.sha256(what.encode()).hexdigest()
        assert reply.stamp.size == len(what)
    for name in ("writes 0.wild", "fine 0.wild"):
        assert found[name].table.entries[0].signal == 0.5
    assert all(found[f"{number}.csv"].table is not None for number in range(60))


def test_a_slow_machine_or_a_slow_share_makes_no_file_unread(plugin: Path):
    """The clock goes on while a process is not let run; only its own work counts against a reader."""
    with Readers(1, seconds=0.3) as readers:
        (reply,) = readers.read_many([wild(plugin, "is slow")])
        assert reply.table is not None
        readers.start([wild(plugin, "is slow", 1)])
        readers.replies(0.0)
        (worker,) = readers._workers
        worker.process.send_signal(signal.SIGSTOP)
        wait([worker.connection], 0.8)  # nothing can come of a stopped process
        worker.process.send_signal(signal.SIGCONT)
        (reply,) = readers.read_many([])
    assert reply.sentence == ""
    assert reply.table is not None


def test_opening_a_file_does_not_count_against_the_reader(tmp_path: Path, monkeypatch: pytest.MonkeyPatch):
    order: list[str] = []
    real = reading._content

    def content(path: str) -> tuple[bytes, Stamp]:
        order.append("opened and read")
        return real(path)

    @contextmanager
    def limited() -> Iterator[None]:
        order.append("limit")
        yield

    monkeypatch.setattr(reading, "_content", content)
    assert read_file(job_of(tmp_path, "x.csv", GOOD), limited).table is not None
    assert order == ["opened and read", "limit"]


@pytest.mark.parametrize("what", ["hangs", "hangs without timer", "kills itself"])
def test_what_may_be_the_machines_doing_is_only_tried_again(plugin: Path, monkeypatch: pytest.MonkeyPatch, what: str):
    """Also, the files behind a hanging one wait for it once, and are not suspected with it."""
    monkeypatch.setattr(workers, "_GRACE", 3.0)
    jobs = [job_of(plugin, f"{number}.csv", GOOD) for number in range(20)]
    with Readers(1, patience=2.0) as readers:
        found = by_name(readers.read_many([*jobs[:10], wild(plugin, what), *jobs[10:]]))
    reply = found.pop(f"{what} 0.wild")
    assert reply.temporary
    assert "is tried again" in reply.sentence
    assert len(found) == 20
    assert all(each.table is not None for each in found.values())


@pytest.mark.parametrize("what", ["starts another", "starts another and hangs"])
def test_what_a_reader_started_ends_with_its_process(plugin: Path, what: str):
    with Readers(1, patience=2.0) as readers:
        readers.read_many([wild(plugin, what)])
    started = [int(line) for line in (plugin / "once").read_text().split()]
    assert started
    assert all(ended(number) for number in started)


def test_what_a_reader_started_ends_when_the_daemon_is_gone(plugin: Path):
    with Readers(1) as readers:
        readers.read_many([wild(plugin, "starts another")])
        (worker,) = readers._workers
        worker.connection.close()
        worker.process.wait(10.0)
        assert all(ended(int(line)) for line in (plugin / "once").read_text().split())
        readers._workers.clear()


def test_a_reader_that_copies_its_process_is_answered_once(plugin: Path):
    jobs = [wild(plugin, "copies itself", number) for number in range(3)]
    with Readers(1) as readers:
        found = by_name(readers.read_many(jobs))
        again = by_name(readers.read_many([job_of(plugin, f"{number}.csv", GOOD) for number in range(40)]))
    assert all(reply.table is not None for reply in [*found.values(), *again.values()])


def ended(number: int, within: float = 5.0) -> bool:
    """Whether a process is gone, or only waits to be reaped."""
    until = time.monotonic() + within
    while time.monotonic() < until:
        try:
            if Path(f"/proc/{number}/stat").read_text().rpartition(")")[2].split()[0] == "Z":
                return True
        except (FileNotFoundError, ProcessLookupError):
            return True
    return False


def test_a_worker_that_somebody_else_kills_is_replaced_and_its_file_read(plugin: Path):
    with Readers(1) as readers:
        (reply,) = readers.read_many([wild(plugin, "is killed once")])
    assert (plugin / "once").exists()
    assert reply.table is not None
    assert reply.sentence == ""


def test_a_worker_killed_between_two_files_is_replaced(tmp_path: Path):
    with Readers(1) as readers:
        readers.read_many([job_of(tmp_path, "1.csv", GOOD)])
        (worker,) = readers._workers
        worker.process.kill()
        worker.process.wait()
        (reply,) = readers.read_many([job_of(tmp_path, "2.csv", GOOD)])
    assert reply.table is not None


def test_packages_are_told_apart_by_name_and_built_in_readers_stay(plugin: Path):
    jobs = {
        name: job_of(plugin, name, content, Layout("l", name, columns=COLUMNS, unit="A"))
        for name, content in {
            "missing": b"x",
            "idle": b"x",
            "nowhere": b"x",
            "leaving": b"x",
            "delimited": GOOD,
        }.items()
    }
    with Readers(1) as readers:
        found = by_name(readers.read_many(jobs.values()))
    assert "cannot be loaded (AttributeError)" in found["missing"].sentence
    assert "'leaving' cannot be loaded (SystemExit)" in found["leaving"].sentence
    assert "has no function read" in found["idle"].sentence
    assert (
        "no reader is called 'nowhere'; installed are delimited, idle, leaving, missing, wild"
        in found["nowhere"].sentence
    )
    assert found["delimited"].table.entries[0].signal == 0.125


# ---- the pool --------------------------------------------------------------------------------------------------------


def test_replies_come_as_they_are_ready(tmp_path: Path):
    with Readers(1) as readers:
        assert readers.replies(0.0) == []
        readers.start(job_of(tmp_path, f"{number}.csv", GOOD) for number in range(workers.BATCH + 1))
        assert readers.busy
        found: list = []
        while readers.busy:
            readers.wait(1.0)
            found += readers.replies(0.0)
        assert len(by_name(found)) == workers.BATCH + 1


def test_a_refused_process_is_told_and_tried_again_later(tmp_path: Path, monkeypatch: pytest.MonkeyPatch):
    job = job_of(tmp_path, "x.csv", GOOD)
    real = workers.subprocess.Popen

    def refuses(*_: object, **__: object) -> None:
        raise BlockingIOError(errno.EAGAIN, os.strerror(errno.EAGAIN))

    with Readers(1) as readers:
        monkeypatch.setattr(workers.subprocess, "Popen", refuses)
        (reply,) = readers.read_many([job])
        assert reply.temporary
        assert os.strerror(errno.EAGAIN) in reply.sentence
        monkeypatch.setattr(workers.subprocess, "Popen", real)
        (reply,) = readers.read_many([job])
        assert reply.table is not None


def test_closing_ends_every_process_even_one_at_work(plugin: Path):
    readers = Readers(2)
    readers.start([wild(plugin, "hangs", number) for number in range(2)])
    readers.replies(0.0)
    processes = [worker.process for worker in readers._workers]
    assert len(processes) == 2
    readers.close()
    assert all(process.returncode is not None for process in processes)
    assert all(not Path(f"/proc/{process.pid}").exists() for process in processes)


def test_a_worker_ends_by_itself_when_the_daemon_is_gone(tmp_path: Path):
    with Readers(1) as readers:
        readers.read_many([job_of(tmp_path, "x.csv", GOOD)])
        (worker,) = readers._workers
        worker.connection.close()
        assert worker.process.wait(10.0) == 0
        readers._workers.clear()
