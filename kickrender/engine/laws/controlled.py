"""Linear controlled sources: v_o = A (v_p - v_m) from ground, and a current g (v_p - v_m) between two nets."""

from __future__ import annotations

from kickrender.circuit.records import ResolvedPart
from kickrender.engine.stamps import Stamps


def stamp_voltage(part: ResolvedPart, stamps: Stamps) -> None:
    """The equation stands in place of the current law of the net `out`; nothing in it moves of itself."""
    out, gain = part.terminals["out"], part.values["gain"]
    row = stamps.own_equation(out)
    stamps.coefficient(row, out, 1.0, typical=1.0)
    stamps.coefficient(row, part.terminals["plus"], -gain, typical=-0.5)
    stamps.coefficient(row, part.terminals["minus"], gain, typical=0.5)


def stamp_current(part: ResolvedPart, stamps: Stamps) -> None:
    """The current flows through the source from `a` to `b`."""
    siemens = part.values["transconductance"]
    for row, sign in (("a", 1.0), ("b", -1.0)):
        for column, direction in (("plus", 1.0), ("minus", -1.0)):
            value = sign * direction
            stamps.coefficient(part.terminals[row], part.terminals[column], value * siemens, typical=value * 1e-4)
