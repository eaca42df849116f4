"""The invented night by itself: its bytes, its mishaps, and whether its signals hold the contents that it tells."""

from __future__ import annotations

import csv
import hashlib
import io
import os
from collections import Counter

import pytest

from spikeward.daemon.demo.mishaps import MISHAPS, REFUSED, TORN
from spikeward.daemon.demo.night import Night, night, play
from spikeward.daemon.demo.scenario import ANALYTES
from spikeward.daemon.rule_file.load import load_rules
from spikeward.rules.outcomes import FAIL, PASS, WARN

BYTES_OF_SEED_7 = "25245ab04039063fe931caad8841fbd2517ea356854c6d274b210b3101f4f575"


@pytest.fixture(scope="module")
def usual() -> Night:
    return night()


def contents(invented: Night, path: str) -> list[str]:
    return [each.content.decode("cp1252") for each in invented.deliveries if each.path == path]


def digest(invented: Night) -> str:
    sha = hashlib.sha256()
    for each in invented.deliveries:
        sha.update(f"{each.minute!r} {each.path}\n".encode() + each.content)
    return sha.hexdigest()


def test_a_seed_gives_the_same_bytes_everywhere(usual):
    assert digest(usual) == BYTES_OF_SEED_7
    assert digest(night(8)) != digest(usual)


def test_the_rule_file_is_right(usual):
    rules, problems = load_rules(usual.rules, "rules.yaml")
    assert rules is not None
    assert [problem.line_text() for problem in problems] == []
    assert [watch.folder for watch in rules.watches] == ["inbox"]


def test_the_night_is_as_large_as_a_night(usual):
    assert 80 <= len({each.path for each in usual.deliveries}) <= 150
    assert len({stem[:4] for stem in usual.expected}) == 3
    assert len(usual.truth) >= 12
    minutes = [each.minute for each in usual.deliveries]
    assert minutes == sorted(minutes)


def test_every_verdict_is_expected_somewhere_and_every_mishap_has_its_series(usual):
    counts = Counter(usual.expected.values())
    assert counts[FAIL] == 6
    assert counts[WARN] == 2
    assert counts[PASS] == len(usual.expected) - 8
    assert set(MISHAPS) <= set(usual.expected)


def test_files_that_come_again(usual):
    times = Counter(each.path for each in usual.deliveries if each.path.endswith(".csv"))
    assert {path for path, count in times.items() if count > 1} == {
        "EM41/EM41_02_A2.csv", TORN, "EM41/EM41_bench.csv",
    }  # fmt: skip
    first, second = contents(usual, "EM41/EM41_02_A2.csv")
    assert rows_of(first)[0]["Signal"] != rows_of(second)[0]["Signal"]
    torn, whole = contents(usual, TORN)
    assert whole.startswith(torn)
    assert torn.splitlines()[-1].count(",") < torn.splitlines()[3].count(",")
    lacking, complete = contents(usual, "EM41/EM41_bench.csv")
    assert "EM41,04," not in lacking
    assert "EM41,04," in complete


def test_files_that_differ_from_the_others(usual):
    names = {each.path for each in usual.deliveries}
    assert "EM41/EM41_03_A1.csv" in names
    assert "EM41/EM41_03_A2.csv" not in names
    (early,), (again,) = contents(usual, "EM42/EM42_09_A2.csv"), contents(usual, "EM42/EM42_09_A2_again.csv")
    assert rows_of(early)[0]["Measured"] == rows_of(again)[0]["Measured"]
    assert rows_of(early)[0]["Exported"] < rows_of(again)[0]["Exported"]
    (refused,) = contents(usual, REFUSED)
    assert {len(row["Signal"].split(",")[1]) for row in rows_of(refused)} == {3}
    closing = next(each.minute for each in usual.deliveries if each.path == "EM41/EM41_BR3.csv")
    late = next(each.minute for each in usual.deliveries if each.path == "EM41/EM41_07_A3.csv")
    assert late > closing + 60


@pytest.mark.parametrize("seed", [7, 8, 21])
def test_one_level_alone_is_over_range(seed):
    over = {
        (path, row["Element"])
        for path, text in emission(night(seed)).items()
        for row in rows_of(text)
        if row["Signal"] == "OVER"
    }
    assert over == {("EM41/EM41_05_A3.csv", "Mn")}


