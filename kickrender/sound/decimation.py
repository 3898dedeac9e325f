"""From densely sampled volts to the file's rate: linear-phase decimation by powers of two.

Each stage halves the rate with a half-band filter: every other tap is zero and the rest are symmetric, so that a
stage costs a quarter of an ordinary filter. Only the last stage is steep. The earlier ones remove just what the
later ones could no longer tell from the pass band.

    total pass band   0 to 0.45 of the file's rate, within 0.0001 dB
    total stop band   from 0.55 of the file's rate, below -125 dB, aliases included
    delay             none: sample k lies at t = k / rate

The taps are data and every sum is taken in one fixed order, so that samples are the same bits on every machine.

Source: common practice (half-band filters from a Kaiser window), from memory; the tests measure the response.
"""

from __future__ import annotations

import functools
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from kickrender.sound.taps import EARLY_TAPS, LAST_TAPS, MIDDLE_TAPS

OVERSAMPLES = (1, 2, 4, 8, 16, 32, 64)

# Samples of the file worked on at once: enough to hide the cost of a call, few enough to stay in the cache.
BLOCK = 2048

Floats = NDArray[np.float64]
Sampler = Callable[[int, int], Floats]


def decimate(sampler: Sampler, count: int, oversample: int, *, block: int = BLOCK) -> Floats:
    """The first `count` samples at the file's rate, filtered, sample k at t = k / rate.

    Parameters
    ----------
    sampler : function (first, n) -> array of float, shape (n,)
        Values at the oversampled times (first + i) / (rate x oversample). [V] Each time is asked for once, in
        rising order, from `reach(oversample)` before the strike to `reach(oversample)` past the last sample.
    count : int
        Samples wanted.
    oversample : int
        One of OVERSAMPLES. With 1 the values are taken as they are, unfiltered.
    block : int
        Samples worked on at once. The result does not depend on it.

    Returns
    -------
    samples : array of float, shape (count,)
        [V]
    """
    taps = _stages(oversample)
    if not taps or count == 0:
        return np.array(sampler(0, count), dtype=np.float64)
    from kickrender.sound.half_band import halve  # loads the compiler, which nobody else here needs

    samples = np.empty(count)
    held = [np.empty(0) for _ in taps]  # per stage, the inputs that its next outputs still need
    position = -reach(oversample)
    for first in range(0, count, block):
        last = min(first + block, count)
        wanted = last * oversample + reach(oversample) - (oversample - 1) - position
        values = sampler(position, wanted)
        position += wanted
        for stage, stage_taps in enumerate(taps):
            signal = np.concatenate((held[stage], values))
            overlap = 2 * _half_length(stage_taps)
            values = np.empty((len(signal) - overlap + 1) // 2)
            halve(signal, stage_taps, values)
            held[stage] = signal[2 * len(values) :]
        samples[first:last] = values
    return samples


@functools.cache
def reach(oversample: int) -> int:
    """How many oversampled values before, and after, its own time one sample depends on."""
    return sum(_half_length(taps) << stage for stage, taps in enumerate(_stages(oversample)))


def margin_s(rate_hz: float, oversample: int) -> float:
    """For how long past a sample's time the volts must be known. [s]"""
    return reach(oversample) / (rate_hz * oversample)


def _stages(oversample: int) -> list[Floats]:
    """The taps of each halving, from the densest samples to the file's rate."""
    if oversample not in OVERSAMPLES:
        raise ValueError(f"oversample is {oversample}; allowed: {OVERSAMPLES}")
    halvings = oversample.bit_length() - 1
    from_the_last = [LAST_TAPS, MIDDLE_TAPS] + [EARLY_TAPS] * 4
    return [np.array(taps) for taps in reversed(from_the_last[:halvings])]


def _half_length(taps: Floats) -> int:
    """How far a half-band filter reaches to either side of its middle."""
    return 2 * len(taps) - 1
