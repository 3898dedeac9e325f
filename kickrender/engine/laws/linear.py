"""Resistors, pots, switches, capacitors and inductors: parts that are only numbers in the matrices."""

from __future__ import annotations

from kickrender.circuit.records import ResolvedPart
from kickrender.engine.stamps import Stamps


def stamp_resistance(part: ResolvedPart, stamps: Stamps) -> None:
    """i = v / R, for resistors and switches."""
    stamps.conductance(part.terminals["a"], part.terminals["b"], 1.0 / part.values["resistance"])


def stamp_pot(part: ResolvedPart, stamps: Stamps) -> None:
    """Two legs that meet in the wiper; with two terminals the first leg alone."""
    if "wiper" not in part.terminals:
        stamps.conductance(part.terminals["a"], part.terminals["b"], 1.0 / part.values["first_leg"])
        return
    stamps.conductance(part.terminals["end_a"], part.terminals["wiper"], 1.0 / part.values["first_leg"])
    stamps.conductance(part.terminals["wiper"], part.terminals["end_b"], 1.0 / part.values["second_leg"])


def stamp_capacitor(part: ResolvedPart, stamps: Stamps) -> None:
    """i = C dv/dt."""
    stamps.capacitance(part.terminals["a"], part.terminals["b"], part.values["capacitance"])


def stamp_inductor(part: ResolvedPart, stamps: Stamps) -> None:
    """L di/dt = v_a - v_b; the current from a to b is an unknown of its own."""
    a, b, current = part.terminals["a"], part.terminals["b"], stamps.inner(part, "current")
    for row, column, sign in ((a, current, 1.0), (b, current, -1.0), (current, a, -1.0), (current, b, 1.0)):
        stamps.coefficient(row, column, sign, sign)
    stamps.rate(current, current, part.values["inductance"], typical=0.1)
