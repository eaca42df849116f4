"""How files arrive: in pieces, late, twice, renamed, replaced, hidden, endless; and what is no file at all."""

from __future__ import annotations

import errno
import os
import re
from collections.abc import Callable, Iterable
from pathlib import Path

import pytest
from harness import BlinkingDisk, Clock, Life, Step, lives, opened_sweep, soon, swept
from processes import Station
from small_night import CLOSING, HEAD, RULES, SPANNING, batch, bracket, renamed, row, series, vessel

from spikeward.daemon.reading import ReadJob
from spikeward.daemon.settle import Stamp


@pytest.fixture
def clock() -> Clock:
    return Clock()


@pytest.fixture
def station(tmp_path: Path) -> Station:
    return Station(tmp_path / "home", RULES)


def flags(station: Station) -> list[str]:
    return sorted(path.name for path in station.out.rglob("*.flag"))


def fresh(tmp_path: Path, rules: str, files: dict[str, bytes], out: str = "inbox") -> Station:
    """A sweep of these files by a station without a past."""
    other = Station(tmp_path / "fresh", rules, out)
    other.put_all(files)
    swept(str(other.home), Clock())
    return other


def history(station: Station, stem: str) -> list[str]:
    """Each revision of a series, first to last, as its summary tells."""
    summary = next(station.out.rglob(f"{stem}.summary.html")).read_text()
    section = re.search(r"<!-- history -->(.*?)<!-- /history -->", summary, re.DOTALL)
    assert section is not None
    return section[1].split("<li value=")[:0:-1]


def reads(life: Life) -> int:
    """How many files have been read in this life."""
    return len(life.opened.pipeline.intake.files)


# ---- A1, A2, A3: in pieces -----------------------------------------------------------------------


def several(batch_name: str, sample: int) -> bytes:
    """All vessels of a series in one growing file."""
    rows = b"".join(vessel(batch_name, sample, level)[len(HEAD) :] for level in range(4))
    return HEAD.encode() + rows


def append(station: Station, path: str, piece: bytes) -> None:
    with (station.data / path).open("ab") as file:
        file.write(piece)


def test_pieces_with_short_pauses_are_one_reading_after_the_last(station: Station, clock: Clock) -> None:
    """Settling takes 1 s; the writer opens, appends and closes every 0.6 s or so: nothing is said in between."""
    whole = several("N1", 1)
    cuts = [0, 40, 90, len(HEAD) + 60, len(whole) - 30, len(whole)]
    said: list[list[str]] = []
    last = [0.0]

    def piece(life: Life) -> None:
        nonlocal cuts
        said.append(flags(station))
        append(station, "run.csv", whole[cuts[0] : cuts[1]])
        cuts = cuts[1:]
        assert not last[0] or clock() - last[0] < 1.0
        last[0] = clock()

    lives(str(station.home), clock, *[soon(1, piece) for _ in range(5)])
    assert said == [[]] * 5
    assert flags(station) == ["N1_01.warn.flag"]
    assert len(history(station, "N1_01")) == 1


def test_a_long_pause_in_the_middle_makes_a_revision(station: Station, clock: Clock) -> None:
    whole = several("N1", 1)
    half = len(HEAD) + 2 * (len(whole) - len(HEAD)) // 4
    between: list[list[str]] = []

    def grow(life: Life) -> None:
        between.append(flags(station))
        append(station, "run.csv", whole[half:])

    station.put("run.csv", whole[:half])
    lives(str(station.home), clock, grow)
    assert between == [["N1_01.waiting.flag"]]
    assert flags(station) == ["N1_01.warn.flag"]


def test_a_reader_that_knows_the_end_waits_for_it(tmp_path: Path, clock: Clock) -> None:
    station = Station(tmp_path / "home", RULES.replace("    time_zone", "    end_marker: End of run\n    time_zone"))
    whole = several("N1", 1)
    told: list[str] = []

    def look(life: Life) -> None:
        told.extend([*flags(station), *life.notices()])
        append(station, "run.csv", whole[-30:] + b"End of run\n")

    station.put("run.csv", whole[:-30])
    lives(str(station.home), clock, look)
    assert len(told) == 1
    assert told[0].startswith("cannot be read now: run.csv: waits for the end of the file")
    assert flags(station) == ["N1_01.warn.flag"]
    assert len(history(station, "N1_01")) == 1


