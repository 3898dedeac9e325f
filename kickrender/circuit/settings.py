"""What a setting addresses and what it does: from a circuit as written to plain electrical values.

A name addresses a control, else a part's value (a pot's position, a switch), else an input's level, else
`temperature`. Every control's start applies first, in the order of the file, then the settings in the order given.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from kickrender.circuit import exact
from kickrender.circuit.kinds import KINDS, Flag, Quantity
from kickrender.circuit.records import Constant, Control, Part, Pulse, ResolvedCircuit, ResolvedPart, Sine, Wave
from kickrender.errors import Fault, InputError, nearest_name

if TYPE_CHECKING:
    from kickrender.circuit.circuit import Circuit

TEMPERATURE = "temperature"
LEVEL = Quantity("V", "level of an input")
_MOST_KEPT = 10_000
_KELVIN = Quantity("K", "temperature")

Target = tuple[str, str]  # ("part" | "input" | "temperature", name)


def level_of(wave: Wave) -> float | None:
    """An input's level: a pulse's strike, a constant's value, a sine's amplitude; points have none. [V]"""
    if isinstance(wave, Pulse):
        return wave.strike
    if isinstance(wave, Constant):
        return wave.level
    return wave.amplitude if isinstance(wave, Sine) else None


def with_level(wave: Wave, level: float) -> Wave:
    """The wave at another level."""
    if isinstance(wave, Pulse):
        return replace(wave, strike=level)
    if isinstance(wave, Constant):
        return replace(wave, level=level)
    assert isinstance(wave, Sine), "points have no level"
    return replace(wave, amplitude=level)


def setting_rule(part: Part) -> Quantity | Flag | None:
    """How a setting of this part is read; None when the part has nothing to set."""
    name = KINDS[part.kind].setting
    rule = KINDS[part.kind].fields[name] if name else None
    return rule if isinstance(rule, Quantity | Flag) else None


def control_rule(control: Control) -> Quantity:
    """How a control's value is read: its unit and its range."""
    low, high = sorted((control.low, control.high))
    return Quantity(control.unit, f"control '{control.name}'", at_least=low, at_most=high)


def control_value(control: Control, walk: float) -> float:
    """The control's value at `walk` of its way, 0 at its low end and 1 at its high end, along its law."""
    if walk in (0.0, 1.0):
        return control.high if walk else control.low
    if control.law == "geometric":
        value = control.low * exact.power(control.high / control.low, walk)
    else:
        value = control.low + (control.high - control.low) * walk
    # Rounding may step over an end by the last bit, and the control would then refuse its own value.
    return min(max(value, min(control.low, control.high)), max(control.low, control.high))


def control_walk(control: Control, value: float) -> float:
    """Where on its way from 0 to 1 a control's value lies: the inverse of `control_value`."""
    if value in (control.low, control.high):
        return float(value == control.high)
    if control.law == "geometric":
        return exact.log(value / control.low) / exact.log(control.high / control.low)
    return (value - control.low) / (control.high - control.low)


@dataclass(frozen=True)
class _Setting:
    """One checked setting: which target it moves, and to what."""

    name: str
    target: Target
    rule: Quantity | Flag
    by_control: bool

    def recorded(self, value: float) -> float | bool:
        return bool(value) if isinstance(self.rule, Flag) else value


def control_target(control: Control) -> Target:
    """What a control moves."""
    return ("input" if control.act == "drives" else "part", control.target)


def _address(circuit: Circuit, name: str, place: str) -> _Setting:
    if control := circuit.controls.get(name):
        return _Setting(name, control_target(control), control_rule(control), by_control=True)
    if part := circuit.parts.get(name):
        rule = setting_rule(part)
        if rule is None:
            raise InputError(Fault(place, f"'{name}' is a {KINDS[part.kind].about}, which has no value to set"))
        return _Setting(name, ("part", name), rule, by_control=False)
    if name in circuit.inputs:
        if level_of(circuit.inputs[name]) is None:
            raise InputError(Fault(place, f"input '{name}' is given by points, which have no level to set"))
        return _Setting(name, ("input", name), LEVEL, by_control=False)
    if name == TEMPERATURE:
        return _Setting(name, (TEMPERATURE, name), _KELVIN, by_control=False)
    known = list(circuit.controls) + [part for part in circuit.parts if setting_rule(circuit.parts[part])]
    known += [name for name, wave in circuit.inputs.items() if level_of(wave) is not None] + [TEMPERATURE]
    allowed = f"a control ({', '.join(circuit.controls) or 'none here'}), a part, an input or {TEMPERATURE}"
    raise InputError(Fault(place, f"unknown setting '{name}'", allowed, nearest_name(name, known)))


