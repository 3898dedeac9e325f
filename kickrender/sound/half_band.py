"""Compiled half-band filters: halve a rate, or find the values half way between samples.

Only additions and multiplications, in an order that does not depend on the block or on how many values the
processor handles at once.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from kickrender.engine.compile import allocating_kernel, kernel

Floats = NDArray[np.float64]

_CHUNK = 512  # sums worked on at once: they stay in the fastest cache while the taps go by


@kernel
def symmetric_sums(values: Floats, taps: Floats, sums: Floats) -> None:
    """sums[i] += sum over j of taps[j] (values[i + m - 1 - j] + values[i + m + j]).

    Parameters
    ----------
    values : array of float, shape (n + 2 m - 1,)
    taps : array of float, shape (m,)
        m a multiple of four.
    sums : array of float, shape (n,)
        Changed in place.
    """
    n, m = len(sums), len(taps)
    for start in range(0, n, _CHUNK):
        width = min(_CHUNK, n - start)
        total = sums[start : start + width]
        for j in range(0, m, 4):
            # Four taps per pass: each pass reads and writes the running totals once.
            t0, t1, t2, t3 = taps[j], taps[j + 1], taps[j + 2], taps[j + 3]
            low, high = start + m - 1 - j, start + m + j
            a0, b0 = values[low : low + width], values[high : high + width]
            a1, b1 = values[low - 1 : low - 1 + width], values[high + 1 : high + 1 + width]
            a2, b2 = values[low - 2 : low - 2 + width], values[high + 2 : high + 2 + width]
            a3, b3 = values[low - 3 : low - 3 + width], values[high + 3 : high + 3 + width]
            for i in range(width):
                total[i] += (t0 * (a0[i] + b0[i]) + t1 * (a1[i] + b1[i])) + (
                    t2 * (a2[i] + b2[i]) + t3 * (a3[i] + b3[i])
                )


@allocating_kernel
def halve(signal: Floats, taps: Floats, halved: Floats) -> None:
    """Every other value of the filtered signal: halved[i] belongs to signal[2 i + 2 m - 1].

    Parameters
    ----------
    signal : array of float, shape (2 n + 4 m - 3,) or one longer
    taps : array of float, shape (m,)
    halved : array of float, shape (n,)
        Changed in place.
    """
    m, n = len(taps), len(halved)
    # Taken apart first, so that the sums run over neighbours in memory.
    even = np.empty(n + 2 * m - 1)
    for i in range(n + 2 * m - 1):
        even[i] = signal[2 * i]
    middle = signal[2 * m - 1 :]
    for i in range(n):
        halved[i] = 0.5 * middle[2 * i]
    symmetric_sums(even, taps, halved)


@allocating_kernel
def double(signal: Floats, taps: Floats, doubled: Floats) -> None:
    """The signal at twice the rate: the samples themselves, and the values half way between them.

    Parameters
    ----------
    signal : array of float, shape (n + 2 m - 1,)
    taps : array of float, shape (m,)
    doubled : array of float, shape (2 n,)
        doubled[2 i] = signal[i + m - 1], doubled[2 i + 1] lies half a sample later. Changed in place.
    """
    m, n = len(taps), len(doubled) // 2
    between = np.zeros(n)
    symmetric_sums(signal, taps, between)
    for i in range(n):
        doubled[2 * i] = signal[i + m - 1]
        doubled[2 * i + 1] = 2.0 * between[i]
