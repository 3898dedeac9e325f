"""The listening sheet in a real browser, opened from disk and offline: sort, filter, what it shows, who can read it."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
from selenium.webdriver import Chrome, Keys
from selenium.webdriver.support.ui import Select

from kickrender.pack.sheet import MEASURES
from tests.browser import requests
from tests.pack.sheet_page import TITLE, names, play_button, said, sounding
from tests.page_checks import accessibility_faults, resize


def header(chrome: Chrome, label: str, unit: str = "") -> Any:
    cells = chrome.find_elements("css selector", "#hits thead th")
    return next(c for c in cells if c.text.removesuffix(unit).strip(" \u2191\u2193") == label)


@pytest.mark.parametrize("key", [key for key in MEASURES if key != "note"])
def test_any_measurement_sorts_both_ways_and_who_has_none_comes_last(
    key: str, sheet: Chrome, pack: tuple[Path, dict[str, Any]]
) -> None:
    rows = [{"name": h["name"], "gain_db": h["gain_db"], **h["measurements"]} for h in pack[1]["hits"]]
    have = [row for row in rows if row[key] is not None]
    none = [row["name"] for row in rows if row[key] is None]
    assert len(none) == (key not in ("length_s", "offset", "gain_db"))  # silence
    Select(sheet.find_element("id", "sort")).select_by_value(key)
    assert names(sheet) == [row["name"] for row in sorted(have, key=lambda row: row[key])] + none
    assert sheet.find_element("css selector", "[aria-sort=ascending]").is_displayed()
    sheet.find_element("id", "turn").click()
    assert names(sheet) == [row["name"] for row in sorted(have, key=lambda row: -row[key])] + none
    assert said(sheet).endswith("descending. 29 hits")


def test_a_header_sorts_and_says_so(sheet: Chrome) -> None:
    header(sheet, "pitch", "Hz").find_element("tag name", "button").click()
    assert [th.text.split()[0] for th in sheet.find_elements("css selector", "th[aria-sort]")] == ["pitch"]
    assert names(sheet)[0].startswith("50/")
    assert names(sheet)[-1] == "odd/silence"
    sheet.switch_to.active_element.send_keys(Keys.ENTER)  # the focus stays on the header
    assert sheet.find_element("css selector", "th[aria-sort=descending]").text.startswith("pitch")
    assert names(sheet)[0].startswith("odd/it's")
    assert said(sheet) == "Sorted by pitch, descending. 29 hits"


def test_notes_are_sorted_by_pitch_and_axes_by_value(sheet: Chrome) -> None:
    Select(sheet.find_element("id", "sort")).select_by_value("note")
    assert [name.split("/")[0] for name in names(sheet)] == ["50"] * 9 + ["60"] * 9 + ["75"] * 9 + ["odd"] * 2
    Select(sheet.find_element("id", "sort")).select_by_value("axis accent")
    ends = [name.split("-")[-1] for name in names(sheet)]
    assert ends == ["soft"] * 9 + ["firm"] * 9 + ["hard"] * 9 + ends[-2:]


def chip(chrome: Chrome, axis: str, label: str) -> Any:
    return chrome.execute_script(
        """
        const set = [...document.querySelectorAll("#axes fieldset")].find((f) => f.querySelector("legend").textContent === arguments[0]);
        return [...set.querySelectorAll("label")].find((l) => l.textContent === arguments[1]);
        """,  # noqa: E501
        axis,
        label,
    )


def test_axis_values_filter_and_join(sheet: Chrome) -> None:
    chip(sheet, "accent", "hard").click()
    assert len(names(sheet)) == 9
    chip(sheet, "accent", "soft").click()  # one axis: either
    assert len(names(sheet)) == 18
    chip(sheet, "decay", "250ms").click()  # two axes: both
    assert names(sheet) == [f"{hz}/0.25-{accent}" for hz in (50, 60, 75) for accent in ("soft", "hard")]
    assert sheet.find_element("id", "shown").text == "6 of 29 hits"
    sheet.find_element("id", "clear").click()
    assert len(names(sheet)) == 29


@pytest.mark.parametrize(
    ("words", "expected"),
    [
        ("hard 60/", ["60/0.15-hard", "60/0.25-hard", "60/0.4-hard"]),
        ("SOFT 50/0.4", ["50/0.4-soft"]),
        ("100% & #1 \u00e9", ["odd/it's 100% & #1 \u00e9; [a]_b"]),
        ("d2 soft decay", ["75/0.25-soft", "75/0.4-soft"]),  # 75 Hz lies nearest to D2; the short one has not settled
        ("no such thing", []),
    ],
)
def test_free_text_filters_by_name_note_and_setting(words: str, expected: list[str], sheet: Chrome) -> None:
    sheet.find_element("id", "words").send_keys(words)
    assert names(sheet) == expected
    assert sheet.find_element("id", "none").is_displayed() == (not expected)
    if not expected:
        sheet.find_element("id", "clear-too").click()
        assert len(names(sheet)) == 29


def test_texts_are_shown_as_they_are_and_run_nothing(sheet: Chrome) -> None:
    assert sheet.find_element("tag name", "h1").text == TITLE
    assert sheet.title == f"{TITLE} \u00b7 listening sheet"
    assert sheet.find_elements("css selector", "img, h1 b, .failed i") == []
    assert "no <i>solution</i>" in sheet.find_element("css selector", ".failed").get_attribute("textContent")


def test_the_page_asks_for_nothing_but_the_sounds_played(sheet: Chrome, pack: tuple[Path, dict[str, Any]]) -> None:
    sheet.refresh()
    requests(sheet)
    sheet.refresh()
    play_button(sheet, "50/0.4-hard").click()
    assert sounding(sheet)
    asked = requests(sheet)
    assert set(asked) == {(pack[0] / "index.html").as_uri(), (pack[0] / "50" / "0.4-hard.wav").as_uri()}


def test_cells_show_the_manifests_numbers(sheet: Chrome, pack: tuple[Path, dict[str, Any]]) -> None:
    hit = pack[1]["hits"][4]
    row = sheet.find_elements("css selector", "#hits tbody tr")[4]
    cells = {c.get_attribute("data-label"): c.text for c in row.find_elements("css selector", "td.number")}
    measured = hit["measurements"]
    assert cells["loudness"] == f"{measured['momentary_lufs']:.2f}".replace("-", "\u2212")
    assert cells["accent"] == "firm"
    assert cells["note"].split()[0] == measured["note"]
    shown = row.find_elements("css selector", "td.number")
    by_header = dict(zip([th.text for th in sheet.find_elements("css selector", "thead th")][3:], shown, strict=True))
    assert by_header["pitch Hz"].text == f"{measured['settled_hz']:.2f}"
    assert by_header["decay set"].text == "250ms"
    assert by_header["decay s"].text == f"{measured['decay_s']:.3f}"


def test_thumbnails_are_drawn_to_one_scale(sheet: Chrome) -> None:
    """The soft hit is a quarter of the hard one's height, and both have their pitch below."""
    heights, colours = sheet.execute_script("""
        const heights = [], colours = new Set();
        for (const name of ["75/0.4-soft", "75/0.4-hard"]) {
          const button = [...document.querySelectorAll(".play")].find((b) => b.textContent === name);
          const canvas = button.closest("tr").querySelector("canvas");
          const pixels = canvas.getContext("2d").getImageData(0, 0, canvas.width, canvas.height).data;
          let top = canvas.height, bottom = 0;
          for (let y = 0; y < canvas.height * 0.68; y++) for (let x = 0; x < canvas.width; x++) {
            const k = 4 * (y * canvas.width + x);
            if (pixels[k + 3] > 128) { colours.add([pixels[k], pixels[k + 1], pixels[k + 2]].join()); }
            if (pixels[k + 3] > 128 && pixels[k] < 120) { top = Math.min(top, y); bottom = Math.max(bottom, y); }
          }
          heights.push(bottom - top + 1);
        }
        return [heights, colours.size];
    """)
    assert heights[1] == pytest.approx(4 * heights[0], abs=4)
    assert 28 <= heights[1] <= 34
    assert colours > 1


