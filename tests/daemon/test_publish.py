"""Publishing under ill treatment: killed at every step, power cut at every step, edits of people."""

from __future__ import annotations

import errno
import hashlib
import itertools

import pytest
from disk_that_dies import Died, DyingDisk

from spikeward.daemon.disk import RealDisk
from spikeward.daemon.names import VERDICTS, unread_name
from spikeward.daemon.publish import publish, publish_files, withdraw_unread

FOLDER = "/data"
STEM = "MD1_07"
FLAGS = [f"{FOLDER}/{STEM}.{verdict}.flag" for verdict in VERDICTS]


def revision(number: int) -> dict[str, bytes]:
    return {
        ".result.json": b'{"revision": %d, "content": 1.25}' % number,
        ".summary.html": b"<p>revision %d</p>" % number,
    }


def flag_of(number: int, verdict: str) -> bytes:
    return b"verdict: %s\nrevision: %d\n" % (verdict.encode(), number)


# Everything the daemon intends to write in these tests, as the journal would have it.
KNOWN = {
    hashlib.sha256(data).hexdigest()
    for number in (1, 2)
    for data in [*revision(number).values(), *(flag_of(number, verdict) for verdict in VERDICTS)]
}


def send(disk: DyingDisk, number: int, verdict: str, known: set[str] | None = None) -> None:
    publish(disk, FOLDER, STEM, revision(number), flag_of(number, verdict), verdict, known)


def standing(disk: DyingDisk) -> list[str]:
    return [flag for flag in FLAGS if flag in disk.names]


def start() -> DyingDisk:
    disk = DyingDisk()
    disk.mkdirs(FOLDER)
    return disk


def outputs(disk: DyingDisk) -> dict[str, bytes]:
    return {path: data for path, data in disk.tree().items() if "-tmp-" not in path}


CHANGES = [("waiting", "pass"), ("pass", "fail"), ("fail", "fail"), ("warn", "pass"), ("fail", "waiting")]


def steps_of(first: str, second: str) -> int:
    disk = start()
    send(disk, 1, first)
    before = disk.steps
    send(disk, 2, second)
    return disk.steps - before


@pytest.mark.parametrize(("first", "second"), CHANGES)
def test_killed_at_each_step_and_started_again_it_ends_as_if_nothing_had_happened(first: str, second: str) -> None:
    undisturbed = start()
    send(undisturbed, 1, first)
    send(undisturbed, 2, second)
    for k in range(1, steps_of(first, second) + 1):
        disk = start()
        send(disk, 1, first)
        disk.restart()
        disk.dies_at = k
        with pytest.raises(Died):
            send(disk, 2, second)
        assert len(standing(disk)) == 1, f"killed at step {k}"
        disk.restart()
        send(disk, 2, second, KNOWN)
        assert disk.tree() == undisturbed.tree(), f"killed at step {k}"


def test_killed_at_each_step_of_the_first_publication() -> None:
    undisturbed = start()
    send(undisturbed, 1, "pass")
    for k in range(1, undisturbed.steps + 1):
        disk = start()
        disk.dies_at = k
        with pytest.raises(Died):
            send(disk, 1, "pass")
        disk.restart()
        send(disk, 1, "pass", KNOWN)
        assert disk.tree() == undisturbed.tree()


@pytest.mark.parametrize(("first", "second"), CHANGES)
def test_at_every_instant_one_flag_and_only_whole_files(first: str, second: str) -> None:
    disk = start()
    send(disk, 1, first)
    whole = {f"{FOLDER}/{STEM}{suffix}": {revision(1)[suffix], revision(2)[suffix]} for suffix in revision(1)}
    flags = {flag_of(1, first), flag_of(2, second)}
    seen = []

    def look() -> None:
        assert len(standing(disk)) == 1
        assert disk.names[standing(disk)[0]].data in flags
        for path, allowed in whole.items():
            assert disk.names[path].data in allowed
        seen.append(standing(disk)[0])

    disk.on_step = look
    send(disk, 2, second)
    assert len(seen) > 10
    assert seen[-1].endswith(f".{second}.flag")


def test_the_flag_comes_after_the_result_that_it_speaks_of() -> None:
    disk = start()
    send(disk, 1, "waiting")

    def look() -> None:
        if disk.names[standing(disk)[0]].data == flag_of(2, "pass"):
            assert disk.names[f"{FOLDER}/{STEM}.result.json"].data == revision(2)[".result.json"]
            assert disk.names[f"{FOLDER}/{STEM}.summary.html"].data == revision(2)[".summary.html"]

    disk.on_step = look
    send(disk, 2, "pass")


