"""A hit as a small picture: its outline and its pitch over time, in columns of one byte each, all hits to one scale.

Time is stretched towards the start, column k of n beginning at (k / n)^2 of the span: a strike, a pitch's drop and a
long tail all show.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from kickrender.errors import WriteError
from kickrender.sound.measure import pitch_track

Floats = NDArray[np.float64]

COLUMNS = 64
FULL = 127  # the outline's byte for the loudest peak of the pack
PITCH_STEPS = 254  # a column's pitch is 1 + this share of the way up the scale; 0 is no pitch


@dataclass(frozen=True)
class Scale:
    """What all thumbnails of a pack share, so that they can be compared by eye.

    span_s : time that the columns cover, the longest hit's length. [s]
    peak : sample value drawn at full height.
    low_hz, high_hz : ends of the pitch scale, which is logarithmic. [Hz]
    """

    span_s: float
    peak: float
    low_hz: float
    high_hz: float


@dataclass(frozen=True)
class Thumbnail:
    """lowest, highest : int8, shape (COLUMNS,), extremes of each column; pitch : uint8, shape (COLUMNS,)."""

    lowest: NDArray[np.int8]
    highest: NDArray[np.int8]
    pitch: NDArray[np.uint8]


def scale_of(hits: Sequence[Mapping[str, Any]]) -> Scale:
    """The scale for these entries of a manifest, from what was measured of them."""
    measured = [hit["measurements"] for hit in hits]
    peaks = [m["peak_dbfs"] for m in measured if m["peak_dbfs"] is not None]
    pitches = [m[key] for m in measured for key in ("start_hz", "settled_hz") if m[key] is not None]
    return Scale(
        span_s=max((m["length_s"] for m in measured), default=1.0),
        peak=10 ** (max(peaks, default=0.0) / 20),
        low_hz=min(pitches, default=20.0) / 1.1,
        high_hz=max(pitches, default=200.0) * 1.1,
    )


def thumbnails_of(folder: Path, hits: Sequence[Mapping[str, Any]], scale: Scale) -> Iterator[Thumbnail]:
    """The thumbnail of each entry of a manifest, from its file in `folder`, one file in memory at a time.

    Raises
    ------
    WriteError
        If a file has gone or cannot be read.
    """
    import soundfile

    for hit in hits:
        path = folder / hit["file"]
        try:
            samples, rate_hz = soundfile.read(path, dtype="float64", always_2d=True)
        except (OSError, soundfile.SoundFileError):
            raise WriteError(f"{path}: has gone or was changed while the pack was rendered; run again") from None
        yield thumbnail(samples[:, 0], rate_hz, scale)


def thumbnail(samples: Floats, rate_hz: float, scale: Scale) -> Thumbnail:
    """The thumbnail of one sound.

    Parameters
    ----------
    samples : array of float, shape (n_samples,)
    rate_hz : float
        [Hz]
    """
    # A sound shorter than the span leaves the columns after its end at rest.
    starts = np.round(_times(np.arange(COLUMNS), scale) * rate_hz).astype(int)
    starts = starts[starts < len(samples)]
    lowest, highest = np.zeros(COLUMNS), np.zeros(COLUMNS)
    if len(starts):
        lowest[: len(starts)] = np.minimum.reduceat(samples, starts)
        highest[: len(starts)] = np.maximum.reduceat(samples, starts)
    height = FULL / scale.peak
    return Thumbnail(
        np.clip(np.round(lowest * height), -FULL, FULL).astype(np.int8),
        np.clip(np.round(highest * height), -FULL, FULL).astype(np.int8),
        _pitch_columns(samples, rate_hz, scale),
    )


def _pitch_columns(samples: Floats, rate_hz: float, scale: Scale) -> NDArray[np.uint8]:
    """The pitch at the middle of each column, between the track's readings; 0 outside them."""
    times, hz = pitch_track(samples, rate_hz)
    columns = np.zeros(COLUMNS, np.uint8)
    if len(times) == 0:
        return columns
    middles = _times(np.arange(COLUMNS) + 0.5, scale)
    sounding = (middles >= times[0]) & (middles <= times[-1])
    climb = np.log(np.interp(middles[sounding], times, hz) / scale.low_hz) / math.log(scale.high_hz / scale.low_hz)
    columns[sounding] = 1 + np.round(np.clip(climb, 0.0, 1.0) * PITCH_STEPS)
    return columns


def _times(columns: NDArray[Any], scale: Scale) -> Floats:
    """Where columns lie in time. [s]"""
    return scale.span_s * (columns / COLUMNS) ** 2
