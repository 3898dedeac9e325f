"""FLAC files: the samples of a 16- or 24-bit WAV in a fraction of the room, and the texts that describe them.

A FLAC file's samples are the same on every machine; its bytes also name the encoder that the installed library brings,
and may differ with that encoder's version. So what is compared, here and in a sidecar, are the samples.

Source: RFC 9639 (2024); texts as Vorbis comments.
"""

from __future__ import annotations

import hashlib
import io
from collections.abc import Mapping
from pathlib import Path

import numpy as np

from kickrender.sound.files import write_whole
from kickrender.sound.finish import Pcm
from kickrender.sound.wav import pcm_bytes

TEXTS = ("title", "artist", "comment", "date", "software", "genre", "copyright", "album", "license")
# Sample format -> (the library's name of it, how far its numbers are shifted up in the library's).
_DEPTHS = {"pcm16": ("PCM_16", 0), "pcm24": ("PCM_24", 8)}


def flac_bytes(pcm: Pcm, rate_hz: int, sample_format: str, texts: Mapping[str, str] | None = None) -> bytes:
    """A whole FLAC file.

    Parameters
    ----------
    pcm : array, shape (n_samples,) or (n_samples, channels)
        int16 for "pcm16", int32 holding 24 bits for "pcm24".
    rate_hz : int
        [Hz]
    sample_format : "pcm16" or "pcm24"
    texts : mapping, optional
        Names of TEXTS -> what the file says of itself; empty ones are left out.
    """
    import soundfile

    depth, shift = _DEPTHS[sample_format]
    file = io.BytesIO()
    channels = 1 if pcm.ndim == 1 else pcm.shape[1]
    with soundfile.SoundFile(file, "w", rate_hz, channels, depth, format="FLAC") as sound:
        for name in TEXTS:
            if text := (texts or {}).get(name, ""):
                setattr(sound, name, text)
        sound.write(np.left_shift(pcm, shift))
    return file.getvalue()


def write_flac(
    path: str | Path, pcm: Pcm, rate_hz: int, sample_format: str, texts: Mapping[str, str] | None = None
) -> None:
    """Write one sound, whole or not at all; see `flac_bytes`.

    Raises
    ------
    WriteError
        If the folder cannot be written to or is full.
    """
    write_whole(Path(path), flac_bytes(pcm, rate_hz, sample_format, texts))


def pcm_digest_of_flac(path: Path) -> str | None:
    """SHA-256 of the samples as a WAV of the same depth holds them; None when there is no file, or no whole one."""
    import soundfile

    formats = {depth: (name, shift) for name, (depth, shift) in _DEPTHS.items()}
    try:
        with soundfile.SoundFile(path) as file:
            if file.format != "FLAC" or file.subtype not in formats:
                return None
            sample_format, shift = formats[file.subtype]
            whole = file.read(dtype="int32" if shift else "int16")
            if len(whole) != file.frames:
                return None
    except (OSError, soundfile.SoundFileError):
        return None
    return hashlib.sha256(pcm_bytes(whole >> shift if shift else whole, sample_format)).hexdigest()
