"""Natural frequencies of the circuit linearised at its rest state."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from kickrender.circuit.records import ResolvedCircuit
from kickrender.engine.equations import matrix_at
from kickrender.engine.lanes import FLAT, PADDING
from kickrender.engine.plan import Plan
from kickrender.engine.program import build_program
from kickrender.engine.solve import rest_state
from kickrender.engine.topology import Topology, numbers_of, stamp_all, topology_of

_RINGS_ABOVE_Q = 0.5


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


def poles(circuit: ResolvedCircuit) -> list[Pole]:
    """Poles of the circuit linearised at its rest state, lowest frequency first.

    Finite eigenvalues s of det(s C + G + device slopes) = 0; those of pole pairs are given once.

    Raises
    ------
    SolveError
        If no rest state is found.
    """
    from scipy import linalg  # slow to import, and rendering does not need it

    matrix, rates, _ = linearised(circuit)
    # infinite eigenvalues belong to unknowns without a time constant; scaling by the largest rate keeps them apart
    values, weights = linalg.eig(matrix, rates, right=False, homogeneous_eigvals=True)
    finite = np.abs(weights) > 1e-13 * np.abs(values)
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


def linearised(circuit: ResolvedCircuit) -> tuple[np.ndarray, np.ndarray, Topology]:
    """Minus the Jacobian of f and C, shape (n, n) each, at the rest state, in the topology's rows and columns."""
    state = rest_state(circuit)
    stamps = stamp_all(circuit)
    topology = topology_of(circuit, stamps)
    order = tuple(range(topology.size))
    program = build_program(topology, Plan(order, order))
    code, layout = program.code, program.layout(numbers_of(circuit, topology, stamps))
    coefficients, vectors = np.zeros(code.coefficients), np.zeros(code.vectors + len(FLAT))
    coefficients[: code.g] = layout[: code.g]
    vectors[: code.size] = [state[name] for name in topology.unknowns]
    vectors[code.stride + code.inputs :][: code.known - code.inputs] = layout[code.n_held :]
    volts = np.array([state[name] for name in topology.inputs])
    matrix_at(
        code,
        np.append(layout, np.zeros(PADDING)),
        coefficients,
        vectors,
        0.0,
        np.zeros(1),
        volts,
        np.zeros(code.inputs),
        np.zeros(3 * code.inputs),
    )
    matrix, rates = np.zeros((2, topology.size, topology.size))
    first = code.first_w
    for entry, (row, column) in enumerate(program.pattern):
        matrix[row, column] = coefficients[first + entry]
    for index, entry in enumerate(program.c_of_entry):
        row, column = topology.entries_c[entry]
        rates[row, column] += layout[code.n_c + index]
    return matrix, rates, topology
