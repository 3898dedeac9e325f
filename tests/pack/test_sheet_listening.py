"""The listening sheet heard and chosen from: play, keys, the last two, favourites, the list it saves."""

from __future__ import annotations

import time
from pathlib import Path
from typing import Any

import numpy as np
from selenium.webdriver import Chrome, Keys

from kickrender.pack.only import read_names
from kickrender.pack.sheet import sheet_bytes
from kickrender.pack.thumbnails import scale_of, thumbnail
from tests.browser import browser, complaints, wait_for
from tests.pack.made_up import RATE_HZ, entry, make_measurements, manifest_of
from tests.pack.sheet_page import is_silent, names, play_button, press, said, sounding


def test_a_click_plays_and_another_stops(sheet: Chrome, pack: tuple[Path, dict[str, Any]]) -> None:
    button = play_button(sheet, "60/0.4-firm")
    assert button.accessible_name == "Play 60/0.4-firm"
    button.click()
    assert sounding(sheet) == f"file://{pack[0]}/60/0.4-firm.wav"
    assert said(sheet) == "Playing 60/0.4-firm"
    assert sheet.find_element("css selector", "tr.sounding th").text == "60/0.4-firm"
    button.click()
    assert is_silent(sheet)
    assert sheet.find_elements("css selector", "tr.sounding") == []


def test_a_hit_that_ends_is_said_to_have_ended(sheet: Chrome) -> None:
    play_button(sheet, "50/0.15-hard").click()
    wait_for(sheet, "document.querySelector('tr.sounding') === null", timeout_s=5)
    assert is_silent(sheet)


def test_a_flac_whose_name_is_full_of_marks_plays(sheet: Chrome) -> None:
    play_button(sheet, "odd/it's 100% & #1 \u00e9; [a]_b").click()
    assert sounding(sheet).endswith("/odd/it's 100% & #1 \u00e9; [a]_b.flac")


def test_arrows_walk_and_play_and_space_stops(sheet: Chrome) -> None:
    press(sheet, Keys.ARROW_DOWN)
    assert sounding(sheet).endswith("/50/0.15-firm.wav")
    press(sheet, Keys.ARROW_DOWN, Keys.ARROW_DOWN, Keys.ARROW_UP)
    assert sounding(sheet).endswith("/50/0.15-hard.wav")
    press(sheet, Keys.SPACE)
    assert is_silent(sheet)
    press(sheet, Keys.SPACE)
    assert sounding(sheet).endswith("/50/0.15-hard.wav")
    press(sheet, Keys.END)
    assert sheet.switch_to.active_element.text == "odd/silence"
    press(sheet, Keys.HOME)
    assert sounding(sheet).endswith("/50/0.15-soft.wav")
    press(sheet, Keys.SPACE)


def test_arrows_can_be_told_not_to_play(sheet: Chrome) -> None:
    sheet.execute_script("document.querySelectorAll('#find details').forEach((d) => { d.open = true; })")
    sheet.find_element("id", "play-on-move").click()
    press(sheet, Keys.ARROW_DOWN)
    assert sheet.switch_to.active_element.text == "50/0.15-firm"
    assert is_silent(sheet)


def test_one_stop_for_the_tab_key_in_the_list(sheet: Chrome) -> None:
    focusable = "return document.querySelectorAll('#hits tbody button[tabindex=\"0\"]').length"
    assert sheet.execute_script(focusable) == 2  # the current hit's play and favourite
    press(sheet, Keys.ARROW_DOWN, Keys.SPACE)
    assert sheet.execute_script(focusable) == 2


