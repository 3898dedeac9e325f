"""The shape of a circuit file as pydantic models, one per table, those of parts and models made from the kinds.

Each entry of a file is checked on its own, so that one bad part does not hide the faults of the others;
`faults_of` turns what pydantic found into faults in this project's words. Nothing else in the package imports
pydantic (0.1 s), and the reader imports this file only when it first reads a circuit.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from functools import cache
from typing import Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, Field, ValidationError, create_model, model_validator
from pydantic_core import PydanticCustomError, core_schema

from kickrender.circuit.kinds import KINDS, Choice, FieldRule, Kind, Quantity
from kickrender.circuit.records import Constant, Points, Pulse, Sine, Wave
from kickrender.circuit.values import UNITS, shown
from kickrender.errors import Fault, InputError, nearest_name

NAME = re.compile(r"[A-Za-z0-9_-]+")
NAME_RULE = "letters, digits, _ and -"


class Leaf:
    """Reads one value with a function that raises InputError; `schema` describes it to an editor."""

    def __init__(self, read: Callable[[Any], Any], schema: dict[str, Any]) -> None:
        self.read, self.schema = read, schema

    def __get_pydantic_core_schema__(self, source: Any, handler: Any) -> core_schema.CoreSchema:
        return core_schema.no_info_plain_validator_function(self._check)

    def __get_pydantic_json_schema__(self, schema: Any, handler: Any) -> dict[str, Any]:
        return dict(self.schema)  # pydantic adds defaults and titles to what it is given

    def _check(self, raw: Any) -> Any:
        try:
            return self.read(raw)
        except InputError as error:
            fault = error.faults[0]
            raise _fault(fault.found, fault.allowed, fault.nearest) from None


def _fault(found: str, allowed: str = "", nearest: str | None = None) -> PydanticCustomError:
    return PydanticCustomError("fault", "{found}", {"found": found, "allowed": allowed, "nearest": nearest})


def read_name(raw: object) -> str:
    """A name as the contract has it, or an InputError."""
    if not isinstance(raw, str):
        raise InputError(Fault("name", shown(raw), f"a name in quotes: {NAME_RULE}"))
    if not NAME.fullmatch(raw):
        raise InputError(Fault("name", f"{shown(raw)} is not a name", NAME_RULE))
    return raw


def read_text(raw: object) -> str:
    """A text, or an InputError."""
    if not isinstance(raw, str):
        raise InputError(Fault("text", shown(raw), "a text in quotes"))
    return raw


def _read_scalar(raw: object) -> str | float:
    if isinstance(raw, bool) or not isinstance(raw, str | int | float):
        raise InputError(Fault("value", shown(raw), "a number or a text in quotes"))
    return raw


def _read_points(raw: object) -> tuple[tuple[float, float], ...]:
    allowed = 'a list of [time, voltage], such as [["0s", "0V"], ["1ms", "5V"]]'
    if not isinstance(raw, list) or not raw or not all(isinstance(pair, list) and len(pair) == 2 for pair in raw):
        raise InputError(Fault("points", shown(raw), allowed))
    time, volts = Quantity("s", "time", at_least=0.0), Quantity("V", "voltage")
    points = tuple((time.read(pair[0]), volts.read(pair[1])) for pair in raw)
    for (earlier, _), (later, _) in zip(points, points[1:], strict=False):
        if later <= earlier:
            found = f"a point at {later:g} s after one at {earlier:g} s"
            raise InputError(Fault("points", found, "times that strictly increase"))
    return points


def _quantity(rule: Quantity) -> Leaf:
    bounds = {"exclusiveMinimum": rule.above, "minimum": rule.at_least, "maximum": rule.at_most}
    number = {"type": "number"} | {key: bound for key, bound in bounds.items() if bound is not None}
    about = (
        rule.about
        + (f" [{rule.unit}]" if rule.unit else "")
        + f": a number or text such as {UNITS[rule.unit].examples}"
    )
    return Leaf(rule.read, {"anyOf": [number, {"type": "string"}], "description": about})


def _choice(rule: Choice) -> Leaf:
    return Leaf(rule.read, {"enum": list(rule.words), "description": rule.about})


def _nets(count: int) -> Leaf:
    def read(raw: object) -> tuple[str, ...]:
        if not isinstance(raw, list) or len(raw) != count:
            found = f"a list of {len(raw)}" if isinstance(raw, list) else shown(raw)
            raise InputError(Fault("nets", found, f"a list of {count} nets"))
        return tuple(read_name(net) for net in raw)

    return Leaf(read, {"type": "array", "items": {"type": "string"}, "minItems": count, "maxItems": count})


_LAW = Choice("how a walk from 0 to 1 maps onto the range", ("linear", "geometric"))

Name = Annotated[str, Leaf(read_name, {"type": "string", "pattern": f"^{NAME.pattern}$"})]
Text = Annotated[str, Leaf(read_text, {"type": "string"})]
Scalar = Annotated[str | float, Leaf(_read_scalar, {"type": ["number", "string"]})]
Volts = Annotated[float, _quantity(Quantity("V", "voltage"))]
FullScale = Annotated[float, _quantity(Quantity("V", "voltage written as 1.0 when no level is asked for", above=0.0))]
Seconds = Annotated[float, _quantity(Quantity("s", "time", above=0.0))]
Hertz = Annotated[float, _quantity(Quantity("Hz", "frequency", above=0.0))]
Degrees = Annotated[float, _quantity(Quantity("deg", "angle"))]
Kelvin = Annotated[float, _quantity(Quantity("K", "temperature"))]
Law = Annotated[Literal["linear", "geometric"], _choice(_LAW)]
PointList = Annotated[
    tuple[tuple[float, float], ...],
    Leaf(_read_points, {"type": "array", "minItems": 1, "items": {"type": "array", "minItems": 2, "maxItems": 2}}),
]


class Table(BaseModel):
    """A table that knows all its keys."""

    model_config = ConfigDict(extra="forbid", frozen=True)


class PulseTable(Table):
    """From rest to strike at t = 0, and back after `length`."""

    rest: Volts
    strike: Volts
    length: Seconds
    rise: Seconds = 2e-6
    fall: Seconds = 2e-6

    @model_validator(mode="after")
    def _in_order(self) -> PulseTable:
        if self.rise > self.length:
            raise _fault(
                f"a rise of {self.rise:g} s in a pulse of {self.length:g} s", "a rise no longer than the pulse"
            )
        return self


class SineTable(Table):
    """offset + amplitude sin(2 pi frequency t + phase)."""

    amplitude: Volts
    frequency: Hertz
    offset: Volts = 0.0
    phase: Degrees = 0.0


class InputTable(Table):
    """A net driven by a voltage over time, from ground: exactly one wave."""

    pulse: PulseTable | None = None
    constant: Volts | None = None
    sine: SineTable | None = None
    points: PointList | None = None

    @model_validator(mode="after")
    def _one_wave(self) -> InputTable:
        waves = tuple(type(self).model_fields)
        given = [key for key in waves if getattr(self, key) is not None]
        if len(given) != 1:
            raise _fault(" beside ".join(given) or "no wave", f"exactly one of {', '.join(waves)}")
        return self

    def wave(self) -> Wave:
        """The record of the one wave given."""
        if self.pulse:
            return Pulse(self.pulse.rest, self.pulse.strike, self.pulse.length, self.pulse.rise, self.pulse.fall)
        if self.sine:
            return Sine(self.sine.amplitude, self.sine.frequency, self.sine.offset, self.sine.phase)
        if self.points:
            return Points(tuple(time for time, _ in self.points), tuple(volts for _, volts in self.points))
        assert self.constant is not None
        return Constant(self.constant)


class ControlTable(Table):
    """What a player turns. Its values are read when its target, and so their unit, is known."""

    turns: Name | None = None
    drives: Name | None = None
    sets: Name | None = None
    low: Scalar | None = Field(default=None, alias="from")
    high: Scalar | None = Field(default=None, alias="to")
    start: Scalar | None = None
    law: Law = "linear"

    @model_validator(mode="after")
    def _one_act(self) -> ControlTable:
        given = [act for act in ("turns", "drives", "sets") if getattr(self, act) is not None]
        if len(given) != 1:
            raise _fault(" beside ".join(given) or "no target", "exactly one of turns, drives, sets")
        return self


class OutputTable(Table):
    """The net whose voltage is the sound."""

    net: Name
    full_scale: FullScale = 1.0


def _field(rule: FieldRule) -> tuple[Any, Any]:
    """Type and default of one key, for `create_model`."""
    if isinstance(rule, Quantity):
        if rule.optional or isinstance(rule.default, str):
            return Annotated[float, _quantity(rule)] | None, None
        return Annotated[float, _quantity(rule)], ... if rule.default is None else rule.default
    if isinstance(rule, Choice):
        return Annotated[str, _choice(rule)], rule.words[0]
    return Annotated[float, Leaf(rule.read, {"type": "boolean", "description": rule.about})], ...


@cache
def part_table(kind: str) -> type[Table]:
    """The shape of a part of this kind."""
    row = KINDS[kind]
    fields: dict[str, Any] = {"kind": (Literal[kind], ...)}
    fields |= {key: _field(rule) for key, rule in row.fields.items()}
    if row.model:
        fields["model"] = (Name, ...)
    for key, roles in {key: roles for wiring in row.wirings for key, roles in wiring.items()}.items():
        net: Any = Name if len(roles) == 1 else Annotated[tuple[str, ...], _nets(len(roles))]
        fields[key] = (net, ...) if len(row.wirings) == 1 else (net | None, None)
    return create_model(f"{kind} part", __base__=Table, __doc__=row.about, __validators__=_one_wiring(row), **fields)


def _one_wiring(row: Kind) -> dict[str, Any]:
    if len(row.wirings) == 1:
        return {}

    def check(self: Any) -> Any:
        given = [key for key in row.terminal_keys if getattr(self, key) is not None]
        if not any(set(given) == set(wiring) for wiring in row.wirings):
            ways = ", or ".join(" and ".join(wiring) for wiring in row.wirings)
            raise _fault(f"terminals given by {' and '.join(given)}" if given else "no terminals", ways)
        return self

    return {"one_wiring": model_validator(mode="after")(check)}


@cache
def model_table(kind: str) -> type[Table]:
    """The shape of a device model of this kind."""
    row = KINDS[kind]
    fields: dict[str, Any] = {"kind": (Literal[kind], ...), "source": (Text, "assumed")}
    fields |= {key: _field(rule) for key, rule in row.model.items()}
    return create_model(f"{kind} model", __base__=Table, __doc__=f"device data of a kind: {row.about}", **fields)


def faults_of(error: ValidationError, shape: type[BaseModel], place: Callable[..., str]) -> list[Fault]:
    """What pydantic found, as faults; `place(*keys)` names a place below the table that was checked."""
    return [_fault_of(detail, shape, place) for detail in error.errors(include_url=False)]


def _fault_of(detail: Mapping[str, Any], shape: type[BaseModel], place: Callable[..., str]) -> Fault:
    where, kind = detail["loc"], detail["type"]
    if kind == "extra_forbidden":
        known = _keys(shape, where[:-1])
        nearest = nearest_name(str(where[-1]), known)
        return Fault(place(*where), f"unknown key '{where[-1]}'", ", ".join(known), nearest)
    if kind == "missing":
        return Fault(place(*where[:-1]), f"key '{where[-1]}' is missing")
    if kind == "fault":
        context = detail["ctx"]
        return Fault(place(*where), context["found"], context["allowed"], context["nearest"])
    if kind == "model_type":
        return Fault(place(*where), shown(detail["input"]), "a table")
    return Fault(place(*where), detail["msg"])


def _keys(shape: Any, where: tuple[Any, ...]) -> list[str]:
    """The keys of the table at `where` inside `shape`."""
    for key in where:
        inner = shape.model_fields[key].annotation
        shape = next(kind for kind in getattr(inner, "__args__", (inner,)) if isinstance(kind, type))
    return [entry.alias or key for key, entry in shape.model_fields.items()]