def survivals(count: int) -> list[frozenset[int]]:
    """Every set of unsynced changes of names that a power cut could leave; beyond six, only beginnings and ends."""
    numbers = range(count)
    if count <= 6:
        return [frozenset(each) for size in range(count + 1) for each in itertools.combinations(numbers, size)]
    return [frozenset(range(k)) for k in range(count + 1)] + [frozenset(range(k, count)) for k in range(count)]


@pytest.mark.parametrize("torn", [False, True])
@pytest.mark.parametrize(("first", "second"), CHANGES)
def test_power_cut_at_each_step(first: str, second: str, torn: bool) -> None:
    undisturbed = start()
    send(undisturbed, 1, first)
    send(undisturbed, 2, second)
    whole = {f"{FOLDER}/{STEM}{suffix}": {revision(1)[suffix], revision(2)[suffix]} for suffix in revision(1)}
    for k in range(1, steps_of(first, second) + 1):
        for kept in survivals(len(died_at(k, first, second).unsynced)):
            disk = died_at(k, first, second)
            disk.cut_power(kept.__contains__, torn)
            found = outputs(disk)
            assert len(standing(disk)) == 1, (k, kept)
            verdict = standing(disk)[0].rsplit(".", 2)[1]
            flag = found[standing(disk)[0]]
            assert flag in (flag_of(1, first), flag_of(2, second))
            if flag == flag_of(2, second):
                assert found[f"{FOLDER}/{STEM}.result.json"] == revision(2)[".result.json"]
            else:
                assert verdict == first, "a new name with an old verdict inside"
            for path, allowed in whole.items():
                assert found[path] in allowed, (k, kept, path)
            send(disk, 2, second, KNOWN)
            assert outputs(disk) == undisturbed.tree(), (k, kept)


def died_at(k: int, first: str, second: str) -> DyingDisk:
    disk = start()
    send(disk, 1, first)
    disk.restart()
    disk.dies_at = k
    with pytest.raises(Died):
        send(disk, 2, second)
    return disk


def test_after_a_publication_nothing_is_left_for_a_power_cut_to_take() -> None:
    disk = start()
    send(disk, 1, "warn")
    send(disk, 2, "pass")
    before = disk.tree()
    disk.cut_power(lambda number: False, torn=False)
    assert disk.tree() == before


def test_equal_bytes_are_not_written_again() -> None:
    disk = start()
    send(disk, 1, "pass")
    before = disk.steps
    again = publish(disk, FOLDER, STEM, revision(1), flag_of(1, "pass"), "pass", KNOWN)
    assert disk.steps == before
    assert again.written == ()


@pytest.mark.parametrize("target", VERDICTS)
@pytest.mark.parametrize("present", [VERDICTS, ("fail", "pass"), ("waiting", "warn")])
def test_several_flags_end_as_one(present: tuple[str, ...], target: str) -> None:
    disk = start()
    for verdict in present:
        disk.write_atomic(f"{FOLDER}/{STEM}.{verdict}.flag", flag_of(1, verdict))

    def look() -> None:
        assert standing(disk)

    disk.on_step = look
    send(disk, 2, target, KNOWN)
    assert standing(disk) == [f"{FOLDER}/{STEM}.{target}.flag"]
    assert disk.read(standing(disk)[0]) == flag_of(2, target)


def test_an_edited_flag_among_several_is_kept_aside() -> None:
    disk = start()
    send(disk, 1, "fail")
    disk.write_atomic(f"{FOLDER}/{STEM}.pass.flag", b"put here by hand")
    send(disk, 2, "warn", KNOWN)
    assert standing(disk) == [f"{FOLDER}/{STEM}.warn.flag"]
    assert disk.read(f"{FOLDER}/{STEM}.pass.flag.kept-1") == b"put here by hand"


def test_result_then_summary_then_flag() -> None:
    done = publish(start(), FOLDER, STEM, revision(1), flag_of(1, "pass"), "pass")
    assert done.written == (f"{STEM}.result.json", f"{STEM}.summary.html", f"{STEM}.pass.flag")


