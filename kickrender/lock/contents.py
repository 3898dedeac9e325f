"""What a lock file says of a plan before anything is rendered: circuits part by part, options, versions."""

from __future__ import annotations

import os
import platform
from collections.abc import Mapping
from dataclasses import asdict
from importlib import metadata
from pathlib import Path

from kickrender import __version__
from kickrender.circuit import Circuit
from kickrender.circuit.records import Control, Model, Part, Wave
from kickrender.engine import ENGINE_VERSION
from kickrender.lock.records import Lock, LockedCircuit
from kickrender.lock.text import fields_of, number_text
from kickrender.pack.records import Hit, Plan
from kickrender.sound.code import code_digest
from kickrender.sound.recipe import beyond_settings

LIBRARIES = ("llvmlite", "numba", "numpy", "pyloudnorm", "scipy", "soundfile")  # that samples or measurements pass


def lock_of(plan: Plan, pack: str) -> Lock:
    """A lock over the plan with no hits in it yet, from what is installed and asked for now."""
    return Lock(
        pack=pack,
        title=plan.title,
        made={"kickrender": __version__, "engine": ENGINE_VERSION, "code": code_digest()},
        libraries=libraries(),
        sound=fields_of(plan.options.of_samples()),
        level={} if plan.level is None else {**fields_of(asdict(plan.level)), "together": ",".join(plan.together)},
        audio="",
        circuits={name: LockedCircuit(circuit.digest, entries(circuit)) for name, circuit in plan.circuits.items()},
        hits={},
    )


def path_beside(path: Path, pack: Path) -> str:
    """The pack's path from the lock file's folder, with `/`."""
    return Path(os.path.relpath(pack.resolve(), path.resolve().parent)).as_posix()


def settings_of(plan: Plan, hit: Hit) -> dict[str, str]:
    """Every setting of a hit as a lock file shows it; further strikes and deviations of parts beside them."""
    resolved = hit.resolved(plan.circuits[hit.circuit])
    fields = fields_of(resolved.settings)
    for sort, found in beyond_settings(resolved).items():
        for name, value in found.items():
            fields[f"{sort}:{name}"] = (
                ",".join(map(number_text, value)) if isinstance(value, list) else number_text(value)
            )
    return fields


def libraries() -> dict[str, str]:
    """The version of every library that a sound passes through, and Python's."""
    return {name: metadata.version(name) for name in LIBRARIES} | {"python": platform.python_version()}


def entries(circuit: Circuit) -> dict[tuple[str, str], dict[str, str]]:
    """What a circuit is made of, by name within each sort: all that its digest covers, and its models' names."""
    found: dict[tuple[str, str], dict[str, str]] = {("temperature", ""): {"value": number_text(circuit.temperature_k)}}
    found |= {("net", name): {"volts": number_text(volts)} for name, volts in sorted(circuit.nets.items())}
    found |= {("input", name): _wave(wave) for name, wave in sorted(circuit.inputs.items())}
    models = {part.model.name: part.model for part in circuit.parts.values() if part.model is not None}
    found |= {("model", name): _model(model) for name, model in sorted(models.items())}
    found |= {("part", name): _part(part) for name, part in sorted(circuit.parts.items())}
    found |= {("control", name): _control(control) for name, control in sorted(circuit.controls.items())}
    found["output", ""] = {"net": circuit.output, "full_scale": number_text(circuit.full_scale_v)}
    return found


def _part(part: Part) -> dict[str, str]:
    fields = {"kind": part.kind, **part.terminals}
    if part.model is not None:
        fields["model"] = part.model.name
    if part.taper != "linear":
        fields["taper"] = part.taper
    return fields | fields_of(dict(sorted(part.values.items())))


def _model(model: Model) -> dict[str, str]:
    return {"kind": model.kind, **fields_of(dict(sorted(model.values.items())))}


def _control(control: Control) -> dict[str, str]:
    return {control.act: control.target, **fields_of({k: getattr(control, k) for k in ("low", "high", "start", "law")})}


def _wave(wave: Wave) -> dict[str, str]:
    """A wave as its file says it; further strikes are not a circuit's but a hit's."""
    fields: Mapping[str, object] = {name: value for name, value in asdict(wave).items() if name != "starts"}
    texts = {
        name: ",".join(map(number_text, value)) if isinstance(value, tuple) else number_text(value)  # type: ignore[arg-type]
        for name, value in fields.items()
    }
    return {"wave": type(wave).__name__.lower(), **texts}
