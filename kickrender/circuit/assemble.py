"""From the entries of a file and its bases to one checked circuit: every name looked up, every record built."""

from __future__ import annotations

from collections.abc import Mapping
from functools import partial
from typing import Any

from kickrender.circuit.checks import Wiring, wiring_faults
from kickrender.circuit.circuit import Circuit
from kickrender.circuit.controls import Targets, control_record
from kickrender.circuit.draft import Draft, Entry, attempt, merged
from kickrender.circuit.kinds import KINDS, TERMINAL_KEYS, Choice
from kickrender.circuit.models import shipped_models
from kickrender.circuit.records import GROUND, Control, Model, Part
from kickrender.circuit.settings import control_target
from kickrender.circuit.source import Source
from kickrender.errors import Fault, InputError, nearest_name

ROOM_K = 298.15


def assemble(chain: list[Source], faults: list[Fault]) -> Circuit:
    """The circuit of a file and its bases, the root base first.

    `faults` holds what was found on the way here; InputError is raised with those and every other.
    """
    draft, source = merged(chain, faults), chain[-1]
    sections = draft.sections
    inputs = {name: entry.value for name, entry in sections["inputs"].items() if entry.value}
    parts = _parts(draft, faults)
    _name_clashes(draft, faults)
    unread = {name for key in ("parts", "inputs") for name, entry in sections[key].items() if entry.value is None}
    controls = _controls(draft, Targets(parts, inputs, frozenset(unread)), faults)
    goals = _goals(draft, faults)
    output = draft.singles.get("output")
    if output is None:
        faults.append(Fault(source.at(), "no output net", 'a table [output] with net = "..."'))
    faults += wiring_faults(_wiring(draft, parts, output))
    if faults or output is None:
        raise InputError(list(dict.fromkeys(faults)))
    single = {key: entry.value for key, entry in draft.singles.items()}
    return Circuit(
        name=source.name,
        title=single.get("title", source.name),
        about=single.get("about", ""),
        path=source.path,
        temperature_k=single.get("temperature", ROOM_K),
        nets={name: entry.value for name, entry in sections["nets"].items()},
        inputs=inputs,
        parts=parts,
        controls=controls,
        models={part.model.name: part.model for part in parts.values() if part.model},
        output=output.value.net,
        full_scale_v=output.value.full_scale,
        goals=goals,
    )


def _parts(draft: Draft, faults: list[Fault]) -> dict[str, Part]:
    """The parts whose entries could be read; one whose model is unknown is kept for the checks of the wiring."""
    own = {name: entry.value for name, entry in draft.sections["models"].items()}
    models: dict[str, Model | None] = {**shipped_models(), **own}
    return {
        name: _part(entry, models, faults) for name, entry in draft.sections["parts"].items() if entry.value is not None
    }


def _part(entry: Entry, models: Mapping[str, Model | None], faults: list[Fault]) -> Part:
    table: Any = entry.value
    row = KINDS[table.kind]
    wiring = next(wiring for wiring in row.wirings if all(getattr(table, key) is not None for key in wiring))
    terminals: dict[str, str] = {}
    for key, roles in wiring.items():
        nets = getattr(table, key)
        terminals |= zip(roles, (nets,) if isinstance(nets, str) else nets, strict=True)
    return Part(
        name=entry.name,
        kind=table.kind,
        terminals=terminals,
        values={key: getattr(table, key) for key, rule in row.fields.items() if not isinstance(rule, Choice)},
        taper=getattr(table, "taper", "linear"),
        model=_model(entry, models, faults) if row.model else None,
    )


def _model(entry: Entry, models: Mapping[str, Model | None], faults: list[Fault]) -> Model | None:
    name, kind = entry.value.model, entry.value.kind
    model = models.get(name)
    if model is None and name in models:
        return None  # a model of the file's own that has faults, told with it
    if model is None or model.kind != kind:
        fitting = [known for known, other in models.items() if other and other.kind == kind]
        found = f"no model '{name}'" if model is None else f"model '{name}' is of kind {model.kind}, not {kind}"
        faults.append(Fault(entry.at("model"), found, ", ".join(fitting), nearest_name(name, fitting)))
    return model


def _name_clashes(draft: Draft, faults: list[Fault]) -> None:
    """Parts, controls and inputs share one name space, held nets and inputs another."""
    nets, inputs, parts, controls = (draft.sections[key] for key in ("nets", "inputs", "parts", "controls"))
    for name, entry in inputs.items():
        if name == GROUND or name in nets:
            found = f"net '{name}' is " + ("always 0 V" if name == GROUND else "held already, by [nets]")
            faults.append(Fault(entry.at(), found, "a net that nothing else drives"))
    for name, entry in {**inputs, **controls}.items():
        if name in parts:
            faults.append(Fault(entry.at(), f"'{name}' is the name of a part as well", "a name of its own"))
    for name, entry in controls.items():
        if name in inputs and entry.value and entry.value.drives != name:
            found = f"'{name}' is the name of an input that this control does not drive"
            faults.append(Fault(entry.at(), found, f'drives = "{name}", or a name of its own'))


def _controls(draft: Draft, targets: Targets, faults: list[Fault]) -> dict[str, Control]:
    controls: dict[str, Control] = {}
    moves: dict[tuple[str, str], str] = {}
    for name, entry in draft.sections["controls"].items():
        if entry.value is None:
            continue
        control = attempt(partial(control_record, entry, targets), faults)
        if control is None:
            continue
        first = moves.setdefault(control_target(control), name)
        if first != name:
            found = f"control '{first}' moves '{control.target}' already"
            faults.append(Fault(entry.at(control.act), found, "one control for each part or input"))
        controls[name] = control
    return controls


def _goals(draft: Draft, faults: list[Fault]) -> dict[str, str]:
    known = draft.sections["controls"]
    goals = {goal: entry for goal, entry in draft.sections["goals"].items() if entry.value is not None}
    for entry in goals.values():
        if entry.value not in known:
            nearest = nearest_name(entry.value, known)
            faults.append(Fault(entry.at(), f"no control '{entry.value}'", ", ".join(known), nearest))
    return {goal: entry.value for goal, entry in goals.items()}


def _wiring(draft: Draft, parts: Mapping[str, Part], output: Entry | None) -> Wiring:
    sections = draft.sections

    def place(section: str, *keys: object) -> str:
        if section == "output" and output is not None:
            return output.at(*keys)
        return sections[section][str(keys[0])].at(*keys[1:])

    return Wiring(
        parts=parts,
        unread={name: _nets_of(entry.raw) for name, entry in sections["parts"].items() if name not in parts},
        held={GROUND: 0.0, **dict.fromkeys(sections["inputs"])}
        | {name: entry.value for name, entry in sections["nets"].items()},
        output=output.value.net if output is not None and output.value else None,
        place=place,
    )


def _nets_of(raw: Any) -> list[str]:
    """Every net a part's table names, whatever else is wrong with it."""
    if not isinstance(raw, dict):
        return []
    named = [raw[key] for key in TERMINAL_KEYS if key in raw]
    flat = [net for value in named for net in (value if isinstance(value, list) else [value])]
    return [net for net in flat if isinstance(net, str)]
