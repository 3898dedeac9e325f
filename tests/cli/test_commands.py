"""The commands, by what they print and write."""

import json
import re
import struct
from importlib import resources
from pathlib import Path

import jsonschema
import numpy as np
import pytest
import soundfile

import kickrender
from kickrender.sound.options import SoundOptions
from tests.cli.conftest import Run

SCHEMA = json.loads((resources.files("kickrender.pack") / "schemas" / "sidecar.schema.json").read_text())


def test_list_names_what_is_shipped(run: Run) -> None:
    found = json.loads(run("list", "--json").out)
    assert found == kickrender.shipped()
    assert {"bridged-t", "twin-t"} <= set(found["circuits"])
    assert "night-ferry" in found["packs"]
    plain = run("list").out
    for group, entries in found.items():
        assert f"{group}:\n" in plain
        for name, title in entries.items():
            assert re.search(rf"^  {name} +{re.escape(title)}$", plain, re.MULTILINE)


def test_show_tells_controls_parts_rest_and_poles(run: Run, folder: Path) -> None:
    ran = run("show", "voice.toml", "--set", "tone=1")
    assert ran.code == 0
    lines = [" ".join(line.split()) for line in ran.out.splitlines()]
    assert lines[0] == "Plain (voice)"
    assert "tone 1 0 1 P1" in lines
    assert "accent 3V 0V 5V gate" in lines
    assert "R1 resistor 47k a=gate, b=core" in lines
    assert "P1 pot 10k a=out, b=ground" in lines
    assert "core 0V" in lines
    assert any(re.fullmatch(r"[0-9.]+k?Hz 0.5 [0-9.]+m?s", line) for line in lines)


def test_show_as_json_is_what_the_function_says(run: Run, folder: Path) -> None:
    facts = json.loads(run("show", "voice.toml", "--json").out)
    assert facts == kickrender.describe("voice.toml")
    # R1 with C1, and P1 with C2: the two corners of two lags, pulled apart by their coupling.
    corners = [pole["frequency_hz"] for pole in facts["poles"]]
    r1, c1, p1, c2 = 47e3, 18e-9, 2001.0, 100e-9
    matrix = np.array([[-(1 / r1 + 1 / p1) / c1, 1 / (p1 * c1)], [1 / (p1 * c2), -1 / (p1 * c2)]])
    assert corners == pytest.approx(sorted(np.abs(np.linalg.eigvals(matrix)) / (2 * np.pi)), rel=1e-6)


def test_render_writes_a_sound_and_its_sidecar(run: Run, folder: Path) -> None:
    ran = run("render", "voice.toml", "--out", "hit.wav", "--set", "accent=5V", "--format", "pcm16", "--rate", "44.1k")
    assert (ran.code, ran.err) == (0, "")
    assert ran.out.startswith("hit.wav: 0.0")
    info = soundfile.info("hit.wav")
    assert (info.samplerate, info.channels, info.subtype) == (44100, 1, "PCM_16")
    facts = json.loads(Path("hit.json").read_bytes())
    jsonschema.Draft202012Validator(SCHEMA).validate(facts)
    assert facts["settings"]["accent"] == {"value": 5.0, "unit": "V"}
    assert sorted(path.name for path in folder.iterdir()) == ["hit.json", "hit.wav", "pack.toml", "voice.toml"]


def test_render_as_json_prints_the_sidecar(run: Run, folder: Path) -> None:
    ran = run("render", "voice.toml", "--out", "hit.wav", "--json")
    assert json.loads(ran.out) == json.loads(Path("hit.json").read_bytes())


def test_the_same_in_python_is_the_same_bytes(run: Run, folder: Path) -> None:
    run("render", "voice.toml", "--out", "hit.wav", "--set", "tone=0.7", "--level", "-30 LUFS")
    sound = kickrender.load("voice.toml").render(tone=0.7, level="-30 LUFS")
    sound.write(folder / "again.wav")
    assert Path("again.wav").read_bytes() == Path("hit.wav").read_bytes()
    assert Path("again.json").read_bytes() == Path("hit.json").read_bytes()
    assert sound.samples.dtype == np.float64
    assert sound.samples.shape == (sound.facts["pcm"]["samples"],)
    assert sound.rate == 48000
    assert sound.facts["measurements"]["momentary_lufs"] == pytest.approx(-30.0, abs=0.001)