# ---- A4: renamed into place ----------------------------------------------------------------------


def test_renamed_into_place_from_inside_outside_and_as_a_whole_folder(tmp_path: Path, clock: Clock) -> None:
    station = Station(tmp_path / "home", CLOSING)
    files = batch("N1", 3, "a", brackets=True)
    outside = tmp_path / "outside"
    for path, content in renamed(series("N1", 3), "a").items():
        (outside / path).parent.mkdir(parents=True, exist_ok=True)
        (outside / path).write_bytes(content)

    def from_inside(life: Life) -> None:
        for level in range(4):
            name = f"a/N1_01_A{level}.csv"
            (station.data / f"{name}.part").write_bytes(files[name])
            (station.data / f"{name}.part").rename(station.data / name)

    def from_outside(life: Life) -> None:
        for path in sorted((outside / "a").iterdir()):
            path.rename(station.data / "a" / path.name)

    def whole_folder(life: Life) -> None:
        other = tmp_path / "b"
        other.mkdir()
        for path, content in renamed(batch("N2", 2), "b").items():
            (tmp_path / path).write_bytes(content)
        other.rename(station.data / "b")

    station.put_all({path: files[path] for path in ("a/N1_BR1.csv", "a/N1_BR2.csv", *series("N1", 2, "a"))})
    lives(str(station.home), clock, from_inside, from_outside, whole_folder)
    every = files | renamed(batch("N2", 2), "b")
    station.equals(fresh(tmp_path, CLOSING, every))


def test_files_that_move_between_folders_keep_their_series(tmp_path: Path, clock: Clock) -> None:
    """Where series may span folders a move changes the place that is quoted, nothing else."""
    station = Station(tmp_path / "home", SPANNING, "results")
    files = batch("N1", 2)
    station.put_all(files)

    def move(life: Life) -> None:
        (station.data / "archive").mkdir()
        for level in (0, 2):
            (station.data / f"N1_01_A{level}.csv").rename(station.data / "archive" / f"N1_01_A{level}.csv")

    def move_all(life: Life) -> None:
        (station.data / "archive").rename(station.data / "2031")

    life = lives(str(station.home), clock, move, move_all)
    assert life.notices() == []
    moved = {path: content for path, content in files.items() if path not in ("N1_01_A0.csv", "N1_01_A2.csv")}
    moved |= {f"2031/{path}": files[path] for path in ("N1_01_A0.csv", "N1_01_A2.csv")}
    swept(str(station.home), clock)
    station.equals(fresh(tmp_path, SPANNING, moved, "results"))
    assert b"2031/N1_01_A0.csv" in (station.out / "N1_01.result.json").read_bytes()


# ---- A5: what is no data -------------------------------------------------------------------------


def test_working_files_of_others_are_never_read(station: Station, clock: Clock) -> None:
    for name in ("~$N1_01_A0.csv", ".N1_01_A0.csv", "N1_01_A0.csv.part", "Thumbs.db", "N1_01_A0.csv~", ".~lock.x.csv#"):
        (station.data / name).write_bytes(vessel("N1", 1, 0))
    life = lives(str(station.home), clock)
    assert reads(life) == 0
    assert flags(station) == []


# ---- A7: the share goes and comes ----------------------------------------------------------------


@pytest.mark.parametrize("returns", ["whole", "empty first"])
def test_a_share_that_is_away_for_an_hour_loses_nothing(tmp_path: Path, clock: Clock, returns: str) -> None:
    station = Station(tmp_path / "home", CLOSING)
    station.put_all({path: each for path, each in batch("N1", 2, "a", True).items() if "BR2" not in path})
    disk = BlinkingDisk(str(station.data))
    told: list[str] = []
    before: list[str] = []

    def goes(life: Life) -> None:
        before.append(station.digest())
        disk.state = "away"

    def an_hour_later(life: Life) -> None:
        clock.sleep(3600.0)
        told.extend(life.notices())
        before.append(station.digest())
        disk.state = "empty" if returns == "empty first" else ""

    def comes(life: Life) -> None:
        disk.state = ""
        station.put("a/N1_BR2.csv", bracket("N1", 2, 200))

    steps = [goes, an_hour_later, soon(2, comes)]
    life = lives(str(station.home), clock, *steps, disk=disk)
    assert told == ["share away: inbox: Stale file handle; nothing counts as deleted"]
    assert before[0] == before[1]
    assert life.notices() == []
    station.equals(fresh(tmp_path, CLOSING, batch("N1", 2, "a", True)))


