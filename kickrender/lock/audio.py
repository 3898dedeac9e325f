"""Renders kept beside a lock file, so that what moved can be nulled and heard.

A kept file is called by its hit and by the first digits of its samples' SHA-256: another sound is another file, so
keeping renders never touches those that an older lock file still speaks of. Whole numbers are kept as FLAC; floats,
which FLAC cannot hold, as WAV.
"""

from __future__ import annotations

import contextlib
from collections.abc import Iterable
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from kickrender.errors import Fault, InputError, WriteError
from kickrender.lock.records import Lock, LockedHit
from kickrender.sound.finish import Pcm
from kickrender.sound.flac import write_flac
from kickrender.sound.wav import FORMATS, pcm_sha256, write_wav

NAME_DIGITS = 12
FLOAT = "float32"


def audio_name(hit: str, pcm: str, sound_format: str) -> str:
    """The kept file of a hit, from the folder of kept renders, with `/`."""
    return f"{hit}-{pcm[:NAME_DIGITS]}.{'wav' if sound_format == FLOAT else 'flac'}"


def keep(path: Path, pcm: Pcm, rate_hz: int, sound_format: str) -> None:
    """Write one sound without loss, whole or not at all.

    Raises
    ------
    WriteError
    """
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise WriteError(f"{path.parent}: cannot be made: {error.strerror}") from None
    if sound_format == FLOAT:
        write_wav(path, pcm, rate_hz, sound_format)
        return
    write_flac(path, pcm, rate_hz, sound_format)


def kept_sound(path: Path, hit: LockedHit, sound_format: str, place: str) -> NDArray[np.float64]:
    """The kept samples of a hit, full scale 1, shape (n_samples,).

    Raises
    ------
    InputError
        If there is no such file, or it does not hold the samples that were locked.
    """
    again = "the file as `kickrender lock --audio` wrote it"
    if not path.is_file():
        raise InputError(Fault(place, f"kept render {path} is missing", again))
    import soundfile

    kind = FORMATS[sound_format][0].name
    try:
        samples: NDArray[Any] = soundfile.read(path, dtype=kind)[0]
    except (OSError, soundfile.SoundFileError):
        raise InputError(
            Fault(place, f"kept render {path} cannot be read: it is damaged or cut short", again)
        ) from None
    pcm = samples if kind != "int32" else samples >> 8
    if pcm_sha256(pcm, sound_format) != hit.pcm:
        found = f"kept render {path} does not hold the samples that were locked: {len(pcm)} of {hit.samples} are there"
        raise InputError(Fault(place, found, again))
    return full_scale(pcm)


def full_scale(pcm: Pcm) -> NDArray[np.float64]:
    """A file's numbers as samples, full scale 1; 24 bits lie in int32."""
    steps = {"int16": 2.0**15, "int32": 2.0**23}.get(pcm.dtype.name, 1.0)
    return pcm.astype(np.float64) / steps


def remove_kept(old: Lock, new: Lock) -> None:
    """Take away kept renders that only the older lock spoke of."""
    folder = old.audio_folder
    if folder is None or folder != new.audio_folder:
        return
    for name in set(_names(old.hits.values(), old)) - set(_names(new.hits.values(), new)):
        with contextlib.suppress(OSError):
            (folder / name).unlink()


def _names(hits: Iterable[LockedHit], lock: Lock) -> list[str]:
    return [audio_name(hit.name, hit.pcm, lock.sound["format"]) for hit in hits]