def test_raw_is_volts_over_full_scale_from_the_rest_state(run: Run, folder: Path) -> None:
    circuit = Path("voice.toml").read_text().replace('net = "out"', 'net = "out"\nfull_scale = "2V"')
    Path("voice.toml").write_text(circuit.replace('rest = "0V"', 'rest = "1V"'))
    run("render", "voice.toml", "--out", "raw.wav", "--raw", "--length", "10ms", "--format", "float32",
        "--oversample", "1", "--probe", "core", "--level", "-30 LUFS")  # fmt: skip
    samples, rate = soundfile.read("raw.wav")
    assert samples.shape == (480, 2)
    assert samples[0].tolist() == [0.0, 0.5]  # out is behind a capacitor; core rests at the gate's 1 V
    # Once the strike is over and its 4 ms lie behind, core falls towards 1 V / 2 V.
    assert samples[191, 1] > samples[-1, 1] > 0.5
    assert samples[-1, 0] < 0.0  # not faded
    facts = json.loads(Path("raw.json").read_bytes())
    assert facts["pcm"]["channels"] == ["out", "core"]
    assert facts["level"] is None
    assert facts["gain_db"] == 0.0


def test_probed_nets_as_a_table(run: Run, folder: Path) -> None:
    loud = ("--set", "accent=5V", "--level", "-30 LUFS")
    ran = run("render", "voice.toml", "--out", "hit.wav", *loud, "--probe", "core", "--probe", "out",
              "--csv", "nets.csv")  # fmt: skip
    assert (ran.code, ran.err) == (0, "")
    head, *lines = Path("nets.csv").read_text().splitlines()
    assert head == "time_s,core_v,out_v"
    table = np.array([[float(cell) for cell in line.split(",")] for line in lines])
    info = soundfile.info("hit.wav")
    assert (info.channels, info.frames) == (1, len(table))
    assert np.array_equal(table[:, 0], np.arange(len(table)) / 48000)
    # the table is what channels hold before the gain, in volts and to the last digit
    loaded = kickrender.load("voice.toml")
    assert np.array_equal(table[:, 1], loaded.render(accent=5.0, nets=["core"]).nets["core"])
    unfaded = len(table) - 240
    plain = loaded.render(accent=5.0, probes=["core"], options=SoundOptions(format="float32"))
    assert np.array_equal(table[:unfaded, 1], plain.probes["core"][:unfaded])
    assert np.array_equal(table[:unfaded, 2], plain.samples[:unfaded])
    assert table[-1, 1] != 0.0


@pytest.mark.parametrize("rate", [22050, 44100, 96000, 192000])
@pytest.mark.parametrize(("sample_format", "width"), [("pcm16", 2), ("pcm24", 3), ("float32", 4)])
def test_every_format_at_every_rate(sample_format: str, width: int, rate: int, run: Run, folder: Path) -> None:
    ran = run("render", "voice.toml", "--out", "h.wav", "--format", sample_format, "--rate", rate, "--length", "20ms")
    assert ran.code == 0
    data = Path("h.wav").read_bytes()
    assert struct.unpack("<I", data[24:28]) == (rate,)
    info = soundfile.info("h.wav")
    assert (info.samplerate, info.frames) == (rate, round(0.02 * rate))
    assert len(data) >= info.frames * width


def test_what_does_not_fit_is_told_not_clipped(run: Run, folder: Path) -> None:
    Path("voice.toml").write_text(
        Path("voice.toml").read_text().replace('net = "out"', 'net = "out"\nfull_scale = "1mV"')
    )
    ran = run("render", "voice.toml", "--out", "h.wav")
    assert ran.code == 2
    assert re.search(
        r"pcm24: the sound reaches [0-9.]+ times full scale .*; allowed: at most 1; lower the level", ran.err
    )
    assert not Path("h.wav").exists()
    assert run("render", "voice.toml", "--out", "h.wav", "--format", "float32").code == 0


def test_a_note_goes_to_stderr(run: Run, folder: Path) -> None:
    Path("voice.toml").write_text(
        Path("voice.toml").read_text().replace('rest = "0V"', 'rest = "1V"').replace('"out"\n', '"core"\n')
    )
    ran = run("render", "voice.toml", "--out", "h.wav", "--length", "20ms", "--format", "float32", "--json")
    assert ran.code == 0
    assert ran.err == "note: the output rests at 1 V, so the sound starts and ends off zero\n"
    assert json.loads(ran.out)["notes"] == ["the output rests at 1 V, so the sound starts and ends off zero"]


def test_a_sidecar_of_somebody_else_stays(run: Run, folder: Path) -> None:
    Path("hit.json").write_text("[1]")
    ran = run("render", "voice.toml", "--out", "hit.wav")
    assert ran.code == 1
    assert (
        ran.err == "kickrender: hit.json: exists and was not written by kickrender; move it, or choose another name\n"
    )
    assert Path("hit.json").read_text() == "[1]"
    assert not Path("hit.wav").exists()


