"""Any past at all: what a station has published in the end depends on its files, rules and closings, not on the way."""

from __future__ import annotations

import os
import shutil
import tempfile
from contextlib import suppress
from pathlib import Path
from typing import Any

from disk_that_dies import Died
from harness import Clock, MortalDisk, Step, lives, soon, swept, with_the_same_past
from hypothesis import HealthCheck, Phase, given, note, settings
from hypothesis import strategies as st
from processes import Station
from small_night import CLOSING, batch

FINAL = batch("N1", 2, "a", brackets=True) | batch("N2", 1, "b", brackets=True)
STRICTER = CLOSING.replace("use: pack:general", "use: pack:general\n  span: {warn_outside: [1, 30]}")
OTHER_WAIT = CLOSING.replace("settle: 1 s", "settle: 0.5 s")
READ_OTHERWISE = CLOSING.replace('files: "*.csv"', 'files: ["*.csv", "*.txt"]')
LENDING = CLOSING.replace("brackets:\n", "precision: pooled\nbrackets:\n  drift: correct\n")
GOOD = (CLOSING, STRICTER, OTHER_WAIT, READ_OTHERWISE, LENDING)
DECISIONS = (
    b"- {exclude: N1_01_A3, by: N. Invented, on: 2031-03-03, why: flask was cracked}\n",
    b"- {exclude: N2_01_A1, by: N. Invented, on: 2031-03-03, why: flask was cracked}\n",
    b"- {exclude: N1_01_A2}\n",
)
BAD = (CLOSING[:400], CLOSING.replace("aliquot: 5 mL", "aliquot: 5 parsecs"), "", CLOSING + "\nsurprise: yes\n")


def torn(content: bytes) -> bytes:
    return content[: len(content) - 9]


def wrong(path: str) -> bytes:
    """Another value at the same place."""
    content = FINAL[path]
    head, _, rest = content.partition(b",cps")
    return head + b"1,cps" + rest


PATHS = st.sampled_from(sorted(FINAL))
WRITES = st.one_of(
    st.tuples(st.just("final"), PATHS),
    st.tuples(st.just("final"), PATHS),
    st.tuples(st.just("wrong"), PATHS),
    st.tuples(st.just("torn"), PATHS),
    st.tuples(st.just("empty"), PATHS),
    st.tuples(st.just("copy"), PATHS),
    st.tuples(st.just("delete"), PATHS),
    st.tuples(st.just("rest"), st.sampled_from(["a", "b"])),
    st.tuples(st.just("decide"), st.sampled_from(range(len(DECISIONS)))),
    st.tuples(st.just("undecide"), st.none()),
    st.tuples(st.just("hour"), st.none()),
    st.tuples(st.just("good rules"), st.sampled_from(range(len(GOOD)))),
    st.tuples(st.just("bad rules"), st.sampled_from(range(len(BAD)))),
)
WAITS = st.one_of(st.none(), st.integers(0, 12))  # until it is quiet, or so many turns of the loop
ENDS = st.sampled_from(
    [
        "stopped", "stopped and the journal is lost", "killed", "killed and the journal is lost", "swept",
        "swept --close", "swept --again",
    ]
)  # fmt: skip
LIVES = st.lists(
    st.tuples(st.lists(st.tuples(WRITES, WAITS), max_size=8), ENDS, st.integers(1, 60)), min_size=1, max_size=4
)


def apply(station: Station, what: str, which: Any) -> None:
    if what == "final":
        station.put(which, FINAL[which])
    elif what == "wrong":
        station.put(which, wrong(which))
    elif what == "torn":
        station.put(which, torn(FINAL[which]))
    elif what == "empty":
        station.put(which, b"")
    elif what == "copy":
        station.put(which.replace("/", "/copy of "), FINAL[which])
    elif what == "delete":
        (station.data / which).unlink(missing_ok=True)
    elif what == "decide":
        station.put("decisions.yaml", DECISIONS[which])
    elif what == "undecide":
        (station.data / "decisions.yaml").unlink(missing_ok=True)
    elif what == "rest":
        station.put_all({path: content for path, content in FINAL.items() if path.startswith(f"{which}/")})
    else:
        write_rules(station, GOOD[which] if what == "good rules" else BAD[which])


