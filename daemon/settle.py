"""When a file counts as written: two looks a settling time apart, by the daemon's own clock, that saw the same."""

from __future__ import annotations

from collections.abc import Collection, Container, Hashable, Iterable
from dataclasses import dataclass
from typing import Generic, NamedTuple, TypeVar

Place = TypeVar("Place", bound=Hashable)


class Stamp(NamedTuple):
    """What a look at a file compares. Size in bytes; times of the file are compared with each other only."""

    size: int
    mtime_ns: int
    inode: int


class Waited(NamedTuple, Generic[Place]):
    """A file that is being waited for: how it looked, and for how many seconds it has looked so."""

    place: Place
    stamp: Stamp
    seconds: float


@dataclass(slots=True)
class _Watched:
    stamp: Stamp
    seconds: float
    seen: float | None


class Settling(Generic[Place]):
    """Files that may still be growing. ``quiet`` is the settling time in seconds.

    ``now`` is monotonic time in seconds. Waiting that was carried over a restart counts, the time between does not:
    a restart makes a file later, never wrong.
    """

    def __init__(self, quiet: float, carried: Iterable[Waited[Place]] = ()) -> None:
        self._quiet = quiet
        self._watched = {each.place: _Watched(each.stamp, each.seconds, None) for each in carried}

    def look(self, place: Place, stamp: Stamp, now: float) -> bool:
        """Take note of a look; whether the file has settled. An empty file never does."""
        watched = self._watched.get(place)
        if watched is None or watched.stamp != stamp:
            self._watched[place] = _Watched(stamp, 0.0, now)
            return self._quiet <= 0 and stamp.size > 0
        if watched.seen is not None:
            watched.seconds += max(0.0, now - watched.seen)
        watched.seen = now
        return stamp.size > 0 and watched.seconds >= self._quiet

    def forget(self, place: Place) -> None:
        """The file was taken in, or is gone."""
        self._watched.pop(place, None)

    def keep_only(self, places: Collection[Place]) -> None:
        """Forget every file that is not among ``places``."""
        for place in [each for each in self._watched if each not in places]:
            del self._watched[place]

    def due_in(self, without: Container[Place] = ()) -> float | None:
        """Seconds until the next file can settle, leaving ``without`` aside; None while none with content waits."""
        left = [
            self._quiet - each.seconds
            for place, each in self._watched.items()
            if each.stamp.size > 0 and place not in without
        ]
        return max(0.0, min(left)) if left else None

    def waiting(self) -> list[Waited[Place]]:
        """All files that are being waited for, to be carried over a restart."""
        return [Waited(place, each.stamp, each.seconds) for place, each in self._watched.items()]
