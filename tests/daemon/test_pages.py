"""Flags, tables, summaries and boards: what they say, and that hostile names stay text."""

from __future__ import annotations

import csv
import io
from dataclasses import replace
from html.parser import HTMLParser
from pathlib import Path
from urllib.parse import unquote, urlsplit
from xml.etree import ElementTree

import pandas
import pytest
from hypothesis import given
from hypothesis import strategies as st

from spikeward.daemon.pages.board import render_board
from spikeward.daemon.pages.cautions import CAUTIONS
from spikeward.daemon.pages.chart import addition_plot
from spikeward.daemon.pages.csv_file import COLUMNS, render_csv
from spikeward.daemon.pages.flag import render_flag, render_unread
from spikeward.daemon.pages.history_marks import without_history
from spikeward.daemon.pages.summary import render_summary
from spikeward.rules.outcomes import BatchOutcome, Check
from spikeward.rules.records import BatchKey
from tests.daemon.page_cases import (
    BATCH_OUTCOME,
    FAILED,
    HISTORY,
    HOSTILE,
    LINKS,
    NOTICES,
    OUTCOMES,
    PASSED,
    STATION,
    TURNED,
    cadmium,
    digest_of,
    outcome,
)

any_text = st.text(st.characters(codec=None, categories=None), max_size=30)


class Page(HTMLParser):
    """Tags, attributes and text of a page."""

    def __init__(self, content: bytes) -> None:
        super().__init__()
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.text = ""
        self.open: list[str] = []
        self.feed(content.decode("utf-8"))

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attrs)))
        if tag not in ("meta", "link", "br"):
            self.open.append(tag)

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        if "style" not in self.open:
            self.text += data


def lines_of(flag: bytes) -> list[tuple[str, str]]:
    assert flag.endswith(b"\n")
    return [tuple(line.split(": ", 1)) for line in flag.decode("utf-8").split("\n")[:-1]]


# ---- flags -----------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", sorted(OUTCOMES))
def test_a_flag_says_its_verdict_first_and_binds_itself_to_its_result(name: str):
    lines = lines_of(render_flag(OUTCOMES[name], digest_of("result")))
    assert lines[0] == ("verdict", OUTCOMES[name].verdict)
    found = dict(lines)
    assert found["result_digest"] == digest_of("result")
    assert found["rules_digest"] == OUTCOMES[name].rules_digest
    assert sum(key == "result" for key, _ in lines) == len(OUTCOMES[name].results)
    assert sum(key == "missing" for key, _ in lines) == len(OUTCOMES[name].waiting_for)


def test_a_flag_tells_why_it_fails_and_what_to_do():
    lines = lines_of(render_flag(OUTCOMES["failed"], ""))
    reasons = [text for key, text in lines if key == "reason"]
    assert reasons[0].startswith("fail, Cd 226.5, linear_top: Vessel 3 reads 1.12 Abs")
    assert reasons[0].endswith("Dilute the digest 1 + 1 and run the series again. Source: rule file.")
    assert [text for key, text in lines if key == "result"][1] == (
        "fail, Pb 283.3, no number: the slope does not differ from zero"
    )


@given(any_text)
def test_no_text_adds_a_line_to_a_flag(text: str):
    plain = OUTCOMES["plain"]
    hostile = replace(plain, sentence=text, key=replace(plain.key, sample=text))
    keys, wanted = ([key for key, _ in lines_of(render_flag(one, ""))] for one in (hostile, plain))
    assert keys == wanted


def test_an_unread_file_has_a_flag_with_a_sentence():
    flag = render_unread("aas/night.csv", "row 14, column Signal: '0,4.1' can be read both ways\nverdict: pass")
    assert lines_of(flag) == [
        ("verdict", "unread"),
        ("file", "aas/night.csv"),
        ("sentence", "row 14, column Signal: '0,4.1' can be read both ways\\nverdict: pass"),
    ]


# ---- table -----------------------------------------------------------------------------------------------------------


def test_a_data_frame_reads_the_table_back():
    frame = pandas.read_csv(io.BytesIO(render_csv(BATCH_OUTCOME)), dtype={"sample": str, "calculation_version": str})
    assert tuple(frame.columns) == COLUMNS
    results = [result for one in BATCH_OUTCOME.outcomes for result in one.results or (None,)]
    assert len(frame) == len(results)
    plain = frame[frame["sample"] == "07"].iloc[0]
    assert plain["sample_content"] == pytest.approx(OUTCOMES["plain"].results[0].in_sample.content, rel=1e-11)
    assert plain["verdict"] == "pass"
    assert plain["vessels"] == 4
    assert pandas.isna(frame[frame["sample"] == "10"].iloc[0]["sample_content"])
    assert set(frame[frame["sample"] == "11"]["verdict"]) == {"fail"}


