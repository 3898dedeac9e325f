"""The circuit as a linear one about a state: for its poles and its small-signal response."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from kickrender.circuit.records import ResolvedCircuit
from kickrender.engine.equations import matrix_at
from kickrender.engine.lanes import FLAT, LONE, PADDING
from kickrender.engine.plan import Plan
from kickrender.engine.program import build_program
from kickrender.engine.solve import rest_state
from kickrender.engine.topology import numbers_of, stamp_all, topology_of


@dataclass(frozen=True, eq=False)
class Linear:
    """rates dx/dt + matrix x + input_rates du/dt + input_matrix u = 0, in small changes x and u.

    matrix, rates : (n, n), minus the Jacobian of f, and C.
    input_matrix, input_rates : (n, inputs).
    unknowns, inputs : what x and u are, by name.
    """

    matrix: NDArray[np.float64]
    rates: NDArray[np.float64]
    input_matrix: NDArray[np.float64]
    input_rates: NDArray[np.float64]
    unknowns: tuple[str, ...]
    inputs: tuple[str, ...]


def linearised(circuit: ResolvedCircuit, state: Mapping[str, float] | None = None) -> Linear:
    """The circuit's equations linearised about a state.

    Parameters
    ----------
    circuit : the circuit under its settings.
    state : voltage of every net and current of every inductor; the rest state by default. [V], [A]

    Raises
    ------
    SolveError
        If no state is given and no rest state is found.
    """
    state = rest_state(circuit) if state is None else state
    stamps = stamp_all(circuit)
    topology = topology_of(circuit, stamps)
    size, inputs = topology.size, len(topology.inputs)
    order = tuple(range(size))
    program = build_program(topology, Plan(order, order))
    code, numbers = program.code, numbers_of(circuit, topology, stamps)
    layout = program.layout(numbers)
    coefficients, vectors = np.zeros(code.coefficients), np.zeros(code.vectors + len(FLAT))
    coefficients[: code.g] = layout[: code.g]
    vectors[:size] = [state[name] for name in topology.unknowns]
    vectors[code.stride + inputs :][: code.known - inputs] = layout[code.n_held :]
    slopes = matrix_at(
        code,
        np.append(layout, np.zeros(PADDING)),
        coefficients,
        vectors,
        0.0,
        np.zeros(1),
        np.array([state[name] for name in topology.inputs]),
        np.zeros(inputs),
        np.zeros(3 * inputs),
        LONE,
    )
    matrix, rates = np.zeros((2, size, size))
    input_matrix, input_rates = np.zeros((2, size, inputs))
    for entry, (row, column) in enumerate(program.pattern):
        matrix[row, column] = coefficients[code.first_w + entry]
    for row, entry, source in code.input_g:
        input_matrix[row, source] -= layout[entry]
    for (row, slope, source), sign in zip(code.input_slope, code.input_sign, strict=True):
        input_matrix[row, source] += sign * slopes[slope]
    for (row, column), farad in zip(topology.entries_c, numbers.c, strict=True):
        if column < size:
            rates[row, column] += farad
        elif column < size + inputs:
            input_rates[row, column - size] += farad
    return Linear(matrix, rates, input_matrix, input_rates, topology.unknowns, topology.inputs)


def response(
    circuit: ResolvedCircuit,
    source: str,
    frequencies_hz: Sequence[float] | NDArray[np.float64],
    state: Mapping[str, float] | None = None,
) -> dict[str, NDArray[np.complex128]]:
    """Small-signal voltage of every net per volt at the input `source`; each of shape (frequencies,). [V/V]

    (i w rates + matrix) x = -(i w input_rates + input_matrix) u about the rest state, or another.

    Raises
    ------
    ValueError
        If the circuit has no such input.
    SolveError
        If no rest state is found.
    """
    linear = linearised(circuit, state)
    if source not in linear.inputs:
        raise ValueError(f"no input '{source}'; inputs: {', '.join(linear.inputs) or 'none'}")
    m = linear.inputs.index(source)
    s = 2j * np.pi * np.asarray(frequencies_hz, dtype=np.float64)[:, None, None]
    left = s * linear.rates + linear.matrix
    right = -(s * linear.input_rates[:, m : m + 1] + linear.input_matrix[:, m : m + 1])
    x = np.linalg.solve(left, right)[:, :, 0]
    answer = {name: np.ascontiguousarray(x[:, k]) for k, name in enumerate(linear.unknowns)}
    answer[source] = np.ones(len(x), np.complex128)
    return answer
