"""A pack by ear, from its file to its folder: goals met, layers at their distances, takes that stay what they are."""

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import soundfile

from kickrender.errors import InputError
from kickrender.pack import tuning
from kickrender.pack.run import render_plan
from tests.pack.folders import contents, hit_files, validate
from tests.pack.plans import plan_of
from tests.tunable_bell import BELL

PACK = """
title = "By ear"
circuit = "bell.toml"
[sound]
rate = "44.1k"
oversample = 1
[level]
target = "-30 LUFS"
[axes]
pitch = { notes = ["C2", "F#2"] }
[fixed]
decay = { seconds = 0.3 }
[layers]
force = ["0.25V", "0.5V", "1V"]
[takes]
count = 2
seed = "night"
spread = { capacitor = "10%", temperature = "2C" }
[files]
name = "{pitch}/{layer}-{take}"
"""


@pytest.fixture
def bells(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder with the circuit in it, and an empty cache of answers."""
    (tmp_path / "bell.toml").write_text(BELL)
    monkeypatch.setattr(tuning, "cache_folder", lambda path: tmp_path / "cache")
    return tmp_path


def facts_of(folder: Path, name: str) -> dict[str, Any]:
    facts = json.loads((folder / f"{name}.json").read_bytes())
    validate(facts, "sidecar.schema.json")
    return dict(facts)


def test_a_pack_by_ear(bells: Path) -> None:
    out = bells / "out"
    plan = plan_of(PACK, bells)
    assert [hit.name for hit in plan.hits][:3] == ["C2/1-1", "C2/1-2", "C2/2-1"]
    assert render_plan(plan, out).failed == {}
    facts = facts_of(out, "C2/2-1")
    goals = facts["pack"]["goals"]
    assert goals["pitch"] == {
        "asked": "C2",
        "value": pytest.approx(65.40639),
        "unit": "Hz",
        "measured": pytest.approx(65.40639, rel=2 / 1200 * 0.693),
        "control": "tune",
        "position": pytest.approx(goals["pitch"]["position"]),
    }
    assert goals["decay"]["measured"] == pytest.approx(0.3, rel=0.03)
    # The take's own pitch is off by what its capacitor is off: f ~ C^(-1/2).
    factor = facts["spread"]["C1.value"]
    assert facts["measurements"]["settled_hz"] == pytest.approx(65.40639 * factor**-0.5, rel=2e-3)
    assert facts["temperature"]["value"] == 298.15 + facts["spread"]["temperature"]
    assert facts["pack"]["velocity"] == {"low": 42, "high": 84}
    assert facts["pack"]["take_seed"] == "night"
    manifest = json.loads((out / "pack.json").read_bytes())
    validate(manifest, "pack.schema.json")
    assert manifest["hits"][2]["goals"] == goals
    assert manifest["hits"][2]["axes"] == {"circuit": "bell", "pitch": "C2", "layer": 2, "force": 0.5, "take": 1}


def test_layers_keep_their_distances_and_share_the_gain(bells: Path) -> None:
    """A linear circuit: half the level is 6.02 dB less."""
    render_plan(plan_of(PACK, bells), bells / "out")
    heard = [facts_of(bells / "out", f"C2/{layer}-1") for layer in (1, 2, 3)]
    levels = [facts["measurements"]["momentary_lufs"] for facts in heard]
    assert levels == pytest.approx([-42.04, -36.02, -30.0], abs=0.01)
    assert len({facts["gain_db"] for facts in heard}) == 1


def test_a_pack_without_takes_meets_its_goals_in_every_file(bells: Path) -> None:
    text = PACK[: PACK.index("[takes]")] + PACK[PACK.index("[files]") :].replace("-{take}", "")
    render_plan(plan_of(text, bells), bells / "out")
    for note, hz in (("C2", 65.40639), ("F#2", 92.49861)):
        for layer in (1, 2, 3):
            found = facts_of(bells / "out", f"{note}/{layer}")["measurements"]
            assert found["settled_hz"] == pytest.approx(hz, rel=2 / 1200 * 0.693)
            assert found["decay_s"] == pytest.approx(0.3, rel=0.03)
            assert (found["note"], abs(found["cents"]) < 2.0) == (note, True)


def test_what_was_found_is_kept_and_not_sought_again(bells: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    first = plan_of(PACK, bells)
    render_plan(first, bells / "out")
    before = contents(bells / "out")

    def never(*_: object) -> None:
        raise AssertionError("asked again")

    monkeypatch.setattr(tuning, "tune_each", never)
    again = plan_of(PACK, bells)
    assert again.hits == first.hits
    assert render_plan(again, bells / "out").rendered == ()
    assert contents(bells / "out") == before


def test_found_anew_it_is_the_same(bells: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    first = plan_of(PACK, bells)
    monkeypatch.setattr(tuning, "cache_folder", lambda path: bells / "other cache")
    assert plan_of(PACK, bells).hits == first.hits


def test_a_spoilt_answer_is_sought_again(bells: Path) -> None:
    first = plan_of(PACK, bells)
    for path in (bells / "cache").rglob("*.json"):
        path.write_text("[{}]")
    assert plan_of(PACK, bells).hits == first.hits


def test_a_hit_does_not_depend_on_what_else_is_asked_for(bells: Path) -> None:
    render_plan(plan_of(PACK, bells), bells / "out")
    alone = PACK.replace('["C2", "F#2"]', '["F#2"]').replace("count = 2", "count = 1")
    render_plan(plan_of(alone, bells), bells / "alone")
    files = hit_files(bells / "alone")
    assert len(files) == 6
    assert files.items() <= hit_files(bells / "out").items()


def test_workers_do_not_show(bells: Path) -> None:
    text = PACK.replace("count = 2", "count = 12")  # 72 hits: enough for two workers
    plan = plan_of(text, bells)
    render_plan(plan, bells / "one", jobs=1)
    render_plan(plan, bells / "two", jobs=2)
    assert contents(bells / "one") == contents(bells / "two")


def test_a_second_strike_is_heard_in_the_ring_of_the_first(bells: Path) -> None:
    """A linear circuit: the pair is the single strike plus itself later."""
    text = PACK[: PACK.index("[layers]")].replace('["C2", "F#2"]', '["C2"]') + '[files]\nname = "{pitch}"\n'
    text = text.replace("oversample = 1", 'oversample = 1\nraw = true\nlength = "0.6s"\nformat = "float32"')
    render_plan(plan_of(text, bells), bells / "once")
    render_plan(plan_of('hits = ["0s", "0.2s"]\n' + text, bells), bells / "twice")
    once, _ = soundfile.read(bells / "once" / "C2.wav")
    twice, _ = soundfile.read(bells / "twice" / "C2.wav")
    later = round(0.2 * 44100)
    wanted = once + np.concatenate([np.zeros(later), once[:-later]])
    assert np.abs(twice - wanted).max() < 1e-5 * np.abs(once).max()
    assert facts_of(bells / "twice", "C2")["inputs"]["gate"]["values"]["starts"] == {"value": [0.0, 0.2], "unit": "s"}


@pytest.mark.parametrize(
    ("old", "new", "fault"),
    [
        ('"C2", "F#2"', '"C5"',
         "p.toml:10, axes.pitch (circuit 'bell'): pitch C5 (523.3 Hz) is out of reach of control 'tune' with "
         "decay 0.3 s, force 0.25V; allowed: 50."),
        ("seconds = 0.3", "seconds = 5",
         "p.toml:12, fixed.decay (circuit 'bell'): a decay of 5 s in a file of at most 4 s"),
        ("decay = { seconds", "drop = { semitones",
         "p.toml:12, fixed.drop (circuit 'bell'): no control of the circuit answers to 'drop'; allowed: goals of the "
         "circuit's table"),
        ("[fixed]", '[fixed]\ntune = "2u"',
         "p.toml:10, axes.pitch (circuit 'bell'): control 'tune' is set, and sought for 'pitch'; allowed: "
         "one of the two"),
    ],
)  # fmt: skip
def test_goals_that_cannot_be_met_stop_a_pack_before_it_starts(old: str, new: str, fault: str, bells: Path) -> None:
    with pytest.raises(InputError) as caught:
        plan_of(PACK.replace(old, new, 1), bells)
    assert any(str(found).startswith(fault) for found in caught.value.faults), str(caught.value)
