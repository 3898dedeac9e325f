"""One part by itself, at voltages of the test's choice: the currents it sends into its nets, and their slopes."""

from __future__ import annotations

from dataclasses import dataclass

import mpmath
import numpy as np

from kickrender.circuit.records import ResolvedCircuit, ResolvedPart
from kickrender.engine.lanes import FLAT, LONE
from kickrender.engine.plan import Plan
from kickrender.engine.program import build_program
from kickrender.engine.topology import numbers_of, stamp_all, topology_of
from tests.engine.doors import evaluate_devices

ROOM_K = 298.15


@dataclass(frozen=True)
class Found:
    """into : net -> f of its row, the current that flows into it [A]; slope : (row, column) -> df/dv [S]."""

    into: dict[str, float]
    slope: dict[tuple[str, str], float]


def evaluate(part: ResolvedPart, volts: dict[str, float], temperature_k: float = ROOM_K) -> Found:
    """What one part does at the given voltages; every one of its nets counts as unknown."""
    circuit = ResolvedCircuit("one part", temperature_k, {}, {}, {part.name: part}, next(iter(volts)), 1.0)
    stamps = stamp_all(circuit)
    topology = topology_of(circuit, stamps)
    assert set(topology.unknowns) <= set(volts)
    order = tuple(range(topology.size))
    program = build_program(topology, Plan(order, order))
    code, numbers = program.code, numbers_of(circuit, topology, stamps)
    layout = np.append(program.layout(numbers), np.zeros(len(FLAT)))
    vectors = np.zeros(code.vectors + len(FLAT))
    vectors[: code.size] = [volts[name] for name in topology.unknowns]
    scratch = [np.zeros(code.exponentials + len(FLAT)) for _ in range(3)]
    tanhs, slopes = np.zeros(code.tanhs + len(FLAT)), np.zeros(code.slopes)
    evaluate_devices(code, layout, vectors, *scratch, tanhs, slopes, True, LONE)
    outputs = vectors[code.v_outputs :]
    into = dict.fromkeys(topology.rows, 0.0)
    slope = {(row, column): 0.0 for row in topology.rows for column in topology.unknowns}
    names = {index: row for row, index in topology.rows.items()}
    for (row, column), value in zip(topology.entries_g, numbers.g, strict=True):
        if column < topology.size:
            into[names[row]] -= float(value) * volts[topology.unknowns[column]]
            slope[names[row], topology.unknowns[column]] -= float(value)
    for device in topology.devices:
        for row, output, sign in device.flows:
            into[row] += sign * float(outputs[output])
        for row, column, index, sign in device.derivatives:
            slope[row, column] -= sign * float(slopes[index])
    return Found(into, slope)


def thermal(temperature_k: float) -> mpmath.mpf:
    """kT/q with the SI's exact constants, at the working precision of mpmath. [V]"""
    return mpmath.mpf("1.380649e-23") * mpmath.mpf(temperature_k) / mpmath.mpf("1.602176634e-19")
