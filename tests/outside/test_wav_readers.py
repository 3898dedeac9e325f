"""WAV files opened by readers not made here: libsndfile, scipy and the standard library."""

from __future__ import annotations

import struct
import wave
from pathlib import Path

import numpy as np
import pytest
import soundfile
from scipy.io import wavfile

from kickrender.sound.finish import quantise
from kickrender.sound.wav import write_wav

FORMATS = ["pcm16", "pcm24", "float32"]
RATES_HZ = [22_050, 44_100, 48_000, 96_000, 192_000]
COUNT = 1001  # odd: 24-bit mono then ends in a pad byte
INFO = b"INFO" + b"INAM" + struct.pack("<I", 5) + b"kick\0" + b"\0"


def sound(channels: int = 1) -> np.ndarray:
    values = np.random.default_rng(1).uniform(-1, 1, (COUNT, channels))
    return values[:, 0] if channels == 1 else values


@pytest.fixture(params=[(), ((b"LIST", INFO), (b"junk", b"odd"))], ids=["plain", "with chunks"])
def chunks(request: pytest.FixtureRequest) -> tuple[tuple[bytes, bytes], ...]:
    """IBM and Microsoft, Multimedia Programming Interface and Data Specifications 1.0 (1991): LIST INFO; any other."""
    return request.param


def written(folder: Path, file_format: str, rate_hz: int, channels: int, chunks=()) -> tuple[Path, np.ndarray]:
    pcm = quantise(sound(channels), file_format)
    write_wav(folder / "a.wav", pcm, rate_hz, file_format, chunks)
    return folder / "a.wav", pcm


@pytest.mark.parametrize("file_format", FORMATS)
@pytest.mark.parametrize("rate_hz", RATES_HZ)
@pytest.mark.parametrize("channels", [1, 2])
def test_libsndfile(tmp_path, file_format, rate_hz, channels, chunks):
    """python-soundfile (libsndfile): format, rate, and every sample bit for bit."""
    path, pcm = written(tmp_path, file_format, rate_hz, channels, chunks)
    info = soundfile.info(path, verbose=True)
    subtype = {"pcm16": "PCM_16", "pcm24": "PCM_24", "float32": "FLOAT"}[file_format]
    assert (info.format, info.subtype, info.samplerate) == ("WAV", subtype, rate_hz)
    assert (info.channels, info.frames) == (channels, COUNT)
    kind = "float32" if file_format == "float32" else "int32"
    shift = {"pcm16": 16, "pcm24": 8, "float32": 0}[file_format]
    found = soundfile.read(path, dtype=kind)[0]
    np.testing.assert_array_equal(found, pcm if kind == "float32" else pcm.astype(np.int32) << shift)


@pytest.mark.parametrize("file_format", FORMATS)
@pytest.mark.parametrize("channels", [1, 2])
def test_libsndfile_reads_back_what_was_meant(tmp_path, file_format, channels):
    """As floats, within half a step of the sound."""
    path, _ = written(tmp_path, file_format, 48_000, channels)
    step = {"pcm16": 2.0**-15, "pcm24": 2.0**-23, "float32": 2.0**-23}[file_format]
    np.testing.assert_allclose(soundfile.read(path)[0], sound(channels), rtol=0, atol=step / 2 * 1.001)


def test_libsndfile_sees_the_title(tmp_path):
    path, _ = written(tmp_path, "pcm24", 48_000, 1, ((b"LIST", INFO),))
    with soundfile.SoundFile(path) as file:
        assert file.title == "kick"


@pytest.mark.parametrize("file_format", FORMATS)
@pytest.mark.parametrize("rate_hz", RATES_HZ)
@pytest.mark.parametrize("channels", [1, 2])
def test_scipy(tmp_path, file_format, rate_hz, channels):
    """scipy.io.wavfile, which gives 24 bits in the upper bytes of 32; it warns of chunks it does not know."""
    path, pcm = written(tmp_path, file_format, rate_hz, channels, ((b"LIST", INFO),))
    rate, found = wavfile.read(path)
    assert rate == rate_hz
    np.testing.assert_array_equal(found, pcm << 8 if file_format == "pcm24" else pcm)


@pytest.mark.parametrize(("file_format", "width"), [("pcm16", 2), ("pcm24", 3)])
@pytest.mark.parametrize("rate_hz", RATES_HZ)
@pytest.mark.parametrize("channels", [1, 2])
def test_standard_library(tmp_path, file_format, width, rate_hz, channels, chunks):
    """CPython's wave module, which takes whole numbers only."""
    path, pcm = written(tmp_path, file_format, rate_hz, channels, chunks)
    with wave.open(str(path)) as file:
        assert file.getparams()[:4] == (channels, width, rate_hz, COUNT)
        frames = file.readframes(COUNT)
    expected = b"".join(int(value).to_bytes(width, "little", signed=True) for value in pcm.ravel())
    assert frames == expected
