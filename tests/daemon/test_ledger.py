"""The ledger holds what was acted on: after a kill or a power cut at any step, and never with a hole."""

from __future__ import annotations

import errno
import os
import shutil
from pathlib import Path

import pytest
from disk_that_dies import Died, DyingDisk

from spikeward.daemon.disk import RealDisk
from spikeward.daemon.ledger import Ledger, LedgerDamaged, RuleTexts, history_lost

PATH = "/state/ledger.jsonl"
SERIES = ["in", "\udcff", "é\n", "sample", "7"]
EVENTS = [
    {
        "event": "closing",
        "batch": SERIES[:3],
        "rules_digest": "ab" * 32,
        "calculation_version": "1",
        "series": [SERIES],
    },
    {"event": "lapse", "series": SERIES, "readings": "cd" * 32},
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
    assert "If a power cut did it" in ledger.sentences[0], "whether it had been acted on cannot be known"


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


def recorded(tmp_path: Path) -> tuple[Ledger, Path]:
    """A ledger in use, and its file."""
    ledger = Ledger(RealDisk(), str(tmp_path / "state" / "ledger.jsonl"))
    (tmp_path / "state").mkdir()
    for event in EVENTS[:2]:
        ledger.append(event)
    return ledger, tmp_path / "state" / "ledger.jsonl"


CHANGES = {
    "cut short": lambda data: data[:30],
    "a line shorter": lambda data: data[: data.index(b"\n") + 1],
    "emptied": lambda data: b"",
    "junk added": lambda data: data + b"\0\0junk",
    "a line added": lambda data: data + b'{"event":"x"}\n',
    "one sign changed": lambda data: data.replace(b"sample", b"sAmple"),
}


@pytest.mark.parametrize("replaced", [False, True])
@pytest.mark.parametrize("how", CHANGES)
def test_changed_by_somebody_else_while_in_use_nothing_is_added(tmp_path: Path, how: str, replaced: bool) -> None:
    ledger, path = recorded(tmp_path)
    whole = path.read_bytes()
    changed = CHANGES[how](whole)
    if replaced:
        path.unlink()
    with open(path, "wb" if replaced else "r+b") as file:
        file.truncate(0)
        file.write(changed)
    os.utime(path, ns=(1, 1))
    for _ in range(2):
        with pytest.raises(LedgerDamaged, match="was changed by somebody else") as refused:
            ledger.append(EVENTS[2])
        assert isinstance(refused.value, OSError), "a running daemon meets it like any refusal of a disk"
        assert refused.value.filename == str(path)
    assert path.read_bytes() == changed
    os.replace(f"{path}.as-recorded", path)
    ledger.append(EVENTS[2])
    assert Ledger(RealDisk(), str(path)).read() == EVENTS


@pytest.mark.parametrize("what", ["the file", "the folder"])
def test_deleted_while_in_use_it_is_written_again(tmp_path: Path, what: str) -> None:
    ledger, path = recorded(tmp_path)
    if what == "the folder":
        shutil.rmtree(path.parent)
    else:
        path.unlink()
    ledger.append(EVENTS[2])
    assert Ledger(RealDisk(), str(path)).read() == EVENTS
    assert ["was deleted while it was in use" in sentence for sentence in ledger.sentences] == [True]


def test_looked_at_or_copied_back_unchanged_it_goes_on(tmp_path: Path) -> None:
    ledger, path = recorded(tmp_path)
    data = path.read_bytes()
    path.unlink()
    path.write_bytes(data)
    ledger.append(EVENTS[2])
    assert Ledger(RealDisk(), str(path)).read() == EVENTS
    assert ledger.sentences == []


def test_an_addition_that_was_written_but_not_brought_to_the_medium_is_not_recorded_twice() -> None:
    class Stubborn(DyingDisk):
        refuses = False

        def append(self, path: str, data: bytes) -> None:
            super().append(path, data)
            if self.refuses:
                raise OSError(errno.EIO, "Input/output error", path)

    disk = Stubborn()
    disk.mkdirs("/state")
    ledger = Ledger(disk, PATH)
    ledger.append(EVENTS[0])
    disk.refuses = True
    with pytest.raises(OSError, match="Input/output"):
        ledger.append(EVENTS[1])
    disk.refuses = False
    ledger.append(EVENTS[1])
    assert Ledger(disk, PATH).read() == EVENTS[:2]
    assert ledger.sentences == []


FALSE = {
    b'{"noevent":1}': "does not say what happened",
    b'{"event":7}': "does not say what happened",
    b'{"event":"revision"}': "'series' of its event 'revision' is missing",
    b'{"event":"closing"}': "'batch' of its event 'closing' is missing",
    b'{"event":"lapse","series":["a","b"],"readings":"x"}': "'series' of its event 'lapse'",
    b'{"event":"lapse","series":["a","b","c","d",5],"readings":"x"}': "'series' of its event 'lapse'",
    b'{"event":"decisions","root":"in","path":"d.yaml","digest":"x","text":null}': "'text' of its event 'decisions'",
    b'{"event":"closing","batch":["a","","b"],"rules_digest":"../../x","calculation_version":"1","series":[]}': (
        "'rules_digest' of its event 'closing'"
    ),
    b'[{"event":"x"},{"event":"closing"}]': "'batch' of its event 'closing'",
}


@pytest.mark.parametrize("last", [False, True])
@pytest.mark.parametrize("line", FALSE)
def test_a_line_that_is_no_record_is_refused_with_its_number(line: bytes, last: bool) -> None:
    disk = start()
    Ledger(disk, PATH).append(EVENTS[0])
    disk.append(PATH, line + (b"\n" if last else b'\n{"event":"x"}\n'))
    before = disk.read(PATH)
    with pytest.raises(LedgerDamaged, match=f"Line 2 .* cannot be used: .*{FALSE[line]}"):
        Ledger(disk, PATH).read()
    assert disk.read(PATH) == before


def test_a_missing_ledger_is_told_where_results_stand(tmp_path: Path) -> None:
    path = str(tmp_path / "state" / "ledger.jsonl")
    folder = tmp_path / "inbox" / "night"
    folder.mkdir(parents=True)
    (folder / "N1_01.waiting.flag").touch()
    (folder / "N1_01_A0.csv.unread.flag").touch()
    folders = [str(tmp_path / "absent"), str(tmp_path / "inbox")]
    assert history_lost(RealDisk(), path, folders) == [], "so far nothing was recorded that could be lost"
    (folder / "N1_02.pass.flag").touch()
    (told,) = history_lost(RealDisk(), path, folders)
    assert "closings, adopted decisions and the history of revisions are lost" in told
    assert "N1_02.pass.flag" in told
    os.mkdir(tmp_path / "state")
    Path(path).touch()
    assert history_lost(RealDisk(), path, folders) == []


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
