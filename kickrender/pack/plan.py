"""From a pack file to its hits: every combination of the axes, named, grouped and checked before anything renders."""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

from kickrender.circuit import Circuit
from kickrender.circuit.strikes import struck_at
from kickrender.errors import Fault, InputError
from kickrender.pack.names import Label, fill, name_faults, template_faults
from kickrender.pack.records import (
    CIRCUIT_AXIS,
    LAYER_AXIS,
    POINT_AXIS,
    TAKE_AXIS,
    Block,
    Hit,
    Pack,
    Plan,
    Setting,
    resolved,
)
from kickrender.pack.steps import Dimension, Step, dimensions, merged
from kickrender.pack.tuning import goal_facts, tuned
from kickrender.sound.goals import Goal
from kickrender.sound.recipe import dither_seed, hit_recipe, recipe_digest, shared_recipe


@dataclass(frozen=True)
class _Draft:
    """A hit before it has a name and a group.

    goals : what is still to be turned into settings, with places.
    """

    circuit: str
    block: Block
    settings: Mapping[str, Setting]
    goals: tuple[tuple[Goal, str], ...]
    step: Step
    group_key: tuple[Any, ...]
    goal_facts: Mapping[str, Mapping[str, Any]]


def plan_pack(pack: Pack) -> Plan:
    """Every hit of a pack, in stable order: blocks and circuits as in the file, then drawn points, axes, layers and
    takes, the last one fastest.

    Goals are turned into control positions here, which renders; nothing is rendered while there are other faults.

    Raises
    ------
    InputError
        With every fault: unknown or unfit settings, a range no circuit knows, strikes that overlap, a template that
        names two hits alike or climbs out of the folder; then goals that cannot be met.
    """
    faults: list[Fault] = []
    faults += template_faults(pack.template, _fields(pack), pack.template_place)
    drafts: list[_Draft] = []
    for number, block in enumerate(pack.blocks):
        for name, circuit in block.circuits.items():
            before = len(faults)
            walked = dimensions(block, circuit, faults)
            faults += _strike_faults(pack, block, circuit)
            if len(faults) == before:
                drafts.extend(_drafts(pack, block, number, name, walked))
    if faults:
        raise InputError(faults)
    names = _names(pack, drafts)
    drafts = _with_positions(pack, drafts)
    circuits = {name: circuit for block in pack.blocks for name, circuit in block.circuits.items()}
    layered = [name for block in pack.blocks if block.layers for name in (LAYER_AXIS, *block.layers.values)]
    together = tuple(dict.fromkeys((*pack.together, *layered))) if pack.level else pack.together
    return Plan(
        title=pack.title,
        about=pack.about,
        circuits=circuits,
        options=pack.options,
        level=pack.level,
        together=together,
        tags=pack.tags,
        license_text=pack.license_text,
        duplicates_below_db=pack.duplicates_below_db,
        hits=tuple(_hits(pack, circuits, drafts, names)),
    )


def _fields(pack: Pack) -> list[str]:
    """Every axis that a name may tell, of any block."""
    found: list[str] = []
    for block in pack.blocks:
        found += [POINT_AXIS] if block.design.draws else []
        found += [axis.name for axis in block.axes]
        found += [*block.layers.values, LAYER_AXIS] if block.layers else []
        found += [TAKE_AXIS] if block.takes else []
    return list(dict.fromkeys(found))


def _strike_faults(pack: Pack, block: Block, circuit: Circuit) -> list[Fault]:
    """Strikes that this circuit cannot have, or that come after the sound's end."""
    longest = pack.options.longest_s
    if block.strikes_s[-1] >= longest:
        found = f"a strike at {block.strikes_s[-1]:g} s in a sound of at most {longest:g} s"
        return [Fault(block.strikes_place, found, "strikes before its end, or a longer length in [sound]")]
    try:
        struck_at(circuit.resolve(), block.strikes_s, block.strikes_place)
    except InputError as error:
        return list(error.faults)
    return []


def _drafts(pack: Pack, block: Block, number: int, circuit: str, walked: Sequence[Dimension]) -> Iterator[_Draft]:
    name = block.circuits[circuit].name
    own = Step(axes={CIRCUIT_AXIS: name}, labels={CIRCUIT_AXIS: Label(name, name)})
    fixed_goals = tuple((goal, block.fixed_places[kind]) for kind, goal in block.fixed_goals.items())
    for combination in itertools.product(*(dimension.steps for dimension in walked)):
        step = merged([own, *combination])
        apart = [
            (name, value)
            for dimension, taken in zip(walked, combination, strict=True)
            if dimension.name != LAYER_AXIS and dimension.name not in pack.together
            for name, value in taken.axes.items()
            if name not in pack.together
        ]
        yield _Draft(
            circuit=circuit,
            block=block,
            settings={**block.fixed, **step.settings},
            goals=(*fixed_goals, *step.goals),
            step=step,
            group_key=(number, None if CIRCUIT_AXIS in pack.together else circuit, *apart),
            goal_facts={},
        )


def _names(pack: Pack, drafts: Sequence[_Draft]) -> list[str]:
    names = []
    faults = []
    for number, draft in enumerate(drafts, start=1):
        try:
            names.append(fill(pack.template, {**draft.step.labels, "number": Label(str(number), number)}))
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


def _with_positions(pack: Pack, drafts: Sequence[_Draft]) -> list[_Draft]:
    """The drafts with control positions in place of goals."""
    wanting = [draft for draft in drafts if draft.goals]
    wanted = [(draft.block.circuits[draft.circuit], draft.settings, draft.goals) for draft in wanting]
    found = iter(tuned(wanted, pack.options) if wanted else [])
    placed = []
    for draft in drafts:
        if draft.goals:
            answer = next(found)
            facts = goal_facts(draft.goals, draft.block.circuits[draft.circuit], answer)
            draft = replace(draft, settings={**draft.settings, **answer.settings}, goal_facts=facts)
        placed.append(draft)
    return placed


def _shares(pack: Pack, block: Block) -> bool:
    """Whether hits of the block share gains: along the axes named, and along its layers always."""
    return pack.level is not None and bool(pack.together or block.layers)


def _hits(pack: Pack, circuits: Mapping[str, Circuit], drafts: Sequence[_Draft], names: list[str]) -> Iterator[Hit]:
    groups: dict[tuple[Any, ...], int] = {}
    members: list[list[str]] = []
    recipes = []
    for draft in drafts:
        circuit, block = circuits[draft.circuit], draft.block
        spread = block.takes.spread if block.takes else None
        struck = resolved(circuit, draft.settings, spread, draft.step.take, block.strikes_s)
        recipe = hit_recipe(circuit, struck, pack.options, pack.level)
        key = draft.group_key if _shares(pack, block) else (len(groups),)
        group = groups.setdefault(key, len(groups))
        if group == len(members):
            members.append([])
        own = recipe_digest(recipe)
        members[group].append(own)
        recipes.append((recipe, own, group))
    for draft, name, (recipe, own, group) in zip(drafts, names, recipes, strict=True):
        whole = recipe_digest(shared_recipe(recipe, members[group])) if _shares(pack, draft.block) else own
        yield Hit(
            name=name,
            circuit=draft.circuit,
            settings=draft.settings,
            axes=draft.step.axes,
            group=group,
            recipe_digest=whole,
            seed=dither_seed(own),
            goals=draft.goal_facts,
            velocity=draft.step.velocity,
            spread=draft.block.takes.spread if draft.block.takes else None,
            take=draft.step.take,
            strikes_s=draft.block.strikes_s,
        )
