"""Near-duplicates: found as trying every pair finds them, left out, remembered by a rerun, and brought back."""

import json
import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import soundfile

from kickrender.errors import InputError
from kickrender.pack import duplicates
from kickrender.pack.duplicates import fingerprint
from kickrender.pack.plan import plan_pack
from kickrender.pack.read import read_pack_text
from kickrender.pack.records import Plan
from kickrender.pack.run import Result, render_plan
from kickrender.sound.null import matched_residual_db
from tests.pack.test_run import contents, validate

RATE_HZ = 48_000
PACK = """
title = "Alike"
circuit = "voice.toml"
[sound]
length = "0.1s"
[level]
target = "-20 LUFS"
[axes]
tone = [0.1, 0.5, 0.500001, 0.9]
S1 = [false]
R1 = ["4k7", "47k"]
[files]
name = "{tone}/{R1}"
"""
TWINS = {"0.500001/4k7": "0.5/4k7", "0.500001/47k": "0.5/47k"}


@pytest.fixture
def plan(folder: Path) -> Plan:
    return plan_of(folder)


def plan_of(folder: Path, more: str = "", **replaced: str) -> Plan:
    text = PACK
    for old, new in replaced.items():
        text = text.replace(old, new)
    return plan_pack(read_pack_text(text + more, "p.toml", folder))


def facts_of(out: Path) -> dict[str, Any]:
    manifest = json.loads((out / "pack.json").read_bytes())
    validate(manifest, "pack.schema.json")
    return manifest


def of(result: Result) -> dict[str, str]:
    return {one.name: one.of for one in result.duplicates}


def test_they_are_told_and_stay(plan: Plan, tmp_path: Path) -> None:
    result = render_plan(plan, tmp_path / "out")
    assert of(result) == TWINS
    assert (len(result.rendered), result.left_out) == (8, ())
    found = facts_of(tmp_path / "out")["duplicates"]
    assert (found["below_db"], found["left_out"]) == (-60.0, False)
    assert {one["name"]: one["of"] for one in found["found"]} == TWINS
    assert all(-160.0 < one["residual_db"] < -60.0 for one in found["found"])
    assert len(facts_of(tmp_path / "out")["hits"]) == 8


def test_they_are_those_that_trying_every_pair_finds(folder: Path) -> None:
    """Of many close hits, so that some pairs lie on either side; the search must not miss one for its fingerprints."""
    tones = ", ".join(f"{0.5 + 0.4 * (k / 30) ** 4:.8f}" for k in range(30))
    plan = plan_of(folder, '[duplicates]\nbelow = "-50 dB"\n', **{"0.1, 0.5, 0.500001, 0.9": tones})
    result = render_plan(plan, folder / "out")
    sounds = [soundfile.read(folder / "out" / f"{hit.name}.wav")[0] for hit in plan.hits]
    expected: dict[str, str] = {}
    for k, hit in enumerate(plan.hits):
        for j in range(k):
            if plan.hits[j].name not in expected and matched_residual_db(sounds[j], sounds[k], RATE_HZ) <= -50.0:
                expected[hit.name] = plan.hits[j].name
                break
    assert of(result) == expected
    assert 10 < len(expected) < 50


def test_fingerprints_lie_no_further_apart_than_sounds() -> None:
    """|f(a) - f(b)| <= |a - b| of sounds scaled to one, at any delay: Parseval and the triangle inequality."""
    stream = np.random.default_rng(3)
    t = np.arange(9600) / RATE_HZ
    for _ in range(50):
        a = np.sin(2 * np.pi * stream.uniform(40, 400) * t) * np.exp(-t / stream.uniform(0.01, 0.1))
        b = np.roll(np.pad(a, (0, 48)), stream.integers(48))[:9600] + stream.standard_normal(
            9600
        ) * 10 ** stream.uniform(-5, -1)
        a, b = a / np.linalg.norm(a), b / np.linalg.norm(b)
        prints = [fingerprint(sound, RATE_HZ, 16_384) for sound in (a, b)]
        assert np.linalg.norm(prints[0]) == pytest.approx(1.0)
        residual = 10 ** (matched_residual_db(a, b, RATE_HZ) / 20)
        bound = math.sqrt(2 - 2 * math.sqrt(max(0.0, 1 - residual**2)))
        assert np.linalg.norm(prints[0] - prints[1]) <= bound * 1.02 + 1e-9


