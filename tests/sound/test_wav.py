"""WAV files, byte by byte, by a parser of the published layout that shares nothing with the writer."""

from __future__ import annotations

import hashlib
import os
import struct

import numpy as np
import pytest

from kickrender.errors import WriteError
from kickrender.sound import wav
from kickrender.sound.wav import FORMATS, pcm_bytes, pcm_digest_of_wav, pcm_sha256, write_wav


def ramp(file_format: str, count: int = 3, channels: int = 1) -> np.ndarray:
    values = np.arange(count * channels) - 1
    pcm = (values / 4 if file_format == "float32" else values).astype(FORMATS[file_format][0])
    return pcm if channels == 1 else pcm.reshape(count, channels)


def parsed(content: bytes) -> list[tuple[bytes, bytes]]:
    """The chunks of a RIFF/WAVE file; fails on any size, pad byte or total that does not fit."""
    riff, size, kind = struct.unpack("<4sI4s", content[:12])
    assert (riff, kind, size) == (b"RIFF", b"WAVE", len(content) - 8)
    chunks, place = [], 12
    while place < len(content):
        identifier, length = struct.unpack("<4sI", content[place : place + 8])
        chunks.append((identifier, content[place + 8 : place + 8 + length]))
        place += 8 + length
        if length % 2:
            assert content[place] == 0
            place += 1
    assert place == len(content)
    return chunks


def test_24_bit_mono_is_the_published_layout(tmp_path):
    """Three frames: data of 9 bytes, a pad byte that only the enclosing size counts, 54 bytes in all."""
    write_wav(tmp_path / "a.wav", ramp("pcm24"), 48_000, "pcm24")
    assert (tmp_path / "a.wav").read_bytes() == (
        b"RIFF" + struct.pack("<I", 46) + b"WAVE"
        b"fmt " + struct.pack("<IHHIIHH", 16, 1, 1, 48_000, 144_000, 3, 24) +
        b"data" + struct.pack("<I", 9) + b"\xff\xff\xff\x00\x00\x00\x01\x00\x00" + b"\x00"
    )  # fmt: skip


@pytest.mark.parametrize("file_format", FORMATS)
@pytest.mark.parametrize("channels", [1, 2, 3])
@pytest.mark.parametrize("rate_hz", [22_050, 44_100, 192_000])
@pytest.mark.parametrize("count", [0, 1, 3, 100])
def test_fields(tmp_path, file_format, channels, rate_hz, count):
    pcm = ramp(file_format, count, channels)
    write_wav(tmp_path / "a.wav", pcm, rate_hz, file_format)
    chunks = parsed((tmp_path / "a.wav").read_bytes())
    width = {"pcm16": 2, "pcm24": 3, "float32": 4}[file_format]
    frame = width * channels
    fields = struct.unpack("<HHIIHH", chunks[0][1][:16])
    assert fields == (3 if file_format == "float32" else 1, channels, rate_hz, rate_hz * frame, frame, 8 * width)
    names = [name for name, _ in chunks]
    if file_format == "float32":
        assert names == [b"fmt ", b"fact", b"data"]
        assert chunks[0][1][16:] == b"\0\0"
        assert chunks[1][1] == struct.pack("<I", count)
    else:
        assert names == [b"fmt ", b"data"]
        assert len(chunks[0][1]) == 16
    whole = {"pcm16": "<i2", "float32": "<f4"}.get(file_format)
    data = chunks[-1][1]
    if whole:
        assert data == pcm.astype(whole).tobytes()
    else:
        assert data == b"".join(int(value).to_bytes(3, "little", signed=True) for value in pcm.ravel())


def test_further_chunks_lie_before_the_samples_and_are_padded(tmp_path):
    extra = [(b"odd ", b"12345"), (b"even", b"1234"), (b"none", b"")]
    write_wav(tmp_path / "a.wav", ramp("pcm24"), 48_000, "pcm24", extra)
    chunks = parsed((tmp_path / "a.wav").read_bytes())
    assert [name for name, _ in chunks] == [b"fmt ", b"odd ", b"even", b"none", b"data"]
    assert chunks[1:4] == extra


@pytest.mark.parametrize("identifier", [b"abc", b"abcde", b"ab\xffd"])
def test_bad_identifiers_are_refused(tmp_path, identifier):
    with pytest.raises(ValueError, match="four ASCII characters"):
        write_wav(tmp_path / "a.wav", ramp("pcm16"), 48_000, "pcm16", [(identifier, b"")])
    assert os.listdir(tmp_path) == []


@pytest.mark.parametrize("file_format", FORMATS)
def test_a_file_is_the_same_at_any_time(tmp_path, file_format, monkeypatch):
    for name, second in (("a.wav", 0), ("b.wav", 4_000_000_000)):
        monkeypatch.setattr("time.time", lambda second=second: float(second))
        write_wav(tmp_path / name, ramp(file_format, 99), 48_000, file_format)
    assert (tmp_path / "a.wav").read_bytes() == (tmp_path / "b.wav").read_bytes()


@pytest.mark.parametrize("file_format", FORMATS)
def test_samples_of_another_type_are_refused(file_format):
    with pytest.raises(ValueError, match=f"{file_format} takes samples of "):
        pcm_bytes(np.zeros(3), file_format)  # type: ignore[arg-type]


def test_more_than_a_riff_file_holds_is_refused(tmp_path, monkeypatch):
    monkeypatch.setattr(wav, "LARGEST_FILE", 100)
    with pytest.raises(WriteError, match="at most 4 GiB"):
        write_wav(tmp_path / "a.wav", ramp("pcm16", 100), 48_000, "pcm16")
    assert os.listdir(tmp_path) == []


@pytest.mark.parametrize("file_format", FORMATS)
def test_digest_is_that_of_the_samples_alone(tmp_path, file_format):
    pcm = ramp(file_format, 101)
    write_wav(tmp_path / "a.wav", pcm, 48_000, file_format)
    write_wav(tmp_path / "b.wav", pcm, 96_000, file_format, [(b"note", b"hello")])
    expected = hashlib.sha256(parsed((tmp_path / "a.wav").read_bytes())[-1][1]).hexdigest()
    assert pcm_sha256(pcm, file_format) == expected
    assert pcm_digest_of_wav(tmp_path / "a.wav") == pcm_digest_of_wav(tmp_path / "b.wav") == expected


def test_files_that_are_not_whole_have_no_digest(tmp_path):
    path = tmp_path / "a.wav"
    assert pcm_digest_of_wav(path) is None
    write_wav(path, ramp("pcm24", 100), 48_000, "pcm24", [(b"note", b"hello")])
    content = path.read_bytes()
    assert pcm_digest_of_wav(path) is not None
    for end in (0, 4, 11, 12, 30, 60, len(content) - 1):
        path.write_bytes(content[:end])
        assert pcm_digest_of_wav(path) is None
    path.write_bytes(content + b"\0")
    assert pcm_digest_of_wav(path) is None
    # A whole RIFF file, by its own account, whose samples are not all there.
    path.write_bytes(b"RIFF" + struct.pack("<I", 14) + b"WAVEdata" + struct.pack("<I", 4) + b"ab")
    assert pcm_digest_of_wav(path) is None
    assert pcm_digest_of_wav(tmp_path) is None
