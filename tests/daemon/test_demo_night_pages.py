"""Every page of the demo night in a real browser: nothing fetched or complained about, readable small and printed."""

from __future__ import annotations

import base64
import os
from pathlib import Path

import pytest

from spikeward.daemon.cli import main
from spikeward.daemon.demo.night import night, play
from tests.daemon.browser import complaints, opened, overflow, requests, show

pytestmark = pytest.mark.browser


@pytest.fixture(scope="module")
def inbox(tmp_path_factory: pytest.TempPathFactory) -> Path:
    home = tmp_path_factory.mktemp("night")
    (home / "inbox").mkdir()
    invented = night()
    (home / "rules.yaml").write_text(invented.rules, encoding="utf-8")
    play(invented, home / "inbox", 0, lambda seconds: None)
    assert main(["sweep", str(home / "rules.yaml"), "--close"]) == 1
    return home / "inbox"


def test_all_pages(inbox: Path, tmp_path: Path):
    """``SPIKEWARD_PICTURES=FOLDER`` keeps a picture of each page at 360 px and at 1280 px, to be looked at."""
    pages = sorted(inbox.rglob("*.html"))
    assert len(pages) == 31 + 3  # a summary for each series, a board for each batch
    pictures = os.environ.get("SPIKEWARD_PICTURES")
    with opened(tmp_path) as browser:
        for page in pages:
            for width in (360, 1280):
                show(browser, page, width)
                assert overflow(browser) == 0, page.name
                assert requests(browser) == [page.as_uri()]
                assert complaints(browser) == []
                if pictures:
                    browser.save_screenshot(f"{pictures}/{page.name}.{width}.png")
            paper = browser.execute_cdp_cmd("Page.printToPDF", {"preferCSSPageSize": True})
            assert base64.b64decode(paper["data"]).startswith(b"%PDF")
            links = browser.execute_script("return [...document.querySelectorAll('a')].map(a => a.href)")
            assert all(link.startswith("file://") for link in links)