@given(any_text)
def test_texts_come_back_and_none_can_be_a_formula(text: str):
    readable = text.replace("\0", "␀").encode("utf-8", "replace").decode("utf-8")
    one = outcome("1", "pass", replace(cadmium([0.0, 1.0, 2.0], [1.0, 2.0, 3.1]), analyte=readable))
    content = render_csv(BatchOutcome(BatchKey("", "", ""), True, (), (one,), ())).decode("utf-8")
    row = list(csv.DictReader(io.StringIO(content, newline="")))[0]
    written = row["analyte"]
    assert not written.startswith(("=", "+", "-", "@", "\t", "\r", "\n"))
    assert written.removeprefix("'") == readable or written == readable
    assert written[:1] != "'" or written[1:] == readable


def test_negative_numbers_stay_numbers():
    below = cadmium([0.0, 10.0, 20.0], [-0.02, 0.08, 0.19])
    content = render_csv(BatchOutcome(BatchKey("", "", ""), True, (), (outcome("1", "warn", below),), ()))
    assert pandas.read_csv(io.BytesIO(content))["solution_content"][0] < 0


# ---- pages -----------------------------------------------------------------------------------------------------------


def _pages() -> dict[str, bytes]:
    pages = {name: render_summary(one, HISTORY, HOSTILE) for name, one in OUTCOMES.items()}
    pages["board"] = render_board(BATCH_OUTCOME, NOTICES, LINKS, HOSTILE)
    pages["folder board"] = render_board(None, NOTICES, {}, STATION, TURNED)
    return pages


PAGES = _pages()


@pytest.mark.parametrize("name", sorted(PAGES))
def test_a_page_is_whole_alone_and_without_script(name: str):
    page = Page(PAGES[name])
    assert page.open == []
    html = dict(page.tags)["html"]
    assert html["lang"] == "en"
    assert {tag for tag, _ in page.tags} & {"script", "img", "iframe", "object", "embed", "form", "base"} == set()
    for _, attributes in page.tags:
        assert not any(key.startswith("on") or key == "style" for key in attributes)
        for key in ("src", "href", "xlink:href"):
            address = attributes.get(key)
            assert address is None or address == "data:," or urlsplit(address).scheme == urlsplit(address).netloc == ""
    policy = next(a["content"] for tag, a in page.tags if a.get("http-equiv") == "Content-Security-Policy")
    assert policy.startswith("default-src 'none'; style-src 'sha256-")
    assert "unsafe" not in policy


def test_hostile_names_are_text():
    page = Page(PAGES["hostile"])
    assert HOSTILE in page.text
    assert "07⟨U+202E⟩txt.exe⟨U+0007⟩ line two ⟨U+0000⟩\\xff {{ 7*7 }} {% raw %}" in page.text
    assert "\x00" not in page.text


@given(any_text)
def test_no_text_changes_the_structure_of_a_page(text: str):
    plain = OUTCOMES["plain"]
    told = replace(plain, sentence=text, notes=(text,), key=replace(plain.key, sample=f"s{text}"))
    wanted = Page(render_summary(replace(plain, notes=("note",)), (), STATION)).tags
    assert [tag for tag, _ in Page(render_summary(told, (), STATION)).tags] == [tag for tag, _ in wanted]


def test_a_summary_says_everything_that_stands_behind_its_verdict():
    text = " ".join(Page(PAGES["failed"]).text.split())
    told = OUTCOMES["failed"]
    assert text.index("Fail") < text.index(told.sentence) < text.index("Checks of the series") < text.index("History")
    for result in told.results:
        for check in result.checks:
            sentence = check.sentence.removeprefix("Not evaluated: ")
            assert all(part in text for part in (sentence, check.limit, check.source, check.remedy))
    for vessel in told.vessels:
        for reading in vessel.readings:
            assert reading.solution in text
            assert reading.path in text
            assert reading.text in text
    for part in (*CAUTIONS, *told.notes, told.rules_digest, told.inputs_digest, told.results[0].preparation):
        assert part in text
    assert "2.52 ± 0.20 mg/kg" in text
    assert "R. Example, 2031-02-12: spilled" in text


def test_a_waiting_summary_says_what_is_missing_and_the_verdict_so_far():
    text = Page(PAGES["waiting"]).text
    assert "This verdict can still change. So far: Warn" in " ".join(text.split())
    assert "a closing bracket later than every vessel" in text
    assert "No number" in text