def test_time_does_not_count_while_the_share_is_away(tmp_path: Path, clock: Clock) -> None:
    station = Station(tmp_path / "home", RULES)
    station.put_all({path: each for path, each in series("N1", 1).items() if "A3" not in path})
    disk = BlinkingDisk(str(station.data))

    def state(which: str) -> object:
        return lambda life: setattr(disk, "state", which)

    def hour(life: Life) -> None:
        clock.sleep(3600.0)

    seen: list[list[str]] = []
    lives(
        str(station.home), clock, state("away"), hour, lambda life: seen.append(flags(station)), state(""),
        lambda life: seen.append(flags(station)), hour, disk=disk,
    )  # fmt: skip
    assert seen == [["N1_01.waiting.flag"]] * 2
    assert flags(station) == ["N1_01.warn.flag"]


# ---- A8, A17: between listing and reading --------------------------------------------------------


def before_reading(name: str, happens: Callable[[], object]) -> Step:
    """Let something happen once, after a file was listed and found settled, and before it is read."""

    def install(life: Life) -> None:
        readers = life.watching.readers
        start, left = readers.start, [happens]

        def start_later(jobs: Iterable[ReadJob]) -> None:
            listed = list(jobs)
            if left and any(job.path.endswith(name) for job in listed):
                left.pop()()
                life.happened = True
            start(listed)

        readers.start = start_later  # type: ignore[method-assign]

    return soon(0, install)


@pytest.mark.parametrize("what", ["deleted", "renamed", "replaced", "turned into a folder"])
def test_a_file_that_changes_between_listing_and_reading(
    station: Station, clock: Clock, tmp_path: Path, what: str
) -> None:
    files = series("N1", 1)
    station.put_all(files)
    victim = station.data / "N1_01_A2.csv"

    def happens() -> None:
        if what == "renamed":
            victim.rename(station.data / "N1_01_A2 new.csv")
        elif what == "replaced":
            station.put("N1_01_A2.csv", vessel("N1", 1, 2, slip=1.01))
        else:
            victim.unlink()
        if what.startswith("turned"):
            victim.mkdir()

    life = lives(str(station.home), clock, before_reading("N1_01_A2.csv", happens))
    assert life.happened
    assert life.notices() == []
    remaining = {name: content for name, content in files.items() if "A2" not in name}
    if what == "renamed":
        remaining["N1_01_A2 new.csv"] = files["N1_01_A2.csv"]
    elif what == "replaced":
        remaining["N1_01_A2.csv"] = vessel("N1", 1, 2, slip=1.01)
    swept(str(station.home), clock)
    station.equals(fresh(tmp_path, RULES, remaining))


def test_a_file_that_cannot_be_read_now_is_tried_again_more_and_more_slowly(
    station: Station, clock: Clock, monkeypatch: pytest.MonkeyPatch
) -> None:
    station.put_all(series("N1", 1))
    tries: list[float] = []
    locked = True
    real_open = os.open

    def guarded(path: object, *rest: int, **more: int) -> int:
        if str(path).endswith("N1_01_A2.csv") and locked:
            tries.append(clock())
            raise PermissionError(errno.EACCES, os.strerror(errno.EACCES), path)
        return real_open(path, *rest, **more)  # type: ignore[arg-type]

    monkeypatch.setattr(os, "open", guarded)
    told: list[list[str]] = []

    def unlock(life: Life) -> None:
        nonlocal locked
        told.append(life.notices())
        locked = False

    def minutes(life: Life) -> None:
        return None

    lives(str(station.home), clock, *[soon(60, minutes)] * 5, soon(1, unlock), soon(200, minutes))
    assert told == [["cannot be read now: N1_01_A2.csv: it cannot be read now (Permission denied); tried again"]]
    pauses = [later - earlier for earlier, later in zip(tries, tries[1:], strict=False)]
    assert len(tries) > 4
    assert pauses == sorted(pauses)
    assert flags(station) == ["N1_01.warn.flag"]


