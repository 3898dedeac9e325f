"""What moved, how far and why: every sort of change made to a locked pack, and what is said of it."""

import json
import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import soundfile

from kickrender.errors import InputError
from kickrender.lock import contents
from kickrender.lock.audio import audio_name
from kickrender.lock.moves import Limits
from kickrender.lock.records import Lock
from kickrender.lock.summary import facts, full_text, summary
from kickrender.lock.text import read_lock
from kickrender.lock.verify import ADDED, CHANGED, FAILED, INAUDIBLE, RECIPE, REMOVED, SAME, Verification, verify_plan
from kickrender.sound import recipe, render
from tests.lock.conftest import Edit, by_name, lock_in, plan_in, verify_in
from tests.lock.texts import BELLS, GONGS


def statuses(found: Verification) -> dict[str, set[str]]:
    return {status: {v.name for v in found.verdicts if v.status == status} for status in found.counts}


def test_an_unchanged_pack_is_the_same_and_is_not_measured(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    lock_in(folder)
    monkeypatch.setattr(render, "measure", lambda *_: pytest.fail("an unchanged hit was measured"))
    found = verify_in(folder)
    assert statuses(found) == {SAME: {*BELLS, *GONGS}}
    assert found.passes()
    assert summary(found) == "8 hits: 8 same"


def test_titles_comments_and_the_order_of_keys_move_nothing(folder: Path, edit: Edit) -> None:
    lock_in(folder)
    edit("bell.toml", '"Bell" # a comment', '"Another" # other words')
    edit("gong.toml", 'R2 = { kind = "resistor", value = "100k",', 'R2 = { value = "0.1M", kind = "resistor",')
    edit("bells.toml", '"Bells"', '"More bells" # words')
    assert statuses(verify_in(folder)) == {SAME: {*BELLS, *GONGS}}


def test_a_part_changed_by_a_thousandth_moves_the_hits_that_use_it_and_is_named(folder: Path, edit: Edit) -> None:
    lock_in(folder)
    edit("bell.toml", '"1u"', '"1.001u"')
    found = verify_in(folder)
    assert statuses(found) == {RECIPE: set(BELLS), SAME: set(GONGS)}
    assert not found.passes()
    for name in BELLS:
        verdict = by_name(found)[name]
        assert not verdict.same_bytes
        assert [str(cause) for cause in verdict.causes] == ["circuit: part C1 value 1u -> 1.001u (+0.1 %)"]
        # f = 1 / (2 pi sqrt(L C)): a textbook's; L and C alone decide, R1 hardly damps.
        (cents,) = [move.by for move in verdict.moves if move.name == "settled_hz"]
        assert cents == pytest.approx(1200 * math.log2(1 / math.sqrt(1.001)), abs=0.03)
    text = summary(found)
    assert "8 hits: 4 same, 4 recipe changed" in text
    assert "circuit: part C1 value 1u -> 1.001u (+0.1 %)  (4 hits)" in text
    assert "settled pitch" in text


def test_what_moved_agrees_with_plain_numpy(folder: Path, edit: Edit) -> None:
    """Null residual, peak and length, from the files by the definitions: RMS over RMS, 20 log10, samples over rate."""
    lock = lock_in(folder, audio=True)
    edit("bell.toml", '"1u"', '"1.002u"')
    edit("bells.toml", "0.6s", "0.7s")
    found = verify_in(folder, keep=folder / "after")
    for verdict in found.verdicts:
        assert verdict.before
        assert verdict.after
        old, rate = soundfile.read(folder / "bells.audio" / audio_name(verdict.name, verdict.before.pcm, "pcm24"))
        new, _ = soundfile.read(folder / "after" / audio_name(verdict.name, verdict.after.pcm, "pcm24"))
        longer = np.zeros(max(len(old), len(new)))
        longer[: len(new)] += new
        longer[: len(old)] -= old
        moved = {move.name: move.by for move in verdict.moves}
        null = 20 * np.log10(np.sqrt(np.sum(longer**2) / len(longer)) / np.sqrt(np.sum(old**2) / len(longer)))
        assert moved["null"] == pytest.approx(null, abs=1e-6)
        peaks = [20 * np.log10(np.abs(sound).max()) for sound in (old, new)]
        assert moved.get("peak_dbfs", 0.0) == pytest.approx(peaks[1] - peaks[0], abs=0.0015)
        assert moved.get("length_s", 0.0) == pytest.approx(1000 * (len(new) - len(old)) / rate, abs=0.002)
    assert {cause.what for cause in by_name(found)["gong/10k-2V"].causes} == {"length_s"}
    assert lock.audio == "bells.audio"


def test_a_model_is_named_with_its_parts(folder: Path, edit: Edit) -> None:
    lock_in(folder)
    edit("gong.toml", '"2.5n"', '"2.6n"')
    found = verify_in(folder)
    assert statuses(found) == {RECIPE: set(GONGS), SAME: set(BELLS)}
    assert str(by_name(found)["gong/10k-2V"].causes[0]) == (
        "models: model silicon (D1) saturation_current 2.5nA -> 2.6nA (+4 %)"
    )


def test_another_recipe_of_the_same_samples_passes_with_tolerance_only(folder: Path, edit: Edit) -> None:
    lock_in(folder)
    edit("gong.toml", 'to = "5V"', 'to = "6V"')
    found = verify_in(folder)
    assert statuses(found) == {RECIPE: set(GONGS), SAME: set(BELLS)}
    verdict = by_name(found)["gong/10k-2V"]
    assert [str(cause) for cause in verdict.causes] == ["circuit: control accent high 5 -> 6 (+20 %)"]
    assert verdict.same_bytes
    assert "the same bytes" in full_text(verdict)
    assert found.passes(tolerance=True)
    assert not found.passes()


def test_parts_added_and_taken_away_are_named(folder: Path, edit: Edit) -> None:
    lock_in(folder)
    edit("bell.toml", "R2 =", 'R3 = { kind = "resistor", value = "1M", between = ["out", "ground"] }\nR9 =')
    causes = {str(cause) for cause in by_name(verify_in(folder))["bell/10k-2V"].causes}
    assert causes == {"circuit: part R2 removed", "circuit: part R3 added", "circuit: part R9 added"}


def test_settings_level_and_sound_are_told(folder: Path, edit: Edit) -> None:
    lock_in(folder)
    edit("bells.toml", "[files]", "[fixed]\nR2 = 5e4\n[files]")
    edit("bells.toml", "-20 LUFS", "-21 LUFS")
    edit("bells.toml", 'length = "0.6s"', 'length = "0.6s"\noversample = 4')
    verdict = by_name(verify_in(folder))["bell/10k-2V"]
    assert {str(cause) for cause in verdict.causes} == {
        "settings: R2 added",
        "sound: oversample 8 -> 4",
        "level: target -20 -> -21",
    }
    (loudness,) = [move.by for move in verdict.moves if move.name == "momentary_lufs"]
    assert loudness == pytest.approx(-1.0, abs=0.002)


def test_hits_added_removed_and_sharing_their_gain(folder: Path, edit: Edit) -> None:
    lock_in(folder)
    edit("bells.toml", '["2V", "5V"]', '["2V", "4V"]')
    found = verify_in(folder)
    added = {name.replace("5V", "4V") for name in [*BELLS, *GONGS] if "5V" in name}
    kept = {name for name in [*BELLS, *GONGS] if "2V" in name}
    assert statuses(found) == {RECIPE: kept, ADDED: added, REMOVED: {name.replace("4V", "5V") for name in added}}
    assert str(by_name(found)["bell/10k-2V"].causes[0]) == "group: other hits share its gain: bell/10k-4V (added)"
    assert not found.passes(tolerance=True)


def test_another_engine_version_is_the_cause(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    lock_in(folder)
    monkeypatch.setattr(recipe, "ENGINE_VERSION", "next")
    monkeypatch.setattr(contents, "ENGINE_VERSION", "next")
    found = verify_in(folder)
    assert statuses(found) == {RECIPE: {*BELLS, *GONGS}}
    assert {str(cause) for v in found.verdicts for cause in v.causes} == {
        f"engine: engine version {read_lock(folder / 'bells.lock').made['engine']} -> next"
    }


def tampered(lock: Lock, name: str, **measured: float) -> Lock:
    """The lock as if a hit had other bytes, and measured otherwise, when it was made."""
    hit = lock.hits[name]
    return replace(lock, hits={**lock.hits, name: replace(hit, pcm="0" * 64, measured={**hit.measured, **measured})})


def test_other_bytes_of_the_same_recipe_are_inaudible_or_changed(folder: Path) -> None:
    lock = lock_in(folder)
    decay_s = lock.hits["bell/10k-2V"].measured["decay_s"]
    for by_s, status in ((0.0, INAUDIBLE), (0.0019, INAUDIBLE), (0.0021, CHANGED)):
        found = verify_plan(plan_in(folder), tampered(lock, "bell/10k-2V", decay_s=decay_s + by_s))
        assert statuses(found) == {status: {"bell/10k-2V"}, SAME: {*BELLS, *GONGS} - {"bell/10k-2V"}}
        assert not found.passes()
        assert found.passes(tolerance=True) == (status == INAUDIBLE)
    wider = verify_plan(plan_in(folder), tampered(lock, "bell/10k-2V", decay_s=decay_s + 1.0), limits=Limits(time=2000))
    assert wider.passes(tolerance=True)
    text = full_text(by_name(found)["bell/10k-2V"])
    assert "bell/10k-2V: changed" in text
    assert "decay -2.100 ms" in text
    assert "nothing that a lock file records differs" in text


def test_a_measurement_that_goes_is_beyond_every_limit(folder: Path) -> None:
    lock = tampered(lock_in(folder), "bell/10k-2V")
    hit = lock.hits["bell/10k-2V"]
    measured = {name: value for name, value in hit.measured.items() if name != "settled_hz"}
    lock = replace(lock, hits={**lock.hits, hit.name: replace(hit, measured=measured)})
    verdict = by_name(verify_plan(plan_in(folder), lock))[hit.name]
    assert verdict.status == CHANGED
    assert str(verdict.moves[0]) == "settled pitch appeared"


def test_code_and_libraries_are_causes_where_no_recipe_moved(folder: Path) -> None:
    lock = tampered(lock_in(folder), "bell/10k-2V")
    made, libraries = {**lock.made, "code": "0" * 16}, {**lock.libraries, "numpy": "0.9"}
    verdict = by_name(verify_plan(plan_in(folder), replace(lock, made=made, libraries=libraries)))["bell/10k-2V"]
    numpy = f"libraries: numpy 0.9 -> {np.__version__}"
    assert [str(cause) for cause in verdict.causes] == [
        "code: kickrender's own code differs, its engine version does not",
        numpy,
    ]


def test_other_code_or_libraries_are_not_trusted_with_the_gain(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A loudness that measures otherwise moves a gain, and with it bytes that a locked gain would hide."""
    lock = lock_in(folder)
    whole = render.measure

    def louder(*arguments: object) -> object:
        found = whole(*arguments)  # type: ignore[arg-type]
        return replace(found, momentary_lufs=found.momentary_lufs + 0.01)

    monkeypatch.setattr(render, "measure", louder)
    other = replace(lock, made={**lock.made, "code": "0" * 16})
    assert SAME not in statuses(verify_plan(plan_in(folder), other))
    monkeypatch.undo()
    assert statuses(verify_plan(plan_in(folder), other)) == {SAME: {*BELLS, *GONGS}}


def test_a_hit_that_fails_is_told_and_no_tolerance_lets_it_pass(folder: Path, edit: Edit) -> None:
    edit("bells.toml", "[level]\ntarget = \"-20 LUFS\"\ntogether = ['accent']".replace("'", '"'), "")
    lock_in(folder)
    edit("gong.toml", '"0.5V"', '"1mV"')
    found = verify_in(folder)
    assert statuses(found) == {SAME: set(BELLS), FAILED: set(GONGS)}
    assert "times full scale" in by_name(found)["gong/10k-2V"].failure
    assert not found.passes(tolerance=True)


def test_kept_renders_that_are_missing_or_damaged_are_all_told_with_their_line(folder: Path) -> None:
    lock = lock_in(folder, audio=True)
    before = (folder / "bells.lock").read_bytes()
    paths = {name: folder / "bells.audio" / audio_name(name, lock.hits[name].pcm, "pcm24") for name in lock.hits}
    paths["bell/10k-2V"].unlink()
    whole = paths["gong/10k-2V"].read_bytes()
    paths["gong/10k-2V"].write_bytes(whole[: len(whole) // 2])
    paths["gong/15k-5V"].write_bytes(paths["bell/15k-5V"].read_bytes())
    with pytest.raises(InputError) as caught:
        verify_in(folder)
    lines = {name: hit.line for name, hit in read_lock(folder / "bells.lock").hits.items()}
    one, two, three = (str(fault) for fault in caught.value.faults)
    assert one.startswith(f"{folder / 'bells.lock'}:{lines['bell/10k-2V']}, hit bell/10k-2V: kept render")
    assert "is missing" in one
    assert two.startswith(f"{folder / 'bells.lock'}:{lines['gong/10k-2V']}, hit gong/10k-2V: kept render")
    assert "does not hold the samples" in two or "cannot be read" in two
    assert "does not hold the samples" in three
    assert (folder / "bells.lock").read_bytes() == before
    for path in (folder / "bells.audio").rglob("*.flac"):
        path.unlink()
    for path in sorted((folder / "bells.audio").rglob("*"), reverse=True):
        path.rmdir()
    (folder / "bells.audio").rmdir()
    with pytest.raises(InputError, match=r"no folder .*bells\.audio"):
        verify_in(folder)


@pytest.mark.parametrize("sound_format", ["pcm16", "pcm24", "float32"])
def test_renders_are_kept_without_loss_in_every_format(sound_format: str, folder: Path, edit: Edit) -> None:
    edit("bells.toml", "[sound]", f'[sound]\nformat = "{sound_format}"')
    lock = lock_in(folder, audio=True)
    kept = sorted(path.suffix for path in (folder / "bells.audio").rglob("*.*"))
    assert kept == [".wav" if sound_format == "float32" else ".flac"] * len(lock.hits)
    assert verify_in(folder).passes()


def test_no_verdict_depends_on_workers(folder: Path, edit: Edit, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("kickrender.lock.work.FEWEST_PER_WORKER", 2)
    lock_in(folder, audio=True)
    edit("bell.toml", '"1u"', '"1.001u"')
    alone, two = (json.dumps(facts(verify_in(folder, jobs=jobs), False)) for jobs in (1, 2))
    assert alone == two


def test_groups_too_large_to_be_held_are_verified_too(
    folder: Path, edit: Edit, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("kickrender.lock.work.MOST_HITS", 1)
    monkeypatch.setattr("kickrender.pack.batches.MOST_HITS", 1)
    lock_in(folder)
    assert verify_in(folder).passes()
    edit("bell.toml", '"1u"', '"1.001u"')
    assert statuses(verify_in(folder)) == {RECIPE: set(BELLS), SAME: set(GONGS)}