def test_only_the_history_differs_between_two_trees():
    one = render_summary(OUTCOMES["hostile"], (), STATION)
    other = render_summary(OUTCOMES["hostile"], HISTORY, STATION)
    assert one != other
    assert without_history(one) == without_history(other)
    changed = render_summary(replace(OUTCOMES["hostile"], notes=()), HISTORY, STATION)
    assert without_history(one) != without_history(changed)


def test_a_name_cannot_pretend_to_be_the_history():
    marked = replace(OUTCOMES["plain"], sentence="<!-- history --> hidden", notes=("<!-- /history -->",))
    other = replace(marked, sentence="<!-- history --> else")
    digests = {without_history(render_summary(one, (), STATION)) for one in (marked, other)}
    assert len(digests) == 2


# ---- board -----------------------------------------------------------------------------------------------------------


def test_a_board_counts_first_and_lists_what_needs_a_person():
    text = " ".join(Page(PAGES["board"]).text.split())
    assert "6 of 10 results reportable, 3 fail, 1 waits; not evaluated: reference; in control: brackets." in text
    urgent = text[text.index("Needs a person") : text.index("Notices")]
    assert urgent.index("Fail 09 Cd 226.5: Vessel 3 reads 1.12 Abs") < urgent.index("Waiting 08")
    assert "Waiting 08 Cd 226.5: Vessel 2b lies 6.2 % off the line" in urgent


def test_a_board_says_which_result_rests_on_an_excluded_vessel():
    text = " ".join(Page(PAGES["board"]).text.split())
    rows = text[text.index("All results") :]
    assert rows.count("1 vessel excluded") == 1
    assert "2.52 ± 0.20 mg/kg dry matter 1 vessel excluded" in rows[rows.index("09Fail") :]


def test_a_check_that_fails_somewhere_is_not_in_control():
    found = [replace(PASSED, name="reference"), replace(FAILED, name="reference"), replace(PASSED, name="brackets")]
    batch = replace(BATCH_OUTCOME, checks=tuple(found))
    text = " ".join(Page(render_board(batch, (), {}, STATION)).text.split())
    assert "; reference: 1 fails; in control: brackets." in text


def test_a_fraction_is_observed_in_per_cent():
    drifted = Check("brackets", "pass", "The sensitivity held.", -0.01111, "1", "warns above 5 %")
    sides = Check("brackets", "warn", "No bracket was measured after this series.", 1.0, "sides")
    ratio = Check("span", "pass", "The top addition is 2.5 times the content.", 2.5, "1")
    batch = replace(BATCH_OUTCOME, checks=(drifted, sides, ratio))
    text = " ".join(Page(render_board(batch, (), {}, STATION)).text.split())
    assert [told in text for told in ("Observed −1.11 %", "Observed 1 sides", "Observed 2.5")] == [True] * 3
    assert "0.0111" not in text


def test_a_board_of_good_results_needs_nobody():
    good = replace(BATCH_OUTCOME, closed=True, waiting_for=(), outcomes=(OUTCOMES["plain"],), checks=())
    text = " ".join(Page(render_board(good, (), {}, STATION)).text.split())
    assert "1 of 1 result reportable." in text
    assert "Needs a person Nothing." in text
    assert "still open" not in text


def test_blanks_and_references_are_counted_apart():
    blank = outcome("1", "warn", replace(OUTCOMES["plain"].results[0], verdict="warn"), role="process_blank")
    both = replace(BATCH_OUTCOME, outcomes=(blank, OUTCOMES["plain"]), checks=())
    text = " ".join(Page(render_board(both, (), {}, STATION)).text.split())
    assert "1 of 1 result reportable; 1 result of blanks and references (1 with a warning)." in text
    assert "Warn process blank 1 Cd 226.5:" in text
    assert "No sample yet; 1 result" in Page(render_board(replace(both, outcomes=(blank,)), (), {}, STATION)).text


def test_links_lead_to_files_beside_the_board():
    addresses = [attributes["href"] for tag, attributes in Page(PAGES["board"]).tags if tag == "a"]
    assert {unquote(address) for address in addresses} == {f"./{name}" for name in LINKS.values()}
    assert all(address.startswith("./") and ":" not in address for address in addresses)


def test_a_folder_without_a_batch_has_a_board_for_its_notices():
    text = Page(PAGES["folder board"]).text
    assert "No batch was recognised in this folder." in text
    assert all(notice.sentence in text for notice in NOTICES)


