"""Writes a circuit with other values as a circuit file of its own, based on the one it comes from."""

from __future__ import annotations

import json
import os
from collections.abc import Mapping
from dataclasses import asdict
from pathlib import Path
from typing import Any

from kickrender.circuit.circuit import Circuit
from kickrender.circuit.kinds import KINDS, Choice, Flag, Quantity
from kickrender.circuit.records import Constant, Control, Part, Pulse, Wave
from kickrender.circuit.settings import TEMPERATURE, with_level
from kickrender.circuit.shipped import shipped_circuits
from kickrender.circuit.values import CODED_UNITS, letter_code


def variant_text(circuit: Circuit, settings: Mapping[str, float | bool], folder: Path, title: str, about: str) -> str:
    """The TOML text of a circuit that differs from `circuit` by settings, each written where it belongs.

    Parameters
    ----------
    circuit : read from a file, which the text is based on.
    settings : control, part, input or "temperature" -> value in SI units. A control's becomes its start.
    folder : where the file will lie; the way to its base starts there.

    Raises
    ------
    ValueError
        If the circuit was read from a text and has no file to be based on.
    """
    lines = [
        f"title = {_text(title)}",
        f"about = {_text(about)}",
        f"based_on = {_text(_base(circuit, folder))}",
        *([f"temperature = {float(settings[TEMPERATURE])!r}"] if TEMPERATURE in settings else []),
    ]
    inputs = {name: with_level(wave, settings[name]) for name, wave in circuit.inputs.items() if name in settings}
    parts = {name: part for name, part in circuit.parts.items() if name in settings}
    controls = {name: control for name, control in circuit.controls.items() if name in settings}
    for name in sorted(set(inputs) - set(controls)):  # a control may bear its input's name
        lines += ["", f"[inputs.{name}]", _wave(inputs[name])]
    if parts:
        lines += ["", "[parts]"]
        lines += [f"{name} = {{ {_part(part, settings[name])} }}" for name, part in parts.items()]
    for name, control in controls.items():
        lines += ["", f"[controls.{name}]", *_control(control, settings[name])]
    return "\n".join(lines) + "\n"


def _base(circuit: Circuit, folder: Path) -> str:
    """How the file calls its base: by name when it is shipped, else by the way there from `folder`."""
    if circuit.path is None:
        raise ValueError(f"circuit '{circuit.name}' is no file")
    for name, path in shipped_circuits().items():
        if path.resolve() == circuit.path.resolve():
            return name
    return Path(os.path.relpath(circuit.path.resolve(), folder.resolve())).as_posix()


def _text(value: str) -> str:
    return json.dumps(value, ensure_ascii=False)


def _part(part: Part, value: float | bool) -> str:
    row = KINDS[part.kind]
    entries = {"kind": _text(part.kind)}
    for key, rule in row.fields.items():
        if isinstance(rule, Choice):
            entries[key] = _text(part.taper)
        elif isinstance(rule, Flag):
            entries[key] = "true" if (value if key == row.setting else part.values[key]) else "false"
        elif isinstance(rule, Quantity):
            entries[key] = _number(float(value) if key == row.setting else part.values[key], rule.unit)
    wiring = next(x for x in row.wirings if {role for roles in x.values() for role in roles} == set(part.terminals))
    for key, roles in wiring.items():
        nets = [_text(part.terminals[role]) for role in roles]
        entries[key] = nets[0] if len(nets) == 1 else f"[{', '.join(nets)}]"
    return ", ".join(f"{key} = {entry}" for key, entry in entries.items())


def _number(value: float, unit: str) -> str:
    """As a schematic has it: a letter code with the small k and u that keyboards and circuit files use."""
    if unit in CODED_UNITS:
        return _text(letter_code(value, unit).replace("K", "k").replace("\u00b5", "u"))
    return repr(value)


def _control(control: Control, value: float | bool) -> list[str]:
    entries: dict[str, Any] = {control.act: _text(control.target)}
    if control.act != "turns":
        entries |= {"from": repr(control.low), "to": repr(control.high), "law": _text(control.law)}
    entries["start"] = repr(float(value))
    return [f"{key} = {entry}" for key, entry in entries.items()]


def _wave(wave: Wave) -> str:
    if isinstance(wave, Constant):
        return f"constant = {wave.level!r}"
    values = {key: value for key, value in asdict(wave).items() if key != "starts"}
    if not isinstance(wave, Pulse):
        values["phase"] = values.pop("phase_deg")
    kind = "pulse" if isinstance(wave, Pulse) else "sine"
    return f"{kind} = {{ {', '.join(f'{key} = {value!r}' for key, value in values.items())} }}"
