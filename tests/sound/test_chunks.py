"""Chunks against the byte layouts and worked values of their specifications."""

import struct

import numpy as np
import pytest
import soundfile

from kickrender.sound.chunks import bext_chunk, info_chunk, inst_chunk, midi_note, smpl_chunk
from kickrender.sound.wav import write_wav


@pytest.mark.parametrize(
    ("frequency_hz", "smpl", "inst"),
    [
        (55.0, (33, 0x00000000), (33, 0)),
        (50.0, (31, 0x5996D42C), (31, -35)),
        (41.2, (27, 0xFFA12514), (28, 0)),
        (440.0, (69, 0), (69, 0)),
    ],
)
def test_root_note(frequency_hz, smpl, inst):
    """MIDI tuning, A4 = 440 Hz (ISO 16): f = 440 2^((n - 69)/12); smpl fractions are above the note, inst's below."""
    note = midi_note(frequency_hz)
    fields = struct.unpack("<9I", smpl_chunk(note, 48_000)[1])
    assert fields[3] == smpl[0]
    assert fields[4] == pytest.approx(smpl[1], abs=2)
    nearest, cents = struct.unpack_from("<Bb", inst_chunk(note)[1])
    assert (nearest, cents) == inst


@pytest.mark.parametrize(("rate_hz", "period_ns"), [(44_100, 22_675), (48_000, 20_833), (96_000, 10_416)])
def test_sample_period_is_rounded_down(rate_hz, period_ns):
    """Microsoft, New Multimedia Data Types (1994): its own example is 22675 ns at 44.1 kHz."""
    assert struct.unpack("<9I", smpl_chunk(60.0, rate_hz)[1])[2] == period_ns


def test_a_note_a_hair_below_the_next_carries_over():
    assert struct.unpack("<9I", smpl_chunk(60.0 - 1e-12, 48_000)[1])[3:5] == (60, 0)


def test_inst_ranges():
    assert inst_chunk(36.0, velocities=(43, 85), keys=(30, 40))[1] == bytes([36, 0, 0, 30, 40, 43, 85])


@pytest.mark.parametrize(
    ("value", "stored"),
    [(-22.644, -2264), (-22.645, -2265), (-22.646, -2265), (12.764, 1276), (12.765, 1277), (12.766, 1277)],
)
def test_bext_loudness_rounding(value, stored):
    """EBU Tech 3285 version 2: its printed examples of rounding, ties away from zero."""
    _, data = _bext(integrated_lufs=value)
    assert struct.unpack_from("<h", data, 412)[0] == stored


def test_bext_layout():
    """EBU Tech 3285 version 2: offsets of the fields; 602 bytes before the coding history; unused is 7FFFh."""
    name, data = _bext(true_peak_dbtp=-1.0, momentary_lufs=-14.0)
    assert name == b"bext"
    assert data[:4] == b"kick"
    assert data[256:259] == b"who"
    assert data[320:338] == b"2026-03-0100:00:00"
    assert struct.unpack_from("<H", data, 346) == (2,)
    assert struct.unpack_from("<5h", data, 412) == (0x7FFF, 0x7FFF, -100, -1400, 0x7FFF)
    assert data[602:] == b"A=PCM,F=48000,W=24,M=mono\r\n"


def _bext(**levels):
    values = {"integrated_lufs": None, "true_peak_dbtp": None, "momentary_lufs": None} | levels
    return bext_chunk(
        description="kick",
        originator="who",
        reference="r",
        date="2026-03-01",
        coding_history="A=PCM,F=48000,W=24,M=mono\r\n",
        **values,
    )


def test_info_texts_are_read_by_libsndfile(tmp_path):
    """libsndfile reads back what the LIST/INFO chunk holds, and its log names every chunk."""
    info = info_chunk({"title": "Ramp", "artist": "Us", "comment": "odd", "software": "kickrender", "genre": "Foley"})
    chunks = [info, smpl_chunk(33.0, 48_000), inst_chunk(33.0), _bext()]
    path = tmp_path / "hit.wav"
    write_wav(path, np.zeros(7, np.int32), 48_000, "pcm24", chunks)
    with soundfile.SoundFile(path) as file:
        assert (file.title, file.artist, file.comment, file.genre) == ("Ramp", "Us", "odd", "Foley")
        assert file.frames == 7
        log = file.extra_info
    for chunk in ("smpl", "inst", "bext", "LIST"):
        assert chunk in log


def test_no_texts_no_chunk():
    assert info_chunk({"title": ""}) is None