def test_notices_stand_in_one_order_whatever_order_they_came_in():
    assert render_board(BATCH_OUTCOME, NOTICES[::-1], LINKS, HOSTILE) == PAGES["board"]


# ---- chart -----------------------------------------------------------------------------------------------------------

SVG = {"s": "http://www.w3.org/2000/svg"}


def drawn(result) -> ElementTree.Element:
    text = str(addition_plot(result, "p"))
    return ElementTree.fromstring(text.replace("<svg ", '<svg xmlns="http://www.w3.org/2000/svg" ', 1))


def marks(svg: ElementTree.Element, kind: str) -> list[ElementTree.Element]:
    return [path for path in svg.iterfind(".//s:path", SVG) if kind in path.get("class", "").split()]


def test_every_vessel_has_a_mark_and_an_excluded_one_is_a_cross():
    svg = drawn(OUTCOMES["failed"].results[0])
    assert len(marks(svg, "vessel")) == 6
    assert len(marks(svg, "excluded")) == 1
    assert "excluded: R. Example" in marks(svg, "excluded")[0].find("s:title", SVG).text


def test_the_line_runs_down_to_minus_the_content():
    # y = 2 + x: content 2, drawn over an axis from -3 to 3, half of the way between zero and -4
    svg = drawn(cadmium([0.0, 1.0, 2.0, 3.0], [2.0, 3.0, 4.0, 5.0]))
    texts = [node.text for node in svg.iterfind(".//s:text", SVG)]
    assert "−C₀" in texts
    assert "−2" in texts
    place = {node.text: float(node.get("x")) for node in svg.iterfind(".//s:text", SVG) if node.get("class") == "tick"}
    crossing = marks(svg, "crossing")[0].get("d").split()[0].removeprefix("M")
    assert float(crossing) == pytest.approx(place["−2"], abs=0.11)


@pytest.mark.parametrize(
    ("result", "vessels", "line", "content"),
    [
        (replace(OUTCOMES["plain"].results[0], no_number="no", content=None), 4, 1, 0),
        (replace(OUTCOMES["plain"].results[0], points=OUTCOMES["plain"].results[0].points[:1]), 1, 0, 1),
        (replace(OUTCOMES["extreme"].results[0]), 4, 1, 1),
        (replace(OUTCOMES["extreme"].results[1]), 3, 1, 1),
        (OUTCOMES["hostile"].results[0], 3, 1, 1),
    ],
)
def test_a_chart_for_every_kind_of_result(result, vessels: int, line: int, content: int):
    svg = drawn(result)
    assert (len(marks(svg, "vessel")), len(marks(svg, "fit")), len(marks(svg, "crossing"))) == (vessels, line, content)
    assert svg.get("role") == "img"
    assert svg.find("s:title", SVG).text
    assert "nan" not in ElementTree.tostring(svg, encoding="unicode")


def test_equal_additions_and_no_points_draw_no_line():
    same = cadmium([0.0, 1.0], [1.0, 2.0])
    level = replace(same, points=tuple(replace(point, x=1.0) for point in same.points), content=None, no_number="no")
    assert marks(drawn(level), "fit") == []
    assert addition_plot(replace(same, points=()), "p") == ""


def test_an_interval_beyond_the_drawing_ends_in_an_arrow():
    wide, plain = OUTCOMES["extreme"].results[2], OUTCOMES["plain"].results[0]
    assert marks(drawn(wide), "interval")[0].get("d").count("l") == 2
    assert marks(drawn(plain), "interval")[0].get("d").count("v") == 2


finite = st.floats(allow_nan=False, allow_infinity=False)


@given(st.lists(st.tuples(finite, finite), min_size=1, max_size=5), finite, finite, finite)
def test_any_points_stay_inside_the_drawing(places, content: float, low: float, high: float):
    base = OUTCOMES["plain"].results[0]
    points = tuple(replace(base.points[0], x=x, y=y, fitted=y) for x, y in places)
    estimate = replace(base.content, content=content, interval=(min(low, high), max(low, high)))
    svg = drawn(replace(base, points=points, content=estimate, intercept=places[0][1]))
    for path in (*marks(svg, "vessel"), *marks(svg, "crossing")):
        x, y = path.get("d").removeprefix("M").split("l")[0].split("m")[0].split()
        assert -1 <= float(x) <= 441
        assert -1 <= float(y) <= 331


def test_no_page_has_a_digit_of_the_clock():
    sources = (Path(__file__).parents[2] / "daemon/pages").glob("*.py")
    assert not any(word in path.read_text("utf-8") for path in sources for word in ("datetime", "import time", "open("))
