"""Reads one block of a pack file: its axes, what is fixed, its design, velocity layers, takes and strikes."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from kickrender.circuit.kinds import Choice
from kickrender.circuit.spread import read_spread, spread_faults
from kickrender.circuit.strikes import ONCE, read_strikes
from kickrender.circuit.values import shown
from kickrender.errors import nearest_name
from kickrender.pack.design import MOST_POINTS
from kickrender.pack.reading import Reading, Where
from kickrender.pack.records import (
    CIRCUIT_AXIS,
    LAYER_AXIS,
    OWN_AXES,
    POINT_AXIS,
    TAKE_AXIS,
    Axis,
    Block,
    Circuits,
    Design,
    Layers,
    Setting,
    Span,
    Takes,
)
from kickrender.sound.goals import GOALS, Goal, notes_between, read_goal

BLOCK_KEYS = ("circuit", "axes", "fixed", "design", "layers", "takes", "hits")
SPAN_KEYS = ("from", "to", "steps", "law")
DESIGN_KEYS = ("kind", "count", "seed")
TAKE_KEYS = ("count", "seed", "distribution", "spread")
LAW = Choice("how a range is divided", ("linear", "geometric"))
DESIGN = Choice("how axes are combined", ("grid", "zip", "random", "latin-hypercube", "sobol"))
MOST_STEPS = 10_000
MOST_TAKES = 1000
MOST_LAYERS = 128  # one for each key velocity
WAYS = tuple(dict.fromkeys(way for kind in GOALS.values() for way in kind.ways))
_OWN_AXIS_HINTS = {
    CIRCUIT_AXIS: 'circuit = ["one", "other"] at the top',
    LAYER_AXIS: "a table [layers]",
    TAKE_AXIS: "a table [takes]",
    POINT_AXIS: "a [design] that draws points",
}


class BlockReading:
    """One block: what the whole file says, with the block's own on top.

    entry : the block's own table, at `where`; both empty for a file without blocks.
    walked : names of axes met in any block, for whoever refers to them.
    """

    def __init__(
        self,
        reading: Reading,
        entry: Mapping[str, Any],
        where: Where,
        circuits: Circuits,
        concert_pitch_hz: float,
        walked: dict[str, None],
    ) -> None:
        self.reading, self.entry, self.where = reading, entry, where
        self.circuits, self.concert_pitch_hz, self.walked = circuits, concert_pitch_hz, walked

    def block(self) -> Block | None:
        """The block; None, and faults collected, when nothing can be made of it."""
        reading = self.reading
        before = len(reading.faults)
        design = self.design()
        walked: dict[str, tuple[Any, Where]] = {}
        fixed: dict[str, Setting] = {}
        goals: dict[str, Goal] = {}
        places: dict[str, str] = {}
        for raw, keys in [(reading.raw, ()), (self.entry, self.where)] if self.where else [(reading.raw, ())]:
            fixed_here = reading.table(raw, keys, "fixed")
            for name, value in fixed_here.items():
                walked.pop(name, None)
                self.fix(name, value, (*keys, "fixed", name), fixed, goals)
                places[name] = reading.at(*keys, "fixed", name)
            for name, value in reading.table(raw, keys, "axes").items():
                if name in fixed_here:
                    reading.fault((*keys, "axes", name), f"'{name}' is both an axis and fixed", "one of the two")
                self.walked[name] = None
                fixed.pop(name, None)
                goals.pop(name, None)
                walked[name] = value, (*keys, "axes", name)
        found = {name: self.axis(name, value, where, design) for name, (value, where) in walked.items()}
        axes = {name: axis for name, axis in found.items() if axis}
        layers, takes = self.layers(axes, fixed), self.takes()
        strikes, strikes_where = self.own("hits")
        strikes_s = ONCE
        if strikes is not None:
            strikes_s = reading.checked(lambda: read_strikes(strikes, reading.at(*strikes_where))) or ONCE
        if design.draws:
            self.walked[POINT_AXIS] = None
            if not any(axis.span for axis in axes.values()):
                reading.fault(
                    self.own("design")[1],
                    f"a design '{design.kind}' without a range to draw from",
                    "one or more axes { from, to }",
                )
        if len(reading.faults) > before or not self.circuits:
            return None
        return Block(
            self.circuits,
            tuple(axes.values()),
            fixed,
            places,
            goals,
            design,
            layers,
            takes,
            strikes_s,
            reading.at(*strikes_where),
        )

    def own(self, key: str) -> tuple[Any, Where]:
        """What stands under a key of the block, else of the whole file, and where."""
        if key in self.entry:
            return self.entry[key], (*self.where, key)
        return self.reading.raw.get(key), (key,)

    def own_table(self, key: str) -> tuple[Mapping[str, Any] | None, Where]:
        value, where = self.own(key)
        if value is None or isinstance(value, dict):
            return value, where
        self.reading.fault(where, shown(value), "a table")
        return None, where

    def design(self) -> Design:
        table, where = self.own_table("design")
        if table is None:
            return Design()
        reading = self.reading
        reading.unknown(table, DESIGN_KEYS, *where)
        kind = reading.checked(lambda: DESIGN.read(table.get("kind", DESIGN.words[0]), reading.at(*where, "kind")))
        design = Design(kind or DESIGN.words[0], place=reading.at(*where))
        if design.draws:
            count = reading.whole(table, "count", where, 1, MOST_POINTS)
            seed = self.seed(table, where)
            return Design(design.kind, count or 1, seed, design.place)
        for key in ("count", "seed"):
            if key in table:
                reading.fault((*where, key), f"'{key}' with a design '{design.kind}'", "random, latin-hypercube, sobol")
        return design

    def seed(self, table: Mapping[str, Any], where: Where) -> int:
        seed = table.get("seed")
        if isinstance(seed, bool) or not isinstance(seed, int):
            found = "key 'seed' is missing" if "seed" not in table else shown(seed)
            self.reading.fault((*where, "seed") if "seed" in table else where, found, "a whole number, such as 1")
            return 0
        return seed

    def fix(self, name: str, value: Any, where: Where, fixed: dict[str, Setting], goals: dict[str, Goal]) -> None:
        fixed.pop(name, None)
        goals.pop(name, None)
        if not isinstance(value, dict):
            fixed[name] = self.reading.setting(value, where)
        elif (way := self.way(name, value, where)) and (goal := self.goal(name, way, value[way], where)):
            goals[name] = goal

    def axis(self, name: str, value: Any, where: Where, design: Design) -> Axis | None:
        reading = self.reading
        if name in OWN_AXES:
            reading.fault(where, f"an axis called '{name}'", _OWN_AXIS_HINTS[name])
            return None
        place = reading.at(*where)
        if isinstance(value, list) and value:
            return Axis(name, tuple(reading.setting(entry, where) for entry in value), None, place)
        if isinstance(value, dict):
            if any(key in WAYS for key in value):
                way = self.way(name, value, where)
                return self.goal_axis(name, way, value[way], where, design) if way else None
            span = self.span(value, where, design)
            return Axis(name, (), span, place) if span else None
        found = "an empty list" if value == [] else shown(value)
        reading.fault(where, found, "a list of values, or { from, to, steps, law }")
        return None

    def way(self, name: str, value: Mapping[str, Any], where: Where) -> str | None:
        """The one key of a goal's table, "notes" or "hertz" and so on."""
        reading, before = self.reading, len(self.reading.faults)
        if name not in GOALS:
            reading.fault(where, f"no goal '{name}'", ", ".join(GOALS), nearest_name(name, GOALS))
            return None
        known = tuple(GOALS[name].ways)
        reading.unknown(value, known, *where)
        if len(reading.faults) == before and len(value) != 1:
            reading.fault(where, f"{len(value)} keys", f"one of {', '.join(known)}")
        return next(iter(value)) if len(reading.faults) == before else None

    def goal(self, name: str, way: str, raw: Any, where: Where) -> Goal | None:
        place = self.reading.at(*where)
        return self.reading.checked(lambda: read_goal(name, way, raw, place, self.concert_pitch_hz))

    def goal_axis(self, name: str, way: str, value: Any, where: Where, design: Design) -> Axis | None:
        reading, place = self.reading, self.reading.at(*where)
        raws = value
        if isinstance(value, dict) and way == "notes":
            reading.unknown(value, SPAN_KEYS[:2], *where, way)
            ends = [self.goal(name, way, value.get(key), (*where, way, key)) for key in SPAN_KEYS[:2]]
            if ends[0] is None or ends[1] is None:
                return None
            raws = notes_between(ends[0].text, ends[1].text)
            if not raws:
                reading.fault((*where, way), f"from {ends[0].text} up to {ends[1].text}", "a lower note first")
                return None
        elif isinstance(value, dict):
            span = self.span(value, (*where, way), design)
            ends = [self.goal(name, way, end, where) for end in span[:2]] if span else [None]
            return Axis(name, (), span, place, way=way) if None not in ends else None
        if not isinstance(raws, list) or not raws:
            reading.fault((*where, way), shown(value), "a list, or { from, to }")
            return None
        goals = [self.goal(name, way, raw, where) for raw in raws]
        return Axis(name, (), None, place, tuple(goal for goal in goals if goal), way)

    def span(self, value: Mapping[str, Any], where: Where, design: Design) -> Span | None:
        """A range; a design that draws needs no steps."""
        reading = self.reading
        before = len(reading.faults)
        known = SPAN_KEYS if not design.draws else (*SPAN_KEYS[:2], SPAN_KEYS[3])
        shape = f"{{ {', '.join(known)} }}"
        reading.unknown(value, known, *where)
        for key in known[: 2 if design.draws else 3]:
            if key not in value:
                reading.fault(where, f"key '{key}' is missing", shape)
        if len(reading.faults) > before:
            return None
        low, high = (reading.setting(value[key], (*where, key)) for key in ("from", "to"))
        steps = 0 if design.draws else reading.whole(value, "steps", where, 2, MOST_STEPS)
        law = reading.checked(lambda: LAW.read(value.get("law", LAW.words[0]), reading.at(*where, "law")))
        if len(reading.faults) > before or law is None or steps is None:
            return None
        return Span(low, high, steps, law)

    def layers(self, axes: Mapping[str, Axis], fixed: dict[str, Setting]) -> Layers | None:
        table, where = self.own_table("layers")
        if table is None:
            return None
        reading = self.reading
        values: dict[str, tuple[Setting, ...]] = {}
        for name, raw in table.items():
            here = (*where, name)
            if not isinstance(raw, list) or not 1 <= len(raw) <= MOST_LAYERS:
                reading.fault(
                    here, shown(raw), f"a list of values, one a layer, the softest first, up to {MOST_LAYERS}"
                )
                continue
            if name in axes:
                reading.fault(here, f"'{name}' is both an axis and a layer's", "one of the two")
            fixed.pop(name, None)
            values[name] = tuple(reading.setting(entry, here) for entry in raw)
            self.walked[name] = None
        if not table:
            reading.fault(where, "no layers", 'a control and its values, such as accent = ["1V", "3V", "5V"]')
        if len({len(row) for row in values.values()}) > 1:
            counts = ", ".join(f"{name} {len(row)}" for name, row in values.items())
            reading.fault(where, f"lists of different lengths: {counts}", "one value a layer for each")
        self.walked[LAYER_AXIS] = None
        return Layers(values, {name: reading.at(*where, name) for name in values}) if values else None

    def takes(self) -> Takes | None:
        table, where = self.own_table("takes")
        if table is None:
            return None
        reading = self.reading
        self.walked[TAKE_AXIS] = None
        reading.unknown(table, TAKE_KEYS, *where)
        count = reading.whole(table, "count", where, 1, MOST_TAKES)
        seed = table.get("seed")
        if isinstance(seed, bool) or not isinstance(seed, int | str):
            found = "key 'seed' is missing" if "seed" not in table else shown(seed)
            reading.fault((*where, "seed") if "seed" in table else where, found, "a name or a whole number")
        given = reading.table(table, where, "spread")
        if "spread" not in table:
            reading.fault(where, "key 'spread' is missing", 'tolerances, such as { resistor = "1%", capacitor = "5%" }')

        def place(*keys: str) -> str:
            return reading.at(*where, *(() if keys == ("distribution",) else ("spread",)), *keys)

        distribution = table.get("distribution", "normal")
        spread = reading.checked(lambda: read_spread(given, str(seed), distribution, place))
        if spread is None or count is None:
            return None
        for fault in spread_faults(spread, self.circuits.values(), place) if self.circuits else ():
            if fault not in reading.faults:
                reading.faults.append(fault)
        return Takes(count, spread)
