"""The oracle: whatever befell a station, what it has published in the end equals a fresh sweep of the same files."""

from __future__ import annotations

import os
import random
import shutil
import subprocess
import threading
import time
from collections.abc import Mapping
from pathlib import Path

import pytest
from harness import Clock, lives
from harness import swept as swept_here
from processes import Reference, Station, reference, until
from small_night import CLOSING, HEAD, RULES, batch, renamed, row, series

from spikeward.daemon.demo.chance import Chance
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
    """Instruments deliver in about twenty seconds; meanwhile the daemon is killed a dozen times."""
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
    """Out of order the files trickle in while the daemon works on those before them."""
    mode, workers = ORDERS[order]
    station = Station(tmp_path / "home", events(usual.rules, mode))
    files = in_order(order, files_of(usual))
    with station.watch(workers=workers) as watch:
        until(watch.is_up, "the daemon is up")
        for number, (path, content) in enumerate(files.items(), 1):
            station.put(path, content)
            if not order.startswith("all") and number in (20, 50, 80):
                said = watch.log().count("published")
                until(lambda said=said: watch.log().count("published") > said, "some of it is published")  # type: ignore[misc]
        station.comes_to(swept[0], watch)
    closes_alike(station, swept)


def test_the_journal_is_deleted_while_it_runs_and_while_it_is_stopped(
    usual: Night, swept: tuple[Reference, Reference], tmp_path: Path
) -> None:
    station = Station(tmp_path / "home", usual.rules)
    thirds = list(files_of(usual).items())

    def delete_journal() -> None:
        for left in (station.home / ".spikeward").glob("journal.sqlite*"):
            left.unlink()

    with station.watch() as watch:
        station.put_all(dict(thirds[:40]))
        until(lambda: "published" in watch.log(), "something is published")
        delete_journal()
        station.put_all(dict(thirds[40:80]))
        until(lambda: (station.home / ".spikeward" / "journal.sqlite").exists(), "a new journal is begun")
        assert watch.stop() == 0
    delete_journal()
    with station.watch() as watch:
        station.put_all(dict(thirds[80:]))
        station.comes_to(swept[0], watch)
    assert not list(station.out.rglob("*.kept-*"))
    closes_alike(station, swept)


# ---- what surrounds the process ------------------------------------------------------------------

NO_KERNELS = "AVX2 FMA3 AVX512F AVX512CD AVX512_SKX AVX512_CLX AVX512_CNL AVX512_ICL X86_V3 X86_V4"
SURROUNDINGS: dict[str, tuple[dict[str, str], int]] = {
    "Turkish": ({"LC_ALL": "tr_TR.UTF-8", "LANG": "tr_TR.UTF-8", "TZ": "Asia/Kathmandu"}, 0o077),
    "Turkish, one byte a letter": ({"LC_ALL": "tr_TR", "PYTHONUTF8": "0"}, 0o000),
    "German": ({"LC_ALL": "de_DE.UTF-8", "LC_NUMERIC": "de_DE.UTF-8", "TZ": "America/St_Johns"}, 0o027),
    "C, nothing coerced": ({"LC_ALL": "C", "PYTHONCOERCECLOCALE": "0", "PYTHONUTF8": "0", "TZ": "UTC-14"}, 0o022),
    "POSIX, no home": ({"LC_ALL": "POSIX", "HOME": "/nonexistent", "PYTHONHASHSEED": "3"}, 0o022),
    "no AVX and no FMA": ({"NPY_DISABLE_CPU_FEATURES": NO_KERNELS}, 0o022),
}


