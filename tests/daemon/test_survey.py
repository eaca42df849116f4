"""One look at a watched folder: what is listed, what is said, what counts as gone."""

from __future__ import annotations

import errno
import os
from collections.abc import Callable
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from spikeward.daemon.disk import Listed, RealDisk
from spikeward.daemon.settle import Stamp
from spikeward.daemon.survey import Listing, Presence, compare, survey


class Sick(RealDisk):
    """A disk that refuses to list some folders."""

    def __init__(self, **refused: int) -> None:
        self.refused = refused

    def entries(self, folder: str, skip: Callable[[str], bool] = lambda name: False) -> list[Listed]:
        code = self.refused.get(os.path.basename(folder))
        if code:
            raise OSError(code, os.strerror(code), folder)
        return super().entries(folder, skip)


def put(root: Path, *paths: str) -> None:
    for path in paths:
        (root / path).parent.mkdir(parents=True, exist_ok=True)
        (root / path).write_bytes(b"x")


def test_regular_files_below_without_ours_and_the_ignored(tmp_path: Path) -> None:
    put(
        tmp_path, "tray.csv", "a/b/deep.csv", "a/MD1_07.pass.flag", "MD1.results.csv", "~$tray.csv", ".hid/x.csv",
        "tray.csv.part", "@eaDir/x.csv", "Thumbs.db", "MD1_07.result.json.kept-1", ".spikeward-station",
    )  # fmt: skip
    listing = survey(RealDisk(), str(tmp_path))
    assert set(listing.files) == {"tray.csv", "a/b/deep.csv"}
    assert sorted(listing.folders) == ["a", "a/b"]
    assert listing.oddities == []
    status = (tmp_path / "tray.csv").stat()
    assert listing.files["tray.csv"] == Stamp(1, status.st_mtime_ns, status.st_ino)


def test_only_one_folder_and_what_is_below(tmp_path: Path) -> None:
    put(tmp_path, "tray.csv", "a/one.csv", "a/b/two.csv", "ab/three.csv")
    listing = survey(RealDisk(), str(tmp_path), "a")
    assert set(listing.files) == {"a/one.csv", "a/b/two.csv"}
    known = dict.fromkeys(["tray.csv", "a/one.csv", "a/b/gone.csv", "ab/three.csv"], Stamp(1, 1, 1))
    changes = compare(listing, known)
    assert changes.new == ("a/b/two.csv",)
    assert changes.changed == ("a/one.csv",)
    assert changes.vanished == ("a/b/gone.csv",)


def test_what_is_left_of_a_run_that_was_cut_short_is_noted(tmp_path: Path) -> None:
    put(tmp_path, "a/.spikeward-tmp-MD1_07.result.json")
    listing = survey(RealDisk(), str(tmp_path))
    assert listing.leftovers == ["a/.spikeward-tmp-MD1_07.result.json"]
    assert listing.files == {}


def test_links_pipes_and_loops_are_said_and_never_followed(tmp_path: Path) -> None:
    put(tmp_path, "a/tray.csv")
    (tmp_path / "passwd.csv").symlink_to("/etc/passwd")
    (tmp_path / "a" / "loop").symlink_to(tmp_path)
    os.mkfifo(tmp_path / "pipe.csv")
    listing = survey(RealDisk(), str(tmp_path))
    assert set(listing.files) == {"a/tray.csv"}
    said = {oddity.path: oddity.sentence for oddity in listing.oddities}
    assert set(said) == {"passwd.csv", "a/loop", "pipe.csv"}
    assert "link" in said["passwd.csv"]
    assert "never opened" in said["pipe.csv"]


def test_names_that_only_a_person_cannot_tell_apart(tmp_path: Path) -> None:
    put(tmp_path, "a/Tray.csv", "a/tray.csv", "caf\u00e9.csv", "cafe\u0301.csv", "b/tray.csv")
    listing = survey(RealDisk(), str(tmp_path))
    assert len(listing.files) == 5
    sentences = [oddity.sentence for oddity in listing.oddities]
    assert len(sentences) == 2
    assert any("Tray.csv and tray.csv in a differ only" in each for each in sentences)


def test_hostile_names_are_listed_and_shown_escaped(tmp_path: Path) -> None:
    names = [b"a\nb.csv", b"\xff\xfe.csv", b"-rf.csv", b'<b>&".csv', "\u202egnp.csv".encode(), b"x" * 251 + b".csv"]
    for name in names:
        with open(os.fsencode(tmp_path) + b"/" + name, "wb") as file:
            file.write(b"x")
    (tmp_path / "li\nnk").symlink_to("/nowhere")
    listing = survey(RealDisk(), str(tmp_path))
    assert {os.fsencode(path) for path in listing.files} == set(names)
    assert all(oddity.sentence.isprintable() for oddity in listing.oddities)


