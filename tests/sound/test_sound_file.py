"""Files of every format: which writer a format takes, FLAC with the samples of the WAV, names, what is damaged."""

from __future__ import annotations

import os
from pathlib import Path

import numpy as np
import pytest
import soundfile

from kickrender.errors import InputError, WriteError
from kickrender.sound.finish import Pcm, quantise
from kickrender.sound.loaded import load
from kickrender.sound.options import FORMATS, SAMPLES, SoundOptions, read_options
from kickrender.sound.sound_file import check_channels, check_sound_name, pcm_digest_of_file, write_sound
from kickrender.sound.wav import pcm_sha256

RATE_HZ = 48_000
PAIRS = [("pcm16", "flac16"), ("pcm24", "flac24")]


def pcm_of(sample_format: str, shape: int | tuple[int, int] = 1001) -> Pcm:
    noise = np.random.default_rng(1).uniform(-1.0, 1.0, shape)
    noise.ravel()[0], noise.ravel()[-1] = 1.0, -1.0  # both ends of what whole numbers hold
    return quantise(noise, sample_format)


@pytest.mark.parametrize(("plain", "packed"), PAIRS)
@pytest.mark.parametrize("shape", [1, 1001, (1001, 2), (333, 8)])
def test_flac_holds_the_samples_of_the_wav_of_its_depth(
    tmp_path: Path, plain: str, packed: str, shape: int | tuple[int, int]
) -> None:
    pcm = pcm_of(plain, shape)
    write_sound(tmp_path / "a.wav", pcm, RATE_HZ, plain)
    write_sound(tmp_path / "a.flac", pcm, RATE_HZ, packed)
    wav, flac = (soundfile.read(tmp_path / name, dtype="int32")[0] for name in ("a.wav", "a.flac"))
    np.testing.assert_array_equal(flac, wav)
    assert pcm_digest_of_file(tmp_path / "a.flac") == pcm_digest_of_file(tmp_path / "a.wav") == pcm_sha256(pcm, plain)


@pytest.mark.parametrize("rate_hz", [22_050, 44_100, 48_001, 96_000, 192_000])
def test_flac_at_every_rate_we_offer(tmp_path: Path, rate_hz: int) -> None:
    write_sound(tmp_path / "a.flac", pcm_of("pcm24"), rate_hz, "flac24")
    info = soundfile.info(tmp_path / "a.flac")
    assert (info.samplerate, info.frames, info.subtype) == (rate_hz, 1001, "PCM_24")


def test_a_rate_that_flac_cannot_tell_is_refused() -> None:
    assert read_options({"rate": 96_001, "format": "pcm24"}, str).rate_hz == 96_001
    assert read_options({"rate": 48_001, "format": "flac24"}, str).rate_hz == 48_001
    with pytest.raises(InputError, match="rate: a rate of 96001 Hz in a FLAC file; allowed: a multiple of 10 above"):
        read_options({"rate": 96_001, "format": "flac24"}, str)


def test_a_flac_file_is_the_same_at_any_time(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    for name, second in (("a.flac", 0), ("b.flac", 4_000_000_000)):
        monkeypatch.setattr("time.time", lambda second=second: float(second))
        write_sound(tmp_path / name, pcm_of("pcm16"), RATE_HZ, "flac16", {"title": "Ramp"})
    assert (tmp_path / "a.flac").read_bytes() == (tmp_path / "b.flac").read_bytes()


@pytest.mark.parametrize("file_format", FORMATS)
def test_texts_stand_in_every_format(tmp_path: Path, file_format: str) -> None:
    path = tmp_path / "a"
    texts = {"title": "Bow ramp", "artist": "H\u00e4rbour", "genre": "Foley", "comment": "", "license": "CC0-1.0"}
    write_sound(path, pcm_of(SAMPLES[file_format]), RATE_HZ, file_format, texts, [(b"junk", b"odd")])
    with soundfile.SoundFile(path) as file:
        assert (file.title, file.artist, file.genre, file.comment) == ("Bow ramp", "H\u00e4rbour", "Foley", "")
        assert file.license == ("CC0-1.0" if file.format == "FLAC" else "")  # LIST/INFO has no such text


def test_flac_files_that_are_not_whole_have_no_digest(tmp_path: Path) -> None:
    path = tmp_path / "a.flac"
    assert pcm_digest_of_file(path) is None
    assert pcm_digest_of_file(tmp_path) is None
    write_sound(path, pcm_of("pcm24"), RATE_HZ, "flac24")
    content = path.read_bytes()
    whole = pcm_digest_of_file(path)
    assert whole is not None
    for end in (0, 4, 41, 60, len(content) // 2, len(content) - 1):
        path.write_bytes(content[:end])
        assert pcm_digest_of_file(path) is None
    flipped = bytearray(content)
    flipped[len(content) // 2] ^= 0xFF
    path.write_bytes(flipped)
    assert pcm_digest_of_file(path) != whole
    write_sound(path, pcm_of("pcm24"), RATE_HZ, "pcm24")  # a WAV by another name
    assert pcm_digest_of_file(path) is None


@pytest.mark.parametrize("file_format", ["flac16", "pcm16"])
def test_a_folder_that_cannot_be_written_is_told(tmp_path: Path, file_format: str) -> None:
    with pytest.raises(WriteError, match="No such file or directory"):
        write_sound(tmp_path / "no" / "a", pcm_of("pcm16"), RATE_HZ, file_format)
    assert os.listdir(tmp_path) == []


@pytest.mark.parametrize(
    ("name", "file_format"), [("a.wav", "pcm16"), ("b/C.WAV", "float32"), ("a.b.flac", "flac16"), ("A.FLAC", "flac24")]
)
def test_names_that_end_as_their_format_does(name: str, file_format: str) -> None:
    check_sound_name(name, file_format)


@pytest.mark.parametrize("name", ["a", "a.flac", "a.wav.txt", "wav"])
def test_other_names_are_refused(name: str) -> None:
    allowed = r"a file name that ends in \.wav \(pcm16, pcm24, float32\) or \.flac \(flac16, flac24\)"
    with pytest.raises(InputError, match=f"--out: found '{name}' for pcm24; allowed: {allowed}"):
        check_sound_name(name, "pcm24")


def test_more_channels_than_flac_has_are_refused(tmp_path: Path) -> None:
    check_channels(9, "pcm24", "--probe")
    with pytest.raises(InputError, match="--probe: 9 channels in a FLAC file; allowed: at most 8, or a WAV format"):
        check_channels(9, "flac24", "--probe")
    with pytest.raises(InputError, match="9 channels in a FLAC file"):
        write_sound(tmp_path / "a.flac", pcm_of("pcm16", (10, 9)), RATE_HZ, "flac16")
    assert os.listdir(tmp_path) == []


def test_a_sound_is_written_under_a_name_of_its_format_only(tmp_path: Path) -> None:
    sound = load("bridged-t").render(options=SoundOptions(format="flac24", length_s=0.05))
    with pytest.raises(InputError, match="path: found '.*a.wav' for flac24"):
        sound.write(tmp_path / "a.wav")
    assert os.listdir(tmp_path) == []
    sound.write(tmp_path / "a.flac")
    assert pcm_digest_of_file(tmp_path / "a.flac") == sound.facts["pcm"]["sha256"]
    plain = load("bridged-t").render(options=SoundOptions(format="pcm24", length_s=0.05))
    assert plain.facts["pcm"] == sound.facts["pcm"]
    assert plain.facts["recipe_digest"] == sound.facts["recipe_digest"]
