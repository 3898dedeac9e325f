"""The page of a verification: what it holds, and how it behaves in a browser."""

import re
from pathlib import Path

import pytest

from kickrender.lock.report import open_report, write_report
from kickrender.lock.verify import Verification
from tests.browser import browser, complaints
from tests.lock.conftest import Edit, lock_in, verify_in
from tests.lock.texts import BELLS
from tests.page_checks import accessibility_faults


@pytest.fixture
def report(folder: Path) -> Path:
    return folder / "report"


def reported(folder: Path, report: Path) -> Verification:
    open_report(report)
    found = verify_in(folder, keep=report / "sounds")
    write_report(found, report)
    return found


def test_the_page_tells_of_every_hit_that_moved_with_picture_and_sounds(folder: Path, edit: Edit, report: Path) -> None:
    lock_in(folder, audio=True)
    edit("bell.toml", '"1u"', '"1.001u"')
    reported(folder, report)
    page = (report / "index.html").read_text()
    assert page.count("<article>") == page.count("data:image/png") == len(BELLS)
    assert "part C1 value 1u -&gt; 1.001u (+0.1 %)" in page
    sources = re.findall(r'<audio controls preload="none" src="([^"]+)"', page)
    assert len(sources) == 2 * len(BELLS)
    assert set(sources) == {p.relative_to(report).as_posix() for p in report.rglob("*.flac")}
    edit("bell.toml", '"1.001u"', '"1u"')
    reported(folder, report)  # over the older report
    assert "Nothing moved" in (report / "index.html").read_text()
    assert not list(report.rglob("*.flac"))


def test_without_kept_renders_there_is_the_sound_after(folder: Path, edit: Edit, report: Path) -> None:
    lock_in(folder)
    edit("bell.toml", '"1u"', '"1.001u"')
    reported(folder, report)
    page = (report / "index.html").read_text()
    assert "No renders were kept" in page
    assert page.count("<audio") == page.count("data:image/png") == len(BELLS)


def test_names_cannot_become_markup(folder: Path, edit: Edit, report: Path) -> None:
    edit("bells.toml", '"Bells"', "\"<script>alert('x')</script>\"")
    lock_in(folder)
    edit("bell.toml", '"1u"', '"1.001u"')
    reported(folder, report)
    assert "<script>alert" not in (report / "index.html").read_text()


@pytest.mark.slow
def test_in_a_browser_before_and_after_play_in_turn(
    folder: Path, edit: Edit, report: Path, tmp_path_factory: pytest.TempPathFactory
) -> None:
    lock_in(folder, audio=True)
    edit("bell.toml", '"1u"', '"1.001u"')
    reported(folder, report)
    with browser(tmp_path_factory.mktemp("browser")) as chrome:
        chrome.get((report / "index.html").as_uri())
        switch = chrome.find_element("css selector", "button.switch")
        switch.click()
        assert switch.get_attribute("aria-pressed") == "true"
        after = "return document.querySelectorAll('audio')[1].currentTime"
        for _ in range(100):
            if chrome.execute_script(after) > 0.0:
                break
            chrome.implicitly_wait(0.05)
            chrome.execute_async_script("setTimeout(arguments[0], 50)")
        assert chrome.execute_script(after) > 0.0, "the sound after never played"
        switch.click()
        assert switch.get_attribute("aria-pressed") == "false"
        assert chrome.execute_script("return [...document.querySelectorAll('audio')].every((sound) => sound.paused)")
        for width, scheme in ((1200, "light"), (390, "dark")):
            assert accessibility_faults(chrome, None, width, scheme) == []
        assert complaints(chrome) == []
