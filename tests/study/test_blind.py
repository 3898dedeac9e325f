"""The blind listening page in a real browser: whole runs with known answers, gapless switching, nothing given away."""

from __future__ import annotations

import base64
import json
import re
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.stats import binomtest
from selenium.webdriver import Chrome, Keys
from selenium.webdriver.common.action_chains import ActionChains

from kickrender.errors import InputError
from kickrender.study.blind import BlindSound, blind_page, write_blind_page
from kickrender.study.pool import pool_results
from tests.browser import browser, complaints, requests, wait_for
from tests.page_checks import accessibility_faults

RATE_HZ = 48_000
TRIALS = 12
# Two steady levels: whoever looks at the output knows at every moment which sound is heard, and what lies between.
LOW, HIGH = 0.25, 0.5

# Stands between the page's sound and the loudspeaker, and keeps what passes.
LISTENER = """
window.heard = [];
const connect = AudioNode.prototype.connect;
AudioNode.prototype.connect = function (target, ...rest) {
  if (target instanceof AudioDestinationNode && !(this instanceof ScriptProcessorNode)) {
    const ear = this.context.createScriptProcessor(1024, 1, 1);
    ear.onaudioprocess = (event) => window.heard.push(Float32Array.from(event.inputBuffer.getChannelData(0)));
    connect.call(this, ear);
    connect.call(ear, target);
  }
  return connect.call(this, target, ...rest);
};
"""


def known_draw(coins: list[int]) -> str:
    """Has the page draw these sides, one byte a trial; longer draws stay as they are."""
    return f"""
const coins = {coins};
const real = crypto.getRandomValues.bind(crypto);
crypto.getRandomValues = (array) => array.length === 1 ? array.fill(coins.shift()) : real(array);
"""


def steady(seconds: float = 1.5) -> list[BlindSound]:
    count = round(seconds * RATE_HZ)
    return [
        BlindSound(np.full(count, LOW), RATE_HZ, "soft <knee> & co", "aa" * 32),
        BlindSound(np.full(count, HIGH), RATE_HZ, "hard knee", "bb" * 32),
    ]


@pytest.fixture
def page(tmp_path: Path) -> Path:
    path = tmp_path / "blind.html"
    write_blind_page(path, steady(), TRIALS, title="Which knee?", pause_s=0.0)
    return path


def click(chrome: Chrome, name: str) -> None:
    chrome.find_element("id", name).click()


def press(chrome: Chrome, *keys: str) -> None:
    ActionChains(chrome).send_keys(*keys).perform()


def saved(chrome: Chrome, folder: Path) -> tuple[Path, dict[str, Any]]:
    before = set((folder / "downloads").glob("*.json"))
    click(chrome, "save")
    wait_for(chrome, "document.readyState === 'complete'")
    for _ in range(200):
        new = set((folder / "downloads").glob("*.json")) - before
        if new:
            path = new.pop()
            return path, json.loads(path.read_text())
        chrome.execute_async_script("setTimeout(arguments[0], 25)")
    raise AssertionError("nothing was saved")


@pytest.mark.parametrize("wrong", [0, 3, TRIALS])
@pytest.mark.slow
def test_a_run_with_known_answers_gives_the_count_and_the_binomial_p_value(
    wrong: int, page: Path, tmp_path: Path
) -> None:
    """The p-value against scipy.stats.binomtest; by keyboard alone."""
    coins = [0, 1, 1, 0, 1, 0, 0, 0, 1, 1, 0, 1]
    with browser(tmp_path, known_draw(coins)) as chrome:
        chrome.get(page.as_uri())
        click(chrome, "begin")
        for number, coin in enumerate(coins):
            assert chrome.find_element("id", "trial-heading").text == f"Trial {number + 1} of {TRIALS}"
            said = coin if number >= wrong else 1 - coin
            press(chrome, "x", "a", "b", "12"[said], Keys.ENTER)
        heading = chrome.find_element("id", "after-heading").text
        _, result = saved(chrome, tmp_path)
        assert complaints(chrome) == []
    right = TRIALS - wrong
    assert heading == f"{right} of {TRIALS} right"
    assert result["correct"] == right
    assert [trial["x"] for trial in result["trials"]] == ["AB"[coin] for coin in coins]
    assert all(trial["heard"] == {"A": 1, "B": 1, "X": 1} for trial in result["trials"])
    assert result["p_value"] == pytest.approx(binomtest(right, TRIALS, 0.5, alternative="greater").pvalue, rel=1e-14)
    assert result["sounds"] == {
        "A": {"label": "soft <knee> & co", "digest": "aa" * 32},
        "B": {"label": "hard knee", "digest": "bb" * 32},
    }


