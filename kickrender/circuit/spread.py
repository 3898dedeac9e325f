"""Component spread: how far real parts and the room lie from what a circuit's file says, take by take.

Tolerances are given for kinds ("capacitor"), for one part ("C_left"), for a device's own numbers ("npn.forward_gain",
"Q_bend.saturation_current") and for the room ("temperature"); the closest to the part wins. Every number of every
part of every take has a stream of its own, named by seed, part and take: so a take is the same for ever, whatever
else is spread, however many takes there are, and in whichever order they are made.

Streams are the raw output of PCG64 (M. E. O'Neill, "PCG", 2014, as in numpy, whose raw bit streams do not change),
keyed by SHA-256. Normal deviates follow the polar method of Marsaglia and Bray (SIAM Review 6, 1964), which needs a
logarithm, here a correctly rounded one, and a square root: the same bits everywhere.
"""

from __future__ import annotations

import hashlib
import json
import math
import re
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from kickrender.circuit import exact
from kickrender.circuit.circuit import Circuit
from kickrender.circuit.kinds import KINDS, Choice, Kind, Quantity
from kickrender.circuit.records import Part, ResolvedCircuit
from kickrender.circuit.settings import TEMPERATURE, resolve
from kickrender.circuit.values import HIGHEST_TEMPERATURE_K, LOWEST_TEMPERATURE_K, parse_value, shown
from kickrender.errors import Fault, InputError, nearest_name

DISTRIBUTION = Choice("how values lie within their tolerance", ("normal", "uniform"))
DEVIATIONS = 3.0  # standard deviations of a normal spread that make its tolerance, where it is cut off
WIDEST_ROOM_K = 50.0
_MAIN = "value"  # the field that a tolerance on a part or kind without a key is of
_PERCENT = re.compile(r"([^%]*)%")
_ROOM = re.compile(r"(.*?)\s*[CK]?")


@dataclass(frozen=True)
class Spread:
    """Tolerances, and the seed of their streams.

    tolerances : "kind", "kind.key", "part" or "part.key" -> greatest relative deviation, above 0 and up to 1.
    room_k : greatest deviation of the temperature. [K]
    distribution : "normal" (standard deviation a third of the tolerance, cut off at the tolerance) or "uniform".
    """

    seed: str
    tolerances: Mapping[str, float] = field(default_factory=dict)
    room_k: float = 0.0
    distribution: str = "normal"

    def tolerance(self, part: Part, key: str) -> float:
        """The tolerance of one of a part's numbers; 0 when it has none."""
        bare = (part.name, part.kind) if key == _MAIN else ()
        names = (f"{part.name}.{key}", *bare[:1], f"{part.kind}.{key}", *bare[1:])
        return next((self.tolerances[name] for name in names if name in self.tolerances), 0.0)


@dataclass(frozen=True)
class Deviations:
    """One take: what every spread number is multiplied by, and what is added to the temperature. [1], [K]"""

    factors: Mapping[str, Mapping[str, float]]  # part -> key -> factor
    room_k: float = 0.0

    @property
    def flat(self) -> dict[str, float]:
        """All of it in one table, "R1.value" -> 0.998."""
        flat = {f"{part}.{key}": factor for part, row in self.factors.items() for key, factor in row.items()}
        return flat | ({TEMPERATURE: self.room_k} if self.room_k else {})


_drawn: dict[object, Deviations] = {}  # a pack's hits share few takes
_MOST_KEPT = 1000


def deviations(circuit: Circuit, spread: Spread, take: int) -> Deviations:
    """The take of that number of a circuit: every spread number's factor, drawn from its own stream."""
    key = (circuit.digest, spread.seed, *spread.tolerances.items(), spread.room_k, spread.distribution, take)
    if key not in _drawn:
        if len(_drawn) >= _MOST_KEPT:
            _drawn.clear()
        _drawn[key] = _draw(circuit, spread, take)
    return _drawn[key]


def _draw(circuit: Circuit, spread: Spread, take: int) -> Deviations:
    factors: dict[str, dict[str, float]] = {}
    for part in circuit.parts.values():
        for key in spread_keys(part):
            if tolerance := spread.tolerance(part, key):
                deviate = _deviate(spread, f"{part.name}.{key}", take)
                factors.setdefault(part.name, {})[key] = 1.0 + tolerance * deviate
    room_k = spread.room_k * _deviate(spread, TEMPERATURE, take) if spread.room_k else 0.0
    return Deviations(factors, room_k)


def resolve_spread(
    circuit: Circuit, settings: Mapping[str, float | str | bool], drawn: Deviations, place: str = "setting"
) -> ResolvedCircuit:
    """The circuit under given settings, built from parts that deviate; see `Circuit.resolve`.

    Every deviation applies to the value that the settings leave; a part's two alike junctions stay alike.
    """
    resolved = resolve(circuit, settings, place, drawn.factors)
    kelvin = min(max(resolved.temperature_k + drawn.room_k, LOWEST_TEMPERATURE_K), HIGHEST_TEMPERATURE_K)
    return replace(resolved, temperature_k=kelvin, spread=drawn.flat)


def spread_keys(part: Part) -> list[str]:
    """What of a part can be spread: its values and its model's."""
    row = KINDS[part.kind]
    return _spread_fields(row) + [key for key in row.model if part.model and key in part.model.values]


