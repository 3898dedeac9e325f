"""What a circuit is: values and units, part kinds, device models, the reader, and settings."""

from kickrender.circuit.circuit import Circuit
from kickrender.circuit.reader import read_circuit, read_circuit_text
from kickrender.circuit.records import (
    GROUND,
    Constant,
    Control,
    Model,
    Part,
    Points,
    Pulse,
    ResolvedCircuit,
    ResolvedPart,
    Sine,
    Wave,
)
from kickrender.circuit.shipped import shipped_circuits, shipped_packs

__all__ = [
    "GROUND",
    "Circuit",
    "Constant",
    "Control",
    "Model",
    "Part",
    "Points",
    "Pulse",
    "ResolvedCircuit",
    "ResolvedPart",
    "Sine",
    "Wave",
    "read_circuit",
    "read_circuit_text",
    "shipped_circuits",
    "shipped_packs",
]
