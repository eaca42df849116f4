"""The oracle: whatever befell a station, what it has published in the end equals a fresh sweep of the same files."""

from __future__ import annotations

import random
import threading
import time
from collections.abc import Mapping
from pathlib import Path

import pytest
from processes import Reference, Station, reference, until

from spikeward.daemon.demo.night import Night, night, play

SEED = 7


@pytest.fixture(scope="module")
def usual() -> Night:
    return night(SEED)


def files_of(invented: Night) -> dict[str, bytes]:
    """The files of a night as they are in the morning, in the order of their last change."""
    last = {delivery.path: delivery for delivery in invented.deliveries}
    return {path: each.content for path, each in sorted(last.items(), key=lambda item: item[1].minute)}


@pytest.fixture(scope="module")
def swept(usual: Night, tmp_path_factory: pytest.TempPathFactory) -> tuple[Reference, Reference]:
    """The night swept by a station without a past: before and after ``--close``."""
    return reference(tmp_path_factory.mktemp("reference") / "home", usual.rules, files_of(usual))


def closes_alike(station: Station, swept: tuple[Reference, Reference]) -> None:
    station.equals(swept[0])
    station.sweep("--close")
    station.equals(swept[1])


def events(rules: str, mode: str) -> str:
    changed = rules.replace("settle: 0.5 s", f"settle: 0.5 s\n    events: {mode}\n    #")
    assert changed != rules
    return changed


def test_the_reference_is_the_night_and_says_something(usual: Night, swept: tuple[Reference, Reference]) -> None:
    before, closed = swept
    flags = {path: data for path, data in closed.published().items() if path.endswith(".flag")}
    stems = {Path(path).name.split(".")[0] for path in flags if ".unread." not in path}
    assert stems == set(usual.expected)
    assert before.digest() != closed.digest()


def test_killed_at_random_moments_of_the_night(
    usual: Night, swept: tuple[Reference, Reference], tmp_path: Path
) -> None:
    """Instruments deliver in about twenty seconds; meanwhile the daemon is killed a dozen times, and once more after."""
    chance = random.Random(20261117)
    station = Station(tmp_path / "home", usual.rules)
    minutes = usual.deliveries[-1].minute
    ended = threading.Event()
    player = threading.Thread(target=play, args=(usual, station.data, minutes / 20.0, ended.wait), daemon=True)
    player.start()
    kills = 0
    while kills < 12 or player.is_alive():
        with station.watch() as watch:
            lives_until = time.monotonic() + chance.uniform(0.6, 3.5)
            until(lambda end=lives_until: time.monotonic() >= end, "the moment of the kill")  # type: ignore[misc]
            assert watch.process.poll() is None, watch.log()[-3000:]
            watch.kill()
            kills += 1
    with station.watch() as watch:
        station.comes_to(swept[0], watch)
    closes_alike(station, swept)


ORDERS = {
    "all at once, events by polling": ("poll", 1),
    "all at once, native events, two workers": ("native", 2),
    "one file at a time, native events": ("native", 1),
    "shuffled, polling, two workers": ("poll", 2),
    "backwards, native events": ("native", 1),
}


def in_order(order: str, files: Mapping[str, bytes]) -> dict[str, bytes]:
    paths = list(files)
    if order.startswith("shuffled"):
        random.Random(41).shuffle(paths)
    elif order.startswith("backwards"):
        paths.reverse()
    return {path: files[path] for path in paths}


@pytest.mark.parametrize("order", ORDERS)
def test_order_of_arrival_events_and_workers(
    order: str, usual: Night, swept: tuple[Reference, Reference], tmp_path: Path
) -> None:
    mode, workers = ORDERS[order]
    station = Station(tmp_path / "home", events(usual.rules, mode))
    files = in_order(order, files_of(usual))
    with station.watch(workers=workers) as watch:
        until(lambda: "watching" in watch.log(), "the daemon is up")
        if order.startswith("all at once"):
            station.put_all(files)
        else:
            for number, (path, content) in enumerate(files.items()):
                station.put(path, content)
                if order.startswith("one") and number < 10:  # each is taken in before the next one comes
                    stem = path.split("/")[-1]
                    until(lambda stem=stem: seen(station, stem), f"{stem} is taken in", 8.0)  # type: ignore[misc]
                elif number % 8 == 0:
                    time.sleep(0.05)
        station.comes_to(swept[0], watch)
    closes_alike(station, swept)


def seen(station: Station, name: str) -> bool:
    """Whether any published result or flag speaks of a file; bench files speak through series that are not there yet."""
    if "bench" in name or "rinse" in name:
        return True
    return any(name.encode() in data for data in station.published().values())
