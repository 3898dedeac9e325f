"""Whole packs: what lies in the folder, that nothing but the pack decides it, and what happens when something fails."""

import csv
import json
import math
import random
import shutil
import warnings
import wave
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import jsonschema
import pytest
import soundfile
from scipy.io import wavfile

from kickrender.errors import WriteError
from kickrender.pack import batches
from kickrender.pack.records import Plan
from kickrender.pack.run import Result, render_plan
from tests.pack.folders import contents, hit_files, validate
from tests.pack.plans import plan_of
from tests.pack.texts import PACK


def sidecars(folder: Path) -> list[dict[str, Any]]:
    return [json.loads(path.read_bytes()) for path in sorted(folder.rglob("*.json")) if path.name != "pack.json"]


@pytest.fixture(scope="session")
def rendered(tmp_path_factory: pytest.TempPathFactory) -> Callable[[], tuple[Plan, Path]]:
    """The small pack, rendered once; tests that change files take a copy."""
    from tests.pack.texts import VOICE

    folder = tmp_path_factory.mktemp("rendered")
    (folder / "voice.toml").write_text(VOICE)
    plan = plan_of(PACK, folder)
    render_plan(plan, folder / "out")

    def copy() -> tuple[Plan, Path]:
        target = tmp_path_factory.mktemp("copy") / "out"
        shutil.copytree(folder / "out", target)
        return plan, target

    return copy


Rendered = Callable[[], tuple[Plan, Path]]


def test_every_hit_has_a_file_that_others_open(rendered: Rendered) -> None:
    plan, out = rendered()
    assert len(plan.hits) == 6
    for hit in plan.hits:
        path = out / f"{hit.name}.wav"
        samples, rate = soundfile.read(path, dtype="int16")
        assert rate == 44100
        with wave.open(str(path)) as file:
            assert (file.getnchannels(), file.getsampwidth(), file.getframerate()) == (1, 2, 44100)
            assert file.getnframes() == len(samples)
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", wavfile.WavFileWarning)  # of chunks that scipy does not know
            assert (wavfile.read(path)[1] == samples).all()
        assert abs(samples).max() > 1000
        assert samples[-1] in (-1, 0, 1)  # faded to zero; what is left is dither


def test_sidecars_and_manifest_keep_to_the_published_schemas(rendered: Rendered) -> None:
    plan, out = rendered()
    assert len(sidecars(out)) == len(plan.hits)
    for facts in sidecars(out):
        validate(facts, "sidecar.schema.json")
    manifest = json.loads((out / "pack.json").read_bytes())
    validate(manifest, "pack.schema.json")
    assert [entry["name"] for entry in manifest["hits"]] == [hit.name for hit in plan.hits]
    del manifest["hits"][0]["pcm_sha256"]
    with pytest.raises(jsonschema.ValidationError, match="pcm_sha256"):
        validate(manifest, "pack.schema.json")


def test_the_table_says_what_the_manifest_says(rendered: Rendered) -> None:
    _, out = rendered()
    manifest = json.loads((out / "pack.json").read_bytes())
    rows = list(csv.DictReader((out / "pack.csv").read_text().splitlines()))
    assert len(rows) == 6
    for row, entry in zip(rows, manifest["hits"], strict=True):
        assert row["file"] == entry["file"]
        assert float(row["accent"]) == entry["axes"]["accent"]
        assert float(row["momentary_lufs"]) == entry["measurements"]["momentary_lufs"]
        assert row["pcm_sha256"] == entry["pcm_sha256"]


