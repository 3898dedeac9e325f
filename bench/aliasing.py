"""What folds back into hearing: the hardest drive at the default oversampling against eight times finer."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from kickrender.circuit import ResolvedCircuit
from kickrender.engine import DEFAULT_TOLERANCE, solve
from kickrender.sound.decimation import decimate, margin_s

RATE_HZ = 48_000
COARSE, FINE = 8, 64
FINER = 100.0  # how much smaller a tolerance the finer solution is solved to
END_SHARE = 0.1  # of the hit, over which its spectrum is faded out
BANDS_HZ = ((20.0, 1_000.0), (1_000.0, 5_000.0), (5_000.0, 20_000.0))


@dataclass(frozen=True)
class Aliasing:
    """Differences to the finer rendering. [dB]

    oversampling_db : RMS over peak, same solution sampled finer. whole_db : sampled finer and solved finer.
    worst_db : per band, the largest difference of one spectral line over the largest line of all; only the end is
        windowed, since a hit begins at rest and most of what folds back comes from the strike.
    """

    oversampling_db: float
    whole_db: float
    worst_db: tuple[float, ...]


def aliasing(circuit: ResolvedCircuit, length_s: float = 1.0) -> Aliasing:
    """Render one hit at 48 kHz from 8 and from 64 times the rate, and compare."""
    coarse = _rendered(circuit, length_s, COARSE, DEFAULT_TOLERANCE)
    sampled_finer = _rendered(circuit, length_s, FINE, DEFAULT_TOLERANCE)
    finer = _rendered(circuit, length_s, FINE, DEFAULT_TOLERANCE / FINER)
    window = np.minimum(1.0, (coarse.size - np.arange(coarse.size)) / (END_SHARE * coarse.size))
    spectrum, difference = (np.abs(np.fft.rfft(window * x)) for x in (sampled_finer, coarse - sampled_finer))
    hz = np.fft.rfftfreq(coarse.size, 1.0 / RATE_HZ)
    worst = [_db(float(difference[(hz >= low) & (hz < high)].max() / spectrum.max())) for low, high in BANDS_HZ]
    return Aliasing(_difference_db(coarse, sampled_finer), _difference_db(coarse, finer), tuple(worst))


def _rendered(circuit: ResolvedCircuit, length_s: float, oversample: int, tolerance: float) -> np.ndarray:
    solution = solve(circuit, length_s + margin_s(RATE_HZ, oversample), tolerance=tolerance)
    count = round(RATE_HZ * length_s)
    return decimate(lambda first, n: solution.sample(RATE_HZ * oversample, n, first), count, oversample)


def _difference_db(a: np.ndarray, b: np.ndarray) -> float:
    return _db(math.sqrt(float(np.mean((a - b) ** 2))) / float(np.abs(b).max()))


def _db(ratio: float) -> float:
    return 20.0 * math.log10(max(ratio, 1e-300))