def newest_level(chrome: Chrome) -> float:
    """The output level once it has been steady since now."""
    chrome.execute_script("window.heard.length = 0")
    return wait_for(chrome, "window.heard.length > 6 && window.heard.at(-1)[1023]")


@pytest.mark.slow
def test_a_listener_who_hears_the_difference_gets_every_trial_right(page: Path, tmp_path: Path) -> None:
    """X is drawn by the browser; the listener here reads nothing but the level at the loudspeaker."""
    with browser(tmp_path, LISTENER) as chrome:
        chrome.get(page.as_uri())
        click(chrome, "hear-A")
        level_of_a = newest_level(chrome)
        click(chrome, "begin")
        for _ in range(TRIALS):
            click(chrome, "hear-X")
            same = abs(newest_level(chrome) - level_of_a) < 0.01
            click(chrome, "say-A" if same else "say-B")
            click(chrome, "next")
        _, result = saved(chrome, tmp_path)
    assert result["correct"] == TRIALS
    assert result["p_value"] == 2.0**-TRIALS
    assert {trial["x"] for trial in result["trials"]} == {"A", "B"}  # fails once in 2048 runs of a fair coin


# The page's own graph, rendered sample by sample instead of in real time; `switches` are [seconds, button].
OFFLINE = """
window.AudioContext = function (options) {
  const context = new OfflineAudioContext(1, SECONDS * options.sampleRate, options.sampleRate);
  const resume = context.resume.bind(context);
  context.resume = () => Promise.resolve();
  window.rendered = (switches) => {
    for (const [seconds, name] of switches) {
      context.suspend(seconds).then(() => { document.getElementById(name).click(); resume(); });
    }
    return context.startRendering().then((buffer) => {
      const bytes = new Uint8Array(buffer.getChannelData(0).buffer);
      let text = "";
      for (let k = 0; k < bytes.length; k += 8192) text += String.fromCharCode(...bytes.subarray(k, k + 8192));
      return btoa(text);
    });
  };
  return context;
};
"""


def rendered(chrome: Chrome, first: str, switches: list[tuple[float, str]]) -> np.ndarray[Any, np.dtype[np.float64]]:
    """The page's output from the press of `first` on, volume taken out."""
    click(chrome, first)
    text = chrome.execute_async_script("window.rendered(arguments[0]).then(arguments[1])", switches)
    volume = chrome.execute_script("return document.getElementById('volume').valueAsNumber")
    return np.frombuffer(base64.b64decode(text), "<f4").astype(float) / np.float32(volume)