def test_a_sidecar_holds_every_setting_and_every_part_with_its_unit(rendered: Rendered) -> None:
    _, out = rendered()
    facts = json.loads((out / "0.1" / "3V.json").read_bytes())
    assert facts["settings"] == {
        "accent": {"value": 3.0, "unit": "V"},
        "tone": {"value": 0.1, "unit": ""},
        "R1": {"value": 4700.0, "unit": "ohm"},
    }
    assert facts["parts"]["R1"]["values"] == {"resistance": {"value": 4700.0, "unit": "ohm"}}
    assert facts["parts"]["C1"]["values"] == {"capacitance": {"value": 1.8e-8, "unit": "F"}}
    assert facts["parts"]["P1"]["values"] == {"first_leg": {"value": 1001.0, "unit": "ohm"}}
    assert facts["pack"]["axes"] == {"circuit": "voice", "tone": 0.1, "accent": 3.0}


def test_a_group_shares_one_gain_and_keeps_its_distances(rendered: Rendered) -> None:
    plan, out = rendered()
    facts = {hit.name: json.loads((out / f"{hit.name}.json").read_bytes()) for hit in plan.hits}
    for group in (0, 1):
        members = [facts[hit.name] for hit in plan.hits if hit.group == group]
        assert len({one["gain_db"] for one in members}) == 1
        loudness = [one["measurements"]["momentary_lufs"] for one in members]
        before = [one["measurements_before_level"]["momentary_lufs"] for one in members]
        # So short a sound reaches the ceiling long before the target, and says so.
        assert max(one["measurements"]["true_peak_dbtp"] for one in members) == -1.0
        assert "the ceiling holds the gain" in members[0]["notes"][-1]
        assert loudness[0] - loudness[2] == pytest.approx(before[0] - before[2], abs=0.002)
        assert loudness[2] - loudness[0] == pytest.approx(
            20 * math.log10(5), abs=0.003
        )  # a linear circuit, 1 V and 5 V


def test_the_loudest_of_a_group_reaches_the_target(folder: Path) -> None:
    render_plan(plan_of(PACK.replace("-20 LUFS", "-30 LUFS"), folder), folder / "out")
    loudest = [
        max(f["measurements"]["momentary_lufs"] for f in sidecars(folder / "out" / tone)) for tone in ("0.1", "0.5")
    ]
    assert loudest == pytest.approx([-30.0, -30.0], abs=0.0011)


def test_no_byte_depends_on_workers_batches_or_order(
    folder: Path, rendered: Rendered, monkeypatch: pytest.MonkeyPatch
) -> None:
    plan, out = rendered()
    wanted = contents(out)
    shuffled = list(plan.hits)
    random.Random(1).shuffle(shuffled)
    render_plan(replace(plan, hits=tuple(shuffled)), folder / "shuffled")
    assert hit_files(folder / "shuffled") == hit_files(out)
    for most in (1, 2, 5):  # groups of three: too large for the first two, so measured first and then rendered
        monkeypatch.setattr(batches, "MOST_HITS", most)
        monkeypatch.setattr(batches, "FEWEST_HITS", 1)
        render_plan(plan, folder / f"most-{most}")
        assert contents(folder / f"most-{most}") == wanted
    monkeypatch.setattr("kickrender.pack.run.FEWEST_PER_WORKER", 1)
    render_plan(plan, folder / "two-workers", jobs=2)
    assert contents(folder / "two-workers") == wanted


def test_a_second_run_renders_nothing(rendered: Rendered) -> None:
    plan, out = rendered()
    before = {path: path.stat().st_mtime_ns for path in out.rglob("*.wav")}
    result = render_plan(plan, out)
    assert result.rendered == ()
    assert result.kept == tuple(hit.name for hit in plan.hits)
    assert {path: path.stat().st_mtime_ns for path in out.rglob("*.wav")} == before


def _remove(out: Path) -> None:
    (out / "0.1/3V.wav").unlink()


def _flip(out: Path) -> None:
    data = bytearray((out / "0.1/3V.wav").read_bytes())
    data[-200] ^= 1
    (out / "0.1/3V.wav").write_bytes(data)


def _cut_wav(out: Path) -> None:
    (out / "0.1/3V.wav").write_bytes((out / "0.1/3V.wav").read_bytes()[:-10])


