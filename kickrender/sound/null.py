"""How far two sounds null: what is left when one is laid over the other, matched in time and level, and subtracted."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

FURTHEST_S = 0.001  # how far one is moved against the other; further apart, the strike itself comes at another time
LOUDER_DB = 0.5  # how far one is turned up or down; a difference of more can be heard, and is one
RESIDUAL_DIGITS = 1  # of a residual in dB, so that the last bits of a sum never decide anything


def matched_residual_db(first: Floats, second: Floats, rate_hz: float) -> float:
    """RMS of what is left of the second sound after the first is subtracted, over the second's own RMS. [dB]

    r = |b - g a_l| / |b|, with the delay l (whole samples, up to FURTHEST_S either way) and the gain g that leave the
    least. The same for both orders, but for rounding.

    Parameters
    ----------
    first, second : array of float, shape (n_samples,) each
        The shorter one is followed by silence.
    rate_hz : float
        [Hz]

    Returns
    -------
    residual_db : float
        To 0.1 dB; minus infinity for equal sounds, infinity where the levels differ by more than LOUDER_DB or one of
        them alone is silent.
    """
    reach = round(FURTHEST_S * rate_hz)
    energy_a, energy_b = _energy(first), _energy(second)
    if energy_a == 0.0 or energy_b == 0.0:
        return -math.inf if energy_a == energy_b else math.inf
    if abs(10.0 * math.log10(energy_b / energy_a)) > LOUDER_DB:
        return math.inf
    a, b = (np.pad(sound, (reach, max(len(first), len(second)) + reach - len(sound))) for sound in (first, second))
    if np.array_equal(a, b):
        return -math.inf
    # Transforms, not products one by one: those are left to a library whose threads wait for each other.
    size = 1 << (len(a) - 1).bit_length()
    products = np.fft.irfft(np.fft.rfft(b, size) * np.conj(np.fft.rfft(a, size)), size)
    delay = max(range(-reach, reach + 1), key=lambda k: float(products[k]))
    moved = np.roll(a, delay)  # into the silence around it
    gain = max(0.0, float((moved * b).sum())) / energy_a  # upside down is not the same
    residual = math.sqrt(_energy(b - gain * moved) / energy_b)
    return round(20.0 * math.log10(residual), RESIDUAL_DIGITS) if residual > 0.0 else -math.inf


def _energy(samples: Floats) -> float:
    return float(np.square(samples).sum())
