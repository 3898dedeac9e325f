"""A sound as a file of any format: which writer it takes, what its name ends in, and the digest of its samples."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from pathlib import Path

from kickrender.errors import Fault, InputError
from kickrender.sound.chunks import info_chunk
from kickrender.sound.finish import Pcm
from kickrender.sound.flac import pcm_digest_of_flac, write_flac
from kickrender.sound.options import ENDINGS, FORMATS, SAMPLES, ending_of
from kickrender.sound.wav import Chunk, pcm_digest_of_wav, write_wav

MOST_FLAC_CHANNELS = 8


def write_sound(
    path: Path,
    pcm: Pcm,
    rate_hz: int,
    file_format: str,
    texts: Mapping[str, str] | None = None,
    chunks: Iterable[Chunk] = (),
) -> None:
    """Write one sound, whole or not at all.

    Parameters
    ----------
    pcm : array, shape (n_samples,) or (n_samples, channels)
        As `quantise` makes it for the format's samples.
    rate_hz : int
        [Hz]
    file_format : str
        One of FORMATS.
    texts : mapping, optional
        What the file says of its making: LIST/INFO in a WAV, comments in a FLAC file.
    chunks : iterable of (identifier, data)
        What only a WAV has room for; left out of a FLAC file.

    Raises
    ------
    InputError
        If the format does not hold so many channels.
    WriteError
        If the folder cannot be written to or is full, or the sound is too long for the format.
    """
    check_channels(1 if pcm.ndim == 1 else pcm.shape[1], file_format, str(path))
    if ending_of(file_format) == ".flac":
        write_flac(path, pcm, rate_hz, SAMPLES[file_format], texts)
        return
    info = info_chunk(texts or {})
    write_wav(path, pcm, rate_hz, SAMPLES[file_format], [*([info] if info else []), *chunks])


def pcm_digest_of_file(path: Path) -> str | None:
    """SHA-256 of the samples in a file; None when there is no such file or it is not a whole one."""
    return (pcm_digest_of_flac if path.suffix.lower() == ".flac" else pcm_digest_of_wav)(path)


def check_sound_name(path: str | Path, file_format: str, place: str = "--out") -> None:
    """Refuse a file name that does not end as its format's files do; raises InputError."""
    if Path(path).suffix.lower() != ending_of(file_format):
        formats = {ending: ", ".join(f for f in FORMATS if ending_of(f) == ending) for ending in ENDINGS}
        allowed = " or ".join(f"{ending} ({names})" for ending, names in formats.items())
        raise InputError(Fault(place, f"found '{path}' for {file_format}", f"a file name that ends in {allowed}"))


def check_channels(channels: int, file_format: str, place: str) -> None:
    """Refuse more channels than a file of the format holds; raises InputError."""
    if ending_of(file_format) == ".flac" and channels > MOST_FLAC_CHANNELS:
        allowed = f"at most {MOST_FLAC_CHANNELS}, or a WAV format"
        raise InputError(Fault(place, f"{channels} channels in a FLAC file", allowed))