def test_the_last_two_are_compared(sheet: Chrome) -> None:
    assert not sheet.find_element("id", "swap").is_enabled()
    play_button(sheet, "50/0.4-hard").click()
    play_button(sheet, "60/0.4-hard").click()
    for expected in ("50", "60", "50"):
        press(sheet, "x")
        assert sounding(sheet).endswith(f"/{expected}/0.4-hard.wav")
    play_button(sheet, "75/0.4-hard").click()  # takes the place of the one not heard last
    sheet.find_element("id", "swap").click()
    assert sounding(sheet).endswith("/50/0.4-hard.wav")
    pair = {sheet.find_element("id", f"play-{k}").accessible_name for k in (0, 1)}
    assert pair == {"A, play 50/0.4-hard", "B, play 75/0.4-hard"}
    assert [e.get_attribute("aria-pressed") for e in sheet.find_elements("css selector", ".pair [aria-pressed]")] == [
        "true",
        "false",
    ]


def test_a_file_that_is_not_there_is_told(window: Chrome, tmp_path: Path) -> None:
    manifest = manifest_of([entry("lost", {}, make_measurements(50.0))])
    scale = scale_of(manifest["hits"])
    (tmp_path / "index.html").write_bytes(sheet_bytes(manifest, [thumbnail(np.zeros(9), RATE_HZ, scale)], scale))
    window.get((tmp_path / "index.html").as_uri())
    play_button(window, "lost").click()
    wait_for(window, "document.getElementById('status').textContent.includes('cannot be played')")
    assert window.find_elements("css selector", "tr.missing")
    complaints(window)  # the browser's own word about the missing file


def saved_list(folder: Path) -> Path:
    for _ in range(200):
        if found := list(folder.glob("favourites*.txt")):
            return found[0]
        time.sleep(0.025)
    raise AssertionError("nothing was saved")


def test_favourites_are_kept_and_saved_as_a_list_that_only_takes(
    sheet: Chrome, pack: tuple[Path, dict[str, Any]], tmp_path: Path
) -> None:
    sheet.execute_cdp_cmd("Browser.setDownloadBehavior", {"behavior": "allow", "downloadPath": str(tmp_path)})
    odd = "odd/it's 100% & #1 \u00e9; [a]_b"
    star = sheet.execute_script("return arguments[0].closest('tr').querySelector('.star')", play_button(sheet, odd))
    assert star.accessible_name == f"Favourite {odd}"
    star.click()
    assert star.get_attribute("aria-pressed") == "true"
    assert said(sheet) == f"{odd} is a favourite"
    press(sheet, Keys.HOME, Keys.ARROW_DOWN, "f", Keys.ARROW_DOWN, "f", "f")  # the last one taken back
    sheet.refresh()
    assert sheet.find_element("id", "star-count").text == "2 favourites"
    sheet.find_element("id", "starred-only").click()
    assert names(sheet) == ["50/0.15-firm", odd]
    sheet.find_element("id", "export").click()
    path = saved_list(tmp_path)
    assert path.read_text("utf-8") == f"50/0.15-firm\n{odd}\n"
    assert [name for _, name in read_names(path)] == ["50/0.15-firm", odd]


def test_without_storage_favourites_still_work(tmp_path: Path, pack: tuple[Path, dict[str, Any]]) -> None:
    deny = (
        "Object.defineProperty(window, 'localStorage', { get() { throw new DOMException('no', 'SecurityError'); } });"
    )
    with browser(tmp_path, deny) as chrome:
        chrome.get((pack[0] / "index.html").as_uri())
        press(chrome, "f")
        assert chrome.find_element("id", "star-count").text == "1 favourite"
        assert complaints(chrome) == []


def test_keys_leave_typing_alone_and_can_be_switched_off(sheet: Chrome) -> None:
    press(sheet, "/")
    press(sheet, "x f 0.4")
    assert sheet.find_element("id", "words").get_attribute("value") == "x f 0.4"
    assert sheet.find_element("id", "star-count").text == "No favourites yet"
    sheet.find_element("id", "words").clear()
    sheet.execute_script("document.querySelectorAll('#find details').forEach((d) => { d.open = true; })")
    sheet.find_element("id", "letter-keys").click()
    press(sheet, Keys.HOME, "f")
    assert sheet.find_element("id", "star-count").text == "No favourites yet"
    press(sheet, Keys.SPACE)
