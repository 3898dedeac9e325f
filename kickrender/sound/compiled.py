"""Compiled loops of the measurements: one pass over the samples each.

They add and multiply in a fixed order, so that a gain set from them is the same on every machine. Most would be one
line of numpy; but each such line makes arrays as long as the sound, and handing out that memory took longer than
measuring it.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from kickrender.engine.compile import kernel

Floats = NDArray[np.float64]


@kernel
def running_energy(samples: Floats, sections: Floats, energy: Floats) -> None:
    """energy[k] = sum of the squares of the first k values of the samples after two biquads in series.

    Parameters
    ----------
    samples : array of float, shape (n,)
        Followed by silence as far as `energy` reaches.
    sections : array of float, shape (2, 5)
        b0, b1, b2, a1, a2 of each biquad.
    energy : array of float, shape (m + 1,), m >= n
        Changed in place.
    """
    b0, b1, b2, a1, a2 = sections[0]
    d0, d1, d2, c1, c2 = sections[1]
    p = q = r = s = total = 0.0
    n = len(samples)
    energy[0] = 0.0
    for k in range(len(energy) - 1):
        x = samples[k] if k < n else 0.0
        y = b0 * x + p
        p = b1 * x - a1 * y + q
        q = b2 * x - a2 * y
        z = d0 * y + r
        r = d1 * y - c1 * z + s
        s = d2 * y - c2 * z
        total += z * z
        energy[k + 1] = total


@kernel
def largest_rise(energy: Floats, window: int) -> float:
    """The largest of energy[k + window] - energy[k], k = 0 to n - window - 1, of an array of shape (n,), n > window."""
    largest = 0.0
    for k in range(len(energy) - window):
        largest = max(largest, energy[k + window] - energy[k])
    return largest


@kernel
def largest_magnitude(samples: Floats) -> tuple[int, float]:
    """Where the largest magnitude is, and what it is; the first one of several. Shape (n,), n >= 1."""
    place, largest = 0, abs(samples[0])
    for k in range(1, len(samples)):
        if abs(samples[k]) > largest:
            place, largest = k, abs(samples[k])
    return place, largest


@kernel
def first_reaching(samples: Floats, level: float) -> int:
    """The first sample whose magnitude is at least `level`; n when there is none. Shape (n,)."""
    for k in range(len(samples)):
        if abs(samples[k]) >= level:
            return k
    return len(samples)


@kernel
def last_reaching(samples: Floats, level: float) -> int:
    """The last sample whose magnitude is at least `level`; -1 when there is none. Shape (n,)."""
    for k in range(len(samples) - 1, -1, -1):
        if abs(samples[k]) >= level:
            return k
    return -1


@kernel
def mean_bin(spectrum: Floats) -> float:
    """Mean index of the bins of a spectrum weighted by their power; shape (2 n,), real and imaginary parts in turn."""
    power = moment = 0.0
    for k in range(len(spectrum) // 2):
        here = spectrum[2 * k] * spectrum[2 * k] + spectrum[2 * k + 1] * spectrum[2 * k + 1]
        power += here
        moment += k * here
    return moment / power


@kernel
def correlate(samples: Floats, shape: Floats, hop: int, sums: Floats) -> None:
    """sums[w] = sum over k of samples[w hop + k] shape[k].

    Parameters
    ----------
    samples : array of float, shape (n,), n >= (windows - 1) hop + length
    shape : array of float, shape (length,)
    hop : int
    sums : array of float, shape (windows,)
        Changed in place.
    """
    for w in range(len(sums)):
        total = 0.0
        for k in range(len(shape)):
            total += samples[w * hop + k] * shape[k]
        sums[w] = total


@kernel
def block_extremes(samples: Floats, lead: int, block: int, heights: Floats, bends: Floats) -> None:
    """The largest magnitude and the largest second difference of each block of a sound that stands in silence.

    Parameters
    ----------
    samples : array of float, shape (n,)
    lead : int
        Zeros before the first sample, at least one.
    block : int
        Samples in a block.
    heights, bends : array of float, shape (blocks,)
        Zeros, changed in place; the blocks cover the lead, the samples, and one zero more.
    """
    older = old = 0.0
    n = len(samples)
    for k in range(n + 2):
        x = samples[k] if k < n else 0.0
        # Both belong to the sample before this one.
        where = (lead + k - 1) // block
        heights[where] = max(heights[where], abs(old))
        bends[where] = max(bends[where], abs(older - 2.0 * old + x))
        older, old = old, x


@kernel
def half_cycles(samples: Floats, least: float, crossings: Floats, peaks: Floats, peak_places: Floats) -> int:
    """Cut a signal at its zero crossings: where each half cycle begins, how far it swings, and where.

    Half cycles that stay below `least` of the swings on both sides of them are ripple about a crossing and are
    swallowed: by their neighbours when these lie on one side of zero, else the crossing in their middle counts.
    Small ones before the first large one are dropped.

    Parameters
    ----------
    samples : array of float, shape (n,)
    least : float
        Between 0 and 1.
    crossings, peaks, peak_places : array of float, shape (n,)
        Changed in place. Places are counted in samples, with a fraction; peaks are magnitudes.

    Returns
    -------
    count : int
        Half cycles found. The last one is cut off by the end of the signal.
    """
    count = 0
    last = -1  # the last sample that was not zero
    begin = swing = place = 0.0
    for k in range(len(samples) + 1):
        ended = k == len(samples)
        if not ended and samples[k] == 0.0:
            continue
        if last >= 0 and (ended or (samples[k] > 0.0) != (samples[last] > 0.0)):
            crossings[count], peaks[count], peak_places[count] = begin, swing, place
            count = _swallow_ripple(least, crossings, peaks, peak_places, count)
            swing = 0.0
            if not ended:
                fall = abs(samples[last])
                begin = last + (k - last) * (fall / (fall + abs(samples[k])))
        elif last < 0 and not ended:
            begin = float(k)
        if not ended:
            if abs(samples[k]) > swing:
                swing, place = abs(samples[k]), float(k)
            last = k
    return count


_FARTHEST_RIPPLE = 16  # half cycles of ripple in a row: bounds the work on a noisy signal


@kernel
def _swallow_ripple(least: float, crossings: Floats, peaks: Floats, peak_places: Floats, new: int) -> int:
    """Fold ripple before half cycle `new` away; the number of half cycles that remain, `new` included."""
    limit = least * peaks[new]
    before, ripple = new - 1, 0.0
    while before >= 0 and peaks[before] < limit and new - before <= _FARTHEST_RIPPLE:
        ripple = max(ripple, peaks[before])
        before -= 1
    between = new - 1 - before
    if between == 0 or (before >= 0 and ripple >= least * peaks[before]):
        return new + 1
    if before >= 0 and between % 2 == 1:  # neighbours on one side of zero: one half cycle
        if peaks[new] > peaks[before]:
            peaks[before], peak_places[before] = peaks[new], peak_places[new]
        return before + 1
    middle = before + 1 + between // 2 if before >= 0 else new
    crossings[before + 1], peaks[before + 1], peak_places[before + 1] = crossings[middle], peaks[new], peak_places[new]
    return before + 2
