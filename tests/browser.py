"""Headless Chromium for tests, with the network cut and every request watched."""

import json
import os
import shutil
from collections.abc import Iterator
from pathlib import Path

import pytest
from selenium import webdriver
from selenium.webdriver.chrome.options import Options
from selenium.webdriver.chrome.service import Service

_FLAGS = (
    "--headless=new",
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--host-resolver-rules=MAP * ~NOTFOUND",
)


def needed_program(*names: str) -> str:
    """Path of the first program found; skips with a reason, or fails where CI must not skip."""
    for name in names:
        found = shutil.which(name)
        if found:
            return found
    message = f"needs {' or '.join(names)}, which is not installed"
    if os.environ.get("CI") == "true":
        pytest.fail(message)
    pytest.skip(message)


@pytest.fixture(scope="module")
def chromium(tmp_path_factory: pytest.TempPathFactory) -> Iterator[webdriver.Chrome]:
    """A browser at desktop size; `requests_of` tells what it asked for."""
    options = Options()
    options.binary_location = needed_program("chromium", "chromium-browser")
    for flag in _FLAGS:
        options.add_argument(flag)
    options.add_argument(f"--user-data-dir={tmp_path_factory.mktemp('chromium')}")
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    browser = webdriver.Chrome(options=options, service=Service(needed_program("chromedriver")))
    try:
        sized(browser, 1400, 900)
        yield browser
    finally:
        browser.quit()


def sized(browser: webdriver.Chrome, width: int, height: int) -> None:
    """Give the page a size, also below the narrowest window of the browser."""
    browser.execute_cdp_cmd(
        "Emulation.setDeviceMetricsOverride",
        {"width": width, "height": height, "deviceScaleFactor": 1, "mobile": width < 600},
    )


def requests_of(browser: webdriver.Chrome) -> list[str]:
    """Addresses asked for since the last call."""
    messages = [json.loads(entry["message"])["message"] for entry in browser.get_log("performance")]
    return [
        message["params"]["request"]["url"]
        for message in messages
        if message["method"] == "Network.requestWillBeSent"
    ]


def opened(browser: webdriver.Chrome, page: Path) -> None:
    """Open a page from disk and wait until it is ready."""
    from selenium.webdriver.support.ui import WebDriverWait

    requests_of(browser)
    browser.get_log("browser")
    browser.get(page.as_uri())
    WebDriverWait(browser, 20).until(
        lambda b: b.execute_script("return document.body.dataset.ready === 'yes'")
    )