def test_a_file_that_is_emptied_before_it_is_read_is_looked_at_no_more_often_than_others(
    station: Station, clock: Clock
) -> None:
    """Its writer may have begun anew; it is waited for like any empty file."""
    station.put_all(series("N1", 1))
    victim = station.data / "N1_01_A2.csv"
    turns: list[int] = []

    def count(life: Life) -> None:
        turns.append(life.turns)
        clock.sleep(0.5)

    def fill(life: Life) -> None:
        victim.write_bytes(series("N1", 1)["N1_01_A2.csv"])

    empty = before_reading("N1_01_A2.csv", lambda: victim.write_bytes(b""))
    life = lives(str(station.home), clock, empty, count, count, count, fill)
    assert life.happened
    assert max(later - earlier for earlier, later in zip(turns, turns[1:], strict=False)) < 60
    assert flags(station) == ["N1_01.warn.flag"]


# ---- A9, A10: twice ------------------------------------------------------------------------------


@pytest.mark.parametrize("copy", ["0 copy.csv", "zz copy.csv"])
def test_the_same_readings_in_two_files_count_once_and_the_other_is_named(
    station: Station, clock: Clock, tmp_path: Path, copy: str
) -> None:
    files = series("N1", 1) | {copy: vessel("N1", 1, 2)}
    station.put_all(files)
    with opened_sweep(str(station.home), clock) as opened:
        (notice,) = [each for _, _, each in opened.pipeline.notices() if each.kind == "duplicate"]
    assert copy in notice.sentence
    assert "repeats" in notice.sentence
    station.equals(fresh(tmp_path, RULES, files))
    assert flags(station) == ["N1_01.warn.flag"]


def test_equal_bytes_that_mean_different_vessels_both_count_with_a_warning(tmp_path: Path, clock: Clock) -> None:
    rules = RULES.replace("{role: sample, match:", "{role: sample, from: file, match:")
    station = Station(tmp_path / "home", rules)
    files = series("N1", 1)
    files["N1_01_A3.csv"] = files["N1_01_A2.csv"]
    station.put_all(files)
    lives(str(station.home), clock)
    result = (station.out / "N1_01.result.json").read_text()
    assert "N1_01_A2.csv and N1_01_A3.csv have equal content" in result


def test_exported_again_with_another_value(station: Station, clock: Clock, tmp_path: Path) -> None:
    """Same path: a revision. Another path, exported later: the later one. Another path, no later: both are named."""
    station.put_all(series("N1", 1))
    same = vessel("N1", 1, 2, slip=1.004)
    later = vessel("N1", 1, 1, slip=0.996, again=30)
    neither = vessel("N1", 1, 3, slip=1.01)
    seen: list[str] = []

    def rewrite(life: Life) -> None:
        station.put("N1_01_A2.csv", same)

    def again(life: Life) -> None:
        seen.append((station.out / "N1_01.result.json").read_text())
        station.put("N1_01_A1 again.csv", later)

    def contradict(life: Life) -> None:
        seen.append((station.out / "N1_01.result.json").read_text())
        assert flags(station) == ["N1_01.warn.flag"]
        station.put("N1_01_A3 too.csv", neither)

    lives(str(station.home), clock, rewrite, again, contradict)
    assert flags(station) == ["N1_01.fail.flag"]
    text = (station.out / "N1_01.fail.flag").read_text()
    assert "N1_01_A3.csv row 2" in text
    assert "N1_01_A3 too.csv row 2" in text
    rows = history(station, "N1_01")
    assert len(rows) == 4
    assert "N1_01_A2.csv" in rows[1]
    assert "N1_01_A1 again.csv" in rows[2]
    assert "N1_01_A1 again.csv" in seen[1]
    files = series("N1", 1) | {"N1_01_A2.csv": same, "N1_01_A1 again.csv": later, "N1_01_A3 too.csv": neither}
    swept(str(station.home), clock)
    station.equals(fresh(tmp_path, RULES, files))


