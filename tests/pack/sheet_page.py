"""What the tests of the listening sheet do to it and read off it."""

from __future__ import annotations

from typing import Any

from selenium.webdriver import Chrome
from selenium.webdriver.common.action_chains import ActionChains

TITLE = "Made </script><img src=x onerror=alert(1)> up & <b>bold</b>"


def names(chrome: Chrome) -> list[str]:
    return chrome.execute_script(
        "return [...document.querySelectorAll('#hits tbody tr:not([hidden]) th')].map((cell) => cell.textContent)"
    )


def said(chrome: Chrome) -> str:
    return chrome.execute_script("return document.getElementById('status').textContent")


def press(chrome: Chrome, *keys: str) -> None:
    ActionChains(chrome).send_keys(*keys).perform()


def play_button(chrome: Chrome, name: str) -> Any:
    return chrome.execute_script(
        "return [...document.querySelectorAll('.play')].find((b) => b.textContent === arguments[0])", name
    )


RUNNING = """
const done = arguments[0];
const players = [...document.querySelectorAll("audio")];
const before = players.map((audio) => audio.currentTime);
setTimeout(() => {
  const moved = players.filter((audio, k) => !audio.paused && audio.currentTime !== before[k]);
  done(moved.map((audio) => decodeURIComponent(audio.src)));
}, 40);
"""


def sounding(chrome: Chrome) -> str:
    """The one file whose audio element runs, that is, whose time advances."""
    for _ in range(50):
        if running := chrome.execute_async_script(RUNNING):
            assert len(running) == 1
            return running[0]
    raise AssertionError("nothing plays")


def is_silent(chrome: Chrome) -> bool:
    """Whether no audio element's time advances, now and a while later."""
    return not any(chrome.execute_async_script(RUNNING) for _ in range(4))