def _cut_sidecar(out: Path) -> None:
    (out / "0.1/3V.json").write_bytes((out / "0.1/3V.json").read_bytes()[:-100])


def _leave_unfinished(out: Path) -> None:
    (out / "0.1/3V.json").unlink()
    (out / "0.1/.kick-0123456789abcdef.part").write_bytes(b"half a fi")


@pytest.mark.parametrize("damage", [_remove, _flip, _cut_wav, _cut_sidecar, _leave_unfinished])
def test_what_is_missing_or_damaged_is_made_again_with_its_group(
    damage: Callable[[Path], None], rendered: Rendered
) -> None:
    plan, out = rendered()
    wanted = contents(out)
    damage(out)
    assert contents(out) != wanted
    result = render_plan(plan, out)
    assert result.rendered == ("0.1/1V", "0.1/3V", "0.1/5V")
    assert contents(out) == wanted


def test_a_changed_pack_renders_only_what_changed(folder: Path, rendered: Rendered) -> None:
    _, out = rendered()
    result = render_plan(plan_of(PACK.replace("[0.1, 0.5]", "[0.1, 0.6]"), folder), out)
    assert result.kept == ("0.1/1V", "0.1/3V", "0.1/5V")
    assert result.rendered == ("0.6/1V", "0.6/3V", "0.6/5V")
    assert result.stale == ("0.5/1V.wav", "0.5/3V.wav", "0.5/5V.wav")


def test_a_run_that_ends_early_leaves_no_manifest(folder: Path, rendered: Rendered) -> None:
    _, out = rendered()

    def stop(hits: int) -> None:
        if hits == 1:
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        render_plan(plan_of(PACK.replace("[0.1, 0.5]", "[0.1, 0.6]"), folder), out, progress=stop)
    assert not list(out.glob("pack.*"))


def silent_and_loud(folder: Path, out: Path) -> Result:
    text = PACK.replace('together = ["accent"]', "").replace("[0.1, 0.5]", "[0.1]")
    text = text.replace('{ from = "1V", to = "5V", steps = 3 }', '["0V", "5V"]')
    return render_plan(plan_of(text.replace("{tone}/{accent}", "{accent}"), folder), out)


def test_a_hit_that_fails_stops_no_other(folder: Path) -> None:
    result = silent_and_loud(folder, folder / "out")
    assert result.failed == {"0V": "no momentary level: the sound is silent"}
    assert result.rendered == ("5V",)
    manifest = json.loads((folder / "out" / "pack.json").read_bytes())
    assert manifest["failed"] == [{"name": "0V", "reason": "no momentary level: the sound is silent"}]
    validate(manifest, "pack.schema.json")
    assert {"5V.json", "5V.wav", "pack.csv", "pack.json"} <= set(contents(folder / "out"))
    assert not list((folder / "out").glob("0V*"))


def test_somebody_elses_file_is_not_replaced(folder: Path) -> None:
    (folder / "out" / "0.1").mkdir(parents=True)
    theirs = folder / "out" / "0.1" / "3V.json"
    theirs.write_text('{"mine": 1}')
    with pytest.raises(WriteError, match=r"0\.1/3V\.json: exists and was not written by kickrender; move it"):
        render_plan(plan_of(PACK, folder), folder / "out")
    assert theirs.read_text() == '{"mine": 1}'
    assert not (folder / "out" / "pack.json").exists()


def test_a_folder_that_cannot_be_made_is_told_before_anything_is_solved(folder: Path) -> None:
    with pytest.raises(WriteError, match=r"voice\.toml/out: cannot be written: Not a directory"):
        render_plan(plan_of(PACK, folder), folder / "voice.toml" / "out")


def test_progress_counts_every_hit_once(folder: Path, rendered: Rendered) -> None:
    plan, out = rendered()
    (out / "0.5/1V.wav").unlink()
    told: list[int] = []
    render_plan(plan, out, progress=told.append)
    assert sum(told) == len(plan.hits)
