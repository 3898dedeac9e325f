"""How a sound rises and dies: attack and decay from the magnitudes of its half cycles."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

DECAY_DB = 60.0
ATTACK_FROM, ATTACK_TO = 0.1, 0.9  # of the peak
LEAST_SWING = 0.1  # of its neighbours': less is ripple about a crossing


def attack_s(samples: Floats, rate_hz: float) -> float:
    """Time between the magnitude's first reaching 10 % and 90 % of the peak. [s]

    `samples`: shape (n_samples,), not silent. Source: common practice (rise time), no source.
    """
    from kickrender.sound.compiled import first_reaching, largest_magnitude  # loads the compiler

    def reached(level: float) -> float:
        """Where, in samples, a straight line between magnitudes first reaches a level; 0 when the first one does."""
        k = first_reaching(samples, level)
        if k == 0:
            return 0.0
        before, here = abs(float(samples[k - 1])), abs(float(samples[k]))
        return k - (here - level) / (here - before)

    peak = largest_magnitude(samples)[1]
    return (reached(ATTACK_TO * peak) - reached(ATTACK_FROM * peak)) / rate_hz


def decay_s(samples: Floats, rate_hz: float, drop_db: float = DECAY_DB) -> float | None:
    """Time from the peak until the sound has died by `drop_db` for good; None when it never does. [s]

    The envelope has one point per half cycle, joined by straight lines in dB: so it moves evenly with a control, where
    the last sample above the level would jump from one half cycle to the next. A sound that ends without crossing
    zero again is followed sample by sample.

    Parameters
    ----------
    samples : array of float, shape (n_samples,)
        Not silent.
    rate_hz : float
        [Hz]
    drop_db : float, default 60
        Fall below the peak that ends the sound. [dB]

    Source: common practice, no source.
    """
    from kickrender.sound.compiled import half_cycles, largest_magnitude, last_reaching  # loads the compiler

    crossings, peaks, places = (np.empty(len(samples)) for _ in range(3))
    count = half_cycles(samples, LEAST_SWING, crossings, peaks, places) - 1  # the last one is cut off
    top, peak = largest_magnitude(samples)
    level = peak * 10 ** (-drop_db / 20)
    last = last_reaching(samples, level)
    if count >= 3:
        peaks, places = peaks[:count], places[:count]
        # A lopsided wave swings farther to one side: its neighbours say where it would be on the other.
        swings = np.maximum(peaks[1:-1], np.sqrt(peaks[:-2] * peaks[2:]))
        above = np.flatnonzero(swings >= level)
        if len(above) and above[-1] < len(swings) - 1:
            k = int(above[-1])
            share = math.log(swings[k] / level) / math.log(swings[k] / swings[k + 1])
            return float(places[k + 1] + share * (places[k + 2] - places[k + 1]) - top) / rate_hz
        if len(samples) - last < crossings[count] - crossings[count - 2]:
            return None  # below the level for less than a period: it may only be crossing zero
    if last == len(samples) - 1:
        return None
    here, after = abs(float(samples[last])), abs(float(samples[last + 1]))
    share = math.log(here / level) / math.log(here / max(after, 1e-300))
    return (last + share - top) / rate_hz
