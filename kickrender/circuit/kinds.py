"""The table of part kinds: the one place that knows terminals, fields, units and model keys.

A row says how a kind is written in a file, what its models hold, what electrical values the engine gets, and what
its terminals do at rest (conduct, drive, sit on a coil), which is all the checks of a circuit need. A new kind is
one row here, one equation file in the engine, its models in models.toml and its reference values in the tests.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from types import MappingProxyType

from kickrender.circuit import exact
from kickrender.circuit.records import Part
from kickrender.circuit.values import format_value, parse_value, shown
from kickrender.errors import Fault, InputError, nearest_name

POT_END_OHM = 1.0  # the wiper never reaches the bare end: a track's contact resistance
SWITCH_CLOSED_OHM = 10e-3
SWITCH_OPEN_OHM = 1e12
TAPER_SPAN = 81.0  # a log taper is at (81^0.5 - 1)/80 = 10 % of its track in the middle


@dataclass(frozen=True)
class Quantity:
    """A value with a unit and a range, as a field of a part or a key of a model.

    default : taken when the file gives none; a text names the key whose value is taken; None means required.
    optional : with default None, the term is off unless given.
    above, at_least, at_most : the range, each bound where there is one.
    """

    unit: str
    about: str
    default: float | str | None = None
    optional: bool = False
    above: float | None = None
    at_least: float | None = None
    at_most: float | None = None

    def read(self, raw: object, place: str = "value") -> float:
        """The checked value of what a file or a setting says, in SI units; raises InputError."""
        value = parse_value(raw, self.unit, place)
        low = (self.above is not None and value <= self.above) or (self.at_least is not None and value < self.at_least)
        if low or (self.at_most is not None and value > self.at_most):
            raise InputError(Fault(place, f"{shown(raw)} is out of range", self.range))
        return value

    @property
    def range(self) -> str:
        """The range in words."""
        bounds = []
        if self.above is not None:
            bounds.append(f"above {format_value(self.above, self.unit)}")
        if self.at_least is not None and self.at_most is not None:
            return f"{format_value(self.at_least, self.unit)} to {format_value(self.at_most, self.unit)}"
        if self.at_least is not None:
            bounds.append(f"{format_value(self.at_least, self.unit)} or more")
        if self.at_most is not None:
            bounds.append(f"up to {format_value(self.at_most, self.unit)}")
        return ", ".join(bounds) or "any finite value"


@dataclass(frozen=True)
class Flag:
    """True or false; kept as 1.0 or 0.0."""

    about: str

    def read(self, raw: object, place: str = "value") -> float:
        """1.0 for true, 0.0 for false; raises InputError."""
        value = {"true": True, "false": False}.get(raw.strip()) if isinstance(raw, str) else raw
        if not isinstance(value, bool):
            raise InputError(Fault(place, shown(raw), "true or false"))
        return float(value)


@dataclass(frozen=True)
class Choice:
    """One of a few words; the first is the default."""

    about: str
    words: tuple[str, ...]

    def read(self, raw: object, place: str = "value") -> str:
        """The word itself; raises InputError for any other."""
        if not isinstance(raw, str) or raw not in self.words:
            nearest = nearest_name(raw, self.words) if isinstance(raw, str) else None
            raise InputError(Fault(place, f"unknown word {shown(raw)}", ", ".join(self.words), nearest))
        return raw


FieldRule = Quantity | Flag | Choice
Wiring = Mapping[str, tuple[str, ...]]
Pairs = tuple[tuple[str, str], ...]


@dataclass(frozen=True)
class Kind:
    """One kind of part.

    wirings : ways to write its terminals, each a mapping from key in the file to the roles it names. A key with
        one role takes a net, a key with several takes a list of nets.
    fields : the kind's own keys in a part's table.
    model : the keys of its device models; empty when it takes none.
    setting : the field that a setting of the part's name addresses; None when it has none.
    electrical : the values the engine gets, from the part as written; `units` gives the unit of each.
    conducts : pairs of roles between which direct current can flow.
    coils : pairs of roles joined by an inductor, a short circuit at rest.
    drives : roles whose net's voltage the part sets.
    senses : roles that draw no current.
    ordered : pairs of roles of which the first must lie above the second, where both nets are held.
    """

    about: str
    wirings: tuple[Wiring, ...]
    fields: Mapping[str, FieldRule] = field(default_factory=dict)
    model: Mapping[str, Quantity] = field(default_factory=dict)
    setting: str | None = None
    electrical: Callable[[Part], dict[str, float]] = lambda part: {}
    units: Mapping[str, str] = field(default_factory=dict)
    conducts: Pairs = ()
    coils: Pairs = ()
    drives: tuple[str, ...] = ()
    senses: tuple[str, ...] = ()
    ordered: Pairs = ()

    @property
    def terminal_keys(self) -> tuple[str, ...]:
        """Every key that names terminals, over all wirings."""
        return tuple(dict.fromkeys(key for wiring in self.wirings for key in wiring))

    @property
    def keys(self) -> tuple[str, ...]:
        """Every key a part of this kind may have in a file."""
        return ("kind", *self.fields, *(("model",) if self.model else ()), *self.terminal_keys)


def _each(*roles: str) -> Wiring:
    return {role: (role,) for role in roles}


_BETWEEN: Wiring = {"between": ("a", "b")}


def taper_fraction(taper: str, position: float) -> float:
    """Share of the track between the first end and the wiper, f(p) of the pot's equation. [1]

    linear f = p; log f = (81^p - 1)/80; reverse-log f = 1 - (81^(1-p) - 1)/80.
    """
    if taper == "linear":
        return position
    if taper == "log":
        return (exact.power(TAPER_SPAN, position) - 1.0) / (TAPER_SPAN - 1.0)
    return 1.0 - (exact.power(TAPER_SPAN, 1.0 - position) - 1.0) / (TAPER_SPAN - 1.0)


def _pot(part: Part) -> dict[str, float]:
    track = part.values["value"]
    fraction = taper_fraction(part.taper, part.values["at"])
    legs = {"first_leg": track * fraction + POT_END_OHM}
    if "wiper" in part.terminals:
        legs["second_leg"] = track * (1.0 - fraction) + POT_END_OHM
    return legs


_BAND_GAP = Quantity("V", "band gap, for the saturation current's temperature", default=1.11, above=0.0)

_DIODE_MODEL: Mapping[str, Quantity] = {
    "saturation_current": Quantity("A", "saturation current at 25 C", above=0.0),
    "ideality": Quantity("", "ideality factor", default=1.0, above=0.0),
    "series_resistance": Quantity("ohm", "series resistance", default=0.0, at_least=0.0),
    "capacitance": Quantity("F", "constant junction capacitance", default=0.0, at_least=0.0),
    "band_gap": _BAND_GAP,
}
_TRANSISTOR_MODEL: Mapping[str, Quantity] = {
    "saturation_current": Quantity("A", "transport saturation current at 25 C", above=0.0),
    "forward_gain": Quantity("", "forward current gain", above=0.0),
    "reverse_gain": Quantity("", "reverse current gain", above=0.0),
    "ideality": Quantity("", "ideality factor of both junctions", default=1.0, above=0.0),
    "early_voltage": Quantity("V", "Early voltage; off when not given", optional=True, above=0.0),
    "reverse_saturation_current": Quantity(
        "A", "saturation current of the base-collector junction; 0 is off", default="saturation_current", at_least=0.0
    ),
    "base_emitter_capacitance": Quantity("F", "constant base-emitter capacitance", default=0.0, at_least=0.0),
    "base_collector_capacitance": Quantity("F", "constant base-collector capacitance", default=0.0, at_least=0.0),
    "band_gap": _BAND_GAP,
}
_OPAMP_MODEL: Mapping[str, Quantity] = {
    "gain_bandwidth": Quantity("Hz", "gain-bandwidth product", above=0.0),
    "slew_rate": Quantity("V/s", "slew rate, both ways", above=0.0),
    "headroom_high": Quantity("V", "upper rail less highest output", at_least=0.0),
    "headroom_low": Quantity("V", "lowest output less lower rail", at_least=0.0),
    "dc_gain": Quantity("", "gain at rest", default=2e5, above=0.0),
}
_JFET_MODEL: Mapping[str, Quantity] = {
    "drain_current": Quantity("A", "saturated drain current with gate and source joined", above=0.0),
    "pinch_off": Quantity("V", "reverse gate voltage that closes the channel, without sign", above=0.0),
    "saturation_current": Quantity("A", "saturation current of each gate junction at 25 C", above=0.0),
    "ideality": Quantity("", "ideality factor of both junctions", default=1.0, above=0.0),
    "early_voltage": Quantity("V", "Early voltage of the channel; off when not given", optional=True, above=0.0),
    "gate_source_capacitance": Quantity("F", "constant gate-source capacitance", default=0.0, at_least=0.0),
    "gate_drain_capacitance": Quantity("F", "constant gate-drain capacitance", default=0.0, at_least=0.0),
    "band_gap": _BAND_GAP,
}
_ZENER_MODEL: Mapping[str, Quantity] = {
    **_DIODE_MODEL,
    "breakdown_voltage": Quantity("V", "reverse voltage at the breakdown current", above=0.0),
    "breakdown_current": Quantity("A", "reverse current at the breakdown voltage", above=0.0),
    "breakdown_ideality": Quantity(
        "", "ideality factor of the breakdown: how soft its knee is", default=1.0, above=0.0
    ),
}
_OTA_MODEL: Mapping[str, Quantity] = {
    "saturation_current": Quantity("A", "saturation current of the bias junction at 25 C", above=0.0),
    "ideality": Quantity("", "ideality factor of the bias junction", default=1.0, above=0.0),
    "headroom_high": Quantity("V", "upper rail less highest output", at_least=0.0),
    "headroom_low": Quantity("V", "lowest output less lower rail", at_least=0.0),
    "band_gap": _BAND_GAP,
}


def _jfet(about: str) -> Kind:
    return Kind(
        about=about,
        wirings=(_each("drain", "gate", "source"),),
        model=_JFET_MODEL,
        # A closed channel leaves the smallest conductance of both junctions, which also joins drain and source.
        conducts=(("drain", "source"), ("gate", "source"), ("gate", "drain")),
    )


def _windings(part: Part) -> dict[str, float]:
    return {key: part.values[key] for key in ("primary_inductance", "secondary_inductance", "coupling")}


def _transistor(about: str) -> Kind:
    return Kind(
        about=about,
        wirings=(_each("collector", "base", "emitter"),),
        model=_TRANSISTOR_MODEL,
        # Both junctions carry at least the smallest conductance, which also joins collector and emitter.
        conducts=(("base", "emitter"), ("base", "collector")),
    )


KINDS: Mapping[str, Kind] = MappingProxyType(
    {
        "resistor": Kind(
            about="resistor",
            wirings=(_BETWEEN,),
            fields={"value": Quantity("ohm", "resistance", above=0.0)},
            setting="value",
            electrical=lambda part: {"resistance": part.values["value"]},
            units={"resistance": "ohm"},
            conducts=(("a", "b"),),
        ),
        "capacitor": Kind(
            about="capacitor",
            wirings=(_BETWEEN,),
            fields={"value": Quantity("F", "capacitance", above=0.0)},
            setting="value",
            electrical=lambda part: {"capacitance": part.values["value"]},
            units={"capacitance": "F"},
        ),
        "inductor": Kind(
            about="inductor",
            wirings=(_BETWEEN,),
            fields={"value": Quantity("H", "inductance", above=0.0)},
            setting="value",
            electrical=lambda part: {"inductance": part.values["value"]},
            units={"inductance": "H"},
            conducts=(("a", "b"),),
            coils=(("a", "b"),),
        ),
        "pot": Kind(
            about="variable resistor with two or three terminals",
            wirings=({"ends": ("end_a", "end_b"), "wiper": ("wiper",)}, _BETWEEN),
            fields={
                "value": Quantity("ohm", "resistance of the whole track", above=0.0),
                "taper": Choice("how the resistance follows the position", ("linear", "log", "reverse-log")),
                "at": Quantity("", "position, from the first end", default=0.5, at_least=0.0, at_most=1.0),
            },
            setting="at",
            electrical=_pot,
            units={"first_leg": "ohm", "second_leg": "ohm"},
            conducts=(("a", "b"), ("end_a", "wiper"), ("wiper", "end_b")),
        ),
        "switch": Kind(
            about="switch",
            wirings=(_BETWEEN,),
            fields={"closed": Flag("whether it conducts")},
            setting="closed",
            electrical=lambda part: {"resistance": SWITCH_CLOSED_OHM if part.values["closed"] else SWITCH_OPEN_OHM},
            units={"resistance": "ohm"},
            conducts=(("a", "b"),),
        ),
        "diode": Kind(
            about="junction diode",
            wirings=(_each("anode", "cathode"),),
            model=_DIODE_MODEL,
            conducts=(("anode", "cathode"),),
        ),
        "npn": _transistor("NPN transistor"),
        "pnp": _transistor("PNP transistor"),
        "opamp": Kind(
            about="operational amplifier",
            wirings=({**_each("plus", "minus", "out"), "rails": ("rail_high", "rail_low")},),
            model=_OPAMP_MODEL,
            drives=("out",),
            senses=("plus", "minus", "rail_high", "rail_low"),
            ordered=(("rail_high", "rail_low"),),
        ),
        "n-jfet": _jfet("n-channel junction field-effect transistor"),
        "p-jfet": _jfet("p-channel junction field-effect transistor"),
        "zener": Kind(
            about="zener diode",
            wirings=(_each("anode", "cathode"),),
            model=_ZENER_MODEL,
            conducts=(("anode", "cathode"),),
        ),
        "ota": Kind(
            about="transconductance amplifier",
            wirings=({**_each("plus", "minus", "bias", "out"), "rails": ("rail_high", "rail_low")},),
            model=_OTA_MODEL,
            # The output is a current: a net it feeds needs a way to ground of its own.
            conducts=(("bias", "rail_low"),),
            senses=("plus", "minus", "rail_high"),
            ordered=(("rail_high", "rail_low"),),
        ),
        "transformer": Kind(
            about="two coupled windings",
            wirings=({"primary": ("primary_a", "primary_b"), "secondary": ("secondary_a", "secondary_b")},),
            fields={
                "primary_inductance": Quantity("H", "inductance of the primary alone", above=0.0),
                "secondary_inductance": Quantity("H", "inductance of the secondary alone", above=0.0),
                "coupling": Quantity("", "coupling factor", default=1.0, above=0.0, at_most=1.0),
            },
            setting="coupling",
            electrical=_windings,
            units={"primary_inductance": "H", "secondary_inductance": "H", "coupling": ""},
            conducts=(("primary_a", "primary_b"), ("secondary_a", "secondary_b")),
            coils=(("primary_a", "primary_b"), ("secondary_a", "secondary_b")),
        ),
        "controlled-voltage": Kind(
            about="voltage-controlled voltage source from ground",
            wirings=(_each("plus", "minus", "out"),),
            fields={"value": Quantity("", "voltage gain")},
            setting="value",
            electrical=lambda part: {"gain": part.values["value"]},
            units={"gain": ""},
            drives=("out",),
            senses=("plus", "minus"),
        ),
        "controlled-current": Kind(
            about="voltage-controlled current source",
            wirings=({**_each("plus", "minus"), **_BETWEEN},),
            fields={"value": Quantity("S", "transconductance")},
            setting="value",
            electrical=lambda part: {"transconductance": part.values["value"]},
            units={"transconductance": "S"},
            senses=("plus", "minus"),
        ),
    }
)
MODEL_KINDS: tuple[str, ...] = tuple(name for name, kind in KINDS.items() if kind.model)
TERMINAL_KEYS: frozenset[str] = frozenset(key for kind in KINDS.values() for key in kind.terminal_keys)
