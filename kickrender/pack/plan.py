"""From a pack file to its hits: every combination of the axes, named, grouped and checked before anything renders."""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

from kickrender.circuit import Circuit, exact
from kickrender.circuit.settings import unit_of
from kickrender.circuit.values import format_value
from kickrender.errors import Fault, InputError
from kickrender.pack.names import Label, fill, name_faults, plain, short_labels, template_faults
from kickrender.pack.records import CIRCUIT_AXIS, Axis, Block, Hit, Pack, Plan, Setting
from kickrender.sound.recipe import dither_seed, hit_recipe, recipe_digest, shared_recipe


@dataclass(frozen=True)
class _Step:
    """One value of an axis for one circuit: what is set, what is recorded, what stands in the name."""

    setting: Setting
    value: Setting
    label: Label


@dataclass(frozen=True)
class _Draft:
    """A hit before it has a name and a group."""

    circuit: str
    settings: Mapping[str, Setting]
    axes: Mapping[str, Setting]
    labels: Mapping[str, Label]
    group_key: tuple[Any, ...]


def plan_pack(pack: Pack) -> Plan:
    """Every hit of a pack, in stable order: blocks and circuits as in the file, then the axes, the last one fastest.

    Raises
    ------
    InputError
        With every fault: unknown or unfit settings, a range no circuit knows, a template that names two hits alike or
        climbs out of the folder.
    """
    faults: list[Fault] = []
    axis_names = list(dict.fromkeys(axis.name for block in pack.blocks for axis in block.axes))
    faults += template_faults(pack.template, axis_names, pack.template_place)
    drafts: list[_Draft] = []
    for number, block in enumerate(pack.blocks):
        for name, circuit in block.circuits.items():
            steps = _checked_steps(block, circuit, faults)
            if steps is not None:
                drafts.extend(_drafts(pack, block, number, name, steps))
    if faults:
        raise InputError(faults)
    names = _names(pack, drafts)
    circuits = {name: circuit for block in pack.blocks for name, circuit in block.circuits.items()}
    return Plan(
        title=pack.title,
        about=pack.about,
        circuits=circuits,
        options=pack.options,
        level=pack.level,
        together=pack.together,
        hits=tuple(_hits(pack, circuits, drafts, names)),
    )


def _checked_steps(block: Block, circuit: Circuit, faults: list[Fault]) -> dict[str, list[_Step]] | None:
    """Each axis's steps for this circuit; None, and faults added, when a setting does not suit it.

    Settings do not depend on each other, so each is tried once alone and not once per hit.
    """
    before = len(faults)
    for name, raw in block.fixed.items():
        _value(circuit, name, raw, block.fixed_places[name], faults)
    steps = {axis.name: _steps(circuit, axis, faults) for axis in block.axes}
    return steps if len(faults) == before else None


def _steps(circuit: Circuit, axis: Axis, faults: list[Fault]) -> list[_Step]:
    if axis.span is None:
        steps = []
        for raw in axis.values:
            value = _value(circuit, axis.name, raw, axis.place, faults)
            if value is not None:
                steps.append(_Step(raw, value, Label(_text(raw), value)))
        return steps
    low, high, count, law = axis.span
    first = _value(circuit, axis.name, low, axis.place, faults)
    last = _value(circuit, axis.name, high, axis.place, faults)
    if first is None or last is None:
        return []
    if law == "geometric" and not (first > 0.0 and last > 0.0):
        faults.append(Fault(axis.place, f"a geometric range from {low} to {high}", "two values above 0"))
        return []
    values = [_between(float(first), float(last), index, count, law) for index in range(count)]
    unit = unit_of(circuit, axis.name)
    texts = [format_value(value, unit, digits=4) for value in values] if unit else short_labels(values)
    return [_Step(value, value, Label(text, value)) for value, text in zip(values, texts, strict=True)]


def _between(first: float, last: float, index: int, count: int, law: str) -> float:
    """The value at `index` of `count` from first to last; both ends exact, the same bits on every machine."""
    if index in (0, count - 1):
        return last if index else first
    walk = index / (count - 1)
    if law == "geometric":
        return first * exact.power(last / first, walk)
    return first + (last - first) * walk


def _value(circuit: Circuit, name: str, raw: Setting, place: str, faults: list[Fault]) -> float | bool | None:
    try:
        return circuit.resolve({name: raw}).settings[name]
    except InputError as error:
        faults.extend(replace(fault, place=f"{place} (circuit '{circuit.name}')") for fault in error.faults)
        return None


def _text(raw: Setting) -> str:
    if isinstance(raw, bool):
        return "on" if raw else "off"
    return raw.strip() if isinstance(raw, str) else plain(f"{raw:.12g}")


def _drafts(pack: Pack, block: Block, number: int, circuit: str, steps: dict[str, list[_Step]]) -> Iterator[_Draft]:
    for combination in itertools.product(*steps.values()):
        chosen = dict(zip(steps, combination, strict=True))
        apart = [(name, step.value) for name, step in chosen.items() if name not in pack.together]
        name = block.circuits[circuit].name
        yield _Draft(
            circuit=circuit,
            settings={**block.fixed, **{name: step.setting for name, step in chosen.items()}},
            axes={CIRCUIT_AXIS: name, **{name: step.value for name, step in chosen.items()}},
            labels={CIRCUIT_AXIS: Label(name, name), **{name: step.label for name, step in chosen.items()}},
            group_key=(number, None if CIRCUIT_AXIS in pack.together else circuit, *apart),
        )


def _names(pack: Pack, drafts: Sequence[_Draft]) -> list[str]:
    names = []
    faults = []
    for number, draft in enumerate(drafts, start=1):
        try:
            names.append(fill(pack.template, {**draft.labels, "number": Label(str(number), number)}))
        except KeyError as error:
            faults.append(
                Fault(pack.template_place, f"field {{{error.args[0]}}}, which circuit '{draft.circuit}' does not walk")
            )
        except ValueError as error:
            faults.append(
                Fault(pack.template_place, f"'{pack.template}': {error}", "a number format such as {number:03d}")
            )
    faults = list(dict.fromkeys(faults)) or name_faults(names, pack.template_place)
    if faults:
        raise InputError(faults)
    return names


def _hits(pack: Pack, circuits: Mapping[str, Circuit], drafts: Sequence[_Draft], names: list[str]) -> Iterator[Hit]:
    groups: dict[tuple[Any, ...], int] = {}
    members: list[list[str]] = []
    recipes = []
    for draft in drafts:
        circuit = circuits[draft.circuit]
        recipe = hit_recipe(circuit, circuit.resolve(draft.settings), pack.options, pack.level)
        key = draft.group_key if pack.together else (len(groups),)
        group = groups.setdefault(key, len(groups))
        if group == len(members):
            members.append([])
        own = recipe_digest(recipe)
        members[group].append(own)
        recipes.append((recipe, own, group))
    for draft, name, (recipe, own, group) in zip(drafts, names, recipes, strict=True):
        whole = recipe_digest(shared_recipe(recipe, members[group])) if pack.together else own
        yield Hit(name, draft.circuit, draft.settings, draft.axes, group, whole, dither_seed(own))