def test_every_row_is_a_row_to_a_screen_reader_also_as_a_card(sheet: Chrome) -> None:
    for width in (1400, 390):
        resize(sheet, width)
        cells = sheet.find_elements("css selector", "#hits, tbody tr:nth-child(2), tbody tr:nth-child(2) > *")
        roles = [cell.aria_role for cell in cells]
        assert roles == ["table", "row", "cell", "rowheader", *["cell"] * (len(cells) - 4)]


@pytest.mark.parametrize("width", [1400, 390])
@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_the_page_is_accessible(window: Chrome, pack: tuple[Path, dict[str, Any]], width: int, scheme: str) -> None:
    """By axe-core, the open accessibility checker; nothing wider than the window."""
    assert accessibility_faults(window, pack[0] / "index.html", width, scheme) == []
    if width < 600:  # fingers: WCAG 2.2, 2.5.5 asks for 44 by 44
        sizes = window.execute_script("""
            return [...document.querySelectorAll("#hits tbody button, #deck button, #find button, select")]
              .map((e) => [e.id || e.className, e.getBoundingClientRect().height, e.getBoundingClientRect().width])
              .filter(([, height, width]) => width > 1 && (height < 44 || width < 44));
        """)
        assert sizes == []


def test_the_data_stand_once_and_whole(pack: tuple[Path, dict[str, Any]]) -> None:
    text = (pack[0] / "index.html").read_text("utf-8")
    data = json.loads(text.split('id="data">')[1].split("</script>")[0])
    assert data["names"] == [hit["name"] for hit in pack[1]["hits"]]
    assert text.count("<script") == text.count("</script>") == 2