# ---- A11, A12: times of files --------------------------------------------------------------------


def test_a_content_that_changed_behind_equal_size_and_time_is_found_by_sweep(
    station: Station, clock: Clock, tmp_path: Path
) -> None:
    files = series("N1", 1)
    station.put_all(files)
    lives(str(station.home), clock)
    victim = station.data / "N1_01_A2.csv"
    before = victim.stat()
    changed = files["N1_01_A2.csv"].replace(b"N1_01_A2,Cd,9", b"N1_01_A2,Cd,8")
    assert changed != files["N1_01_A2.csv"]
    with victim.open("r+b") as file:
        file.write(changed)
    os.utime(victim, ns=(before.st_atime_ns, before.st_mtime_ns))
    assert Stamp(before.st_size, before.st_mtime_ns, before.st_ino) == Stamp(*_stamp(victim))
    swept(str(station.home), clock)
    station.equals(fresh(tmp_path, RULES, files | {"N1_01_A2.csv": changed}))


def _stamp(path: Path) -> tuple[int, int, int]:
    found = path.stat()
    return found.st_size, found.st_mtime_ns, found.st_ino


@pytest.mark.parametrize("seconds", [0, -86400 * 365 * 60, 86400 * 365 * 80])
def test_times_of_files_decide_nothing(station: Station, clock: Clock, tmp_path: Path, seconds: int) -> None:
    """1970, before it, and far in the future; and a rewrite that is older than what it replaces."""
    files = series("N1", 1)
    for name, content in files.items():
        station.put(name, content)
        os.utime(station.data / name, (seconds, seconds))
    newer = vessel("N1", 1, 2, slip=1.004)

    def rewrite(life: Life) -> None:
        assert flags(station) == ["N1_01.warn.flag"]
        station.put("N1_01_A2.csv", newer)
        os.utime(station.data / "N1_01_A2.csv", (seconds - 10, seconds - 10))

    lives(str(station.home), clock, rewrite)
    swept(str(station.home), clock)
    station.equals(fresh(tmp_path, RULES, files | {"N1_01_A2.csv": newer}))


def test_files_older_than_the_station(tmp_path: Path, clock: Clock) -> None:
    station = Station(tmp_path / "home", CLOSING)
    station.put_all(batch("N1", 2, "a", True))
    lives(str(station.home), clock)
    station.equals(fresh(tmp_path, CLOSING, batch("N1", 2, "a", True)))


# ---- A13: nothing, without end, too much ---------------------------------------------------------


def test_an_empty_file_and_one_that_never_ends_wait_and_are_shown(station: Station, clock: Clock) -> None:
    station.put_all(series("N1", 1))
    station.put("nothing.csv", b"")
    station.put("endless.csv", HEAD.encode())
    told: list[str] = []

    def grow(life: Life) -> None:
        append(station, "endless.csv", row("N1_02_A0", 1600.0, 60).encode())

    def look(life: Life) -> None:
        told.extend(life.notices())

    lives(str(station.home), clock, *[soon(1, grow)] * 30, soon(0, look))
    assert "still being written: nothing.csv: waits until it stops changing" in told
    assert "still being written: endless.csv: waits until it stops changing" in told
    assert not [notice for notice in told if not notice.startswith("still being written")]


def test_a_file_that_is_too_large_is_refused_unread(station: Station, clock: Clock) -> None:
    station.put_all(series("N1", 1))
    with (station.data / "huge.csv").open("wb") as file:
        file.truncate(2 << 30)
    life = lives(str(station.home), clock)
    assert [notice for notice in life.notices() if "huge.csv" in notice and "MiB" in notice]
    assert "huge.csv.unread.flag" in flags(station)


# ---- A15: what is no file ------------------------------------------------------------------------


def test_pipes_links_and_folders_with_the_name_of_a_file(station: Station, clock: Clock, tmp_path: Path) -> None:
    station.put_all(series("N1", 1))
    os.mkfifo(station.data / "N1_02_A0.csv")
    (tmp_path / "secret.csv").write_bytes(vessel("N1", 3, 0))
    (station.data / "N1_03_A0.csv").symlink_to(tmp_path / "secret.csv")
    (station.data / "N1_04_A0.csv").mkdir()
    life = lives(str(station.home), clock)
    assert flags(station) == ["N1_01.warn.flag"]
    told = " ".join(life.notices())
    assert "N1_02_A0.csv is not a regular file" in told
    assert "N1_03_A0.csv is a link" in told
    assert reads(life) == 4


