"""The listening sheet over 5,000 hits: nothing stalls, no place is lost."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from selenium.webdriver import Chrome, Keys

from kickrender.pack.sheet import sheet_bytes
from kickrender.pack.thumbnails import scale_of, thumbnail
from tests.browser import complaints, wait_for
from tests.pack.made_up import RATE_HZ, entry, hit_samples, make_measurements, manifest_of
from tests.pack.sheet_page import names, press
from tests.page_checks import resize


@pytest.fixture(scope="module")
def large(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("large")
    random = np.random.default_rng(5000)
    hits = []
    for number in range(5000):
        measured = make_measurements(
            float(random.uniform(40, 90)),
            decay_s=float(random.uniform(0.1, 2)),
            centroid_hz=float(random.uniform(50, 500)),
        )
        axes = {"circuit": f"voice-{number % 5}", "pitch": number // 5 / 1000, "take": number % 25}
        hits.append(entry(f"voice-{number % 5}/hit-number-{number:04d}_take-{number % 25:02d}", axes, measured))
    scale = scale_of(hits)
    shapes = [thumbnail(hit_samples(hz, 0.3, 0.8), RATE_HZ, scale) for hz in (45.0, 60.0, 80.0)]
    page = sheet_bytes(manifest_of(hits, "Large"), (shapes[k % 3] for k in range(5000)), scale)
    (folder / "index.html").write_bytes(page)
    return folder / "index.html"


@pytest.mark.slow
def test_five_thousand_hits_without_a_stall(window: Chrome, large: Path) -> None:
    """Every step, painting included, in under 0.3 s; the best of three, as other work on the machine is not ours."""
    assert large.stat().st_size < 5_000_000
    resize(window)
    window.get(large.as_uri())
    painted = wait_for(window, "performance.getEntriesByName('first-contentful-paint')[0]?.startTime")
    assert painted < 3000
    assert window.execute_script("return document.querySelectorAll('#hits tbody tr').length") == 50
    timed = window.execute_async_script("""
        const done = arguments[0], times = {};
        const at = (id) => document.getElementById(id);
        const steps = {
          sort() { at("sort").value = "decay_s"; at("sort").dispatchEvent(new Event("change")); },
          turn() { at("turn").click(); },
          words() { at("words").value = "take-07"; at("words").dispatchEvent(new Event("input")); },
          clear() { at("clear").click(); },
          chip() { document.querySelector("#axes input").click(); },
          page() { at("on").click(); },
          end() { document.body.dispatchEvent(new KeyboardEvent("keydown", { key: "End", bubbles: true })); },
          scroll() { at("list").scrollTop = 1e6; },
          column() { document.querySelector("#columns input:not(:checked)").click(); },
        };
        document.getElementById("play-on-move").checked = false;
        (async () => {
          for (let turn = 0; turn < 3; turn++) {
            for (const [name, step] of Object.entries(steps)) {
              const before = performance.now();
              step();
              await new Promise((painted) => requestAnimationFrame(() => setTimeout(painted)));
              times[name] = Math.min(times[name] ?? Infinity, performance.now() - before);
            }
            at("clear").click();
          }
          done(times);
        })();
    """)
    assert len(timed) == 9
    assert max(timed.values()) < 300, timed
    assert window.execute_script("return document.querySelectorAll('#hits tbody tr').length") <= 50
    assert complaints(window) == []


@pytest.mark.slow
def test_pages_of_a_long_list_are_walked_without_losing_the_place(window: Chrome, large: Path) -> None:
    resize(window)
    window.get(large.as_uri())
    window.execute_script("document.getElementById('play-on-move').checked = false")
    assert window.find_element("id", "page").text == "1 to 50 of 5,000"
    press(window, *[Keys.ARROW_DOWN] * 50)  # over the edge of the first page
    assert window.find_element("id", "page").text == "51 to 100 of 5,000"
    assert window.switch_to.active_element.text == "voice-0/hit-number-0050_take-00"
    window.find_element("id", "on").click()
    assert names(window)[0] == "voice-0/hit-number-0100_take-00"
    press(window, Keys.END)
    assert window.find_element("id", "page").text == "4951 to 5000 of 5,000"
    assert not window.find_element("id", "on").is_enabled()
    # An axis with many values is filtered by a range.
    lowest, highest = window.find_elements("css selector", "#axes input[type=number]")[:2]
    assert lowest.accessible_name == "pitch, lowest"
    lowest.send_keys("0.5")
    highest.send_keys("0.501")
    assert [name[-12:] for name in names(window)] == [f"{k:04d}_take-{k % 25:02d}" for k in range(2500, 2510)]
    assert complaints(window) == []
