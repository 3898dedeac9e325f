"""What a circuit is, as frozen records that were checked when they were made.

`Circuit` is a file as its author wrote it, with every name resolved and every value in SI units.
`ResolvedCircuit` is that circuit under given settings: plain electrical values, nothing left to turn. It is
all the engine ever sees.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

GROUND = "ground"


@dataclass(frozen=True)
class Model:
    """Device data: `values` holds every key of the kind, defaults filled in, SI units, at 25 C.

    A term that is switched off (no Early effect) is absent from `values`.
    """

    name: str
    kind: str
    values: Mapping[str, float]
    source: str = "assumed"


@dataclass(frozen=True)
class Pulse:
    """Rises from `rest` at t = 0 over `rise`, falls over `fall` from `length` after the rise began. [V], [s]

    starts : when it rises; every pulse is over before the next begins.
    """

    rest: float
    strike: float
    length: float
    rise: float = 2e-6
    fall: float = 2e-6
    starts: tuple[float, ...] = (0.0,)


@dataclass(frozen=True)
class Constant:
    """A level that does not move. [V]"""

    level: float


@dataclass(frozen=True)
class Sine:
    """offset + amplitude sin(2 pi frequency t + phase); held at its t = 0 value before. [V], [Hz], [deg]"""

    amplitude: float
    frequency: float
    offset: float = 0.0
    phase_deg: float = 0.0


@dataclass(frozen=True)
class Points:
    """Piecewise linear through (times, volts), first voltage before, last voltage after. [s], [V]"""

    times: tuple[float, ...]
    volts: tuple[float, ...]


Wave = Pulse | Constant | Sine | Points


@dataclass(frozen=True)
class Part:
    """One part as its author wrote it.

    terminals : role -> net, in the order of the kind's row in the table of kinds.
    values : the kind's own fields in SI units: resistor "value" [ohm], capacitor "value" [F], inductor "value"
        [H], pot "value" [ohm] and "at" (0 to 1), switch "closed" (0 or 1).
    """

    name: str
    kind: str
    terminals: Mapping[str, str]
    values: Mapping[str, float] = field(default_factory=dict)
    taper: str = "linear"
    model: Model | None = None


@dataclass(frozen=True)
class Control:
    """What a player turns: a pot's position, an input's level or a part's value.

    act : "turns" (a pot), "drives" (an input's level), "sets" (a part's value).
    low, high : its range in its own units (0 and 1 for a pot); low may exceed high.
    """

    name: str
    act: Literal["turns", "drives", "sets"]
    target: str
    low: float
    high: float
    start: float
    law: Literal["linear", "geometric"] = "linear"
    unit: str = ""


@dataclass(frozen=True)
class ResolvedPart:
    """One part under given settings.

    values : electrical values: resistor and switch "resistance" [ohm], capacitor "capacitance" [F], inductor
        "inductance" [H], pot "first_leg" [ohm] and, with three terminals, "second_leg" [ohm].
    """

    name: str
    kind: str
    terminals: Mapping[str, str]
    values: Mapping[str, float] = field(default_factory=dict)
    model: Model | None = None


@dataclass(frozen=True)
class ResolvedCircuit:
    """A circuit under given settings: what the engine solves.

    nets : held nets -> voltage; `ground` is not listed and is 0 V. [V]
    inputs : driven net -> wave.
    settings : every control and every setting given, in canonical order, in SI units; for people and sidecars.
    spread : how this one deviates from the circuit as written, "R1.value" -> factor, "temperature" -> kelvin added;
        empty for parts that are exactly what they say.
    """

    name: str
    temperature_k: float
    nets: Mapping[str, float]
    inputs: Mapping[str, Wave]
    parts: Mapping[str, ResolvedPart]
    output: str
    full_scale_v: float
    settings: Mapping[str, float | bool] = field(default_factory=dict)
    spread: Mapping[str, float] = field(default_factory=dict)
