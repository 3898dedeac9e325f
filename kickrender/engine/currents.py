"""Currents into the terminals of parts, at a given state."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from kickrender.circuit.records import GROUND, ResolvedCircuit
from kickrender.engine.equations import matrix_at
from kickrender.engine.lanes import FLAT, LONE, PADDING
from kickrender.engine.plan import Plan
from kickrender.engine.program import build_program
from kickrender.engine.topology import numbers_of, stamp_all, topology_of


def terminal_currents(circuit: ResolvedCircuit, state: Mapping[str, float]) -> dict[str, dict[str, float]]:
    """Part -> terminal -> current into it, without what charges capacitances. [A]

    Parameters
    ----------
    circuit : the circuit under its settings.
    state : voltage of every net, inner nets included, and current of every inductor, as `rest_state` gives them.

    A driven output (an op-amp's) has no law for its current: it gives what the others ask for, and is left out.
    """
    stamps = stamp_all(circuit)
    topology = topology_of(circuit, stamps)
    order = tuple(range(topology.size))
    program = build_program(topology, Plan(order, order))
    code, layout = program.code, program.layout(numbers_of(circuit, topology, stamps))
    coefficients, vectors = np.zeros(code.coefficients), np.zeros(code.vectors + len(FLAT))
    coefficients[: code.g] = layout[: code.g]
    vectors[: topology.size] = [state[name] for name in topology.unknowns]
    vectors[code.stride + code.inputs :][: code.known - code.inputs] = layout[code.n_held :]
    volts = np.array([state[name] for name in topology.inputs])
    at_rest = np.zeros(1), volts, np.zeros(code.inputs), np.zeros(3 * code.inputs)
    matrix_at(code, np.append(layout, np.zeros(PADDING)), coefficients, vectors, 0.0, *at_rest, LONE)
    first_output = dict(zip(topology.device_order, _starts(topology.devices, code.v_outputs), strict=True))
    value = {**state, GROUND: 0.0}
    currents: dict[str, dict[str, float]] = {}
    device_index = 0
    for part, own in zip(circuit.parts.values(), stamps, strict=True):
        into: dict[str, float] = {}
        for (row, column), siemens in zip(own.g_places, own.g_numbers, strict=True):
            into[row] = into.get(row, 0.0) + siemens * value[column]
        for device in own.devices:
            for row, output, sign in device.flows:
                into[row] = into.get(row, 0.0) - sign * float(vectors[first_output[device_index] + output])
            device_index += 1
        driven = set(own.own_equations)
        currents[part.name] = {
            terminal: into.get(net, 0.0) for terminal, net in part.terminals.items() if net not in driven
        }
    return currents


def _starts(devices: tuple[object, ...], first: int) -> list[int]:
    starts = []
    for device in devices:
        starts.append(first)
        first += device.outputs  # type: ignore[attr-defined]
    return starts
