"""Rule files and decisions edited while the daemon runs: good, bad, half saved; the last good ones stay in force."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from harness import Clock, Life, lives, opened_sweep, soon, swept
from processes import Station
from small_night import CLOSING, RULES, batch, series

STRICT = ("use: pack:general", "use: pack:general\n  span: {fail_below: 20}")
OPEN_BATCH = {path: content for path, content in batch("N2", 2, "b", brackets=True).items() if "BR2" not in path}
NIGHT = batch("N1", 2, "a", brackets=True) | OPEN_BATCH


@pytest.fixture
def clock() -> Clock:
    return Clock()


@pytest.fixture
def station(tmp_path: Path) -> Station:
    return Station(tmp_path / "home", CLOSING)


def edit(station: Station, text: str) -> None:
    (station.home / "rules.yaml").write_text(text)


def verdicts(station: Station, name: str) -> dict[str, str]:
    """Verdict by series of one batch, as the flags' contents say."""
    return {path.name.split(".")[0]: path.name.split(".")[1] for path in station.out.rglob(f"{name}_*.flag")}


def events(station: Station, kind: str) -> list[dict[str, object]]:
    found: list[dict[str, object]] = []
    for line in (station.home / ".spikeward" / "ledger.jsonl").read_text().splitlines():
        parsed = json.loads(line)
        found += parsed if isinstance(parsed, list) else [parsed]
    return [each for each in found if each["event"] == kind]


def test_a_good_edit_applies_to_what_is_not_closed_and_says_how_to_solve_the_rest_again(
    station: Station, clock: Clock, tmp_path: Path
) -> None:
    station.put_all(NIGHT)
    before: dict[str, dict[str, str]] = {}

    def good(life: Life) -> None:
        before.update(N1=verdicts(station, "N1"), N2=verdicts(station, "N2"))
        edit(station, CLOSING.replace(*STRICT))

    life = lives(str(station.home), clock, good)
    assert set(before["N1"].values()) == {"warn"}
    assert set(before["N2"].values()) == {"waiting"}
    assert verdicts(station, "N1") == before["N1"]
    assert set(verdicts(station, "N2").values()) == {"fail"}
    (remedy,) = life.opened.pipeline.remedies()
    assert "N1" in remedy
    assert "spikeward sweep" in remedy
    assert "--again" in remedy

    with opened_sweep(str(station.home), clock) as opened:
        assert opened.pipeline.remedies() == [remedy]
    assert verdicts(station, "N1") == before["N1"]
    swept(str(station.home), clock, again="N1")
    assert set(verdicts(station, "N1").values()) == {"fail"}
    (again,) = events(station, "again")
    assert again["before"] != again["after"]
    other = Station(tmp_path / "fresh", CLOSING.replace(*STRICT))
    other.put_all(NIGHT)
    swept(str(other.home), Clock())
    station.equals(other)


BAD = {
    "another unit": CLOSING.replace("aliquot: 5 mL", "aliquot: 5 parsecs"),
    "a key that is not known": CLOSING + "\nsurprise: yes\n",
    "half saved": CLOSING[: CLOSING.index("standards:") + 40],
    "empty": "",
    "no text at all": "\x00\x01",
}


@pytest.mark.parametrize("how", BAD)
def test_a_bad_edit_leaves_the_last_good_rules_in_force(
    station: Station, clock: Clock, tmp_path: Path, how: str
) -> None:
    station.put_all(NIGHT)
    told: list[str] = []

    def bad(life: Life) -> None:
        edit(station, BAD[how])

    def goes_on(life: Life) -> None:
        told.extend(life.notices())
        board = (station.data / "a" / "N1.board.html").read_text()
        assert "the last good rules stay in force" in board
        station.put_all(batch("N2", 2, "b", brackets=True))

    def mended(life: Life) -> None:
        assert set(verdicts(station, "N2").values()) == {"warn"}
        edit(station, CLOSING + "# looked through again\n")

    life = lives(str(station.home), clock, bad, goes_on, mended)
    assert any("rules.yaml" in notice and "the last good rules stay in force" in notice for notice in told)
    assert life.notices() == []
    other = Station(tmp_path / "fresh", CLOSING)
    other.put_all(NIGHT | batch("N2", 2, "b", brackets=True))
    swept(str(other.home), Clock())
    station.equals(other)


def test_a_rule_file_that_is_saved_piece_by_piece_is_taken_when_it_is_whole(station: Station, clock: Clock) -> None:
    station.put_all(OPEN_BATCH)
    whole = CLOSING.replace(*STRICT)
    pieces = [whole[:200], whole[:700], whole[:-30], whole]
    steps = [soon(2, lambda life, piece=piece: edit(station, piece)) for piece in pieces]  # type: ignore[misc]
    life = lives(str(station.home), clock, *steps)
    assert life.notices() == []
    assert set(verdicts(station, "N2").values()) == {"fail"}


