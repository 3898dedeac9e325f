"""Pages of one file: what is put in cannot get out, and can be read in both schemes of colour."""

from __future__ import annotations

import json
import re
from importlib import resources
from pathlib import Path

import pytest

from kickrender.sound.page.frame import page_bytes, script_json
from tests.browser import browser, complaints

EVIL = "</script><script>window.got_out = true</script><!-- & \u2028 \u2029 'quotes' \"double\""


def test_json_for_a_script_element_cannot_end_it_and_reads_back() -> None:
    text = script_json({EVIL: [EVIL, 1.5, None]})
    assert not set("<>&\u2028\u2029") & set(text)
    assert json.loads(text) == {EVIL: [EVIL, 1.5, None]}
    with pytest.raises(ValueError, match="not JSON compliant"):
        script_json(float("nan"))


def blind(title: str = "Title") -> bytes:
    data = {"sounds": [{"label": EVIL, "digest": EVIL, "samples": ""}] * 2, "a": 0, "trials": 5}
    return page_bytes("kickrender.study", "blind", data, title=title, trials=5, seconds=EVIL)


def test_only_the_pages_own_script_runs(tmp_path: Path) -> None:
    """A script that got into the file all the same is stopped by the page's policy."""
    (tmp_path / "page.html").write_bytes(blind(EVIL))
    changed = blind().replace(b"<h1>", b"<script>window.got_out = true</script><img src='x' onerror='got_out = 1'><h1>")
    (tmp_path / "changed.html").write_bytes(changed)
    with browser(tmp_path) as chrome:
        chrome.get((tmp_path / "page.html").as_uri())
        assert chrome.find_element("tag name", "h1").get_property("textContent") == EVIL
        assert chrome.execute_script("return window.got_out") is None
        assert complaints(chrome) == []
        chrome.get((tmp_path / "changed.html").as_uri())
        assert chrome.execute_script("return window.got_out") is None
        assert chrome.find_element("id", "hear-A").get_attribute("aria-pressed") == "false"
        assert all("Content Security Policy" in message for message in complaints(chrome))


def colours(scheme: str) -> dict[str, str]:
    css = (resources.files("kickrender.sound.page") / "look.css").read_text("utf-8")
    blocks = re.findall(r":root \{(.*?)\}", css, re.DOTALL)
    found: dict[str, str] = {}
    for block in blocks[: 1 if scheme == "light" else 2]:
        found |= dict(re.findall(r"--([\w-]+): (#[0-9a-f]{6});", block))
    return found


def luminance(colour: str) -> float:
    parts = [int(colour[k : k + 2], 16) / 255 for k in (1, 3, 5)]
    linear = [part / 12.92 if part <= 0.04045 else ((part + 0.055) / 1.055) ** 2.4 for part in parts]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_colours_stand_out_as_wcag_asks(scheme: str) -> None:
    """WCAG 2.2: text 4.5 to 1 (1.4.3), edges of controls and what pictures show 3 to 1 (1.4.11)."""
    colour = colours(scheme)

    def contrast(one: str, other: str) -> float:
        dark, light = sorted((luminance(colour[one]), luminance(colour[other])))
        return (light + 0.05) / (dark + 0.05)

    assert luminance("#ffffff") == pytest.approx(1.0)
    for ground in ("paper", "sheet", "accent-soft"):
        for text in ("ink", "quiet", "accent", "warm"):
            assert contrast(text, ground) >= 4.5, (text, ground)
        for shape in ("edge", "shape"):
            assert contrast(shape, ground) >= 3.0, (shape, ground)
    assert contrast("on-accent", "accent") >= 4.5