# ---- S8: a late file -----------------------------------------------------------------------------


def test_a_late_file_of_an_old_series_makes_a_revision(tmp_path: Path, clock: Clock) -> None:
    station = Station(tmp_path / "home", RULES)
    station.put_all({path: each for path, each in series("N1", 1).items() if "A3" not in path})

    def a_week(life: Life) -> None:
        clock.sleep(7 * 86400.0)

    def late(life: Life) -> None:
        assert flags(station) == ["N1_01.warn.flag"]
        station.put("N1_01_A3.csv", vessel("N1", 1, 3))

    lives(str(station.home), clock, a_week, late)
    assert [row for row in history(station, "N1_01") if "N1_01_A3.csv" in row]
    swept(str(station.home), clock)
    station.equals(fresh(tmp_path, RULES, series("N1", 1)))


@pytest.mark.parametrize("levels", [(0, 1, 2), (0, 1, 2, 3)])
def test_time_is_up_once_also_for_a_batch_whose_files_are_gone(
    station: Station, clock: Clock, levels: tuple[int, ...]
) -> None:
    """The ledger must not grow by a record each turn because nothing can be solved any more."""
    files = {f"N1_01_A{level}.csv": vessel("N1", 1, level) for level in levels}
    files["N2_01_A0.csv"] = vessel("N2", 1, 0)
    station.put_all(files)
    ledger = station.home / ".spikeward" / "ledger.jsonl"
    lines: list[int] = []

    def delete(life: Life) -> None:
        for level in levels:
            (station.data / f"N1_01_A{level}.csv").unlink()

    def hours(life: Life) -> None:
        clock.sleep(4 * 3600.0)

    def count(life: Life) -> None:
        lines.append(len(ledger.read_text().splitlines()))

    lives(str(station.home), clock, delete, hours, soon(20, count), soon(100, count))
    assert lines[0] == lines[1]


def test_a_late_file_makes_no_revision_while_a_source_is_missing(
    station: Station, clock: Clock, tmp_path: Path
) -> None:
    station.put_all({path: each for path, each in series("N1", 1).items() if "A3" not in path})
    before: list[str] = []

    def archive(life: Life) -> None:
        before.append(station.digest())
        (station.data / "N1_01_A0.csv").rename(tmp_path / "N1_01_A0.csv")

    def late(life: Life) -> None:
        station.put("N1_01_A3.csv", vessel("N1", 1, 3))

    def look(life: Life) -> None:
        assert (station.out / "N1_01.waiting.flag").exists()
        (told,) = life.notices()
        assert "source missing: N1_01: the published result quotes N1_01_A0.csv" in told
        (tmp_path / "N1_01_A0.csv").rename(station.data / "N1_01_A0.csv")

    life = lives(str(station.home), clock, archive, late, look)
    assert life.notices() == []
    swept(str(station.home), clock)
    station.equals(fresh(tmp_path, RULES, series("N1", 1)))


def test_a_result_that_a_person_deletes_is_solved_from_what_is_there(
    station: Station, clock: Clock, tmp_path: Path
) -> None:
    """What the board says to do about a missing source helps while the daemon runs, too."""
    station.put_all(series("N1", 1) | {"N1_01_A2 too.csv": vessel("N1", 1, 2, slip=1.02)})

    def take_away(life: Life) -> None:
        assert flags(station) == ["N1_01.fail.flag"]
        (station.data / "N1_01_A2 too.csv").unlink()

    def delete_results(life: Life) -> None:
        assert any("source missing" in notice for notice in life.notices())
        for path in station.out.glob("N1_01.*"):
            path.unlink()
        clock.sleep(60.0)

    life = lives(str(station.home), clock, take_away, delete_results)
    assert life.notices() == []
    assert flags(station) == ["N1_01.warn.flag"]
    swept(str(station.home), clock)
    station.equals(fresh(tmp_path, RULES, series("N1", 1)))
