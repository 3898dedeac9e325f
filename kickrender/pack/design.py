"""Points spread over ranges otherwise than as a grid: seeded random, Latin hypercube and Sobol sets.

Points come from raw, version-stable random bits only (PCG64, and scipy's Sobol numbers without scipy's own scrambling,
whose stream may change), are rounded to 1e-6, and are the same on every machine. More points of a random or Sobol
set keep those there were; a Latin hypercube is laid out anew for each count.
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterator

import numpy as np

POINT_DIGITS = 6
MOST_POINTS = 100_000
_SOBOL_BITS = 30

Point = tuple[float, ...]


def points(kind: str, dimensions: int, count: int, seed: int) -> list[Point]:
    """`count` points of the unit cube.

    Parameters
    ----------
    kind : str
        "random" (independent), "latin-hypercube" (each of `count` even slices along every dimension holds one point),
        "sobol" (a Sobol sequence under a random digital shift, so that its points do not begin in a corner).
    dimensions, count : int
    seed : int

    Source: M. D. McKay, R. J. Beckman, W. J. Conover, Technometrics 21 (1979); I. M. Sobol, USSR Computational
    Mathematics and Mathematical Physics 7 (1967), numbers of S. Joe and F. Y. Kuo (2008) as in scipy.stats.qmc.
    """
    columns = {"random": _random, "latin-hypercube": _latin, "sobol": _sobol}[kind](dimensions, count, seed)
    return [tuple(round(share, POINT_DIGITS) for share in row) for row in zip(*columns, strict=True)]


def _random(dimensions: int, count: int, seed: int) -> list[list[float]]:
    return [[_share(bits) for bits, _ in zip(_stream(seed, k), range(count), strict=False)] for k in range(dimensions)]


def _latin(dimensions: int, count: int, seed: int) -> list[list[float]]:
    columns = []
    for k in range(dimensions):
        bits = _stream(seed, k)
        slices = list(range(count))
        for last in range(count - 1, 0, -1):  # Fisher and Yates: every order as likely as any other
            other = next(bits) % (last + 1)
            slices[last], slices[other] = slices[other], slices[last]
        columns.append([(one + _share(next(bits))) / count for one in slices])
    return columns


def _sobol(dimensions: int, count: int, seed: int) -> list[list[float]]:
    from scipy.stats import qmc  # half a second to import

    doublings = max(1, (count - 1).bit_length())
    whole = qmc.Sobol(dimensions, scramble=False, bits=_SOBOL_BITS).random_base2(doublings)[:count]
    columns = []
    for k in range(dimensions):
        shift = next(_stream(seed, k)) >> (64 - _SOBOL_BITS)
        shifted = [int(share * 2**_SOBOL_BITS) ^ shift for share in whole[:, k].tolist()]
        columns.append([(number + 0.5) / 2**_SOBOL_BITS for number in shifted])
    return columns


def _stream(seed: int, dimension: int) -> Iterator[int]:
    """64-bit numbers from the stream of this seed and dimension."""
    key = hashlib.sha256(f"kickrender design {seed} {dimension}".encode("ascii")).digest()
    stream = np.random.PCG64(int.from_bytes(key, "big"))
    while True:
        yield int(stream.random_raw())


def _share(bits: int) -> float:
    return ((bits >> 12) + 0.5) * 2.0**-52
