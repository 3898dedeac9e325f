"""The last steps before a file: cut the dead tail, fade to zero, dither, turn into whole numbers.

Every value here ends in a file, so there is nothing but element-wise arithmetic and comparison: no sums, no library
functions, random numbers straight from the generator's integers.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from kickrender.errors import Fault, InputError, MeasurementError

Floats = NDArray[np.float64]
Pcm = NDArray[np.int16] | NDArray[np.int32] | NDArray[np.float32]

TAIL_FLOOR = 3.1622776601683795e-05  # -90 dB of the peak
FADE_S = 0.005
BITS = {"pcm16": 16, "pcm24": 24}
# A gain is rounded to 0.001 dB, so a sound levelled to full scale may pass it by as much: that takes the largest
# number there is, and is the only value that is ever clipped.
LARGEST = 1.000115146


def trim(samples: Floats, rate_hz: float) -> Floats:
    """The sound up to where it has fallen below -90 dB of its peak for good, and one fade's length more.

    `samples`: shape (n_samples,). The fade then falls into what is dead, never into the sound. Silence is kept whole.
    """
    magnitude = np.abs(samples)
    peak = magnitude.max(initial=0.0)
    alive = np.flatnonzero(magnitude >= TAIL_FLOOR * peak)
    if peak == 0.0:
        return samples
    return samples[: int(alive[-1]) + 1 + round(FADE_S * rate_hz)]


def fade(samples: Floats, rate_hz: float) -> Floats:
    """A copy whose last 5 ms fall to exactly zero along 1 - 3 u^2 + 2 u^3, which leaves and arrives level."""
    faded = samples.copy()
    count = min(round(FADE_S * rate_hz), len(faded))
    u = np.arange(1, count + 1) / count
    faded[len(faded) - count :] *= 1.0 - u * u * (3.0 - 2.0 * u)
    return faded


def triangular_noise(count: int, seed: int) -> Floats:
    """Differences of two even random numbers: triangular between -1 and 1, shape (count,).

    Source: triangular-density dither as in Lipshitz, Wannamaker and Vanderkooy, Quantization and Dither, J. Audio
    Eng. Soc. 40 (1992), from memory: two steps wide, it makes the error's mean and variance independent of the sound.
    """
    # The top 53 bits of each integer, as numpy's own uniform numbers are made; only the raw stream is promised to
    # stay as it is.
    even = (np.random.PCG64(seed).random_raw(2 * count) >> np.uint64(11)) * 2.0**-53
    return even[0::2] - even[1::2]


def quantise(samples: Floats, file_format: str, seed: int | None = None) -> Pcm:
    """Numbers as a file of the format holds them, rounded to the nearest, half to even.

    Parameters
    ----------
    samples : array of float, shape (n_samples,) or (n_samples, channels)
        Full scale is 1.
    file_format : "pcm16", "pcm24" or "float32"
    seed : int, optional
        Of the dither, which only 16 bits need. None means no dither.

    Returns
    -------
    pcm : array of int16, of int32 holding 24 bits, or of float32; the shape of `samples`

    Raises
    ------
    InputError
        If the sound lies beyond full scale in a format that would have to clip it.
    MeasurementError
        If a sample is no number.
    """
    largest = float(np.abs(samples).max(initial=0.0))
    if not math.isfinite(largest):
        raise MeasurementError("the sound holds samples that are not finite")
    if file_format == "float32":
        return samples.astype(np.float32)
    if largest > LARGEST:
        over = f"the sound reaches {largest:.4g} times full scale ({20 * math.log10(largest):+.2f} dB)"
        remedy = "at most 1; lower the level, set a ceiling, raise full_scale, or write float32"
        raise InputError(Fault(file_format, over, remedy))
    steps = 2 ** (BITS[file_format] - 1)
    scaled = samples * float(steps)
    if file_format == "pcm16" and seed is not None:
        scaled = scaled + triangular_noise(scaled.size, seed).reshape(scaled.shape)
    whole = np.minimum(np.maximum(np.rint(scaled), -steps), steps - 1)
    return whole.astype(np.int16) if file_format == "pcm16" else whole.astype(np.int32)
