"""Names of our own files: safe, short, told apart; and what is never read."""

from __future__ import annotations

import string
from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from spikeward.daemon.names import (
    IGNORED_ENDINGS,
    IGNORED_NAMES,
    batch_stem,
    ignored,
    is_ours,
    series_stem,
    shown,
    stems,
    unread_name,
)
from spikeward.rules.records import ROLES, BatchKey, SeriesKey

SAFE = set(string.ascii_letters + string.digits + ".-_%")
TEXT = st.text(st.characters(codec=None), max_size=60)


def key(batch: str, sample: str, role: str = "sample", folder: str = "") -> SeriesKey:
    return SeriesKey("in", folder, batch, role, sample)


@pytest.mark.parametrize(
    ("series", "stem"),
    [
        (key("MD1", "07"), "MD1_07"),
        (key("MD1", "MUD-1", "reference"), "MD1_reference_MUD-1"),
        (key("MD1", "1", "process_blank"), "MD1_process-blank_1"),
        (key("", "07"), "sample_07"),
        (key("", "07", "spiked_sample"), "spiked-sample_07"),
        (key("MD_1", "a b"), "MD%5F1_a%20b"),
        (key(".md", "é"), "%2Emd_%C3%A9"),
        (key("-rf", "1"), "%2Drf_1"),
        (key("..", "../../etc/passwd"), "%2E._..%2F..%2Fetc%2Fpasswd"),
        (key("B", "\udcff"), "B_%FF"),
        (key("B", "a\nb<script>"), "B_a%0Ab%3Cscript%3E"),
    ],
)
def test_stems_as_the_manual_shows_them(series: SeriesKey, stem: str) -> None:
    assert series_stem(series) == stem


def test_stems_of_batches() -> None:
    assert batch_stem(BatchKey("in", "a/b", "")) == "folder"
    assert batch_stem(BatchKey("in", "", "MD 1")) == "MD%201"


@given(batch=TEXT, sample=TEXT, role=st.sampled_from(ROLES))
def test_any_key_gives_one_safe_visible_short_name(batch: str, sample: str, role: str) -> None:
    stem = series_stem(key(batch, sample, role))
    assert set(stem) <= SAFE
    assert not stem.startswith((".", "-"))
    assert len(stem) <= 120 + 13
    assert is_ours(stem + ".result.json")


def test_the_longest_names_fit_beside_each_other() -> None:
    a, b = key("B" * 300, "1"), key("B" * 300, "2")
    assert series_stem(a) != series_stem(b)
    assert series_stem(a) == series_stem(replace(a, root="elsewhere", folder="moved")), "a moved folder keeps its names"
    assert len((".spikeward-tmp-" + series_stem(a) + ".waiting.flag.kept-1000").encode()) <= 255


def test_a_cut_never_goes_through_an_escape() -> None:
    for lead in range(6):
        stem = series_stem(key("x" * lead + "é" * 100, "1"))
        body = stem.rsplit("_", 1)[0]
        assert body.count("%") * 3 + lead == len(body)


PARTS = st.tuples(
    st.sampled_from(["", "sample", "B", "b", "é", "É", "e\u0301", "A_1", "x" * 130]), st.text("aA_é1", max_size=3)
)


@given(st.lists(st.tuples(PARTS, st.sampled_from(["sample", "check", "spiked_sample"])), max_size=8))
def test_series_that_do_not_clash_have_names_that_differ_on_any_disk(found: list[tuple[tuple[str, str], str]]) -> None:
    keys = {key(batch, sample, role) for (batch, sample), role in found}
    named, clashing = stems(keys)
    assert set(named) == keys
    clear = [named[each].casefold() for each in keys - clashing]
    assert len(set(clear)) == len(clear)


@pytest.mark.parametrize(
    ("one", "other"),
    [
        (key("MD1", "a7"), key("MD1", "A7")),
        (key("MD1", "caf\u00e9"), key("MD1", "cafe\u0301")),
        (key("sample", "07"), key("", "07")),
        (key("B" * 200, "a"), key("b" * 200, "A")),
    ],
)
def test_names_that_fold_to_one_clash_in_one_folder_only(one: SeriesKey, other: SeriesKey) -> None:
    assert stems([one, other, key("MD1", "8")])[1] == {one, other}
    assert stems([one, replace(other, folder="next")])[1] == set()
    assert stems([one, one])[1] == set()


@pytest.mark.parametrize(
    "name",
    [
        "MD1_07.summary.html", "MD1_07.result.json", "MD1_07.pass.flag", "MD1_07.warn.flag", "MD1_07.fail.flag",
        "MD1_07.waiting.flag", "tray.csv.unread.flag", "MD1.board.html", "MD1.results.csv", "HOLD.flag",
        ".spikeward-tmp-MD1_07.result.json", ".spikeward-station", "MD1_07.result.json.kept-1",
        "MD1.results.csv.kept-12",
    ],
)  # fmt: skip
def test_our_own_names(name: str) -> None:
    assert is_ours(name)


@pytest.mark.parametrize(
    "name", ["tray.csv", "results.csv", "MD1.csv.kept-1", "pass.flag", "a.flag", "result.json", "x.kept-1"]
)
def test_names_of_others(name: str) -> None:
    assert not is_ours(name)


@pytest.mark.parametrize(
    "name",
    [
        "~$tray.xlsx", ".hidden.csv", "._tray.csv", ".DS_Store", "Thumbs.db", "THUMBS.DB", "Desktop.ini",
        "tray.csv.part",
        "tray.csv.PART", "tray.tmp", "tray.csv.crdownload", "tray.csv~", "#tray.csv#", ".tray.csv.swp", "tray.bak",
        ".stversions", "@eaDir",
    ],
)  # fmt: skip
def test_ignored_by_a_listed_rule_with_its_reason(name: str) -> None:
    assert ignored(name)


@pytest.mark.parametrize(
    "name", ["tray.csv", "part.csv", "tmp", "~tray.csv", "-tray.csv", "#1.csv", "tray.partial.csv", "é.csv"]
)
def test_data_files_are_not_ignored(name: str) -> None:
    assert ignored(name) is None


def test_every_listed_rule_is_in_force() -> None:
    assert all(ignored("x" + ending.upper()) == reason for ending, reason in IGNORED_ENDINGS.items())
    assert all(ignored(name.upper()) == reason for name, reason in IGNORED_NAMES.items())


@given(TEXT)
def test_what_is_shown_stays_on_its_line_and_in_its_direction(name: str) -> None:
    assert shown(name).isprintable()
    shown(name).encode("utf-8")


def test_shown() -> None:
    assert shown("tray 1é.csv") == "tray 1é.csv"
    assert shown("a\nb\x1b[31m") == "a\\u000ab\\u001b[31m"
    assert shown("\u202egnp.csv") == "\\u202egnp.csv"
    assert shown("\udcff.csv") == "\\xff.csv"
    assert shown("\\xff.csv") == "\\\\xff.csv"


def test_the_flag_beside_an_unread_file_fits_on_the_disk() -> None:
    assert unread_name("tray_1.csv") == "tray_1.csv.unread.flag"
    assert unread_name("-tray.csv") == "%2Dtray.csv.unread.flag"
    assert len(unread_name("é" * 127)) <= 255
    assert unread_name("é" * 127) != unread_name("é" * 126 + "e")
