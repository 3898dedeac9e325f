"""Which parts decide how a circuit sounds: the change of pitch, decay and loudness per percent of each part's number.

Central differences: every number is made half a percent smaller, then half a percent larger, the circuit struck both
times, so that a difference spans the one percent it is told for. Smaller steps drown in the scatter of measuring:
solver, pitch reader and rounding move a sound's readings by some thousandths of a cent, whatever the step. Larger ones
bend: over two percent, a sound's loudest and last half cycles may already be others. A power law is met within
(1/2 %)^2, far below that scatter.

The scatter itself is measured: all numbers at once walk from one end of the step to the other, some up and some down,
and what a curve of fifth degree through the readings leaves over is scatter. A slope within three standard deviations
of it says nothing; that is the noise floor.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from kickrender.circuit import Circuit, ResolvedCircuit
from kickrender.circuit.kinds import KINDS
from kickrender.circuit.records import Part
from kickrender.circuit.spread import Deviations, spread_keys
from kickrender.errors import MeasurementError
from kickrender.pack.workers import Progress
from kickrender.sound.options import SoundOptions
from kickrender.sound.render import Settings
from kickrender.study.aspects import ASPECTS
from kickrender.study.many import Variant, measure_many, values_of

STEP = 0.005
SPAN_PERCENT = 200.0 * STEP
DEVIATIONS = 3.0
LOOKED_AT = ("pitch", "start", "decay", "loudness")
# Walks in three directions, each some up and some down, that have nothing in common with one another.
_WALKS, _WALK_POINTS, _WALK_DEGREE = 3, 13, 5


@dataclass(frozen=True)
class Slope:
    """One number of one part, and what a percent of it does.

    value : as the settings leave it, in `unit`.
    slopes : aspect -> change per percent, in the aspect's unit of a change; None where a sound has no such value.
    failure : why a strike gave no sound, in words; else empty.
    """

    part: str
    kind: str
    key: str
    value: float
    unit: str
    slopes: Mapping[str, float | None]
    failure: str = ""

    @property
    def name(self) -> str:
        """The number's name, as tolerances are given: "C_left", "Q_bend.forward_gain"."""
        return self.part if self.key == "value" else f"{self.part}.{self.key}"


@dataclass(frozen=True)
class Sensitivity:
    """A circuit's slopes, in the order of its file.

    exact : aspect -> value with exact parts.
    floor : aspect -> size below which a slope is noise; None where there is nothing to measure.
    """

    circuit: Circuit
    settings: Mapping[str, float | bool]
    exact: Mapping[str, float | None]
    floor: Mapping[str, float | None]
    slopes: tuple[Slope, ...]

    def ranked(self, aspect: str) -> list[Slope]:
        """Slopes by the size of one aspect's, the steepest first; those within its noise follow in the file's order."""
        order = {part: place for place, part in enumerate(self.circuit.parts)}
        in_order = sorted(self.slopes, key=lambda slope: order[slope.part])
        return sorted(in_order, key=lambda s: -abs(s.slopes[aspect] or 0.0) if self.tells(s, aspect) else 0.0)

    def tells(self, slope: Slope, aspect: str) -> bool:
        """Whether a slope stands out of the noise."""
        value, floor = slope.slopes[aspect], self.floor[aspect]
        return value is not None and floor is not None and abs(value) > floor


