"""What a circuit is under given settings, and what it does at rest: controls, parts, voltages, currents, poles."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from kickrender.circuit import Circuit
from kickrender.engine import Pole, poles, rest_state
from kickrender.engine.currents import terminal_currents
from kickrender.sound.sidecar import circuit_facts
from kickrender.study.bench_view import DROP_OPEN_S, poles_with_drop_open


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
        "rest" (net -> volts; inductor -> amperes), "currents" (part -> terminal -> amperes into it, at rest), "poles"
        (frequency in Hz, Q, time to -60 dB in s; None where it is infinite) at rest, and "poles_with_drop_open" about
        the state "drop_open_s" after the strike.

    Raises
    ------
    InputError
        If a setting is wrong.
    SolveError
        If no rest state is found.
    """
    resolved = circuit.resolve(settings)
    facts = circuit_facts(circuit, resolved)
    rest = rest_state(resolved)
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
        "rest": {name: {"value": value, "unit": "A" if name in coils else "V"} for name, value in sorted(rest.items())},
        "currents": {
            part: {terminal: {"value": value, "unit": "A"} for terminal, value in terminals.items()}
            for part, terminals in terminal_currents(resolved, rest).items()
        },
        "poles": [_pole(pole) for pole in poles(resolved, rest)],
        "drop_open_s": DROP_OPEN_S,
        "poles_with_drop_open": [_pole(pole) for pole in poles_with_drop_open(resolved)],
    }


def _pole(pole: Pole) -> dict[str, Any]:
    return {
        "frequency_hz": _finite(pole.frequency_hz),
        "q": _finite(pole.q),
        "decay_s": _finite(pole.decay_s),
        "rings": bool(pole.rings),
    }


def _finite(value: float) -> float | None:
    """JSON has no infinity."""
    return float(value) if math.isfinite(value) else None
