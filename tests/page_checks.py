"""What every page of ours has to pass, whatever is on it."""

from __future__ import annotations

from pathlib import Path

from axe_selenium_python import Axe
from selenium.webdriver import Chrome


def resize(chrome: Chrome, width: int = 1400) -> None:
    chrome.execute_cdp_cmd(
        "Emulation.setDeviceMetricsOverride",
        {"width": width, "height": 900, "deviceScaleFactor": 1, "mobile": width < 600},
    )


def accessibility_faults(chrome: Chrome, path: Path | None, width: int, scheme: str) -> list[str]:
    """What axe-core finds wrong with a page, all of it unfolded, and whether it is wider than the window.

    path : the page to open, or None for what is open.
    """
    resize(chrome, width)
    chrome.execute_cdp_cmd(
        "Emulation.setEmulatedMedia", {"features": [{"name": "prefers-color-scheme", "value": scheme}]}
    )
    if path is not None:
        chrome.get(path.as_uri())
    chrome.execute_script("document.querySelectorAll('details').forEach((details) => { details.open = true; })")
    axe = Axe(chrome)
    axe.inject()
    results = axe.run()
    assert len(results["passes"]) > 20  # it did look
    faults = [f"{fault['id']}: {node['html'][:120]}" for fault in results["violations"] for node in fault["nodes"]]
    too_wide = chrome.execute_script("return document.documentElement.scrollWidth > innerWidth")
    return [*faults, *(["wider than the window"] if too_wide else [])]
