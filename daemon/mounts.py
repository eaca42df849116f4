"""Which file system a folder lies on, from the system's list of mounts."""

from __future__ import annotations

import os

MOUNTS = "/proc/mounts"
NETWORK = frozenset(
    (
        "9p", "afs", "ceph", "cifs", "davfs", "fuse.davfs2", "fuse.glusterfs", "fuse.rclone", "fuse.s3fs", "fuse.sshfs",
        "fuse.vmhgfs-fuse", "glusterfs", "gpfs", "lustre", "ncpfs", "nfs", "nfs4", "smb3", "smbfs", "vboxsf",
        "virtiofs", "vmhgfs",
    )
)  # fmt: skip
"""Kinds of file systems that another machine (or the host of a virtual one) writes to without telling this one."""


def read_mounts() -> str:
    """The system's list of mounts; empty where it keeps none, so that every folder counts as local."""
    try:
        with open(MOUNTS, encoding="utf-8", errors="surrogateescape") as file:
            return file.read()
    except OSError:
        return ""


def kind_of(folder: str, mounts: str) -> str:
    """The kind of file system (``ext4``, ``cifs`` …) that a folder lies on; empty where the list does not say."""
    wanted = os.path.realpath(folder)
    found, longest = "", -1
    for line in mounts.splitlines():
        parts = line.split(" ")
        if len(parts) < 3:
            continue
        point = _unescaped(parts[1])
        inside = point == "/" or wanted == point or wanted.startswith(point + "/")
        if inside and len(point) >= longest:  # of several mounts on one point the last is in force
            found, longest = parts[2], len(point)
    return found


def network_kind(folder: str, mounts: str) -> str:
    """The kind of a folder's file system if it is a network one, else nothing."""
    kind = kind_of(folder, mounts)
    return kind if kind in NETWORK else ""


def _unescaped(point: str) -> str:
    """Blanks and backslashes stand in the list as octal numbers."""
    for octal, character in (("\\040", " "), ("\\011", "\t"), ("\\012", "\n"), ("\\134", "\\")):
        point = point.replace(octal, character)
    return point
