"""Many notices of one kind are summed up: a board and a report stay readable whatever lies in a folder."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable

from spikeward.daemon.pages.facts import Notice

Noticed = tuple[str, str, Notice]  # root, output folder, notice
FEW = 5  # of one kind, in a report and of files that nobody needs to look at one by one
MANY = 200  # of one kind, on a board


def summed(notices: Iterable[Noticed], most: int) -> list[Noticed]:
    """At most so many notices of each root, folder and kind, by subject; one more counts the rest."""
    alike: dict[tuple[str, str, str], list[Notice]] = defaultdict(list)
    for root, folder, notice in notices:
        alike[root, folder, notice.kind].append(notice)
    found = []
    for (root, folder, kind), same in alike.items():
        shown = same if len(same) <= most else sorted(same, key=lambda each: (each.subject, each.sentence))[:most]
        found += [(root, folder, notice) for notice in shown]
        if len(same) > most:
            left = len(same) - most
            rest = Notice(kind, f"and {left:,} more", f"only the first {most} by name are listed")
            found.append((root, folder, rest))
    return found