def test_a_persons_edit_is_kept_aside_once_and_the_name_is_never_without_a_file() -> None:
    path = f"{FOLDER}/{STEM}.result.json"
    disk = start()
    send(disk, 1, "pass")
    disk.write_atomic(path, b"my own numbers")
    disk.on_step = lambda: disk.names[path]
    done = publish(disk, FOLDER, STEM, revision(1), flag_of(1, "pass"), "pass", KNOWN)
    assert done.kept == ((f"{STEM}.result.json", f"{STEM}.result.json.kept-1"),)
    assert disk.read(path + ".kept-1") == b"my own numbers"
    assert disk.read(path) == revision(1)[".result.json"]
    disk.write_atomic(path, b"others")
    send(disk, 1, "pass", KNOWN)
    assert disk.read(path + ".kept-2") == b"others"
    assert disk.read(path + ".kept-1") == b"my own numbers"


def test_an_edited_flag_is_kept_aside_also_when_the_verdict_changes() -> None:
    disk = start()
    send(disk, 1, "fail")
    disk.write_atomic(f"{FOLDER}/{STEM}.fail.flag", b"verdict: pass, says the chief")
    disk.on_step = lambda: pytest.fail("no flag") if not standing(disk) else None
    send(disk, 2, "warn", KNOWN)
    assert standing(disk) == [f"{FOLDER}/{STEM}.warn.flag"]
    assert disk.read(f"{FOLDER}/{STEM}.fail.flag.kept-1") == b"verdict: pass, says the chief"


def test_an_edit_killed_while_it_was_kept_aside_is_kept_once() -> None:
    for k in range(1, 40):
        disk = start()
        send(disk, 1, "pass")
        disk.write_atomic(f"{FOLDER}/{STEM}.result.json", b"my own numbers")
        disk.restart()
        disk.dies_at = k
        try:
            send(disk, 2, "fail", KNOWN)
            break
        except Died:
            disk.restart()
        send(disk, 2, "fail", KNOWN)
        kept = [path for path in disk.tree() if ".kept-" in path]
        assert kept == [f"{FOLDER}/{STEM}.result.json.kept-1"], k
        assert disk.read(kept[0]) == b"my own numbers"
    else:
        pytest.fail("the publication never came to its end")


def test_without_a_memory_nothing_counts_as_an_edit() -> None:
    disk = start()
    send(disk, 1, "pass")
    send(disk, 2, "pass", None)
    assert not [path for path in disk.tree() if ".kept-" in path]


def test_a_refusing_disk_is_reported_and_leaves_nothing_half_done() -> None:
    class Full(DyingDisk):
        def append(self, path: str, data: bytes) -> None:
            raise AssertionError

        def write(self, path: str, data: bytes) -> None:
            super().write(path, data[:3])
            raise OSError(errno.ENOSPC, "No space left on device", path)

    disk = Full()
    disk.mkdirs(FOLDER)
    with pytest.raises(OSError, match="No space left"):
        send(disk, 1, "pass")
    assert disk.tree() == {}, "room is given back"


def test_a_table_and_a_board_have_no_flag() -> None:
    disk = start()
    done = publish_files(disk, FOLDER, {"MD1.results.csv": b"a,b\n", "MD1.board.html": b"<p>"})
    assert done.written == ("MD1.board.html", "MD1.results.csv")
    assert set(disk.tree()) == {f"{FOLDER}/MD1.results.csv", f"{FOLDER}/MD1.board.html"}


def test_unread_comes_and_goes() -> None:
    disk = start()
    publish_files(disk, FOLDER, {unread_name("tray 1.csv"): b"sentence: row 3 has 4 cells, the heading 5\n"})
    assert list(disk.tree()) == [f"{FOLDER}/tray%201.csv.unread.flag"]
    assert withdraw_unread(disk, FOLDER, "tray 1.csv")
    assert not withdraw_unread(disk, FOLDER, "tray 1.csv")
    assert disk.tree() == {}


def test_on_a_real_disk(tmp_path) -> None:
    disk = RealDisk()
    folder = str(tmp_path)
    publish(disk, folder, STEM, revision(1), flag_of(1, "waiting"), "waiting")
    done = publish(disk, folder, STEM, revision(2), flag_of(2, "pass"), "pass", KNOWN)
    assert sorted(path.name for path in tmp_path.iterdir()) == sorted(done.files)
    assert (tmp_path / f"{STEM}.pass.flag").read_bytes() == flag_of(2, "pass")
    assert hashlib.sha256(revision(2)[".result.json"]).hexdigest() == done.files[f"{STEM}.result.json"]