@pytest.fixture(scope="module")
def locales(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Turkish and German, made where the machine has the sources of locales; without them the C library falls back."""
    folder = tmp_path_factory.mktemp("locales")
    maker = shutil.which("localedef")
    if maker:
        for name, charset in (("tr_TR", "UTF-8"), ("tr_TR", "ISO-8859-9"), ("de_DE", "UTF-8")):
            target = folder / (f"{name}.UTF-8" if charset == "UTF-8" else name)
            subprocess.run([maker, "-i", name, "-f", charset, str(target)], capture_output=True, check=False)
    return folder


@pytest.mark.parametrize("where", SURROUNDINGS)
def test_locale_time_zone_umask_and_processor(
    where: str, usual: Night, swept: tuple[Reference, Reference], tmp_path: Path, locales: Path
) -> None:
    env, umask = SURROUNDINGS[where]
    env = {"LOCPATH": str(locales), **env}
    station = Station(tmp_path / "home", usual.rules)
    station.put_all(files_of(usual))
    station.sweep(env=env, umask=umask)
    station.equals(swept[0])
    station.sweep("--close", env=env, umask=umask)
    station.equals(swept[1])


def test_names_that_are_not_ascii_are_the_same_everywhere(tmp_path: Path, locales: Path) -> None:
    """The bytes of a name are what counts: a locale of one byte a letter, or none, must not change what is quoted."""
    digests = set()
    for number, env in enumerate(
        ({}, *(SURROUNDINGS[w][0] for w in ("Turkish, one byte a letter", "C, nothing coerced")))
    ):
        station = Station(tmp_path / str(number), RULES)
        files = renamed(series("N1", 1), "Fluß Ø")
        station.put_all({path.replace("N1_01_A2", "Größe N1_01_A2"): content for path, content in files.items()})
        station.sweep(env={"LOCPATH": str(locales), **env})
        digests.add(station.digest())
    assert len(digests) == 1


# ---- what is in the folder besides ---------------------------------------------------------------


def test_copies_of_files_count_once(usual: Night, tmp_path: Path) -> None:
    files = files_of(usual)
    chance = random.Random(8)
    exports = sorted(path for path in files if path.endswith(".csv") and "bench" not in path)
    for path in chance.sample(exports, 25):
        copy = chance.choice(["Copy of {0}", "{0} (2)"]).format(path.rsplit("/", 1)[1].removesuffix(".csv")) + ".csv"
        files[f"{path.rsplit('/', 1)[0]}/{copy}"] = files[path]
    swept = reference(tmp_path / "reference", usual.rules, files)
    station = Station(tmp_path / "home", usual.rules)
    with station.watch() as watch:
        station.put_all(in_order("shuffled", files))
        station.comes_to(swept[0], watch)
    closes_alike(station, swept)


# ---- one file at a time, in a clock's time -------------------------------------------------------


@pytest.mark.parametrize("order", ["as measured", "shuffled", "backwards"])
def test_one_file_at_a_time(order: str, tmp_path: Path) -> None:
    """Each is settled, read and published before the next one comes."""
    files = in_order(order, batch("N1", 2, "a", brackets=True) | batch("N2", 1, "b", brackets=True))
    swept = reference(tmp_path / "reference", CLOSING, files)
    station = Station(tmp_path / "home", CLOSING)
    clock = Clock()
    steps = [lambda life, path=path: station.put(path, files[path]) for path in files]  # type: ignore[misc]
    lives(str(station.home), clock, *steps)
    closes_alike(station, swept)


# ---- company -------------------------------------------------------------------------------------


def of_vessels(vessels: int, number: int) -> dict[str, bytes]:
    """A series of so many vessels, spread over four levels, in one file."""
    rows = []
    for turn in range(vessels):
        level, letters = turn % 4, turn // 4
        name = f"N{number}_01_A{level}" + (chr(97 + letters // 26) + chr(97 + letters % 26) if letters else "")
        chance = Chance(100 * number + turn)
        rows.append(row(name, 20000.0 * (0.11 + 0.2 * level) * chance.noise(0.004), turn % 60, element="Cd"))
    return {f"{number}/run.csv": (HEAD + "".join(rows)).encode()}


def test_a_series_has_the_same_digits_alone_and_in_company(tmp_path: Path) -> None:
    """Three, four, eight and 130 vessels; sums of hardware and of libraries depend on how many are added at once."""
    rules = RULES.replace("(?P<vessel>[a-z])?", "(?P<vessel>[a-z]+)?")
    sizes = [3, 4, 8, 130, 5, 33, 64, 7, 16, 17]
    together = Station(tmp_path / "together", rules)
    for number, size in enumerate(sizes, 1):
        together.put_all(of_vessels(size, number))
    swept_here(str(together.home), Clock())
    for number, size in enumerate(sizes, 1):
        alone = Station(tmp_path / f"alone {number}", rules)
        alone.put_all(of_vessels(size, number))
        swept_here(str(alone.home), Clock())
        mine = {path: data for path, data in together.published().items() if path.startswith(f"{number}/")}
        assert len(mine) == 3
        assert mine == alone.published()


# ---- exactly one flag ----------------------------------------------------------------------------


def test_a_lister_never_sees_two_flags_of_a_series_or_none(usual: Night, tmp_path: Path) -> None:
    """About a thousand listings a second while a night is played in ten seconds, in folders of up to 500 entries."""
    station = Station(tmp_path / "home", usual.rules)
    for folder in ("EM41", "EM42", "EM43"):
        for number in range(240):
            station.put(f"{folder}/other {number}.txt", b"nothing of ours\n")
    ended = threading.Event()
    minutes = usual.deliveries[-1].minute
    player = threading.Thread(target=play, args=(usual, station.data, minutes / 10.0, ended.wait), daemon=True)
    flagged: dict[str, set[str]] = {}
    wrong: list[str] = []
    listings = largest = 0
    with station.watch() as watch:
        until(watch.is_up, "the daemon is up")
        player.start()
        began = time.monotonic()
        changes = 0
        while player.is_alive() or time.monotonic() - began < 14.0:
            for folder in ("EM41", "EM42", "EM43"):
                names = os.listdir(station.data / folder)
                listings, largest = listings + 1, max(largest, len(names))
                seen: dict[str, set[str]] = {}
                for name in names:
                    if name.endswith(".flag") and ".unread." not in name and not name.startswith("."):
                        seen.setdefault(f"{folder}/{name.rsplit('.', 2)[0]}", set()).add(name)
                for stem in flagged:
                    if stem.startswith(folder) and stem not in seen:
                        wrong.append(f"none of {stem}")
                wrong += [f"{stem}: {flags}" for stem, flags in seen.items() if len(flags) != 1]
                changes += sum(flagged.get(stem, flags) != flags for stem, flags in seen.items())
                flagged |= seen
        seconds = time.monotonic() - began
        assert watch.stop() == 0
    assert not wrong
    assert len(flagged) > 20
    assert changes >= 5, "no flag changed its name, so nothing was shown"
    assert largest <= 500
    assert listings / seconds > 300
