"""What a pack is: as its file says (`Pack`), and as the hits to render (`Plan`). Frozen, checked when made."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from kickrender.circuit import Circuit
from kickrender.sound.level import Level
from kickrender.sound.options import SoundOptions

Setting = float | bool | str  # a number, truth value or text such as "4.7k", as a file or a person writes it

CIRCUIT_AXIS = "circuit"  # the axis that a list of circuits makes


@dataclass(frozen=True)
class Axis:
    """One axis of a grid: a setting's name and the values it walks through, as written.

    values : the list as written; empty for a range.
    span : (from, to, steps, law) of a range, or None.
    place : where the file says so, for faults.
    """

    name: str
    values: tuple[Setting, ...]
    span: tuple[Setting, Setting, int, str] | None
    place: str


@dataclass(frozen=True)
class Block:
    """One grid: every circuit with every combination of axis values.

    circuits : name as written -> circuit, in the order of the file.
    fixed : settings that every hit of the block has; `fixed_places` is where each stands, for faults.
    """

    circuits: Mapping[str, Circuit]
    axes: tuple[Axis, ...]
    fixed: Mapping[str, Setting]
    fixed_places: Mapping[str, str]


@dataclass(frozen=True)
class Pack:
    """A pack file as its author wrote it, every key known and every circuit read.

    template : the file names' template; `template_place` is where it stands.
    path : None for a text that is no file.
    level : None when none is asked for.
    together : axes along which hits share one gain.
    """

    title: str
    about: str
    path: Path | None
    blocks: tuple[Block, ...]
    options: SoundOptions
    level: Level | None
    together: tuple[str, ...]
    template: str
    template_place: str


@dataclass(frozen=True)
class Hit:
    """One file to make.

    name : path below the pack's folder with `/`, without ending.
    circuit : the circuit's name in the plan.
    settings : what is turned for this hit, in order.
    axes : axis name -> its value for this hit, in SI units (a text where the axis is the circuit).
    group : number of the group of hits that share one gain.
    recipe_digest : of everything this hit's file depends on, its group included.
    seed : for the dither; depends on the hit alone.
    """

    name: str
    circuit: str
    settings: Mapping[str, Setting]
    axes: Mapping[str, Setting]
    group: int
    recipe_digest: str
    seed: int


@dataclass(frozen=True)
class Plan:
    """Every hit of a pack in stable order, ready to render: nothing in it can be wrong any more.

    left_out : hits that are not to be made this time; who shares a gain with them still has that gain.
    """

    title: str
    about: str
    circuits: Mapping[str, Circuit]
    options: SoundOptions
    level: Level | None
    together: tuple[str, ...]
    hits: tuple[Hit, ...]
    left_out: tuple[Hit, ...] = ()