def write_rules(station: Station, text: str) -> None:
    beside = station.home / "rules.yaml.new"
    beside.write_text(text)
    beside.replace(station.home / "rules.yaml")


def step(station: Station, what: str, which: Any) -> Step:
    if what == "hour":
        return lambda life: life.clock.sleep(4000.0)
    return lambda life: apply(station, what, which)


def ends_as_a_fresh_sweep(script: list[Any], rules: int, keep_copies: bool) -> None:
    top = Path(tempfile.mkdtemp(dir="/dev/shm" if os.path.isdir("/dev/shm") else None))
    clock = Clock()
    try:
        station = Station(top / "home", CLOSING)
        last_good = CLOSING
        for writes, end, step_of_death in script:
            write_rules(station, last_good)  # a bad rule file keeps a station from starting: its own test
            steps = []
            for (what, which), wait in writes:
                one = step(station, what, which)
                steps.append(one if wait is None else soon(wait, one))
                if what == "good rules":
                    last_good = GOOD[which]
            disk = MortalDisk(dies_at=step_of_death if end.startswith("killed") else 0)
            with suppress(Died):
                lives(str(station.home), clock, *steps, disk=disk)
            if end.startswith("swept"):
                write_rules(station, last_good)
                again = "" if end.endswith("again") else None
                swept(str(station.home), clock, close=end.endswith("close"), again=again)
            if "lost" in end:
                for left in (station.home / ".spikeward").glob("journal.sqlite*"):
                    left.unlink()
        write_rules(station, GOOD[rules])
        station.put_all({p: c for p, c in FINAL.items() if not is_there(station, p, c)})
        if not keep_copies:
            for copy in station.data.rglob("copy of *"):
                if not copy.name.endswith((".flag", ".json", ".html")):
                    copy.unlink()
        life = lives(str(station.home), clock)
        note("\n".join(life.notices()))
        fresh = Station(top / "fresh", GOOD[rules])
        with_the_same_past(str(station.home), str(fresh.home))
        fresh.put_all(
            {
                str(path.relative_to(station.data)): path.read_bytes()
                for path in [*station.data.rglob("*.csv"), *station.data.glob("decisions.yaml")]
                if not path.name.endswith(".results.csv")
            }
        )
        swept(str(fresh.home), Clock())
        station.equals(fresh)
        swept(str(station.home), clock, close=True)
        swept(str(fresh.home), Clock(), close=True)
        station.equals(fresh)
        assert not kept_aside(station), "bytes of our own were taken for a person's"
    finally:
        shutil.rmtree(top)


def kept_aside(station: Station) -> list[str]:
    """What was kept aside, save boards of a batch whose only file, a bracket's, was for a time of no use to a sweep."""
    kept = [path.name for path in station.out.rglob("*.kept-*")]
    return [name for name in kept if ".board.html." not in name and ".results.csv." not in name]


def is_there(station: Station, path: str, content: bytes) -> bool:
    place = station.data / path
    return place.exists() and place.read_bytes() == content


@settings(
    max_examples=int(os.environ.get("SPIKEWARD_EXAMPLES", "30")),
    deadline=None,
    suppress_health_check=[HealthCheck.too_slow],
    phases=[Phase.explicit, Phase.reuse, Phase.generate],  # an example takes a third of a second: no shrinking
)
@given(script=LIVES, rules=st.sampled_from(range(len(GOOD))), keep_copies=st.booleans())
def test_any_past_ends_as_a_fresh_sweep_of_the_same_files(script: list[Any], rules: int, keep_copies: bool) -> None:
    ends_as_a_fresh_sweep(script, rules, keep_copies)
