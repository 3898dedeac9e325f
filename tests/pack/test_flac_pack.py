"""A pack in FLAC: the samples of the same pack in WAV, resumed and damaged alike, and either made over the other."""

import json
from pathlib import Path
from typing import Any

import pytest
import soundfile

from kickrender.pack.estimate import FURTHER_BYTES, estimate
from kickrender.pack.plan import plan_pack
from kickrender.pack.read import read_pack_text
from kickrender.pack.records import Plan
from kickrender.pack.run import render_plan
from tests.pack.folders import contents, validate
from tests.pack.texts import PACK

TAGS = '\n[tags]\nartist = "Harbour"\ngenre = "Foley"\ndate = 2026-03-01\n'


def plan_of(folder: Path, sound_format: str) -> Plan:
    text = PACK.replace('"pcm16"', f'"{sound_format}"') + TAGS
    return plan_pack(read_pack_text(text, "p.toml", folder))


def manifest(out: Path) -> dict[str, Any]:
    found: dict[str, Any] = json.loads((out / "pack.json").read_bytes())
    return found


def digests(out: Path) -> dict[str, str]:
    return {hit["name"]: hit["pcm_sha256"] for hit in manifest(out)["hits"]}


@pytest.mark.parametrize("depth", ["16", "24"])
def test_the_samples_are_those_of_the_pack_in_wav(folder: Path, depth: str) -> None:
    """With the dither of 16 bits too, which comes from a seed of the recipe."""
    out, wav = folder / "flac", folder / "wav"
    plan = plan_of(folder, f"flac{depth}")
    assert render_plan(plan, out).failed == {}
    render_plan(plan_of(folder, f"pcm{depth}"), wav)
    assert digests(out) == digests(wav)
    for hit in manifest(out)["hits"]:
        assert hit["file"] == f"{hit['name']}.flac"
        a, b = (soundfile.read(path, dtype="int32")[0] for path in (out / hit["file"], wav / f"{hit['name']}.wav"))
        assert (a == b).all()
        facts = json.loads((out / hit["sidecar"]).read_bytes())
        assert facts["sound"]["format"] == f"flac{depth}"
        validate(facts, "sidecar.schema.json")
    validate(manifest(out), "pack.schema.json")
    assert not list(out.rglob("*.wav"))
    with soundfile.SoundFile(out / "0.1/3V.flac") as file:
        assert (file.title, file.album, file.artist) == ("3V", "Plain pack", "Harbour")
        assert (file.genre, file.date) == ("Foley", "2026-03-01")


def test_a_second_run_keeps_whole_files_and_makes_damaged_ones_again(folder: Path) -> None:
    plan, out = plan_of(folder, "flac16"), folder / "out"
    render_plan(plan, out, jobs=1)
    wanted = contents(out)
    assert render_plan(plan, out).rendered == ()
    damaged = bytearray((out / "0.1/3V.flac").read_bytes())
    damaged[len(damaged) // 2] ^= 0xFF
    (out / "0.1/3V.flac").write_bytes(damaged)
    (out / "0.5/1V.flac").write_bytes(wanted["0.5/1V.flac"][:-1])
    assert len(render_plan(plan, out).rendered) == 6  # both groups, which share their gains
    assert contents(out) == wanted


def test_another_format_is_made_over_the_first_whose_files_are_named_as_left_over(folder: Path) -> None:
    out = folder / "out"
    render_plan(plan_of(folder, "pcm24"), out)
    result = render_plan(plan_of(folder, "flac24"), out)
    assert len(result.rendered) == 6
    assert len(result.stale) == 6
    assert result.stale[0] == "0.1/1V.wav"
    back = render_plan(plan_of(folder, "pcm24"), out)
    assert len(back.rendered) == 6  # the sidecars spoke of the others
    assert back.stale[0] == "0.1/1V.flac"
    assert manifest(out)["sound"]["format"] == "pcm24"


def test_room_is_foretold_of_packed_files(tmp_path: Path) -> None:
    text = 'title = "Two"\ncircuit = "bridged-t"\n[axes]\npitch = [0.1, 0.5]\n[files]\nname = "{pitch}"\n'
    plan = plan_pack(read_pack_text(f'{text}[sound]\nformat = "flac24"\n'))
    wav = plan_pack(read_pack_text(text))
    render_plan(plan, tmp_path)
    files = [tmp_path / file for hit in manifest(tmp_path)["hits"] for file in (hit["file"], hit["sidecar"])]
    taken = sum(-(-path.stat().st_size // 4096) * 4096 + FURTHER_BYTES / 2 for path in files)
    told = estimate(plan, plan.hits, 1).bytes
    assert told == pytest.approx(taken, rel=0.1)
    assert told < estimate(wav, wav.hits, 1).bytes / 2
