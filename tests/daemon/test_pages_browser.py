"""Pages in a real browser: nothing fetched, nothing complained about, nothing wider than a small telephone."""

from __future__ import annotations

import base64
from pathlib import Path

import pytest
from selenium import webdriver

from spikeward.daemon.pages.board import render_board
from spikeward.daemon.pages.summary import render_summary
from tests.daemon.browser import complaints, opened, overflow, requests, show
from tests.daemon.page_cases import BATCH_OUTCOME, HISTORY, LINKS, NOTICES, OUTCOMES, STATION

pytestmark = pytest.mark.browser


@pytest.fixture(scope="module")
def browser(tmp_path_factory: pytest.TempPathFactory):
    with opened(tmp_path_factory.mktemp("browser")) as driver:
        yield driver


@pytest.fixture(scope="module")
def pages(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("pages")
    for name, outcome in OUTCOMES.items():
        (folder / f"MD12_{name}.summary.html").write_bytes(render_summary(outcome, HISTORY, STATION))
    (folder / "MD12.board.html").write_bytes(render_board(BATCH_OUTCOME, NOTICES, LINKS, STATION))
    (folder / "folder.board.html").write_bytes(render_board(None, NOTICES, {}, STATION, "inbox"))
    return folder


NAMES = [*(f"MD12_{name}.summary.html" for name in OUTCOMES), "MD12.board.html", "folder.board.html"]


@pytest.mark.parametrize("name", NAMES)
def test_a_page_asks_for_nothing_and_fits_everywhere(browser: webdriver.Chrome, pages: Path, name: str):
    for width, dark in ((360, False), (1280, False), (360, True)):
        show(browser, pages / name, width, dark=dark)
        assert overflow(browser) == 0
        assert requests(browser) == [(pages / name).as_uri()]
        assert complaints(browser) == []
        assert browser.execute_script("return document.querySelector('h1').getBoundingClientRect().width") > 0


def test_the_style_sheet_is_applied_in_light_and_dark(browser: webdriver.Chrome, pages: Path):
    colours = set()
    for dark in (False, True):
        show(browser, pages / "MD12_plain.summary.html", 1280, dark=dark)
        colours.add(browser.execute_script("return getComputedStyle(document.documentElement).backgroundColor"))
    assert len(colours) == 2
    assert "rgba(0, 0, 0, 0)" not in colours


def test_a_hostile_page_runs_nothing(browser: webdriver.Chrome, pages: Path):
    show(browser, pages / "MD12_hostile.summary.html", 1280)
    assert browser.title.startswith("Warn: @</style>")
    assert browser.execute_script("return document.querySelectorAll('script, img').length") == 0


def test_a_script_that_got_in_would_be_seen(browser: webdriver.Chrome, pages: Path):
    broken = pages / "broken.html"
    text = (pages / "MD12_plain.summary.html").read_text("utf-8")
    broken.write_text(text.replace("<main>", "<main><script>1</script><img src='other.png'>"), "utf-8")
    show(browser, broken, 360)
    assert complaints(browser) != []
    requests(browser)


@pytest.mark.parametrize("name", ["MD12_failed.summary.html", "MD12.board.html"])
def test_a_page_prints(browser: webdriver.Chrome, pages: Path, name: str):
    show(browser, pages / name, 1280)
    printed = base64.b64decode(browser.print_page())
    assert printed.startswith(b"%PDF-")
    assert 1 <= printed.count(b"/Type /Page\n") + printed.count(b"/Type /Page/") <= 8
    requests(browser)


@pytest.mark.parametrize("dark", [False, True])
def test_words_stand_out_from_their_paper(browser: webdriver.Chrome, pages: Path, dark: bool):
    show(browser, pages / "MD12.board.html", 1280, dark=dark)
    found = browser.execute_script(_CONTRASTS)
    assert len(found) >= 3
    # 4.5 to 1 for text: Web Content Accessibility Guidelines 2.2, success criterion 1.4.3
    assert min(ratio for _, ratio in found) >= 4.5, found


_CONTRASTS = """
const part = v => (v /= 255) <= 0.04045 ? v / 12.92 : ((v + 0.055) / 1.055) ** 2.4;
const light = rgb => { const c = rgb.map(part);
  return 0.2126 * c[0] + 0.7152 * c[1] + 0.0722 * c[2] };
const parts = text => text.match(/[\\d.]+/g).map(Number);
const paper = e => { for (; e; e = e.parentElement) { const c = parts(getComputedStyle(e).backgroundColor);
  if (c.length < 4 || c[3] > 0) return c.slice(0, 3) } };
return [...document.querySelectorAll('.verdict, p, td, th, a, h2')].map(e => {
  const a = light(parts(getComputedStyle(e).color).slice(0, 3)), b = light(paper(e));
  return [e.className || e.tagName, (Math.max(a, b) + 0.05) / (Math.min(a, b) + 0.05)] });
"""