def test_a_rule_file_that_goes_away_for_a_while(station: Station, clock: Clock) -> None:
    station.put_all(OPEN_BATCH)

    def goes(life: Life) -> None:
        (station.home / "rules.yaml").rename(station.home / "rules.old")

    def returns(life: Life) -> None:
        assert any("the last good rules stay in force" in notice for notice in life.notices())
        (station.home / "rules.old").rename(station.home / "rules.yaml")

    life = lives(str(station.home), clock, goes, returns)
    assert life.notices() == []


def test_rules_are_kept_over_restarts_for_what_closed_under_them(station: Station, clock: Clock) -> None:
    station.put_all(NIGHT)
    lives(str(station.home), clock)
    before = verdicts(station, "N1")
    edit(station, CLOSING.replace(*STRICT))
    life = lives(str(station.home), clock)
    assert verdicts(station, "N1") == before
    assert set(verdicts(station, "N2").values()) == {"fail"}
    assert life.opened.pipeline.remedies()


def test_an_edit_that_has_everything_read_again_takes_no_flag_away(station: Station, clock: Clock) -> None:
    """Between the edit and the new reading nothing is known of a batch beside a closed one; its outputs stand."""
    station.put_all(NIGHT | {path.replace("b/", "a/"): content for path, content in OPEN_BATCH.items()})
    flagged: list[int] = []

    def edit_columns(life: Life) -> None:
        edit(station, CLOSING.replace('files: "*.csv"', 'files: ["*.csv", "*.txt"]'))

    def look(life: Life) -> None:
        flagged.append(len(list((station.out / "a").glob("N2_*.flag"))))

    life = lives(str(station.home), clock, edit_columns, *[soon(1, look)] * 40)
    assert flagged == [2] * 40
    assert life.notices() == []
    assert not list(station.out.rglob("*.kept-*"))


# ---- decisions -----------------------------------------------------------------------------------

GOOD = "- {exclude: N1_01_A3, by: N. Invented, on: 2031-03-03, why: flask was cracked}\n"
REFUSED = {
    "no reason": ("- {exclude: N1_01_A2, by: N. Invented, on: 2031-03-03}\n", "'why' is missing"),
    "an empty reason": ("- {exclude: N1_01_A2, by: N. Invented, on: 2031-03-03, why: }\n", "'why' is empty"),
    "nobody": ("- {exclude: N1_01_A2, on: 2031-03-03, why: cracked}\n", "'by' is missing"),
    "no date": ("- {exclude: N1_01_A2, by: N. Invented, on: yesterday, why: cracked}\n", "is not a date"),
    "itself contradicted": (
        "- {prefer: N1_01_A2.csv, by: N. I., on: 2031-03-03, why: a}\n"
        "- {prefer: N1_01_A2.csv, by: O. I., on: 2031-03-03, why: b}\n",
        "keep one of the two",
    ),
    "no list": ("exclude: N1_01_A2\n", "decisions are a list"),
    "no YAML": ("- {exclude: [N1_01_A2\n", "decisions.yaml"),
}  # fmt: skip


@pytest.mark.parametrize("how", REFUSED)
def test_decisions_that_do_not_hold_together_are_refused_whole(tmp_path: Path, clock: Clock, how: str) -> None:
    station = Station(tmp_path / "home", RULES)
    station.put_all(series("N1", 1))
    station.put("decisions.yaml", GOOD.encode())
    text, sentence = REFUSED[how]
    digests: list[str] = []

    def refused(life: Life) -> None:
        digests.append(station.digest())
        station.put("decisions.yaml", (GOOD + text if text.startswith("-") else text).encode())

    life = lives(str(station.home), clock, refused)
    (notice,) = life.notices()
    assert sentence in notice
    assert "The decisions before it stand" in notice
    assert station.digest() == digests[0]
    assert b"flask was cracked" in (station.out / "N1_01.result.json").read_bytes()
    assert len(events(station, "decisions")) == 1


def test_a_decision_about_a_vessel_that_nobody_knows(tmp_path: Path, clock: Clock) -> None:
    station = Station(tmp_path / "home", RULES)
    station.put_all(series("N1", 1))
    digests: list[str] = []

    def decide(life: Life) -> None:
        digests.append(station.digest())
        station.put("decisions.yaml", GOOD.replace("N1_01_A3", "N1_99_A3").encode())

    life = lives(str(station.home), clock, decide)
    (notice,) = life.notices()
    assert "line 1: no solution and no file is named N1_99_A3; the decision has no effect" in notice
    assert station.digest() == digests[0]


def test_a_decision_stands_after_restarts_and_counts_like_any_other_input(tmp_path: Path, clock: Clock) -> None:
    files = series("N1", 1) | {"decisions.yaml": GOOD.encode()}
    station = Station(tmp_path / "home", RULES)
    station.put_all(series("N1", 1))
    lives(str(station.home), clock, lambda life: station.put("decisions.yaml", GOOD.encode()))
    lives(str(station.home), clock)
    swept(str(station.home), clock)
    other = Station(tmp_path / "fresh", RULES)
    other.put_all(files)
    swept(str(other.home), Clock())
    station.equals(other)
