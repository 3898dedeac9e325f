"""What a pack is: as its file says (`Pack`), and as the hits to render (`Plan`). Frozen, checked when made."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, NamedTuple

from kickrender.circuit import Circuit, ResolvedCircuit
from kickrender.circuit.spread import Spread, deviations, resolve_spread
from kickrender.circuit.strikes import ONCE, struck_at
from kickrender.sound.goals import Goal
from kickrender.sound.level import Level
from kickrender.sound.options import SoundOptions

Setting = float | bool | str  # a number, truth value or text such as "4.7k", as a file or a person writes it

Circuits = Mapping[str, Circuit]  # name as written -> circuit, in the order of the file

CIRCUIT_AXIS = "circuit"  # the axis that a list of circuits makes
LAYER_AXIS = "layer"  # velocity layers, counted from 1, the softest first
TAKE_AXIS = "take"  # takes, counted from 1
POINT_AXIS = "point"  # points of a drawn design, counted from 1
OWN_AXES = (CIRCUIT_AXIS, LAYER_AXIS, TAKE_AXIS, POINT_AXIS)

# Null residual below which two hits are near-duplicates, unless the pack says otherwise. A thousandth is left: as
# little as when a decay counts as over, and the most that `verify` calls inaudible. So nothing audible is lost. [dB]
DUPLICATES_BELOW_DB = -60.0


class Span(NamedTuple):
    """A range as written. steps : 0 in a design that draws its points."""

    low: Setting
    high: Setting
    steps: int
    law: str


@dataclass(frozen=True)
class Axis:
    """One axis: a setting's or goal's name and the values it walks through, as written.

    values : the list as written; empty for a range and for goals.
    span : a range, or None.
    place : where the file says so, for faults.
    goals : the list of goals; empty for settings and for a range.
    way : how a goal is written ("notes", "hertz"); empty for settings.
    """

    name: str
    values: tuple[Setting, ...]
    span: Span | None
    place: str
    goals: tuple[Goal, ...] = ()
    way: str = ""


@dataclass(frozen=True)
class Design:
    """How axes are combined: "grid", "zip", or drawn ("random", "latin-hypercube", "sobol") over their ranges."""

    kind: str = "grid"
    count: int = 0
    seed: int = 0
    place: str = ""

    @property
    def draws(self) -> bool:
        """Whether ranges are drawn from, not walked through."""
        return self.kind not in ("grid", "zip")


@dataclass(frozen=True)
class Layers:
    """Velocity layers, the softest first: setting -> its value in each layer, as written; they share one gain."""

    values: Mapping[str, tuple[Setting, ...]]
    places: Mapping[str, str]

    @property
    def count(self) -> int:
        """How many layers there are."""
        return len(next(iter(self.values.values())))


@dataclass(frozen=True)
class Takes:
    """Takes of every hit, each of parts that deviate anew."""

    count: int
    spread: Spread


@dataclass(frozen=True)
class Block:
    """One design: every circuit with every combination of axis values, layer and take.

    fixed, fixed_goals : settings and goals of every hit of the block; `fixed_places` is where each stands, for faults.
    strikes_s : when every pulse starts; `strikes_place` is where that stands. [s]
    """

    circuits: Circuits
    axes: tuple[Axis, ...]
    fixed: Mapping[str, Setting]
    fixed_places: Mapping[str, str]
    fixed_goals: Mapping[str, Goal] = field(default_factory=dict)
    design: Design = Design()
    layers: Layers | None = None
    takes: Takes | None = None
    strikes_s: tuple[float, ...] = ONCE
    strikes_place: str = ""

    @property
    def asks_for_goals(self) -> bool:
        """Whether planning the block has to render."""
        return bool(self.fixed_goals) or any(axis.way for axis in self.axes)


@dataclass(frozen=True)
class Tags:
    """What every file of a pack says of its making; empty means nothing.

    date : yyyy-mm-dd.
    license, credits : the licence's short name, and a line for each who is credited.
    """

    artist: str = ""
    genre: str = ""
    comment: str = ""
    copyright: str = ""
    date: str = ""
    license: str = ""
    credits: tuple[str, ...] = ()


@dataclass(frozen=True)
class Pack:
    """A pack file as its author wrote it, every key known and every circuit read.

    template : the file names' template; `template_place` is where it stands.
    path : None for a text that is no file.
    level : None when none is asked for.
    license_text : the licence's words; empty when only its name is given, in `tags`.
    duplicates_below_db : null residual below which two hits are near-duplicates. [dB]
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
    tags: Tags = Tags()
    license_text: str = ""
    duplicates_below_db: float = DUPLICATES_BELOW_DB


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
    goals : what was asked for by ear -> the facts of it: see the sidecar's schema.
    velocity : lowest and highest key velocity of the hit's layer, 0 to 127.
    spread, take : tolerances of the hit's parts, and which take this is.
    strikes_s : when every pulse starts. [s]
    """

    name: str
    circuit: str
    settings: Mapping[str, Setting]
    axes: Mapping[str, Setting]
    group: int
    recipe_digest: str
    seed: int
    goals: Mapping[str, Mapping[str, Any]] = field(default_factory=dict)
    velocity: tuple[int, int] | None = None
    spread: Spread | None = None
    take: int = 0
    strikes_s: tuple[float, ...] = ONCE

    def resolved(self, circuit: Circuit) -> ResolvedCircuit:
        """The hit's circuit as it is struck."""
        return resolved(circuit, self.settings, self.spread, self.take, self.strikes_s)


def resolved(
    circuit: Circuit, settings: Mapping[str, Setting], spread: Spread | None, take: int, strikes_s: tuple[float, ...]
) -> ResolvedCircuit:
    """A circuit under settings, of parts that deviate as in this take, struck at these times."""
    if spread is None:
        return struck_at(circuit.resolve(settings), strikes_s)
    return struck_at(resolve_spread(circuit, settings, deviations(circuit, spread, take)), strikes_s)


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
    tags: Tags = Tags()
    license_text: str = ""
    duplicates_below_db: float = DUPLICATES_BELOW_DB
