"""The machine's own disk: whole files, no links followed, no pipe waited for, any name."""

from __future__ import annotations

import errno
import os
import socket
import stat
import subprocess
import sys
from pathlib import Path

import pytest

from spikeward.daemon.disk import FILE, FOLDER, LINK, OTHER, TEMPORARY, RealDisk, temporary

disk = RealDisk()


def test_entries_tell_kinds_and_do_not_follow_links(tmp_path: Path) -> None:
    (tmp_path / "a.csv").write_bytes(b"12345")
    (tmp_path / "below").mkdir()
    (tmp_path / "link.csv").symlink_to("/etc/passwd")
    (tmp_path / "loop").symlink_to(tmp_path)
    os.mkfifo(tmp_path / "pipe.csv")
    found = {each.name: each for each in disk.entries(str(tmp_path))}
    assert {name: each.kind for name, each in found.items()} == {
        "a.csv": FILE,
        "below": FOLDER,
        "link.csv": LINK,
        "loop": LINK,
        "pipe.csv": OTHER,
    }
    status = os.stat(tmp_path / "a.csv")
    assert found["a.csv"][2:] == (5, status.st_mtime_ns, status.st_ino)
    assert disk.look(str(tmp_path / "a.csv")) == found["a.csv"]
    assert [each.name for each in disk.entries(str(tmp_path), lambda name: name != "below")] == ["below"]


def test_reading_refuses_what_is_not_a_regular_file(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "pipe")
    (tmp_path / "link").symlink_to("/etc/passwd")
    with pytest.raises(OSError, match="not a regular file"):
        disk.read(str(tmp_path / "pipe"))
    with pytest.raises(OSError, match=os.strerror(errno.ELOOP)):
        disk.read(str(tmp_path / "link"))
    with pytest.raises(OSError, match="directory"):
        disk.read(str(tmp_path))
    with socket.socket(socket.AF_UNIX) as plug:
        plug.bind(str(tmp_path / "s"))
        with pytest.raises(OSError):  # noqa: PT011  # the system's own words differ
            disk.read(str(tmp_path / "s"))


def test_reading_has_a_limit(tmp_path: Path) -> None:
    (tmp_path / "a").write_bytes(b"12345")
    assert disk.read(str(tmp_path / "a"), at_most=5) == b"12345"
    with pytest.raises(OSError, match=os.strerror(errno.EFBIG)):
        disk.read(str(tmp_path / "a"), at_most=4)


def test_a_new_content_replaces_the_old_in_one_step(tmp_path: Path) -> None:
    path = tmp_path / "a"
    disk.write_atomic(str(path), b"old")
    with open(path, "rb") as reader:
        disk.write_atomic(str(path), b"new")
        assert reader.read() == b"old"
    assert path.read_bytes() == b"new"
    assert [each.name for each in tmp_path.iterdir()] == ["a"]


def test_a_link_in_the_way_is_replaced_and_never_written_through(tmp_path: Path) -> None:
    (tmp_path / "raw").write_bytes(b"raw data")
    (tmp_path / "a").symlink_to(tmp_path / "raw")
    Path(temporary(str(tmp_path / "a"))).symlink_to(tmp_path / "raw")
    disk.write_atomic(str(tmp_path / "a"), b"result")
    assert (tmp_path / "raw").read_bytes() == b"raw data"
    assert (tmp_path / "a").read_bytes() == b"result"
    assert not (tmp_path / "a").is_symlink()


def test_what_a_dead_run_left_is_overwritten(tmp_path: Path) -> None:
    left = Path(temporary(str(tmp_path / "a")))
    left.write_bytes(b"half of a longer res")
    disk.write_atomic(str(tmp_path / "a"), b"whole")
    assert (tmp_path / "a").read_bytes() == b"whole"
    assert not left.exists()


def test_the_name_in_use_is_hidden_and_beside(tmp_path: Path) -> None:
    assert temporary("/data/MD1_07.result.json") == f"/data/{TEMPORARY}MD1_07.result.json"
    assert TEMPORARY.startswith(".")


@pytest.mark.parametrize("mask", [0o077, 0o000, 0o022])
def test_files_have_the_rights_that_the_mask_leaves(tmp_path: Path, mask: int) -> None:
    before = os.umask(mask)
    try:
        disk.write_atomic(str(tmp_path / "a"), b"x")
    finally:
        os.umask(before)
    assert stat.S_IMODE((tmp_path / "a").stat().st_mode) == 0o666 & ~mask


def test_a_name_that_is_not_utf8_goes_there_and_back(tmp_path: Path) -> None:
    raw = os.fsencode(tmp_path) + b"/\xff\n\xe2\x80\xaetray.csv"
    with open(raw, "wb") as file:
        file.write(b"12")
    (found,) = disk.entries(str(tmp_path))
    assert os.fsencode(found.name) == b"\xff\n\xe2\x80\xaetray.csv"
    assert disk.read(f"{tmp_path}/{found.name}") == b"12"


def test_append_and_truncate(tmp_path: Path) -> None:
    path = str(tmp_path / "ledger")
    disk.append(path, b"one\n")
    disk.append(path, b"two\n")
    assert disk.read(path) == b"one\ntwo\n"
    disk.truncate(path, 4)
    assert disk.read(path) == b"one\n"


def test_folders_are_made_with_those_above(tmp_path: Path) -> None:
    disk.mkdirs(str(tmp_path / "a" / "b" / "c"))
    disk.mkdirs(str(tmp_path / "a" / "b" / "c"))
    assert (tmp_path / "a" / "b" / "c").is_dir()
    assert disk.exists(str(tmp_path / "a"))
    assert not disk.exists(str(tmp_path / "a" / "x"))
    assert disk.look(str(tmp_path / "a" / "x" / "y")) is None


def test_a_real_full_disk_gives_its_room_back(tmp_path: Path) -> None:
    """The limit of a file's size stands in for a full disk; in a process of its own, as it lasts."""
    program = (
        "import resource, signal, sys; signal.signal(signal.SIGXFSZ, signal.SIG_IGN)\n"
        "from spikeward.daemon.disk import RealDisk\n"
        "resource.setrlimit(resource.RLIMIT_FSIZE, (1000, 1000))\n"
        "try: RealDisk().write_atomic(sys.argv[1], b'x' * 2000)\n"
        "except OSError as error: print(error.errno)\n"
    )
    path = tmp_path / "a"
    path.write_bytes(b"old")
    answer = subprocess.run([sys.executable, "-c", program, str(path)], capture_output=True, text=True, check=True)
    assert int(answer.stdout) == errno.EFBIG
    assert path.read_bytes() == b"old"
    assert [each.name for each in tmp_path.iterdir()] == ["a"]
