"""A real Chromium without a window, for the tests of pages: driven over WebDriver, offline, with an empty profile."""

from __future__ import annotations

import json
import os
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import pytest
from selenium import webdriver
from selenium.webdriver.chrome.options import Options
from selenium.webdriver.chrome.service import Service

FLAGS = (
    "--headless=new",
    "--no-sandbox",  # build servers run as root
    "--disable-gpu",
    "--disable-quic",
    "--disable-dev-shm-usage",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--autoplay-policy=no-user-gesture-required",
    "--force-device-scale-factor=1",
)


@contextmanager
def browser(folder: Path, before_load: str = "") -> Iterator[webdriver.Chrome]:
    """A browser that saves files to `folder`/downloads; `before_load` runs in every page before its own scripts.

    Skips the test where there is no Chromium, except on a build server, where it has to be.
    """
    binary, driver = shutil.which("chromium"), shutil.which("chromedriver")
    if binary is None or driver is None:
        reason = "needs Debian's chromium and chromium-driver"
        if os.environ.get("CI"):
            pytest.fail(reason)
        pytest.skip(reason)
    downloads = folder / "downloads"
    downloads.mkdir(exist_ok=True)
    options = Options()
    options.binary_location = binary
    for flag in (*FLAGS, f"--user-data-dir={folder / 'profile'}"):
        options.add_argument(flag)
    options.add_experimental_option("prefs", {"download.default_directory": str(downloads)})
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    chrome = webdriver.Chrome(options, Service(driver))
    try:
        chrome.execute_cdp_cmd("Network.enable", {})
        chrome.execute_cdp_cmd(
            "Network.emulateNetworkConditions",
            {"offline": True, "latency": 0, "downloadThroughput": -1, "uploadThroughput": -1},
        )
        if before_load:
            chrome.execute_cdp_cmd("Page.addScriptToEvaluateOnNewDocument", {"source": before_load})
        yield chrome
    finally:
        chrome.quit()


def complaints(chrome: webdriver.Chrome) -> list[str]:
    """What the page wrote to its console since the last look: a page of ours writes nothing."""
    return [entry["message"] for entry in chrome.get_log("browser")]


def wait_for(chrome: webdriver.Chrome, condition: str, *values: Any, timeout_s: float = 10.0) -> Any:
    """The value of a JavaScript expression once it is true."""
    from selenium.webdriver.support.ui import WebDriverWait

    wait = WebDriverWait(chrome, timeout_s, poll_frequency=0.02)
    return wait.until(lambda c: c.execute_script(f"return {condition}", *values), f"never true: {condition}")


def requests(chrome: webdriver.Chrome) -> list[str]:
    """Addresses that pages asked for since the last look, in order."""
    messages = [json.loads(entry["message"])["message"] for entry in chrome.get_log("performance")]
    sent = [m["params"]["request"]["url"] for m in messages if m["method"] == "Network.requestWillBeSent"]
    return [url for url in sent if not url.startswith("data:")]
