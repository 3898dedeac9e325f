"""How a solve can end, and what to try then."""

from __future__ import annotations

from kickrender.engine import stepper

OUTCOMES: dict[str, str] = {
    "no rest state": "No operating point was found. Look for nets held only by junctions, op-amps without feedback "
    "between equal inputs, or supplies that are missing; a large resistor to ground often helps.",
    "singular equations": "The circuit's equations have no unique solution. Look for nets that only capacitors or "
    "only inductors reach, or op-amps that drive each other without a time constant.",
    "step too small": "The circuit moves faster than the solver can follow. Look for positive feedback without a "
    "capacitor near this net; a few picofarads there make the transition finite.",
    "not finite": "A voltage left the range of numbers. Look for an unbounded feedback or a value off by a prefix "
    "near this net.",
    "too many steps": "The circuit never stops switching. Look for a self-oscillation near this net, render a "
    "shorter hit or loosen the tolerance.",
}

NAME_OF_STATUS = {
    stepper.STEP_TOO_SMALL: "step too small",
    stepper.NOT_FINITE: "not finite",
    stepper.TOO_MANY_STEPS: "too many steps",
    stepper.PIVOT_COLLAPSED: "singular equations",
}
