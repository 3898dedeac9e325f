"""Loudness of short sounds: ITU-R BS.1770-5 and EBU Tech 3341, with a rule for sounds too short for either.

Momentary is the measure for one-shots: the loudest 400 ms, with silence before and after, so that it exists for a
50 ms hit and does not change with the length of the tail. Every position of the window is tried, for a hop of
100 ms under-reads a 400 ms burst by up to 0.6 LU.

The usual library, pyloudnorm, is what the tests compare with, and is not used here: its default filter is not the
standard's (0.04 LU low), it refuses sounds under 400 ms, answers minus infinity for one sample that is no number,
hops instead of sliding, counts a truncated last block, and takes longer to import than a hit takes to render.
"""

from __future__ import annotations

import functools
import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

WINDOW_S = 0.4  # BS.1770's gating block, Tech 3341's momentary window
BLOCKS_PER_S = 10  # BS.1770: blocks overlap by 75 %
ABSOLUTE_GATE_LUFS = -70.0
RELATIVE_GATE_LU = -10.0
OFFSET_DB = -0.691  # cancels the K-weighting's gain at 997 Hz

# The slowest pole of the K-weighting falls 60 dB in 30 ms: after this much silence nothing of it is left.
RING_OUT_S = 0.1


@dataclass(frozen=True)
class Loudness:
    """momentary_lufs : highest 400 ms loudness; None for silence. integrated_lufs : gated; None below the gate."""

    momentary_lufs: float | None
    integrated_lufs: float | None


def loudness(samples: Floats, rate_hz: float) -> Loudness:
    """Highest momentary loudness and gated integrated loudness of one channel.

    L = -0.691 + 10 log10(z), with z the mean square of the K-weighted samples over a window.

    Parameters
    ----------
    samples : array of float, shape (n_samples,)
        Full scale is 1; all finite.
    rate_hz : float
        [Hz]

    Returns
    -------
    loudness : Loudness
        Momentary: the sound stands in silence, at least one window of it on either side. Integrated: the first block
        starts with the sound, only complete blocks count, and silence fills the one block of a shorter sound.

    Source: ITU-R BS.1770-5 (11/2023) Annex 1; EBU Tech 3341 V4 (11/2023) section 2.2. The silence around short
    sounds is common practice, no source.
    """
    from kickrender.sound.compiled import largest_rise, running_energy  # loads the compiler

    window = round(WINDOW_S * rate_hz)
    energy = np.empty(len(samples) + round(RING_OUT_S * rate_hz) + 1)
    running_energy(samples, k_weighting(rate_hz), energy)
    # Windows that reach into the silence hold no more than the nearest one that does not, unless all of them do.
    loudest = largest_rise(energy, window) if len(energy) > window else energy[-1]
    return Loudness(
        _lufs(float(loudest) / (WINDOW_S * rate_hz)),
        _integrated(energy, len(samples), window, rate_hz),
    )


def _integrated(energy: Floats, count: int, window: int, rate_hz: float) -> float | None:
    """Gated loudness from the running energy of `count` samples and their ring-out."""
    blocks = 1 + max(0, math.floor((count - window) * BLOCKS_PER_S / rate_hz))
    starts = np.array([math.floor(block * rate_hz / BLOCKS_PER_S) for block in range(blocks)])
    ends = np.minimum(starts + window, len(energy) - 1)
    mean_squares = (energy[ends] - energy[starts]) / (WINDOW_S * rate_hz)
    loud = mean_squares[mean_squares > 10 ** ((ABSOLUTE_GATE_LUFS - OFFSET_DB) / 10)]
    if len(loud) == 0:
        return None
    loud = loud[loud > loud.mean() * 10 ** (RELATIVE_GATE_LU / 10)]
    return _lufs(float(loud.mean()))


def _lufs(mean_square: float) -> float | None:
    return OFFSET_DB + 10 * math.log10(mean_square) if mean_square > 0 else None


@functools.cache
def k_weighting(rate_hz: float) -> Floats:
    """The two biquads of the K-weighting at any rate: rows b0, b1, b2, a1, a2.

    The standard tabulates 48 kHz and asks for the same response elsewhere: the analogue filters behind the table go
    through the bilinear transform again. The high-pass's numerator, 1, -2, 1 in the table, is scaled so that its
    gain stays the 48 kHz one; left alone it would read 0.027 dB low at 192 kHz.

    Source: ITU-R BS.1770-5 Annex 1, tables 1 and 2; analogue values from memory of several open libraries, which
    reproduce the tables to 5e-16.
    """
    shelf_k = math.tan(math.pi * 1681.974450955533 / rate_hz)
    high = 10 ** (3.999843853973347 / 20)
    shelf_gains = (high, high**0.4996667741545416, 1.0)
    shelf = _biquad(shelf_k, 0.7071752369554196, shelf_gains)
    pass_k, table_k = (math.tan(math.pi * 38.13547087602444 / rate) for rate in (rate_hz, 48_000))
    q = 0.5003270373238773
    scale = (1 + table_k / q + table_k**2) / (1 + pass_k / q + pass_k**2)
    high_pass = _biquad(pass_k, q, (1.0, 0.0, 0.0))
    return np.array([shelf, [scale, -2 * scale, scale, *high_pass[3:]]])


def _biquad(k: float, q: float, gains: tuple[float, float, float]) -> list[float]:
    """(g0 s^2 + g1 s/q + g2) / (s^2 + s/q + 1) by the bilinear transform, k = tan(pi f0 / rate)."""
    g0, g1, g2 = gains
    a0 = 1 + k / q + k * k
    return [
        (g0 + g1 * k / q + g2 * k * k) / a0,
        2 * (g2 * k * k - g0) / a0,
        (g0 - g1 * k / q + g2 * k * k) / a0,
        2 * (k * k - 1) / a0,
        (1 - k / q + k * k) / a0,
    ]
