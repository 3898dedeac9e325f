"""What a circuit is under given settings, and what it does at rest: controls, parts, rest voltages, poles."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from kickrender.circuit import Circuit
from kickrender.engine import poles, rest_state
from kickrender.sound.sidecar import circuit_facts


def describe(circuit: Circuit, settings: Mapping[str, float | str | bool] | None = None) -> dict[str, Any]:
    """Controls, parts with resolved values, rest voltages, and the poles of the circuit linearised at rest.

    Parameters
    ----------
    settings : mapping, optional
        As for `Circuit.resolve`.

    Returns
    -------
    facts : dict of plain JSON values
        Beside what a sidecar says of a circuit: "about", "controls" (name -> what it moves, range, start, value),
        "rest" (net -> volts; inductor -> amperes), "poles" (frequency in Hz, Q, time to -60 dB in s; None where it
        is infinite).

    Raises
    ------
    InputError
        If a setting is wrong.
    SolveError
        If no rest state is found.
    """
    resolved = circuit.resolve(settings)
    facts = circuit_facts(circuit, resolved)
    coils = {name for name, part in circuit.parts.items() if part.kind == "inductor"}
    return {
        **facts,
        "about": circuit.about,
        "controls": {
            name: {
                "act": control.act,
                "target": control.target,
                "from": control.low,
                "to": control.high,
                "law": control.law,
                "start": control.start,
                "value": resolved.settings[name],
                "unit": control.unit,
            }
            for name, control in circuit.controls.items()
        },
        "rest": {
            name: {"value": value, "unit": "A" if name in coils else "V"}
            for name, value in sorted(rest_state(resolved).items())
        },
        "poles": [
            {
                "frequency_hz": _finite(pole.frequency_hz),
                "q": _finite(pole.q),
                "decay_s": _finite(pole.decay_s),
                "rings": bool(pole.rings),
            }
            for pole in poles(resolved)
        ],
    }


def _finite(value: float) -> float | None:
    """JSON has no infinity."""
    return float(value) if math.isfinite(value) else None
