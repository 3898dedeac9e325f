"""One part on the bench: its currents and slopes at given voltages, as the engine's kernels compute them."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from kickrender.circuit import ResolvedCircuit, ResolvedPart
from kickrender.engine.equations import matrix_at
from kickrender.engine.lanes import LONE, PADDING
from kickrender.engine.plan import Plan
from kickrender.engine.program import build_program
from kickrender.engine.topology import Topology, numbers_of, stamp_all, topology_of
from tests.engine.doors import evaluate_devices, residual


def topology_with(part: ResolvedPart, temperature_k: float = 298.15) -> Topology:
    """The structure of a circuit of this part alone, every net of it an unknown."""
    chosen = _circuit(part, temperature_k)
    return topology_of(chosen, stamp_all(chosen))


def measured(
    part: ResolvedPart, volts: Mapping[str, float], temperature_k: float
) -> tuple[dict[str, float], dict[tuple[str, str], float], dict[tuple[str, str], float]]:
    """f, -df/dx and C of C x' = f(x) by the names of rows and unknowns.

    A net's row is the sum of the currents into it; an op-amp output's row is named `net.driven`. [A], [S], [F]
    """
    chosen = _circuit(part, temperature_k)
    stamps = stamp_all(chosen)
    topology = topology_of(chosen, stamps)
    order = tuple(range(topology.size))
    program = build_program(topology, Plan(order, order))
    code, layout = program.code, program.layout(numbers_of(chosen, topology, stamps))
    numbers = np.append(layout, np.zeros(PADDING))
    coefficients, vectors = np.zeros(code.coefficients), np.zeros(code.vectors + PADDING)
    coefficients[: code.g] = layout[: code.g]
    coefficients[code.g : code.g + 2] = 1.0, -1.0
    vectors[: code.size] = [volts[name] for name in topology.unknowns]
    arguments, exp_slopes, exp_values = np.zeros((3, code.exponentials + PADDING))
    tanhs, slopes = np.zeros(code.tanhs + PADDING), np.zeros(code.slopes)
    evaluate_devices(code, numbers, vectors, arguments, exp_slopes, exp_values, tanhs, slopes, True, LONE)
    residual(code, numbers, coefficients, vectors, np.zeros(code.stride), 0.0, LONE)
    rows = {index: name for name, index in topology.rows.items()}
    f = {rows[k]: float(vectors[code.v_y + k]) for k in range(code.size)}
    none = np.zeros(code.inputs)
    matrix_at(code, numbers, coefficients, vectors, 0.0, np.zeros(1), none, none, np.zeros(3 * code.inputs), LONE)
    slope = {
        (rows[row], topology.unknowns[column]): float(coefficients[code.first_w + entry])
        for entry, (row, column) in enumerate(program.pattern)
    }
    capacitance: dict[tuple[str, str], float] = {}
    for index, entry in enumerate(program.c_of_entry):
        row, column = topology.entries_c[entry]
        capacitance[rows[row], topology.unknowns[column]] = float(layout[code.n_c + index])
    return f, slope, capacitance


def _circuit(part: ResolvedPart, temperature_k: float) -> ResolvedCircuit:
    return ResolvedCircuit(
        name="bench",
        temperature_k=temperature_k,
        nets={},
        inputs={},
        parts={part.name: part},
        output=next(iter(part.terminals.values())),
        full_scale_v=1.0,
    )