def sensitivity(
    circuit: Circuit,
    *,
    settings: Settings | None = None,
    options: SoundOptions | None = None,
    jobs: int = 1,
    progress: Progress = lambda done: None,
) -> Sensitivity:
    """How much of pitch, start pitch, decay and loudness goes with a percent of every number of every part.

    Parameters
    ----------
    jobs : int
        Worker processes; no value depends on it.
    progress : function (done) -> None
        Told how many more sounds are measured, `strikes(circuit)` in all.

    Raises
    ------
    InputError
        If the settings do not suit the circuit.
    SolveError, MeasurementError
        If the circuit of exact parts cannot be solved, or is silent.
    """
    settings = settings or {}
    resolved = circuit.resolve(settings)
    numbers = varied(circuit)
    walks = [_walk(numbers, direction, place) for direction in range(_WALKS) for place in _places()]
    steps = [_one(part, key, 1.0 + sign * STEP) for part, key in numbers for sign in (-1.0, 1.0)]
    wanted = tuple(dict.fromkeys(field for aspect in LOOKED_AT for field in ASPECTS[aspect].fields))
    variants = [Variant(settings, drawn) for drawn in (Deviations({}), *walks, *steps)]
    readings = measure_many(circuit, variants, wanted, options, jobs=jobs, progress=progress)
    if readings[0].measurements is None or readings[0].measurements.peak_dbfs is None:
        raise MeasurementError(readings[0].failure or f"'{circuit.name}' is silent: there is nothing to measure")
    values = [values_of(reading, LOOKED_AT) for reading in readings]
    exact, walked, stepped = values[0], values[1 : 1 + len(walks)], values[1 + len(walks) :]
    failures = [reading.failure for reading in readings[1 + len(walks) :]]
    slopes = [
        Slope(
            part.name,
            part.kind,
            key,
            *_value(part, key, resolved),
            {aspect: _slope(aspect, *stepped[2 * k : 2 * k + 2]) for aspect in LOOKED_AT},
            failures[2 * k] or failures[2 * k + 1],
        )
        for k, (part, key) in enumerate(numbers)
    ]
    floor = {aspect: _floor(aspect, exact[aspect], [row[aspect] for row in walked]) for aspect in LOOKED_AT}
    return Sensitivity(circuit, resolved.settings, exact, floor, tuple(slopes))


def varied(circuit: Circuit) -> list[tuple[Part, str]]:
    """Every number of every part that a tolerance could spread, but those that are zero, of which a percent is none."""
    return [
        (part, key)
        for part in circuit.parts.values()
        for key in spread_keys(part)
        if (part.model.values if part.model and key in part.model.values else part.values)[key] != 0.0
    ]


def strikes(circuit: Circuit) -> int:
    """How many sounds a study of this circuit takes."""
    return 1 + _WALKS * _WALK_POINTS + 2 * len(varied(circuit))


def _places() -> list[float]:
    return [float(place) for place in np.linspace(-1.0, 1.0, _WALK_POINTS)]


def _one(part: Part, key: str, factor: float) -> Deviations:
    return Deviations({part.name: {key: factor}})


def _walk(numbers: Sequence[tuple[Part, str]], direction: int, place: float) -> Deviations:
    """All numbers moved together: number k upwards where bit `direction` of k is 0, else downwards."""
    factors: dict[str, dict[str, float]] = {}
    for k, (part, key) in enumerate(numbers):
        sign = -1.0 if k >> direction & 1 else 1.0
        factors.setdefault(part.name, {})[key] = 1.0 + sign * place * STEP
    return Deviations(factors)


def _slope(aspect: str, below: Mapping[str, float | None], above: Mapping[str, float | None]) -> float | None:
    low, high = below[aspect], above[aspect]
    return None if low is None or high is None else ASPECTS[aspect].change(low, high) / SPAN_PERCENT


def _floor(aspect: str, exact: float | None, walked: Sequence[float | None]) -> float | None:
    """Three standard deviations of a slope that is nothing but scatter."""
    if exact is None or None in walked:
        return None
    changes = np.array([ASPECTS[aspect].change(exact, value) for value in walked if value is not None])
    squares = 0.0
    for readings in changes.reshape(_WALKS, _WALK_POINTS):
        curve = np.polynomial.Polynomial.fit(_places(), readings, _WALK_DEGREE)
        squares += float(np.sum((curve(np.array(_places())) - readings) ** 2))
    scatter = math.sqrt(squares / (_WALKS * (_WALK_POINTS - _WALK_DEGREE - 1)))
    return DEVIATIONS * math.sqrt(2.0) * scatter / SPAN_PERCENT


def _value(part: Part, key: str, resolved: ResolvedCircuit) -> tuple[float, str]:
    """A number as the settings leave it, and its unit."""
    row = KINDS[part.kind]
    if key not in row.fields:
        assert part.model is not None
        return part.model.values[key], row.model[key].unit
    values = resolved.parts[part.name].values
    # What a setting moves is the part's one electrical value; all else is as it was written.
    value = next(iter(values.values())) if key == row.setting else part.values[key]
    rule = row.fields[key]
    return value, getattr(rule, "unit", "")
