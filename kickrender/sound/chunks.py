"""What a WAVE file can say about itself: root note, key and velocity range, who made it, how loud it is.

Each function gives one chunk for `wav.write_wav`: its identifier and its data.

Source: IBM and Microsoft, Multimedia Programming Interface and Data Specifications 1.0 (1991), for LIST/INFO;
Microsoft, New Multimedia Data Types and Data Techniques (1994), for smpl and inst; EBU Tech 3285 version 2 (2011), for
bext; MIDI note numbers with A4 = note 69.
"""

from __future__ import annotations

import math
import struct
from collections.abc import Mapping

from kickrender.sound.wav import Chunk

CONCERT_A_HZ, CONCERT_A_NOTE = 440.0, 69  # ISO 16; MIDI
HIGHEST_NOTE = 127
_UNUSED_LOUDNESS = 0x7FFF
INFO_FIELDS = {
    "title": b"INAM",
    "artist": b"IART",
    "comment": b"ICMT",
    "date": b"ICRD",
    "software": b"ISFT",
    "genre": b"IGNR",
    "copyright": b"ICOP",
    "album": b"IPRD",
}


def midi_note(frequency_hz: float, concert_a_hz: float = CONCERT_A_HZ) -> float:
    """The note number of a frequency, with its fraction of a semitone. [MIDI note]"""
    return CONCERT_A_NOTE + 12.0 * math.log2(frequency_hz / concert_a_hz)


def smpl_chunk(note: float, rate_hz: int) -> Chunk:
    """Root note of a one-shot: the note at or below, and how far above it the sound is, in 2^-32 of a semitone.

    The period is in whole nanoseconds, rounded down as in the specification's own example.
    """
    lower, fraction = _split(note)
    period_ns = 1_000_000_000 // rate_hz
    return b"smpl", struct.pack("<9I", 0, 0, period_ns, lower, fraction, 0, 0, 0, 0)


def inst_chunk(note: float, velocities: tuple[int, int] = (1, 127), keys: tuple[int, int] = (0, 127)) -> Chunk:
    """Nearest note, the cents that would bring the sound onto it, and the keys and velocities it is meant for."""
    nearest = min(max(math.floor(note + 0.5), 0), HIGHEST_NOTE)
    correction = min(max(_nearest_whole(100.0 * (nearest - note)), -50), 50)
    return b"inst", struct.pack("<BbbBBBB", nearest, correction, 0, *keys, *velocities)


def info_chunk(texts: Mapping[str, str]) -> Chunk | None:
    """LIST/INFO of the texts given, by names of INFO_FIELDS; None when all are empty."""
    body = b""
    for name, identifier in INFO_FIELDS.items():
        if text := texts.get(name, ""):
            data = text.encode() + b"\0"
            body += struct.pack("<4sI", identifier, len(data)) + data + b"\0" * (len(data) % 2)
    return (b"LIST", b"INFO" + body) if body else None


def bext_chunk(
    *,
    description: str,
    originator: str,
    reference: str,
    date: str,
    coding_history: str,
    integrated_lufs: float | None,
    true_peak_dbtp: float | None,
    momentary_lufs: float | None,
) -> Chunk:
    """Broadcast extension, version 2, with the loudness fields that a one-shot has.

    Parameters
    ----------
    description, originator, reference : str
        Cut at 256, 32 and 32 bytes; what is not ASCII is written as "?".
    date : str
        "yyyy-mm-dd", or empty. The time of day is always 00:00:00 then: files must not depend on the clock.
    coding_history : str
        Lines that end in CR LF.
    integrated_lufs, true_peak_dbtp, momentary_lufs : float or None
        None leaves the field unused. Loudness range and short-term loudness say nothing about a one-shot and stay
        unused.
    """
    fixed = struct.pack(
        "<256s32s32s10s8sIIH64s",
        _ascii(description),
        _ascii(originator),
        _ascii(reference),
        _ascii(date),
        b"00:00:00" if date else b"",
        0,
        0,
        2,
        b"",
    )
    loudness = [_hundredths(value) for value in (integrated_lufs, None, true_peak_dbtp, momentary_lufs, None)]
    return b"bext", fixed + struct.pack("<5h180s", *loudness, b"") + _ascii(coding_history)


def _split(note: float) -> tuple[int, int]:
    """Whole note and 32-bit fraction; a fraction that rounds up to a whole semitone carries over."""
    whole = math.floor(note)
    fraction = _nearest_whole((note - whole) * 2.0**32)
    if fraction >= 2**32:
        whole, fraction = whole + 1, 0
    if not 0 <= whole <= HIGHEST_NOTE:
        raise ValueError(f"note {note} lies outside 0 to {HIGHEST_NOTE}")
    return whole, fraction


def _hundredths(value: float | None) -> int:
    """A level in hundredths, ties away from zero as Tech 3285 asks; the unused mark for None or beyond +-99.99."""
    if value is None or abs(value) >= 99.995:
        return _UNUSED_LOUDNESS
    return _nearest_whole(round(100.0 * value, 6))  # what is not exactly a tie in binary may be one in decimal


def _nearest_whole(value: float) -> int:
    """The nearest whole number, ties away from zero."""
    return int(value + math.copysign(0.5, value))


def _ascii(text: str) -> bytes:
    return text.encode("ascii", "replace")
