"""RIFF/WAVE files: their one writer, and the digest of the samples in a file.

Written here rather than by the file library because that one has no way to `smpl`, `inst` and `bext`, floors samples on
their way to whole numbers, and puts the time of day into float files, which must be the same bytes at any time.

Layout: fmt, fact (float only), further chunks as given, data. All numbers little-endian; a chunk of odd size is
followed by a zero byte that its own size leaves out and the file's includes.

Source: IBM and Microsoft, Multimedia Programming Interface and Data Specifications 1.0 (1991); Microsoft, New
Multimedia Data Types and Data Techniques (1994).
"""

from __future__ import annotations

import hashlib
import struct
from collections.abc import Iterable
from pathlib import Path
from typing import Any

import numpy as np

from kickrender.errors import WriteError
from kickrender.sound.files import write_whole
from kickrender.sound.finish import Pcm

PCM_TAG, FLOAT_TAG = 1, 3
LARGEST_FILE = 2**32 - 1

# Sample format -> (type of the array, bytes per sample, format tag).
FORMATS: dict[str, tuple[np.dtype[Any], int, int]] = {
    "pcm16": (np.dtype(np.int16), 2, PCM_TAG),
    "pcm24": (np.dtype(np.int32), 3, PCM_TAG),
    "float32": (np.dtype(np.float32), 4, FLOAT_TAG),
}

Chunk = tuple[bytes, bytes]


def write_wav(path: str | Path, pcm: Pcm, rate_hz: int, file_format: str, chunks: Iterable[Chunk] = ()) -> None:
    """Write one sound, whole or not at all.

    Parameters
    ----------
    path : path
    pcm : array, shape (n_samples,) or (n_samples, channels)
        int16 for "pcm16", int32 holding 24 bits for "pcm24", float32 for "float32"; see `quantise`.
    rate_hz : int
        [Hz]
    file_format : str
        One of FORMATS.
    chunks : iterable of (identifier, data)
        Further chunks: four ASCII characters, and bytes.

    Raises
    ------
    WriteError
        If the folder cannot be written to or is full, or the sound is longer than a RIFF file can hold.
    """
    data = pcm_bytes(pcm, file_format)
    head = wav_head(len(data), 1 if pcm.ndim == 1 else pcm.shape[1], rate_hz, file_format, chunks)
    if len(head) + len(data) > LARGEST_FILE:
        raise WriteError(f"{path}: {len(data)} bytes of sound; a WAV file holds at most 4 GiB")
    write_whole(Path(path), head, data, b"\0" * (len(data) % 2))


def pcm_bytes(pcm: Pcm, file_format: str) -> bytes:
    """The samples as they lie in a file."""
    kind, width, _ = FORMATS[file_format]
    if pcm.dtype != kind:
        raise ValueError(f"{file_format} takes samples of {kind}, found {pcm.dtype}")
    little = np.ascontiguousarray(pcm, dtype=kind.newbyteorder("<"))
    if width == kind.itemsize:
        return little.tobytes()
    return little.view(np.uint8).reshape(-1, kind.itemsize)[:, :width].tobytes()


def pcm_sha256(pcm: Pcm, file_format: str) -> str:
    """SHA-256 of the samples as they lie in a file, in hexadecimal."""
    return hashlib.sha256(pcm_bytes(pcm, file_format)).hexdigest()


def wav_head(size: int, channels: int, rate_hz: int, file_format: str, chunks: Iterable[Chunk] = ()) -> bytes:
    """Everything before the samples, which take `size` bytes."""
    _, width, tag = FORMATS[file_format]
    frame = width * channels
    form = struct.pack("<HHIIHH", tag, channels, rate_hz, rate_hz * frame, frame, 8 * width)
    if tag == PCM_TAG:
        body = _chunk(b"fmt ", form)
    else:  # anything but PCM has the size of an extension, here none, and the number of frames
        body = _chunk(b"fmt ", form + struct.pack("<H", 0)) + _chunk(b"fact", struct.pack("<I", size // frame))
    body += b"".join(_chunk(identifier, data) for identifier, data in chunks)
    whole = 4 + len(body) + 8 + size + size % 2
    return struct.pack("<4sI4s", b"RIFF", whole & LARGEST_FILE, b"WAVE") + body + struct.pack("<4sI", b"data", size)


def _chunk(identifier: bytes, data: bytes) -> bytes:
    if len(identifier) != 4 or not identifier.isascii():
        raise ValueError(f"a chunk's identifier is four ASCII characters, found {identifier!r}")
    return struct.pack("<4sI", identifier, len(data)) + data + b"\0" * (len(data) % 2)


def pcm_digest_of_wav(path: Path) -> str | None:
    """SHA-256 of the samples in a WAV file; None when there is no such file or it is not a whole one."""
    try:
        content = Path(path).read_bytes()
    except OSError:
        return None
    if content[:4] != b"RIFF" or content[8:12] != b"WAVE" or struct.unpack("<I", content[4:8])[0] != len(content) - 8:
        return None
    place = 12
    while place + 8 <= len(content):
        identifier, size = struct.unpack_from("<4sI", content, place)
        data = content[place + 8 : place + 8 + size]
        if identifier == b"data":
            return hashlib.sha256(data).hexdigest() if len(data) == size else None
        place += 8 + size + size % 2
    return None
