"""What a sidecar says: the whole recipe of a sound, and what was measured, as plain JSON values.

Nothing in it depends on when, where or by how many workers a sound was rendered.
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import asdict
from pathlib import Path
from typing import Any

from kickrender.circuit import Circuit, Model, Part, ResolvedCircuit, ResolvedPart, Wave
from kickrender.circuit.kinds import KINDS
from kickrender.circuit.settings import unit_of
from kickrender.engine import ENGINE_VERSION, Solution
from kickrender.errors import WriteError
from kickrender.sound.options import SoundOptions

SCHEMA = "kickrender sidecar"
SCHEMA_VERSION = 1
WAVE_UNITS = {
    "frequency": "Hz",
    "phase_deg": "deg",
    "length": "s",
    "rise": "s",
    "fall": "s",
    "starts": "s",
    "times": "s",
}


def circuit_facts(circuit: Circuit, resolved: ResolvedCircuit) -> dict[str, Any]:
    """Everything electrical about a hit: settings, parts, models, supplies, inputs, each value with its unit."""
    models = {part.model.name: part.model for part in resolved.parts.values() if part.model is not None}
    return {
        "circuit": {"name": circuit.name, "title": circuit.title, "digest": circuit.digest},
        "settings": {name: _value(value, unit_of(circuit, name)) for name, value in resolved.settings.items()},
        **({"spread": dict(resolved.spread)} if resolved.spread else {}),
        "temperature": _value(resolved.temperature_k, "K"),
        "nets": {name: _value(volts, "V") for name, volts in resolved.nets.items()},
        "inputs": {name: _wave(wave) for name, wave in resolved.inputs.items()},
        "parts": {name: _part(circuit.parts[name], part) for name, part in resolved.parts.items()},
        "models": {name: _model(model) for name, model in sorted(models.items())},
        "output": {"net": resolved.output, "full_scale": _value(resolved.full_scale_v, "V")},
    }


def sound_facts(circuit: Circuit, solution: Solution, options: SoundOptions) -> dict[str, Any]:
    """How a sidecar begins: the circuit, how it was solved and how it was asked to sound."""
    return {
        "schema": SCHEMA,
        "schema_version": SCHEMA_VERSION,
        **circuit_facts(circuit, solution.circuit),
        "engine": {"version": ENGINE_VERSION, "counters": dict(solution.counters)},
        "sound": asdict(options),
    }


def _value(value: float | bool | list[float], unit: str) -> dict[str, Any]:
    return {"value": value, "unit": unit}


def _part(written: Part, part: ResolvedPart) -> dict[str, Any]:
    """A part's resolved values; a pot's or switch's position too, from which they come."""
    units = KINDS[part.kind].units
    facts: dict[str, Any] = {"kind": part.kind, "terminals": dict(part.terminals)}
    if part.model is not None:
        facts["model"] = part.model.name
    if part.values:
        facts["values"] = {name: _value(value, units[name]) for name, value in part.values.items()}
    return facts


def _model(model: Model) -> dict[str, Any]:
    rows = KINDS[model.kind].model
    values = {name: _value(value, rows[name].unit) for name, value in model.values.items()}
    return {"kind": model.kind, "source": model.source, "values": values}


def _wave(wave: Wave) -> dict[str, Any]:
    values = {
        name: _value(list(value) if isinstance(value, tuple) else value, WAVE_UNITS.get(name, "V"))
        for name, value in asdict(wave).items()
    }
    return {"wave": type(wave).__name__.lower(), "values": values}


def json_bytes(facts: Mapping[str, Any]) -> bytes:
    """JSON for a file: in the order given, UTF-8, one line feed at the end; refuses what JSON cannot hold.

    The two outer levels have a line for each entry (one part, one control a line). The library indents in Python but
    encodes in C, and a sidecar should not cost a tenth of its hit.
    """
    entries = ",\n".join(f"  {_encode(key)}: {_in_lines(value)}" for key, value in facts.items())
    return f"{{\n{entries}\n}}\n".encode()


_encode = json.JSONEncoder(ensure_ascii=False, allow_nan=False).encode


def _in_lines(value: Any) -> str:
    if isinstance(value, dict) and value:
        inner = ",\n".join(f"    {_encode(key)}: {_encode(entry)}" for key, entry in value.items())
        return f"{{\n{inner}\n  }}"
    if isinstance(value, list) and value:
        inner = ",\n".join(f"    {_encode(entry)}" for entry in value)
        return f"[\n{inner}\n  ]"
    return _encode(value)


def read_sidecar(path: Path) -> dict[str, Any] | None:
    """A sidecar's facts; None when there is no such file or it is no whole sidecar of this version."""
    try:
        facts = json.loads(path.read_bytes())
    except (OSError, ValueError):
        return None
    known = isinstance(facts, dict) and (facts.get("schema"), facts.get("schema_version")) == (SCHEMA, SCHEMA_VERSION)
    return facts if known else None


def check_ours(path: Path) -> None:
    """Refuse to replace a .json that somebody else wrote.

    Raises
    ------
    WriteError
        If there is a file that neither begins as kickrender's do nor is empty.
    """
    try:
        with path.open("rb") as file:
            start = file.read(len(_START))
    except FileNotFoundError:
        return
    except OSError as error:
        raise WriteError(f"{path}: {error.strerror}") from None
    if start and start != _START:
        raise WriteError(f"{path}: exists and was not written by kickrender; move it, or choose another name")


_START = b'{\n  "schema": "kickrender '
