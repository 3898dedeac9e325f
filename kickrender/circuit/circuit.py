"""A circuit as its author wrote it, checked, and what can be asked of it."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import asdict, dataclass, field
from functools import cached_property
from pathlib import Path

from kickrender.circuit.records import Control, Model, Part, ResolvedCircuit, ResolvedPart, Wave
from kickrender.circuit.settings import resolve

DIGEST_FORMAT = 1


@dataclass(frozen=True)
class Circuit:
    """A checked circuit; every name in it is known and every value is in SI units.

    name : the file's name without its ending.
    path : the file it came from; None when it was read from a text.
    nets : held nets -> voltage; `ground` is not listed. [V]
    models : the device models its parts name, by name.
    goals : what is heard -> the control that answers to it ("pitch" -> "tune").
    """

    name: str
    title: str
    about: str
    path: Path | None
    temperature_k: float
    nets: Mapping[str, float]
    inputs: Mapping[str, Wave]
    parts: Mapping[str, Part]
    controls: Mapping[str, Control]
    models: Mapping[str, Model]
    output: str
    full_scale_v: float
    goals: Mapping[str, str] = field(default_factory=dict)

    def resolve(
        self, settings: Mapping[str, float | str | bool] | None = None, place: str = "setting"
    ) -> ResolvedCircuit:
        """The circuit under given settings: plain electrical values, nothing left to turn.

        Parameters
        ----------
        settings : mapping of name to number, text or truth value
            A name addresses a control, else a part's value (a pot's position, a switch's true or false), else an
            input's level, else `temperature`. Texts may carry units ("4.7k"). Control starts apply first, then
            these in the order given.
        place : str
            What a fault calls a setting: "setting decay", "--set decay".

        Raises
        ------
        InputError
            Every unknown name and every value that cannot be read or is out of range, at once.
        """
        return resolve(self, settings or {}, place)

    @cached_property
    def resolved_parts(self) -> dict[object, ResolvedPart]:
        """Parts resolved so far, by name, value set and deviations; see `settings.resolve`."""
        return {}

    @cached_property
    def digest(self) -> str:
        """SHA-256, in hex, of what decides how the circuit sounds.

        The bytes hashed are JSON with sorted keys, no white space and ASCII only, every number a float in its
        shortest exact form, of: nets, inputs, parts with the values (not the names) of their models, controls,
        output, temperature and full scale. Titles, paths, comments, sources, goals and the order of keys are left out.
        """
        content = {
            "format": DIGEST_FORMAT,
            "temperature_k": self.temperature_k,
            "nets": dict(self.nets),
            "inputs": {name: {type(wave).__name__.lower(): _written(wave)} for name, wave in self.inputs.items()},
            "parts": {name: _electrical(part) for name, part in self.parts.items()},
            "controls": {
                name: {key: getattr(control, key) for key in ("act", "target", "low", "high", "start", "law")}
                for name, control in self.controls.items()
            },
            "output": self.output,
            "full_scale_v": self.full_scale_v,
        }
        text = json.dumps(content, sort_keys=True, separators=(",", ":"), ensure_ascii=True, allow_nan=False)
        return hashlib.sha256(text.encode("ascii")).hexdigest()


def _written(wave: Wave) -> dict[str, object]:
    """What a file says of a wave; further strikes are not a circuit's but a hit's."""
    return {key: value for key, value in asdict(wave).items() if key != "starts"}


def _electrical(part: Part) -> dict[str, object]:
    return {
        "kind": part.kind,
        "terminals": dict(part.terminals),
        "values": dict(part.values),
        "taper": part.taper,
        "model": None if part.model is None else dict(part.model.values),
    }