@pytest.mark.slow
@pytest.mark.parametrize("x", [0, 1])
def test_switching_leaves_no_gap_and_adds_no_click(x: int, page: Path, tmp_path: Path) -> None:
    """Two steady levels: the output lies on one, on the other, or on the way between, and nowhere else."""
    slow = [(0.1 * (k + 1), f"hear-{letter}") for k, letter in enumerate("BAXABXBA")]
    hasty = [(1.2 + 0.004 * k, f"hear-{letter}") for k, letter in enumerate("BAXABXBAXB")]  # faster than a fade
    with browser(tmp_path, OFFLINE.replace("SECONDS", "2") + known_draw([x])) as chrome:
        chrome.get(page.as_uri())
        click(chrome, "begin")
        output = rendered(chrome, "hear-A", slow + hasty)
        assert complaints(chrome) == []
    began = int(np.argmax(output > 0))
    heard = output[began:]
    assert began < 0.05 * RATE_HZ
    assert heard.min() >= LOW - 1e-6
    assert heard.max() <= HIGH + 1e-6
    # A raised cosine over 12 ms is at most pi/2 times as steep as a straight line; a click would jump.
    assert np.abs(np.diff(heard)).max() <= (HIGH - LOW) * np.pi / 2 / (0.012 * RATE_HZ) * 1.05
    levels = [LOW, HIGH, LOW, [LOW, HIGH][x], LOW, HIGH, [LOW, HIGH][x], HIGH, LOW]
    for k, level in enumerate(levels):  # within 50 ms of each press the sound asked for is heard alone
        settled = output[round((0.1 * k + 0.05) * RATE_HZ) : round((0.1 * k + 0.1) * RATE_HZ)]
        assert settled == pytest.approx(level, abs=1e-6)
    assert heard[-1] == pytest.approx(HIGH, abs=1e-6)  # the last press holds


@pytest.mark.slow
def test_both_sounds_run_in_step_and_loop(tmp_path: Path) -> None:
    """A ramp and its double: the level says where in the sound one is, which runs on evenly over every switch."""
    count, pause = 24_000, 4_800
    ramp = (1 + np.arange(count)) / count * 0.4
    sounds = [BlindSound(ramp, RATE_HZ, "ramp", "aa"), BlindSound(2 * ramp, RATE_HZ, "twice", "bb")]
    write_blind_page(tmp_path / "blind.html", sounds, 5, pause_s=pause / RATE_HZ)
    with browser(tmp_path, OFFLINE.replace("SECONDS", "2")) as chrome:
        chrome.get((tmp_path / "blind.html").as_uri())
        output = rendered(chrome, "hear-A", [(0.25, "hear-B"), (0.75, "hear-A")])
    began = int(np.argmax(output > 0))
    loop = np.r_[ramp, np.zeros(pause)]
    place = (np.arange(len(output)) - began) % len(loop)
    for first, last, gain in ((0.1, 0.25, 1), (0.3, 0.75, 2), (0.8, 2.0, 1)):
        part = slice(round(first * RATE_HZ), round(last * RATE_HZ))
        assert output[part] == pytest.approx(gain * loop[place[part]], abs=1e-6)


@pytest.mark.slow
def test_strike_anew_begins_the_sound_again_at_each_switch(tmp_path: Path) -> None:
    """The same ramp: after a switch it starts from nothing, whether the other sound or the same one is asked for."""
    ramp = (1 + np.arange(RATE_HZ)) / RATE_HZ * 0.4
    sounds = [BlindSound(ramp, RATE_HZ, "ramp", "aa"), BlindSound(2 * ramp, RATE_HZ, "twice", "bb")]
    write_blind_page(tmp_path / "blind.html", sounds, 5)
    with browser(tmp_path, OFFLINE.replace("SECONDS", "1")) as chrome:
        chrome.get((tmp_path / "blind.html").as_uri())
        click(chrome, "restart")
        output = rendered(chrome, "hear-A", [(0.4, "hear-B"), (0.7, "hear-B")])
    for press, until, gain in ((0.4, 0.7, 2), (0.7, 1.0, 2)):
        began = output[round((press + 0.06) * RATE_HZ)] / gain * RATE_HZ / 0.4  # samples since the start
        assert 0.02 * RATE_HZ < began < 0.06 * RATE_HZ
        assert np.diff(output[round((press + 0.06) * RATE_HZ) : round(until * RATE_HZ)]) == pytest.approx(
            gain * 0.4 / RATE_HZ, rel=0.02
        )