def test_a_folder_that_cannot_be_listed_loses_nothing(tmp_path: Path) -> None:
    put(tmp_path, "a/one.csv", "a/c/two.csv", "b/three.csv")
    known = survey(RealDisk(), str(tmp_path)).files
    listing = survey(Sick(a=errno.EIO), str(tmp_path))
    assert listing.unlisted == {"a": os.strerror(errno.EIO)}
    assert set(listing.files) == {"b/three.csv"}
    assert compare(listing, known).vanished == ()
    (tmp_path / "b" / "three.csv").unlink()
    assert compare(survey(Sick(a=errno.EACCES), str(tmp_path)), known).vanished == ("b/three.csv",)


@pytest.mark.parametrize("depth", [100])
def test_deep_trees(tmp_path: Path, depth: int) -> None:
    path = "/".join("d" * depth) + "/tray.csv"
    put(tmp_path, path)
    assert set(survey(RealDisk(), str(tmp_path)).files) == {path}
    shallow = survey(RealDisk(), str(tmp_path), deepest=50)
    assert shallow.files == {}
    (place,) = shallow.unlisted
    assert place.count("/") == 50
    assert compare(shallow, {path: Stamp(1, 1, 1)}).vanished == ()


def test_too_many_files_are_bounded_and_said(tmp_path: Path) -> None:
    put(tmp_path, *(f"{folder}/{number}.csv" for folder in "abcdef" for number in range(5)))
    listing = survey(RealDisk(), str(tmp_path), most=12)
    assert 12 < len(listing.files) < 20
    assert "more than 12 files" in next(iter(listing.unlisted.values()))
    known = dict.fromkeys([f"{folder}/{number}.csv" for folder in "abcdef" for number in range(5)], Stamp(1, 1, 1))
    assert compare(listing, known).vanished == ()


def test_a_missing_root_is_a_state_and_takes_nothing_away(tmp_path: Path) -> None:
    listing = survey(RealDisk(), str(tmp_path / "share"))
    assert listing.away == "the folder is not there"
    assert compare(listing, {"tray.csv": Stamp(1, 1, 1)}).vanished == ()
    (tmp_path / "share").mkdir()
    assert survey(Sick(share=errno.ESTALE), str(tmp_path / "share")).away == os.strerror(errno.ESTALE)


@given(
    st.dictionaries(st.sampled_from("abcdefgh"), st.integers(0, 2)),
    st.dictionaries(st.sampled_from("abcdefgh"), st.integers(0, 2)),
)
def test_changes_lead_from_what_was_known_to_what_is(before: dict[str, int], after: dict[str, int]) -> None:
    known = {path: Stamp(1, version, 1) for path, version in before.items()}
    listing = Listing(files={path: Stamp(1, version, 1) for path, version in after.items()})
    changes = compare(listing, known)
    for path in changes.vanished:
        del known[path]
    known |= {path: listing.files[path] for path in (*changes.new, *changes.changed)}
    assert known == listing.files
    assert not set(changes.new) & set(before)
    assert list(changes.new) == sorted(changes.new)


def full(inode: int = 1) -> Listing:
    return Listing(files={"tray.csv": Stamp(1, 1, 1)}, root_inode=inode)


def test_an_empty_folder_that_held_files_is_believed_the_second_time() -> None:
    presence = Presence()
    assert presence.away(full(), True) == ""
    assert "empty now" in presence.away(Listing(root_inode=1), True)
    assert presence.away(Listing(root_inode=1), True) == ""


def test_a_blink_is_never_believed() -> None:
    presence = Presence()
    presence.away(full(), True)
    for _ in range(5):
        assert presence.away(Listing(root_inode=1), True)
        assert presence.away(full(), True) == ""


def test_an_empty_mount_point_is_never_believed() -> None:
    presence = Presence()
    presence.away(full(inode=2), True)
    assert all("mounted" in presence.away(Listing(root_inode=77), True) for _ in range(1000))
    assert presence.away(full(inode=2), True) == ""


def test_gone_for_an_hour_back_empty_then_whole() -> None:
    presence = Presence()
    presence.away(full(), True)
    for _ in range(3600):
        assert presence.away(Listing(away="the folder is not there"), True) == "the folder is not there"
    assert presence.away(Listing(root_inode=1), True)
    assert presence.away(full(), True) == ""


def test_a_folder_that_never_held_files_may_be_empty() -> None:
    presence = Presence()
    assert presence.away(Listing(root_inode=1), False) == ""
    assert presence.away(Listing(start="a", root_inode=1), True) == ""
