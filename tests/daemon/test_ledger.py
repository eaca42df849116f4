"""The ledger holds what was acted on: after a kill or a power cut at any step, and never with a hole."""

from __future__ import annotations

import errno
from pathlib import Path

import pytest
from disk_that_dies import Died, DyingDisk

from spikeward.daemon.disk import RealDisk
from spikeward.daemon.ledger import Ledger, LedgerDamaged, RuleTexts

PATH = "/state/ledger.jsonl"
EVENTS = [
    {"event": "closing", "batch": ["in", "", "MD1"]},
    {"event": "lapse", "series": ["\udcff", "é\n"]},
    {"event": "x"},
]


def start() -> DyingDisk:
    disk = DyingDisk()
    disk.mkdirs("/state")
    return disk


def test_what_was_appended_is_read(tmp_path: Path) -> None:
    path = str(tmp_path / "ledger.jsonl")
    ledger = Ledger(RealDisk(), path)
    assert ledger.read() == []
    ledger.append(EVENTS[0])
    ledger.append(*EVENTS[1:])
    assert ledger.read() == EVENTS
    assert Ledger(RealDisk(), path).read() == EVENTS
    assert (tmp_path / "ledger.jsonl").read_bytes().count(b"\n") == 2


def write_all(disk: DyingDisk) -> list[int]:
    """Append the events one by one; the number of those whose call returned, in a list that outlives a death."""
    done: list[int] = [0]
    ledger = Ledger(disk, PATH)

    def run() -> None:
        for event in EVENTS:
            ledger.append(event)
            done[0] += 1

    try:
        run()
    except Died:
        disk.restart()
    return done


@pytest.mark.parametrize("how", ["killed", "power cut", "power cut, torn", "power cut, names kept"])
def test_an_event_whose_call_returned_is_never_lost(how: str) -> None:
    undisturbed = start()
    write_all(undisturbed)
    for k in range(1, undisturbed.steps + 1):
        disk = start()
        disk.dies_at = k
        (done,) = write_all(disk)
        assert done < len(EVENTS)
        if how != "killed":
            disk.cut_power(lambda number: how.endswith("kept"), torn="torn" in how)
        again = Ledger(disk, PATH)
        found = again.read()
        assert found in (EVENTS[:done], EVENTS[: done + 1]), k
        for event in EVENTS[len(found) :]:
            again.append(event)
        assert Ledger(disk, PATH).read() == EVENTS
        assert disk.read(PATH) == undisturbed.read(PATH)


def test_every_torn_end_is_cut_off_and_said() -> None:
    disk = start()
    for event in EVENTS:
        Ledger(disk, PATH).append(event)
    whole = disk.read(PATH)
    last = whole.rindex(b"\n", 0, -1) + 1
    for cut in range(last, len(whole)):
        torn = start()
        torn.append(PATH, whole[:cut])
        ledger = Ledger(torn, PATH)
        found = ledger.read()
        assert found == (EVENTS if cut == len(whole) - 1 else EVENTS[:-1])
        assert bool(ledger.sentences) == (last < cut < len(whole) - 1)
        ledger.append({"event": "next"})
        assert Ledger(torn, PATH).read() == [*found, {"event": "next"}]


@pytest.mark.parametrize("tail", [b"\0" * 40, b"\0" * 40 + b'"}\n', b"{}{}\n", b"[1]\n", b"12\n"])
def test_an_end_that_a_power_cut_filled_with_rubbish(tail: bytes) -> None:
    disk = start()
    Ledger(disk, PATH).append(*EVENTS)
    disk.append(PATH, tail)
    ledger = Ledger(disk, PATH)
    assert ledger.read() == EVENTS
    assert "cut off" in ledger.sentences[0]


def test_events_of_one_call_are_torn_together() -> None:
    disk = start()
    ledger = Ledger(disk, PATH)
    ledger.append(EVENTS[0])
    ledger.append(*EVENTS[1:])
    whole = disk.read(PATH)
    for cut in range(whole.index(b"\n") + 1, len(whole)):
        torn = start()
        torn.append(PATH, whole[:cut])
        assert Ledger(torn, PATH).read() == (EVENTS if cut == len(whole) - 1 else EVENTS[:1])
    assert Ledger(disk, PATH).read() == EVENTS


@pytest.mark.parametrize(("broken", "last"), [(1, b""), (2, b'{"event":"unfini')])
def test_damage_in_the_middle_is_refused_with_its_line(broken: int, last: bytes) -> None:
    disk = start()
    for event in EVENTS:
        Ledger(disk, PATH).append(event)
    lines = disk.read(PATH).split(b"\n")
    lines[broken] = lines[broken][:-4]
    lines[-1] = last
    damaged = start()
    damaged.append(PATH, b"\n".join(lines))
    with pytest.raises(LedgerDamaged, match=f"Line {broken + 1}"):
        Ledger(damaged, PATH).read()
    with pytest.raises(LedgerDamaged):
        Ledger(damaged, PATH).append({"event": "x"})
    assert damaged.read(PATH) == b"\n".join(lines), "a damaged ledger is left as it is"


def test_a_full_disk_leaves_no_half_line_behind() -> None:
    class Filling(DyingDisk):
        full = False

        def append(self, path: str, data: bytes) -> None:
            super().append(path, data[:9] if self.full else data)
            if self.full:
                raise OSError(errno.ENOSPC, "No space left on device", path)

    disk = Filling()
    disk.mkdirs("/state")
    ledger = Ledger(disk, PATH)
    ledger.append(EVENTS[0])
    disk.full = True
    for _ in range(3):
        with pytest.raises(OSError, match="No space left"):
            ledger.append(EVENTS[1])
    disk.full = False
    ledger.append(EVENTS[1])
    assert Ledger(disk, PATH).read() == EVENTS[:2]


def test_a_number_that_no_reader_could_read_back_is_refused() -> None:
    disk = start()
    ledger = Ledger(disk, PATH)
    with pytest.raises(ValueError, match="JSON"):
        ledger.append({"event": "x", "value": float("nan")})
    ledger.append(EVENTS[0])
    assert ledger.read() == EVENTS[:1]


def test_rule_texts_are_kept_by_digest() -> None:
    disk = start()
    texts = RuleTexts(disk, "/state/rules")
    assert texts.get("ab" * 32) is None
    texts.keep("ab" * 32, "station: Küste\r\n")
    steps = disk.steps
    texts.keep("ab" * 32, "station: Küste\r\n")
    assert disk.steps == steps
    assert RuleTexts(disk, "/state/rules").get("ab" * 32) == "station: Küste\r\n"
    with pytest.raises(ValueError, match="digest"):
        texts.keep("../../etc/cron.d/x", "")
