"""Which file system a folder lies on."""

from __future__ import annotations

from pathlib import Path

import pytest

from spikeward.daemon.mounts import kind_of, network_kind, read_mounts

MOUNTS = r"""/dev/sda1 / ext4 rw 0 0
proc /proc proc rw 0 0
//server/data /mnt/instr\040one cifs rw 0 0
server:/x /mnt/nfs nfs4 rw 0 0
tmpfs /mnt/nfs/cache tmpfs rw 0 0
/dev/sdb1 /mnt/over ext4 rw 0 0
server:/y /mnt/over nfs rw 0 0
half a line
"""


@pytest.mark.parametrize(
    ("folder", "kind"),
    [
        ("/", "ext4"),
        ("/data/inbox", "ext4"),
        ("/mnt/instr one/tray", "cifs"),
        ("/mnt/instr one", "cifs"),
        ("/mnt/instr one else", "ext4"),
        ("/mnt/nfs/a", "nfs4"),
        ("/mnt/nfs/cache/a", "tmpfs"),
        ("/mnt/over/a", "nfs"),
    ],
)
def test_the_longest_and_last_mount_counts(folder: str, kind: str) -> None:
    assert kind_of(folder, MOUNTS) == kind


def test_network_file_systems_are_known() -> None:
    assert network_kind("/mnt/nfs/a", MOUNTS) == "nfs4"
    assert network_kind("/mnt/nfs/cache", MOUNTS) == ""
    assert network_kind("/data", "") == ""


def test_links_are_seen_through(tmp_path: Path) -> None:
    (tmp_path / "link").symlink_to("/mnt/nfs/a")
    assert kind_of(str(tmp_path / "link"), MOUNTS) == "nfs4"


def test_this_machine_tells() -> None:
    assert kind_of("/proc", read_mounts()) == "proc"