Factors = Mapping[str, float]  # key of a part's own values or of its model -> what it is multiplied by


def resolve(
    circuit: Circuit,
    settings: Mapping[str, float | str | bool],
    place: str = "setting",
    deviations: Mapping[str, Factors] | None = None,
) -> ResolvedCircuit:
    """The circuit under the given settings, as the engine gets it; see `Circuit.resolve`.

    deviations : part -> how it deviates from what is written or set; see `spread`.
    """
    faults: list[Fault] = []
    moved = {control_target(control): control.start for control in circuit.controls.values()}
    of_controls: dict[str, float | bool] = {name: control.start for name, control in circuit.controls.items()}
    direct: dict[Target, tuple[str, float | bool]] = {}
    for name, raw in settings.items():
        here = f"{place} {name}"
        try:
            setting = _address(circuit, name, here)
            value = setting.rule.read(raw, here)
        except InputError as error:
            faults += error.faults
            continue
        moved[setting.target] = value
        if setting.by_control:
            of_controls[name] = value
            # A control given after a part's own setting wins; what no longer counts is not recorded.
            direct.pop(setting.target, None)
        else:
            direct[setting.target] = (name, setting.recorded(value))
    if faults:
        raise InputError(faults)
    return ResolvedCircuit(
        name=circuit.name,
        temperature_k=moved.get((TEMPERATURE, TEMPERATURE), circuit.temperature_k),
        nets=dict(sorted(circuit.nets.items())),
        inputs={
            name: with_level(wave, moved["input", name]) if ("input", name) in moved else wave
            for name, wave in sorted(circuit.inputs.items())
        },
        # By name, not in the file's order: two files of one digest must give the engine the same sums.
        parts={
            name: _resolved(circuit, part, moved.get(("part", name)), (deviations or {}).get(name))
            for name, part in sorted(circuit.parts.items())
        },
        output=circuit.output,
        full_scale_v=circuit.full_scale_v,
        settings=dict(sorted(of_controls.items())) | dict(sorted(direct.values())),
    )


def _resolved(circuit: Circuit, part: Part, value: float | None, factors: Factors | None) -> ResolvedPart:
    """The part at a value; the same object whenever all is the same, so that what is derived from it is shared."""
    kept = circuit.resolved_parts
    key = (part.name, value, tuple((factors or {}).items()))
    if key not in kept:
        if len(kept) >= _MOST_KEPT:
            kept.clear()
        kept[key] = _electrical(part, value, factors)
    return kept[key]


def _electrical(part: Part, value: float | None, factors: Factors | None = None) -> ResolvedPart:
    row = KINDS[part.kind]
    if value is not None and row.setting:
        part = replace(part, values={**part.values, row.setting: value})
    if factors:
        part = _deviating(part, factors)
    return ResolvedPart(part.name, part.kind, part.terminals, row.electrical(part), part.model)


def _deviating(part: Part, factors: Factors) -> Part:
    """The part with its values multiplied; its model, now its own, bears the part's name."""
    values = {key: value * factors.get(key, 1.0) for key, value in part.values.items()}
    if part.model is None:
        return replace(part, values=values)
    own = dict(part.model.values)
    for key, rule in KINDS[part.kind].model.items():
        # What a model takes from another of its keys (both junctions of one transistor) deviates with it.
        source = rule.default if isinstance(rule.default, str) else key
        alike = source in own and own.get(key) == part.model.values[source]
        if key in own:
            own[key] *= factors.get(key, factors.get(source, 1.0) if alike else 1.0)
    return replace(part, values=values, model=replace(part.model, name=f"{part.model.name} of {part.name}", values=own))


def unit_of(circuit: Circuit, name: str) -> str:
    """The unit of a setting's value; "" for a plain number."""
    rule = _address(circuit, name, f"setting {name}").rule
    return rule.unit if isinstance(rule, Quantity) else ""
