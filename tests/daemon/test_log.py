"""One line per event, whatever a name holds."""

from __future__ import annotations

import io
import json

from hypothesis import given
from hypothesis import strategies as st

from spikeward.daemon.log import Log

TEXT = st.text(st.characters(codec=None), max_size=20)


def clock() -> str:
    return "2026-12-01T03:00:00Z"


def test_a_line_as_the_manual_shows_it() -> None:
    stream = io.StringIO()
    log = Log(stream, clock)
    log.info("published", series="MD1_07", verdict="pass", revision=2, seconds=0.5, again=False, lot=None)
    log.warning("unread", file="a b.csv", reason='row 3: "x" = \\')
    assert stream.getvalue().splitlines() == [
        "2026-12-01T03:00:00Z info published series=MD1_07 verdict=pass revision=2 seconds=0.5 again=no lot=-",
        '2026-12-01T03:00:00Z warning unread file="a b.csv" reason="row 3: \\"x\\" = \\\\"',
    ]


@given(TEXT, TEXT)
def test_nothing_breaks_out_of_its_line_or_its_value(name: str, reason: str) -> None:
    stream = io.StringIO()
    Log(stream, clock).error("unread", file=name, reason=reason)
    text = stream.getvalue()
    assert text.endswith("\n")
    assert text[:-1].isprintable()
    text.encode("utf-8")
    outside = "".join(text.replace("\\\\", "").replace('\\"', "").split('"')[::2])
    assert outside.count("=") == 2


@given(TEXT)
def test_json_lines_say_the_same(name: str) -> None:
    stream = io.StringIO()
    Log(stream, clock, as_json=True).info("read", file=name, rows=3)
    assert stream.getvalue().count("\n") == 1
    assert json.loads(stream.getvalue()) == {
        "time": clock(), "level": "info", "event": "read", "file": name, "rows": 3,
    }  # fmt: skip


def test_a_terminal_that_is_gone_stops_nobody() -> None:
    stream = io.StringIO()
    stream.close()
    Log(stream, clock).info("published", series="MD1_07")