def everything_readable(chrome: Chrome) -> str:
    """The document as it stands, every name and value a script can reach from the window, and what is stored."""
    return chrome.execute_script("""
        const names = Object.getOwnPropertyNames(window).filter((name) => !name.startsWith("cdc_")).sort();
        const values = names.map((name) => {
          try { return `${name}=${JSON.stringify(window[name])}`; } catch { return name; }
        });
        const fields = [...document.querySelectorAll("*")].map((element) =>
          Object.keys(element).concat(element.value ?? "", JSON.stringify(element.dataset ?? {})).join());
        return [document.documentElement.outerHTML, ...values.filter((v) => !/^(performance|heard|coins)/.test(v)),
          ...fields, JSON.stringify(localStorage), JSON.stringify(sessionStorage), document.cookie, document.title,
          location.href].join("\\n");
    """)


@pytest.mark.slow
def test_what_x_is_cannot_be_read_anywhere(page: Path, tmp_path: Path) -> None:
    """Two runs alike in everything but the draw: all that can be read must be the same, at every moment."""
    runs = []
    for coin in (0, 1):
        folder = tmp_path / str(coin)
        folder.mkdir()
        # The draw is told to the page without leaving a name behind.
        stub = f"crypto.getRandomValues = (array) => array.fill({coin});"
        with browser(folder, stub) as chrome:
            chrome.get(page.as_uri())
            click(chrome, "begin")
            seen = [everything_readable(chrome)]
            for name in ("hear-X", "hear-A", "hear-X", "hear-B", "hear-X", "say-A", "next", "hear-X", "stop"):
                click(chrome, name)
                seen.append(everything_readable(chrome))
            runs.append(seen)
    assert len(runs[0][0]) > 5_000
    assert [a == b for a, b in zip(*runs, strict=True)] == [True] * 10


def test_nothing_in_the_file_tells_the_sounds_apart_but_themselves(tmp_path: Path) -> None:
    kick = np.sin(np.arange(RATE_HZ) / 50) * np.exp(-np.arange(RATE_HZ) / 5000)
    sounds = [BlindSound(kick, RATE_HZ, "one", "11"), BlindSound(kick[:30_000] * 0.9, RATE_HZ, "other", "22")]
    text = blind_page(sounds, 16, "Page").decode()
    data = json.loads(re.search(r'id="data">(.*?)</script>', text)[1])  # type: ignore[index]
    encoded = [sound["samples"] for sound in data["sounds"]]
    assert len(encoded[0]) == len(encoded[1])
    decoded = [np.frombuffer(base64.b64decode(samples), "<f4") for samples in encoded]
    assert {len(samples) for samples in decoded} == {RATE_HZ}
    a = decoded[data["a"]]
    assert (a == kick.astype(np.float32)).all()
    assert (decoded[1 - data["a"]][:30_000] == (kick[:30_000] * 0.9).astype(np.float32)).all()
    assert not decoded[1 - data["a"]][30_000:].any()
    assert blind_page(sounds, 16, "Page").decode() == text


def test_which_sound_comes_first_in_the_file_hangs_on_the_pair_and_not_on_who_is_a() -> None:
    def first(number: int) -> str:
        sounds = [BlindSound(np.array([k / 4]), RATE_HZ, "ab"[k - 1], f"{number}-{k}") for k in (1, 2)]
        text = blind_page(sounds, 16, "Page").decode()
        return json.loads(re.search(r'id="data">(.*?)</script>', text)[1])["sounds"][0]["label"]  # type: ignore[index]

    firsts = [first(number) for number in range(64)]
    assert 16 <= firsts.count("a") <= 48  # a fair coin leaves this range once in 10,000 pairs


@pytest.mark.slow
def test_no_outcome_is_shown_before_the_last_trial(page: Path, tmp_path: Path) -> None:
    with browser(tmp_path, known_draw([0] * TRIALS)) as chrome:
        chrome.get(page.as_uri())
        click(chrome, "begin")
        texts = []
        for number in range(TRIALS):
            assert not chrome.find_element("id", "after").is_displayed()
            click(chrome, "say-A" if number % 2 else "say-B")
            texts.append(chrome.find_element("tag name", "main").text)
            click(chrome, "next")
        assert chrome.find_element("id", "after").is_displayed()
    for text in texts[1:]:
        assert re.sub(r"Trial \d+", "", text) == re.sub(r"Trial \d+", "", texts[0])


