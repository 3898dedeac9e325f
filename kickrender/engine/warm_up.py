"""Compile every kernel of the engine ahead of the first hit, so that workers find the code on disk."""

from __future__ import annotations

from kickrender.circuit.records import Constant, ResolvedCircuit, ResolvedPart
from kickrender.engine.solve import solve_each


def warm_up() -> None:
    """Solve two tiny hits: one alone and two side by side. Quick when the compiled code is on disk."""
    circuit = ResolvedCircuit(
        name="warm-up",
        temperature_k=298.15,
        nets={},
        inputs={"in": Constant(1.0)},
        parts={
            "R1": ResolvedPart("R1", "resistor", {"a": "in", "b": "out"}, {"resistance": 1e3}),
            "C1": ResolvedPart("C1", "capacitor", {"a": "out", "b": "ground"}, {"capacitance": 1e-6}),
        },
        output="out",
        full_scale_v=1.0,
    )
    for count in (1, 2):
        for outcome in solve_each([circuit] * count, [1e-4] * count):
            outcome.sample(48000.0, 2)  # type: ignore[union-attr]