def _deviate(spread: Spread, name: str, take: int) -> float:
    """One draw between -1 and 1 from the stream of that name and take."""
    uniform = _uniforms(spread.seed, name, take)
    if spread.distribution == "uniform":
        return 2.0 * next(uniform) - 1.0
    while True:
        u, v = 2.0 * next(uniform) - 1.0, 2.0 * next(uniform) - 1.0
        square = u * u + v * v
        if square < 1.0:
            deviate = u * math.sqrt(-2.0 * exact.log(square) / square) / DEVIATIONS
            if abs(deviate) < 1.0:  # cut off, not piled up at the ends
                return deviate


def _uniforms(seed: str, name: str, take: int) -> Iterator[float]:
    """Numbers strictly between 0 and 1, multiples of 2^-53, from the stream of these names."""
    key = json.dumps(["kickrender spread", seed, name, take], ensure_ascii=True).encode("ascii")
    stream = np.random.PCG64(int.from_bytes(hashlib.sha256(key).digest(), "big"))
    while True:
        yield ((int(stream.random_raw()) >> 12) + 0.5) * 2.0**-52


def read_spread(given: Mapping[str, Any], seed: str, distribution: object, place: Callable[..., str]) -> Spread:
    """The spread written as a table of tolerances; names are checked later, by `spread_faults`.

    Parameters
    ----------
    given : mapping
        Name -> "5%" (or a share, 0.05); "temperature" -> "3C". A name's keys may be a table of their own, as TOML
        writes `npn.forward_gain = "30%"`.
    place : function
        From keys to the place a fault is reported at.

    Raises
    ------
    InputError
        With every fault: a tolerance that is none, below 0 or over 100 %, an unknown distribution.
    """
    faults: list[Fault] = []
    tolerances: dict[str, float] = {}
    room_k = 0.0
    for name, raw in given.items():
        entries = {(name, key): value for key, value in raw.items()} if isinstance(raw, dict) else {(name,): raw}
        for keys, value in entries.items():
            try:
                if keys == (TEMPERATURE,):
                    room_k = _read_room(value, place(*keys))
                else:
                    tolerances[".".join(keys)] = read_tolerance(value, place(*keys))
            except InputError as error:
                faults += error.faults
    try:
        word = DISTRIBUTION.read(distribution, place("distribution"))
    except InputError as error:
        faults += error.faults
    if faults:
        raise InputError(faults)
    return Spread(seed, tolerances, room_k, word)


def read_tolerance(raw: object, place: str) -> float:
    """A tolerance as a share: "5%" is 0.05; raises InputError unless above 0 and up to 100 %."""
    percent = _PERCENT.fullmatch(raw.strip()) if isinstance(raw, str) else None
    allowed = "above 0 % and up to 100 %, such as '5%' or 0.05"
    try:
        value = parse_value(percent.group(1) if percent else raw, "", place)
    except InputError:
        raise InputError(Fault(place, f"{shown(raw)} is not a tolerance", allowed)) from None
    share = value / 100.0 if percent else value
    if not 0.0 < share <= 1.0:
        raise InputError(Fault(place, f"a tolerance of {100.0 * share:g} %", allowed))
    return share


def _read_room(raw: object, place: str) -> float:
    match = _ROOM.fullmatch(raw.strip()) if isinstance(raw, str) else None
    allowed = f"a deviation above 0 and up to {WIDEST_ROOM_K:g} C, such as '3C'"
    try:
        value = parse_value(match.group(1) if match else raw, "", place)
    except InputError:
        raise InputError(Fault(place, f"{shown(raw)} is not a deviation of temperature", allowed)) from None
    if not 0.0 < value <= WIDEST_ROOM_K:
        raise InputError(Fault(place, f"{shown(raw)} is out of range", allowed))
    return value


def spread_faults(spread: Spread, circuits: Iterable[Circuit], place: Callable[..., str]) -> list[Fault]:
    """Tolerances of what no kind and none of the circuits' parts has."""
    known: dict[str, None] = {}
    for kind, row in KINDS.items():
        known |= dict.fromkeys(_names(kind, [*_spread_fields(row), *row.model]))
    for circuit in circuits:
        for part in circuit.parts.values():
            known |= dict.fromkeys(_names(part.name, spread_keys(part)))
    faults = []
    for name in spread.tolerances:
        if name not in known:
            own = [key for key in known if key.split(".")[0] == name.split(".")[0]]
            allowed = ", ".join(own) or "a kind of part or a part, such as resistor, npn.forward_gain or R1"
            found = f"nothing called '{name}' to spread"
            faults.append(Fault(place(*name.split(".")), found, allowed, nearest_name(name, known)))
    return faults


def _spread_fields(row: Kind) -> list[str]:
    """Fields of a kind that can be spread: values, not positions and others with an upper end."""
    return [key for key, rule in row.fields.items() if isinstance(rule, Quantity) and rule.at_most is None]


def _names(owner: str, keys: Iterable[str]) -> list[str]:
    """How tolerances of these keys may be called; the main one bears the owner's own name."""
    return [name for key in keys for name in ([owner] if key == _MAIN else []) + [f"{owner}.{key}"]]