def test_the_second_layout_is_german_and_grows(usual):
    (first, *_, last) = contents(usual, "EM43/Lauf_EM43_21.txt")
    assert last.startswith(first)
    head = first.split("\r\n")[1]
    assert head.split(";")[:4] == ["Lösung", "Element", "Linie", "Mittelwert"]
    assert all("," in line.split(";")[3] for line in last.split("\r\n")[2:-2])
    assert last.endswith("Ende des Protokolls\r\n")


@pytest.mark.parametrize("seed", [7, 8])
def test_extrapolation_finds_what_is_true(seed):
    """A line drawn here, C0 = intercept over slope, finds the contents of series to which nothing happens."""
    invented = night(seed)
    texts, bench = emission(invented), bench_of(invented)
    stems = [stem for stem in invented.truth if stem.startswith(("EM41", "EM42")) and stem not in MISHAPS]
    assert len(stems) >= 3
    for stem in stems:
        mass, dry = bench[stem]
        for analyte in ANALYTES:
            x, y = [], []
            for level in range(4):
                signals = [
                    float(row["Signal"]) - 152
                    for row in rows_of(texts[f"{stem[:4]}/{stem}_A{level}.csv"])
                    if row["Element"] == analyte
                ]
                x.append({"Mn": 70.2, "Ni": 3.51, "Zn": 14.04}[analyte] * 0.25 * level / 5)
                y.append(sum(signals) / len(signals))
            mean_x, mean_y = sum(x) / 4, sum(y) / 4
            slope = sum((a - mean_x) * (b - mean_y) for a, b in zip(x, y, strict=True))
            slope /= sum((a - mean_x) ** 2 for a in x)
            found = (mean_y / slope - mean_x) * 50 / (mass * dry / 100)
            assert found == pytest.approx(invented.truth[stem][analyte], rel=0.04), (stem, analyte)


def test_matrices_differ(usual):
    """The slopes of one analyte differ between samples by more than a third, or nobody would need additions."""
    texts = emission(usual)
    rises = []
    for stem in [stem for stem in usual.truth if stem.startswith("EM41")]:
        ends = [float(rows_of(texts[f"{stem[:4]}/{stem}_A{level}.csv"])[1]["Signal"]) for level in (0, 3)]
        rises.append(ends[1] - ends[0])
    assert max(rises) > 1.33 * min(rises)


def test_play_delivers_all_at_once(usual, tmp_path):
    play(usual, tmp_path, 0, lambda seconds: pytest.fail("no pace, no sleep"))
    last = {each.path: each.content for each in usual.deliveries}
    present = {
        os.path.relpath(os.path.join(here, name), tmp_path) for here, _, names in os.walk(tmp_path) for name in names
    }
    assert present == set(last)
    assert all((tmp_path / path).read_bytes() == content for path, content in last.items())


def test_play_keeps_the_pace_and_lets_files_grow(usual, tmp_path):
    slept, seen = [], []

    def sleep(seconds: float) -> None:
        slept.append(seconds)
        growing = tmp_path / "EM43" / "Lauf_EM43_21.txt"
        if growing.exists():
            seen.append((growing.stat().st_ino, growing.stat().st_size))

    play(usual, tmp_path, 60, sleep)
    assert sum(slept) == pytest.approx(usual.deliveries[-1].minute / 60)
    assert len({inode for inode, _ in seen}) == 1
    assert len({size for _, size in seen}) == 3


def rows_of(text: str) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(text.split("\n", 2)[2])))


def emission(invented: Night) -> dict[str, str]:
    return {
        each.path: each.content.decode()
        for each in invented.deliveries
        if each.path.endswith(".csv") and "bench" not in each.path
    }


def bench_of(invented: Night) -> dict[str, tuple[float, float]]:
    found = {}
    for each in invented.deliveries:
        if each.path.endswith("_bench.csv"):
            for row in csv.DictReader(io.StringIO(each.content.decode())):
                found[f"{row['Batch']}_{row['Sample']}"] = (float(row["Mass"].split()[0]), float(row["DM"].split()[0]))
    return found
