"""Further strikes into a circuit that still rings: every pulse of a hit starts at each of the times given."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from kickrender.circuit.kinds import Quantity
from kickrender.circuit.records import Pulse, ResolvedCircuit
from kickrender.circuit.values import shown
from kickrender.errors import Fault, InputError

ONCE: tuple[float, ...] = (0.0,)
_TIME = Quantity("s", "time of a strike", at_least=0.0, at_most=60.0)


def read_strikes(raw: object, place: str) -> tuple[float, ...]:
    """The times of a list such as ["0s", "0.18s"]. [s]

    Raises
    ------
    InputError
        If it is no list, a time cannot be read, the first is not 0, or times do not increase.
    """
    allowed = 'a list of times that starts at 0 and increases, such as ["0s", "0.18s"]'
    if not isinstance(raw, list) or not raw:
        raise InputError(Fault(place, shown(raw), allowed))
    times = tuple(_TIME.read(entry, place) for entry in raw)
    if times[0] != 0.0:
        raise InputError(Fault(place, f"the first strike at {times[0]:g} s", allowed))
    for earlier, later in zip(times, times[1:], strict=False):
        if later <= earlier:
            raise InputError(Fault(place, f"a strike at {later:g} s after one at {earlier:g} s", allowed))
    return times


def struck_at(circuit: ResolvedCircuit, times_s: Sequence[float], place: str = "hits") -> ResolvedCircuit:
    """The circuit with every pulse starting at each of these times. [s]

    Raises
    ------
    InputError
        If the circuit has no pulse, or one is not over when the next begins.
    """
    times = tuple(times_s)
    if times == ONCE:
        return circuit
    pulses = {name: wave for name, wave in circuit.inputs.items() if isinstance(wave, Pulse)}
    if not pulses:
        found = f"circuit '{circuit.name}' has no input given by a pulse"
        raise InputError(Fault(place, found, "a single strike for circuits that no pulse strikes"))
    shortest = min((later - earlier for earlier, later in zip(times, times[1:], strict=False)), default=0.0)
    for name, wave in pulses.items():
        whole = wave.length + wave.fall
        if len(times) > 1 and shortest < whole:
            found = f"strikes {shortest:g} s apart, and a pulse of input '{name}' that takes {whole:g} s"
            raise InputError(Fault(place, found, f"strikes at least {whole:g} s apart"))
    struck = {name: replace(wave, starts=times) for name, wave in pulses.items()}
    return replace(circuit, inputs={**circuit.inputs, **struck})