def test_a_missing_folder_is_told(run: Run, folder: Path) -> None:
    ran = run("render", "voice.toml", "--out", "nowhere/hit.wav")
    assert (ran.code, ran.err) == (1, "kickrender: nowhere/hit.wav: No such file or directory\n")


def test_pack_fills_a_folder(run: Run, folder: Path) -> None:
    ran = run("pack", "pack.toml", "--out", "out", "--jobs", "1")
    assert (ran.code, ran.out, ran.err) == (0, "out: 6 hits, 6 of them rendered now\n", "")
    assert len(list(Path("out").rglob("*.wav"))) == 6
    ran = run("pack", "pack.toml", "--out", "out", "--jobs", "1")
    assert ran.out == "out: 6 hits, 0 of them rendered now\n"
    assert ran.err == "6 hits were there already\n"


def test_dry_run_names_the_first_hits_and_writes_nothing(run: Run, folder: Path) -> None:
    ran = run("pack", "pack.toml", "--dry-run", "--out", "out")
    lines = ran.out.splitlines()
    assert re.fullmatch(r"Plain pack: 6 hits, about \d+ s, [\d.]+ kB", lines[0])
    assert lines[1:] == [
        *(f"  {tone}/{accent}.wav" for tone in ("0.1", "0.5") for accent in ("1V", "3V", "5V")),
    ]
    assert not Path("out").exists()


def test_a_pack_with_a_silent_hit_renders_the_others_and_fails(run: Run, folder: Path) -> None:
    text = Path("pack.toml").read_text().replace('together = ["accent"]', "").replace('from = "1V"', 'from = "0V"')
    Path("pack.toml").write_text(text)
    ran = run("pack", "pack.toml", "--out", "out", "--jobs", "1")
    assert ran.code == 1
    assert ran.out == "out: 4 hits, 4 of them rendered now, 2 near duplicates\n"
    assert [line for line in ran.err.splitlines() if line.startswith("kickrender")] == [
        f"kickrender: {tone}/0V: no momentary level: the sound is silent" for tone in ("0.1", "0.5")
    ]


def test_near_duplicates_are_told_and_left_out(run: Run, folder: Path) -> None:
    """A linear circuit struck harder sounds the same at one loudness."""
    Path("pack.toml").write_text(Path("pack.toml").read_text().replace('together = ["accent"]', ""))
    ran = run("pack", "pack.toml", "--out", "out", "--jobs", "1")
    assert ran.out == "out: 6 hits, 6 of them rendered now, 4 near duplicates\n"
    *told, advice = ran.err.splitlines()
    assert re.fullmatch(r"note: 0\.1/3V is a near duplicate of 0\.1/1V: they null to -\d+\.\d dB", told[0])
    assert (len(told), advice) == (4, "note: --drop-duplicates leaves near duplicates out")
    ran = run("pack", "pack.toml", "--out", "out", "--jobs", "1", "--drop-duplicates")
    assert ran.out == "out: 2 hits, 0 of them rendered now, 4 near duplicates left out\n"
    assert "note: left out: 0.1/3V is a near duplicate of 0.1/1V" in ran.err
    assert sorted(path.name for path in Path("out").rglob("*.wav")) == ["1V.wav", "1V.wav"]


@pytest.mark.parametrize(("name", "hits"), [("night-ferry", 48), ("car-deck", 30)])
def test_a_shipped_pack_plans(name: str, hits: int, run: Run) -> None:
    lines = run("pack", name, "--dry-run").out.splitlines()
    count = int(re.findall(r": (\d+) hits, about", lines[0])[0])
    assert count >= hits
    assert lines[-1] == f"  and {count - 20} more"


def test_a_name_in_flac_asks_for_flac(run: Run, folder: Path) -> None:
    ran = run("render", "voice.toml", "--out", "h.flac", "--level", "-20 LUFS")
    assert ran.code == 0
    assert ran.out.startswith("h.flac: ")
    info = soundfile.info("h.flac")
    assert (info.format, info.subtype) == ("FLAC", "PCM_24")
    assert json.loads(Path("h.json").read_bytes())["sound"]["format"] == "flac24"
    assert run("render", "voice.toml", "--out", "h.flac", "--format", "flac16", "--level", "-20 LUFS").code == 0
    assert soundfile.info("h.flac").subtype == "PCM_16"
    many = [word for _ in range(8) for word in ("--probe", "core")]
    ran = run("render", "voice.toml", "--out", "many.flac", *many)
    assert (ran.code, ran.err) == (
        2,
        "kickrender: --probe: 9 channels in a FLAC file; allowed: at most 8, or a WAV format\n",
    )
    assert not Path("many.flac").exists()