def test_only_close_neighbours_are_subtracted(plan: Plan, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    tried = []

    def counted(first: Any, second: Any, rate_hz: float) -> float:
        tried.append(1)
        return matched_residual_db(first, second, rate_hz)

    monkeypatch.setattr(duplicates, "matched_residual_db", counted)
    render_plan(plan, tmp_path / "out")
    assert len(tried) <= 4  # of 28 pairs


def test_they_are_left_out_of_all_that_speaks_of_the_pack(plan: Plan, tmp_path: Path) -> None:
    out = tmp_path / "out"
    result = render_plan(plan, out, drop_duplicates=True)
    assert result.left_out == tuple(TWINS)
    assert len(result.rendered) == 6
    manifest = facts_of(out)
    assert not {hit["name"] for hit in manifest["hits"]} & set(TWINS)
    assert manifest["duplicates"]["left_out"] is True
    assert {one["name"]: one["of"] for one in manifest["duplicates"]["found"]} == TWINS
    assert not (out / "0.500001").exists()
    assert "0.500001" not in (out / "pack.csv").read_text()
    page = (out / "index.html").read_text()
    assert "2 near duplicates left out" in page
    assert "0.500001/4k7.wav" not in page


def test_a_rerun_renders_nothing_and_says_the_same(plan: Plan, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    out = tmp_path / "out"
    first = render_plan(plan, out, drop_duplicates=True)
    before = contents(out)
    monkeypatch.setattr(duplicates, "fingerprint", lambda *_: pytest.fail("searched again"))
    again = render_plan(plan, out, drop_duplicates=True)
    assert again.rendered == ()
    assert again.kept == first.rendered
    assert (again.duplicates, again.left_out) == (first.duplicates, first.left_out)
    assert contents(out) == before


def test_without_the_option_they_come_back(plan: Plan, tmp_path: Path) -> None:
    out = tmp_path / "out"
    render_plan(plan, out)
    whole = contents(out)
    render_plan(plan, out, drop_duplicates=True)
    back = render_plan(plan, out)
    assert back.rendered == tuple(TWINS)
    assert contents(out) == whole


def test_a_changed_pack_is_searched_anew(folder: Path, tmp_path: Path) -> None:
    """The first of two is gone, so the second is no duplicate any more and must be there."""
    out = tmp_path / "out"
    render_plan(plan_of(folder), out, drop_duplicates=True)
    changed = plan_of(folder, **{"0.5, 0.500001": "0.500001"})
    result = render_plan(changed, out, drop_duplicates=True)
    assert result.duplicates == ()
    assert set(result.rendered) == set(TWINS)
    assert len(facts_of(out)["hits"]) == 6


def test_a_run_stopped_while_taking_away_is_gone_on_with(
    plan: Plan, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    out, other = tmp_path / "out", tmp_path / "other"
    with monkeypatch.context() as patch:
        patch.setattr("kickrender.pack.run.remove_hits", lambda *_: (_ for _ in ()).throw(KeyboardInterrupt))
        with pytest.raises(KeyboardInterrupt):
            render_plan(plan, out, drop_duplicates=True)
    assert (out / "0.500001/4k7.wav").exists()
    assert render_plan(plan, out, drop_duplicates=True).rendered == ()
    render_plan(plan, other, drop_duplicates=True)
    assert contents(out) == contents(other)


def test_a_lost_file_is_made_again_and_the_rest_stays(plan: Plan, tmp_path: Path) -> None:
    out = tmp_path / "out"
    render_plan(plan, out, drop_duplicates=True)
    before = contents(out)
    (out / "0.5/4k7.wav").unlink()
    assert render_plan(plan, out, drop_duplicates=True).rendered == ("0.5/4k7",)
    assert contents(out) == before


def test_members_of_a_group_are_left_out_and_their_gain_stays(folder: Path, tmp_path: Path) -> None:
    """What shares a gain is made again together, and what was left out goes again."""
    plan = plan_of(folder, **{'"-20 LUFS"': '"-20 LUFS"\ntogether = ["R1"]'})
    out = tmp_path / "out"
    first = render_plan(plan, out, drop_duplicates=True)
    assert of(first) == TWINS
    before = contents(out)
    (out / "0.9/4k7.wav").unlink()
    assert set(render_plan(plan, out, drop_duplicates=True).rendered) == {"0.9/4k7", "0.9/47k"}
    assert contents(out) == before


@pytest.mark.slow
def test_workers_have_no_part_in_it(folder: Path, tmp_path: Path) -> None:
    tones = ", ".join(f"{0.1 + 0.8 * (k // 2) / 40 + 1e-7 * (k % 2):.8f}" for k in range(40))
    plan = plan_of(folder, **{"0.1, 0.5, 0.500001, 0.9": tones})
    one, two = tmp_path / "one", tmp_path / "two"
    assert len(render_plan(plan, one, jobs=1, drop_duplicates=True).left_out) >= 40
    render_plan(plan, two, jobs=2, drop_duplicates=True)
    assert contents(one) == contents(two)


def test_equal_samples_have_nothing_left(folder: Path, tmp_path: Path) -> None:
    plan = plan_of(folder, **{"S1 = [false]": 'temperature = ["20C", "30C"]', '{R1}"': '{R1}-{temperature}"'})
    result = render_plan(plan, tmp_path / "out")
    assert {one.residual_db for one in result.duplicates if "30C" in one.name and "0.500001" not in one.name} == {None}
    assert facts_of(tmp_path / "out")["duplicates"]["found"][0]["residual_db"] is None


@pytest.mark.parametrize("written", ["-70", "-70.0", '"-70 dB"', '"-70dB"', '"-70"'])
def test_the_limit_is_read(folder: Path, written: str) -> None:
    assert plan_of(folder, f"[duplicates]\nbelow = {written}\n").duplicates_below_db == -70.0


@pytest.mark.parametrize(
    ("written", "found"),
    [
        ("below = -10", "duplicates.below: -10; allowed: a null residual from -120 dB to -20 dB"),
        ("below = true", "duplicates.below: true; allowed: a null"),
        ('below = "quiet"', "duplicates.below: 'quiet'; allowed: a null"),
        ('below = "nan"', "duplicates.below: nan; allowed: a null"),
        ("under = -60", "unknown key 'under'; allowed: below"),
    ],
)
def test_a_mistake_is_told(folder: Path, written: str, found: str) -> None:
    with pytest.raises(InputError) as caught:
        plan_of(folder, f"[duplicates]\n{written}\n")
    assert found in str(caught.value)
