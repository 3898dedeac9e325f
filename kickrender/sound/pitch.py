"""Pitch of a struck sound over time, where it starts, how long it falls, and where it settles.

A kick has few cycles, its pitch falls by octaves within the first of them, and its wave may be bent or flattened.
So time is cut at zero crossings, which clipping does not move, and only half cycles of one polarity are compared with
each other, so that a lopsided wave is not read as a change of pitch. The settled pitch is then read from the phase
of the fundamental alone.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from kickrender.sound.true_peak import padded_part

Floats = NDArray[np.float64]

# The analysis runs on the sound averaged down to about this rate, then smoothed by a bell of this width, which keeps
# pitches up to about 600 Hz and takes clicks and hiss away without ringing.
ANALYSIS_RATE_HZ = 12_000
SMOOTHING_S = 0.22e-3
LEAST_SWING = 0.1  # of its neighbours': less is ripple about a crossing

ONSET = 0.01  # of the largest swing: where the sound begins
START_WITHIN_S = 0.010  # half cycles that begin this soon after the onset may hold the start of a drop

FLOOR_DB = -50.0  # below the largest swing nothing is read
GAP = 1e-6  # of the loudest window: silence between two strikes
DROP_LEFT = math.exp(-1.0)  # of the drop, in semitones, when it counts as done: an exponential's time constant
LEAST_DROP = 2.0 ** (1.0 / 12.0)  # start over settled pitch; less is no drop whose time could be told
SETTLED_SPREAD = 0.003  # a pitch this far from the settled one, as a ratio, counts a quarter
SETTLING_ROUNDS = 4  # each round moves several times closer


@dataclass(frozen=True)
class Pitch:
    """times_s, hz : pitch over time, a reading per half cycle; start_hz, settled_hz, drop_s : None if there is none."""

    times_s: Floats
    hz: Floats
    start_hz: float | None
    settled_hz: float | None
    drop_s: float | None = None


def pitch(samples: Floats, rate_hz: float) -> Pitch:
    """Pitch track, start and settled fundamental of a struck sound.

    Parameters
    ----------
    samples : array of float, shape (n_samples,)
        All finite. Pitches from 20 to 600 Hz are read.
    rate_hz : float
        [Hz]

    Returns
    -------
    pitch : Pitch
        Track: the reciprocal of a full period about each half cycle, its own length plus the geometric mean of its
        neighbours'. Start: the highest reading among half cycles that begin within 10 ms of the onset (else the
        first); the half cycle in which the strike still drives the sound is not read. Settled: the mean frequency of
        the fundamental where it stays about one value, weighted by amplitude, for all that lies above -50 dB. Drop:
        from the start's reading until 1/e of the way to the settled pitch is left, in semitones, between readings.

    Source: common practice, no source.
    """
    from kickrender.sound.compiled import first_reaching  # loads the compiler

    cut = _cut(samples, rate_hz)
    if cut is None:
        return Pitch(np.empty(0), np.empty(0), None, None)
    onset = first_reaching(cut.smooth, ONSET * cut.peak)
    early = cut.crossings[1:-1] <= onset + START_WITHIN_S * cut.rate_hz
    start = float(cut.hz[early].max()) if early.any() else float(cut.hz[0])
    ends = cut.crossings[1] / 2, cut.crossings[-1] / 2
    settled = _settled(cut.smooth[::2].copy(), cut.rate_hz / 2, *ends, float(np.median(cut.hz[-4:])))
    return Pitch(cut.times_s, cut.hz, start, settled, _drop_s(cut.times_s, cut.hz, start, settled))


def track(samples: Floats, rate_hz: float) -> tuple[Floats, Floats]:
    """The track of `pitch` without what reading the settled pitch costs: (times_s, hz), empty when there is none."""
    cut = _cut(samples, rate_hz)
    return (np.empty(0), np.empty(0)) if cut is None else (cut.times_s, cut.hz)


@dataclass(frozen=True)
class _Cut:
    """A sound cut into half cycles: the smoothed sound, its rate and largest swing, crossings in its samples from the
    strike's to the last one read, and the track's readings between them."""

    smooth: Floats
    rate_hz: float
    peak: float
    crossings: Floats
    times_s: Floats
    hz: Floats


def _cut(samples: Floats, rate_hz: float) -> _Cut | None:
    """Half cycles and their readings; None when there are too few."""
    from kickrender.sound.compiled import half_cycles

    factor = max(1, round(rate_hz / ANALYSIS_RATE_HZ))
    smooth = _smoothed(samples, factor, rate_hz)
    rate = rate_hz / factor
    delay_s = (factor - 1) / 2 / rate_hz  # an average belongs to the middle of its samples
    crossings, peaks, places = (np.empty(len(smooth)) for _ in range(3))
    count = half_cycles(smooth, LEAST_SWING, crossings, peaks, places)
    peak = float(peaks[:count].max(initial=0.0))
    loud = np.flatnonzero(peaks[:count] >= peak * 10 ** (FLOOR_DB / 20))
    # The last half cycle is cut off, the first driven; crossings[1] to crossings[end] bound whole ones.
    end = min(count - 1, int(loud[-1]) + 1) if count else 0
    crossings = crossings[: end + 1]
    lengths = np.diff(crossings[1:]) / rate
    if len(lengths) < 3:
        return None
    times = (crossings[1:-1] + crossings[2:]) / 2 / rate + delay_s
    return _Cut(smooth, rate, peak, crossings, times, _readings(lengths))


def _drop_s(times: Floats, hz: Floats, start: float, settled: float) -> float | None:
    """How long the pitch falls until so little of its drop is left that it counts as done; None without a drop. [s]"""
    if start < LEAST_DROP * settled:
        return None
    left = np.log(hz / settled) / math.log(start / settled)
    first = int(np.argmax(hz == start))  # readings before it still rise
    done = np.flatnonzero(left[first:] <= DROP_LEFT)
    if len(done) == 0:
        return None
    k = first + int(done[0])
    share = (left[k - 1] - DROP_LEFT) / (left[k - 1] - left[k])
    return float(times[k - 1] + share * (times[k] - times[k - 1]) - times[first])


def _smoothed(samples: Floats, factor: int, rate_hz: float) -> Floats:
    """Averages over `factor` samples, then a bell-shaped mean; nothing is delayed."""
    from kickrender.sound.half_band import symmetric_sums

    count = len(samples) // factor
    # Added one after the other: numpy's own sum would add in an order of the processor's choice.
    averages = samples[: count * factor : factor].copy()
    for k in range(1, factor):
        averages += samples[k : count * factor : factor]
    width = SMOOTHING_S * rate_hz / factor
    m = 4 * math.ceil(4 * width / 4)
    bell = np.array([math.exp(-0.5 * ((j + 0.5) / width) ** 2) for j in range(m)])
    smooth = np.zeros(count)
    symmetric_sums(padded_part(averages, 1 - m, count + m), bell / (2 * factor * bell.sum()), smooth)
    return smooth


def _readings(lengths: Floats) -> Floats:
    """Pitch about each half cycle from the lengths of all. [s] to [Hz]

    Inside, one over (own length + geometric mean of both neighbours'). At either end one neighbour is missing: the
    pitch moves on as the last two half cycles of its own polarity did.
    """
    hz = np.empty(len(lengths))
    hz[1:-1] = 1 / (lengths[1:-1] + np.sqrt(lengths[:-2] * lengths[2:]))
    hz[0] = hz[1] * math.sqrt(lengths[2] / lengths[0])
    hz[-1] = hz[-2] * math.sqrt(lengths[-3] / lengths[-1])
    return hz


def _settled(smooth: Floats, rate: float, first: float, last: float, guess_hz: float) -> float:
    """The fundamental's frequency where it stays about one value; `guess_hz` when the sound is too short to tell.

    The sound is heard through a raised-cosine window of two periods that undoes the decay. It passes the fundamental
    and has its zeros at the harmonics and at 0 Hz; the phase's advance from one window to the next is the frequency.
    """
    from kickrender.sound.compiled import correlate

    settled, decay = guess_hz, 0.0  # decay per sample, as a natural logarithm
    for _ in range(SETTLING_ROUNDS):
        length = round(2 * rate / settled)
        hop = max(1, length // 8)
        begin, end = int(first), min(int(last) + 1, len(smooth))
        windows = (end - begin - length) // hop + 1
        if windows < 3:
            return guess_hz
        turn = 2 * np.pi * settled / rate
        k = np.arange(length)
        window = (1 - np.cos(2 * np.pi * (k + 0.5) / length)) * np.exp(decay * (k - length / 2))
        real, imaginary = np.empty(windows), np.empty(windows)
        correlate(smooth[begin:end], window * np.cos(turn * k), hop, real)
        correlate(smooth[begin:end], window * -np.sin(turn * k), hop, imaginary)
        heard = real + 1j * imaginary
        before, after = heard[:-1], heard[1:]
        sounding = np.minimum(np.abs(before), np.abs(after)) > GAP * np.abs(heard).max()
        if not sounding.any():
            return guess_hz
        before, after = before[sounding], after[sounding]
        step = after * np.conj(before) * np.exp(-1j * turn * hop)
        hz = settled + np.angle(step) * rate / (2 * np.pi * hop)
        level = np.abs(step)
        for _ in range(SETTLING_ROUNDS):
            weights = np.sqrt(level) / (1 + ((hz / settled - 1) / SETTLED_SPREAD) ** 2) ** 2
            settled = float((weights * hz).sum() / weights.sum())
        fall = -np.log(np.abs(after / before)) / hop
        decay = min(max(float((weights * fall).sum() / weights.sum()), 0.0), 3 / length)
    return settled
