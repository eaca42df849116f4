"""A real browser for pages: headless, alone with a fresh profile, and unable to fetch anything without being seen.

``with opened(folder) as browser`` gives a selenium driver; ``available()`` says why there is none. With the environment
variable ``SPIKEWARD_REQUIRE_BROWSER=1`` a missing browser fails instead of skipping.
"""

from __future__ import annotations

import json
import os
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest
from selenium import webdriver
from selenium.webdriver.chrome.options import Options
from selenium.webdriver.chrome.service import Service

_QUIET = (
    "--headless=new", "--no-sandbox", "--disable-gpu", "--no-first-run", "--disable-background-networking",
    "--disable-component-update", "--disable-sync", "--hide-scrollbars", "--disable-dev-shm-usage",
)  # fmt: skip


def required() -> None:
    """Skip the test with a reason where there is no browser, or fail it where one is required."""
    missing = [name for name in ("chromium", "chromedriver") if shutil.which(name) is None]
    if not missing:
        return
    reason = f"{' and '.join(missing)} not found: install Debian's chromium and chromium-driver"
    if os.environ.get("SPIKEWARD_REQUIRE_BROWSER") == "1":
        pytest.fail(reason)
    pytest.skip(reason)


@contextmanager
def opened(profile: Path) -> Iterator[webdriver.Chrome]:
    """A browser with a profile of its own below ``profile``; it is closed at the end."""
    required()
    options = Options()
    options.binary_location = str(shutil.which("chromium"))
    for option in (*_QUIET, f"--user-data-dir={profile / 'profile'}"):
        options.add_argument(option)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    driver = webdriver.Chrome(options=options, service=Service(str(shutil.which("chromedriver"))))
    try:
        driver.get("about:blank")
        requests(driver), complaints(driver)  # the browser's own first page is not what a test is about
        yield driver
    finally:
        driver.quit()


def show(driver: webdriver.Chrome, page: Path, width: int, height: int = 900, dark: bool = False) -> None:
    """Open a page of the disk in a window of the stated size, in CSS pixels."""
    features = [{"name": "prefers-color-scheme", "value": "dark" if dark else "light"}]
    driver.execute_cdp_cmd("Emulation.setEmulatedMedia", {"features": features})
    metrics = {"width": width, "height": height, "deviceScaleFactor": 1, "mobile": width < 500}
    driver.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", metrics)
    driver.get(page.as_uri())


def complaints(driver: webdriver.Chrome) -> list[str]:
    """What the console has said since it was last asked."""
    return [entry["message"] for entry in driver.get_log("browser")]


def requests(driver: webdriver.Chrome) -> list[str]:
    """The addresses asked for since last time, without those that are inside the page itself."""
    events = [json.loads(entry["message"])["message"] for entry in driver.get_log("performance")]
    asked = [event["params"]["request"]["url"] for event in events if event["method"] == "Network.requestWillBeSent"]
    return [address for address in asked if not address.startswith("data:")]


def overflow(driver: webdriver.Chrome) -> int:
    """By how many pixels the page is wider than its window."""
    return int(driver.execute_script("const e = document.documentElement; return e.scrollWidth - e.clientWidth"))
