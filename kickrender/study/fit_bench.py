"""Strikes a circuit with other part values and measures what is asked of it, each point once."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from kickrender.circuit import Circuit
from kickrender.engine import Pole, poles
from kickrender.errors import MeasurementError, SolveError
from kickrender.pack.workers import Progress
from kickrender.sound.goals import GOALS, Goal
from kickrender.sound.measure import Measurements
from kickrender.sound.options import SoundOptions
from kickrender.sound.render import Settings
from kickrender.sound.tune import FADE_S
from kickrender.study.approach import Box, Floats
from kickrender.study.aspects import ASPECTS
from kickrender.study.fit_read import variable_parts
from kickrender.study.many import Reading, Variant, measure_many, values_of

WIDEST = 10.0  # a value stays between a tenth and ten times what it was
# Told of every combination, wanted or not: parts seldom move one thing.
BESIDES = ("pitch", "drop", "decay", "loudness")

Point = tuple[float, ...]


@dataclass(frozen=True)
class Combination:
    """One choice of values, struck and measured.

    values : part -> its value. [SI unit]
    measured, misses : goal -> what it measures in its own unit, and how far that is from what was wanted, in the unit
        of `miss_unit`.
    off : root mean square of the misses, each counted in the tolerance that packs meet that goal within.
    besides : aspect that nobody asked for -> its value, in the unit of ASPECTS; None where the sound has none.
    """

    values: Mapping[str, float]
    measured: Mapping[str, float]
    misses: Mapping[str, float]
    off: float
    besides: Mapping[str, float | None]


def miss_unit(kind: str) -> str:
    """In what people are told how far a goal is missed."""
    return {"pitch": "cents", "drop": "semitones"}.get(kind, "%")


def miss(goal: Goal, value: float) -> float:
    """How far a value is from the goal, in `miss_unit`; above 0 when it is too large."""
    change = GOALS[goal.kind].even(value) - GOALS[goal.kind].even(goal.value)
    return {"cents": 100.0 * change, "semitones": change, "%": 100.0 * math.expm1(change)}[miss_unit(goal.kind)]


class Bench:
    """Strikes a circuit with some parts at other values, and remembers what was measured.

    A point holds the logarithms of the varied parts' values; goals are scaled, see `GoalKind.scaled`.
    """

    def __init__(
        self,
        circuit: Circuit,
        goals: Sequence[Goal],
        settings: Settings,
        options: SoundOptions,
        jobs: int,
        progress: Progress,
    ) -> None:
        self.circuit, self.goals, self.settings = circuit, tuple(goals), settings
        self.options, self.jobs, self.progress = options, jobs, progress
        self.kinds = [GOALS[goal.kind] for goal in goals]
        self.wanted = np.array([kind.scaled(goal.value) for kind, goal in zip(self.kinds, goals, strict=True)])
        self.fields = tuple(dict.fromkeys(field for goal in goals for field in ASPECTS[goal.kind].fields))
        self.resolved = circuit.resolve(settings, "--set")
        self.strikes = 0
        self.failure = ""
        self.vary(tuple(variable_parts(circuit, settings)))

    def vary(self, parts: tuple[str, ...]) -> None:
        """Let these parts be the ones a point holds."""
        self.parts = parts
        self.heard: dict[Point, tuple[float, ...] | None] = {}
        values = [next(iter(self.resolved.parts[name].values.values())) for name in parts]
        self.start: Floats = np.log(np.array(values))
        self.box = Box(self.start - math.log(WIDEST), self.start + math.log(WIDEST))
        self.grows_itself = self.grows(self.start)

    def values(self, point: Floats) -> dict[str, float]:
        """Part -> value at a point. [SI unit]"""
        # twelve digits: the logarithm of a series' value leads back to that value
        return {name: float(f"{math.exp(x):.12g}") for name, x in zip(self.parts, point, strict=True)}

    def poles(self, point: Floats) -> list[Pole]:
        """Poles at rest at a point; none where there is no rest state."""
        try:
            return poles(self.circuit.resolve({**self.settings, **self.values(point)}))
        except SolveError:
            return []

    def grows(self, point: Floats) -> bool:
        """Whether the circuit would swing of itself there: no voice, and long to solve."""
        return any(pole.q < 0.0 for pole in self.poles(point))

    def measure(self, points: Sequence[Floats]) -> list[Floats | None]:
        """What the goals measure at each point, scaled; None where one has no value, or the circuit would grow."""
        keys = [key_of(point) for point in points]
        new = [key for key in dict.fromkeys(keys) if key not in self.heard]
        if not self.grows_itself:
            growing = {key for key in new if self.grows(np.array(key))}
            self.heard |= dict.fromkeys(growing, None)
            new = [key for key in new if key not in growing]
        readings = self.strike([self.values(np.array(key)) for key in new], self.fields)
        for key, reading in zip(new, readings, strict=True):
            self.failure = self.failure or reading.failure
            self.heard[key] = self._goals_of(reading.measurements)
        return [self._scaled(self.heard[key]) for key in keys]

    def strike(self, values: Sequence[Mapping[str, float]], fields: Sequence[str]) -> list[Reading]:
        """Readings of the circuit with each of these part values."""
        variants = [Variant({**self.settings, **each}) for each in values]
        self.strikes += len(variants)
        return measure_many(self.circuit, variants, fields, self.options, jobs=self.jobs, progress=self.progress)

    def _goals_of(self, found: Measurements | None) -> tuple[float, ...] | None:
        if found is None or (found.decay_s is not None and found.decay_s > self.options.longest_s - FADE_S):
            return None
        values = tuple(kind.measured(found) for kind in self.kinds)
        return None if None in values else values  # type: ignore[return-value]

    def _scaled(self, values: Sequence[float] | None) -> Floats | None:
        if values is None:
            return None
        return np.array([kind.scaled(value) for kind, value in zip(self.kinds, values, strict=True)])

    def told(self, points: Sequence[Floats]) -> list[Combination | None]:
        """Points that were struck, as told to people; None where a goal has no value."""
        besides = [name for name in BESIDES if name not in {goal.kind for goal in self.goals}]
        fields = tuple(dict.fromkeys(field for name in besides for field in ASPECTS[name].fields))
        readings = self.strike([self.values(point) for point in points], fields)
        told: list[Combination | None] = []
        for point, scaled, reading in zip(points, self.measure(points), readings, strict=True):
            values = self.heard[key_of(point)]
            if values is None or scaled is None:
                told.append(None)
                continue
            measured = {goal.kind: value for goal, value in zip(self.goals, values, strict=True)}
            misses = {goal.kind: miss(goal, measured[goal.kind]) for goal in self.goals}
            off = size(scaled - self.wanted)
            told.append(Combination(self.values(point), measured, misses, off, values_of(reading, besides)))
        return told

    def heard_at_start(self) -> tuple[float, ...]:
        """What the goals measure of the circuit as it is, in their own units."""
        values = self.heard[key_of(self.start)]
        assert values is not None
        return values

    def unmeasured(self) -> MeasurementError:
        """Why a goal cannot be measured of the circuit."""
        names = " and ".join(goal.kind for goal in self.goals)
        return MeasurementError(self.failure or f"'{self.circuit.name}': no {names} can be measured of it")


def key_of(point: Floats) -> Point:
    """A point as what is remembered of it is found by."""
    return tuple(float(x) for x in point)


def size(errors: Floats) -> float:
    """Root mean square."""
    return float(np.sqrt(np.mean(errors**2)))