@pytest.fixture(scope="module")
def calm(tmp_path_factory: pytest.TempPathFactory) -> Iterator[tuple[Chrome, Path]]:
    folder = tmp_path_factory.mktemp("calm")
    write_blind_page(folder / "blind.html", steady(), TRIALS, title="Which <i>knee</i>?")
    with browser(folder) as chrome:
        yield chrome, folder / "blind.html"


def test_the_page_asks_for_nothing_and_says_nothing_to_the_console(calm: tuple[Chrome, Path]) -> None:
    chrome, path = calm
    requests(chrome)
    chrome.get(path.as_uri())
    click(chrome, "hear-A")
    wait_for(chrome, "document.getElementById('hear-A').getAttribute('aria-pressed') === 'true'")
    assert requests(chrome) == [path.as_uri()]
    assert complaints(chrome) == []
    assert chrome.find_element("tag name", "h1").text == "Which <i>knee</i>?"


@pytest.mark.parametrize("width", [1280, 360])
@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_the_page_is_accessible(calm: tuple[Chrome, Path], width: int, scheme: str) -> None:
    """By axe-core, the open accessibility checker; nothing wider than the window."""
    chrome, path = calm
    assert accessibility_faults(chrome, path, width, scheme) == []
    chrome.find_element("id", "begin").click()
    assert accessibility_faults(chrome, None, width, scheme) == []
    chrome.execute_script("onbeforeunload = null")


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"trials": 4}, "trials: found 4; allowed: a whole number from 5 to 200"),
        ({"trials": True}, "trials: found True"),
        ({"sounds": steady()[:1]}, "found 1 sounds; allowed: two"),
        ({"sounds": [steady()[0], steady()[0]]}, "are the same sound"),
        ({"sounds": [steady()[0], BlindSound(np.zeros(9), RATE_HZ, "null", "cc")]}, "'null': silence; allowed"),
        ({"sounds": [steady()[0], BlindSound(np.ones(9), 44_100, "other", "cc")]}, "at 48000 Hz and 44100 Hz"),
        ({"sounds": [steady()[0], BlindSound(np.array([np.nan]), RATE_HZ, "n", "cc")]}, "no finite numbers"),
        ({"sounds": [steady()[0], BlindSound(np.array([1.5]), RATE_HZ, "n", "cc")]}, "a peak of 1.5 of full scale"),
        ({"sounds": [steady()[0], BlindSound(np.ones((9, 2)), RATE_HZ, "n", "cc")]}, "samples of shape (9, 2)"),
        ({"sounds": [steady()[0], BlindSound(np.ones(61 * RATE_HZ), RATE_HZ, "n", "cc")]}, "61 s of sound"),
    ],
)  # fmt: skip
def test_sounds_that_make_no_test_are_refused(change: dict[str, Any], message: str, tmp_path: Path) -> None:
    with pytest.raises(InputError, match=re.escape(message)):
        write_blind_page(tmp_path / "x.html", **{"sounds": steady(), "trials": 16, **change})
    assert list(tmp_path.iterdir()) == []


@pytest.mark.slow
def test_a_saved_result_is_one_that_can_be_pooled(page: Path, tmp_path: Path) -> None:
    with browser(tmp_path, known_draw([0, 1] * 6)) as chrome:
        chrome.get(page.as_uri())
        chrome.find_element("id", "listener").send_keys("Ann <3")
        click(chrome, "begin")
        for _ in range(TRIALS):
            press(chrome, "1", Keys.ENTER)
        path, _ = saved(chrome, tmp_path)
    pooled = pool_results([path])
    assert (pooled.trials, pooled.correct, pooled.labels) == (TRIALS, 6, ("soft <knee> & co", "hard knee"))
    assert pooled.each[0][1] == "Ann <3"
