"""Natural frequencies of the circuit linearised about a state."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from kickrender.circuit.records import ResolvedCircuit
from kickrender.engine.linearise import linearised

_RINGS_ABOVE_Q = 0.5
_ROUNDING = 1e-14


@dataclass(frozen=True)
class Pole:
    """One pole or conjugate pair of C x' = J x.

    frequency_hz : |s|/(2 pi). q : quality, 0.5 for a real pole, negative if it grows. decay_s : time to -60 dB of
    e^(Re s t), infinite or negative if it does not decay.
    """

    frequency_hz: float
    q: float
    decay_s: float

    @property
    def rings(self) -> bool:
        """Whether it is a pair of conjugate poles."""
        return abs(self.q) > _RINGS_ABOVE_Q * (1.0 + 1e-9)


def poles(circuit: ResolvedCircuit, state: Mapping[str, float] | None = None) -> list[Pole]:
    """Poles of the circuit linearised about `state` (its rest state by default), lowest frequency first.

    Finite eigenvalues s of det(s C + G + device slopes) = 0; those of pole pairs are given once.

    Raises
    ------
    SolveError
        If no rest state is found.
    """
    from scipy import linalg  # slow to import, and rendering does not need it

    linear = linearised(circuit, state)
    # rows differ by 1e12 (current laws beside an op-amp's rate), and the algorithm's rounding is that of the largest
    scale = np.abs(linear.matrix).max(axis=1, keepdims=True)
    scale[scale == 0.0] = 1.0
    matrix, rates = linear.matrix / scale, linear.rates / scale
    values, weights = linalg.eig(matrix, rates, right=False, homogeneous_eigvals=True)
    # infinite eigenvalues belong to unknowns without a time constant: their weights are rounding
    finite = np.abs(weights) * np.abs(matrix).max() > _ROUNDING * np.abs(rates).max() * np.abs(values)
    found = []
    for s in -(values[finite] / weights[finite]):
        size = abs(s)
        if s.imag < -1e-9 * size or size == 0.0 or size > 1e11:
            continue
        paired = s.imag > 1e-9 * size
        quality = (
            -size / (2.0 * s.real)
            if paired and s.real != 0.0
            else (np.copysign(0.5, -s.real) if not paired else np.inf)
        )
        decay_s = np.log(1000.0) / -s.real if s.real != 0.0 else np.inf
        found.append(Pole(float(size / (2.0 * np.pi)), float(quality), float(decay_s)))
    return sorted(found, key=lambda pole: pole.frequency_hz)
