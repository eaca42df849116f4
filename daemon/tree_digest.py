"""One digest over everything that is published below a folder and must not depend on what happened on the way.

Results, tables, flags, and summaries without their history section. Two trees from the same files and rules are equal
in it after any restart, in any order of arrival. Run as ``python -m spikeward.daemon.tree_digest FOLDER``.
"""

from __future__ import annotations

import hashlib
import os
import sys

from spikeward.daemon.names import RESULT, SUMMARY, TABLE, is_ours
from spikeward.daemon.pages.history_marks import without_history


def tree_digest(folder: str) -> str:
    """SHA-256 (hex) over the paths and contents of the published files below a folder, in the order of their paths.

    Raises ``OSError`` where the folder or a published file cannot be read.
    """
    digest = hashlib.sha256()
    for path in sorted(_published(folder)):
        with open(os.path.join(os.fsencode(folder), path), "rb") as file:
            data = file.read()
        if path.endswith(SUMMARY.encode("ascii")):
            data = without_history(data)
        digest.update(b"%d %d\n" % (len(path), len(data)))
        digest.update(path)
        digest.update(data)
    return digest.hexdigest()


def _published(folder: str) -> list[bytes]:
    if not os.path.isdir(folder):
        raise NotADirectoryError(f"{folder}: there is no such folder")
    top = os.fsencode(folder)
    found = []
    for here, below, names in os.walk(top):
        below[:] = [each for each in below if not each.startswith(b".")]
        found += [os.path.relpath(os.path.join(here, name), top) for name in names if _counts(os.fsdecode(name))]
    return found


def _counts(name: str) -> bool:
    return is_ours(name) and not name.startswith(".") and name.endswith((RESULT, SUMMARY, TABLE, ".flag"))


def main(arguments: list[str]) -> int:
    """Print the digest of one folder; exit status 2 where it cannot be read."""
    if len(arguments) != 1:
        print("usage: python -m spikeward.daemon.tree_digest FOLDER", file=sys.stderr)
        return 2
    try:
        print(tree_digest(arguments[0]))
    except OSError as error:
        print(error, file=sys.stderr)
        return 2
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
