"""Part values for wanted goals, in values that parts are made in: the best few combinations, each one rendered.

First the goals are met as if parts came in any value (`approach`): from where the circuit's poles promise them, then
by renders. Then all combinations of the series' values around that place are foretold from measured slopes and bends;
the most promising are struck, what is measured corrects the rest (each by its nearest neighbour that was struck), and
so on until nothing better is promised. What is told is measured, never foretold.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import product
from typing import Any

import numpy as np

from kickrender.circuit import Circuit
from kickrender.circuit.series import values_between
from kickrender.engine import Pole, poles
from kickrender.errors import Fault, InputError, MeasurementError, SolveError
from kickrender.pack.workers import Progress
from kickrender.sound.goals import GOALS, Goal
from kickrender.sound.options import SoundOptions
from kickrender.sound.render import Settings
from kickrender.sound.tune import FADE_S
from kickrender.study.approach import DEAF, Box, Floats, Place, approach, slopes_at
from kickrender.study.aspects import ASPECTS
from kickrender.study.fit_read import USUAL_SERIES, variable_parts
from kickrender.study.many import Variant, measure_many

WIDEST = 10.0  # a value stays between a tenth and ten times what it was
MORE_THAN_GOALS = 2  # parts varied unasked, beyond one for each goal: room to even out what the series leave
MOST_COUNT = 50
_RINGS_ABOVE_Q = 1.0
_SAME_PITCH = 0.1  # a pole this near to the heard pitch is the one that is heard
_SURVEY = 64  # strikes all over the box, when the search from the circuit's own values fails
_SURVEY_STARTS = 3
_BATCH = 24
_BATCHES = 5
_REACH = 0.7  # how far from the free values a series' value may lie: twice as large
_MOST_COMBINATIONS = 200_000
_MOST_CORRECTED = 5_000
_BEND_STEP = 0.06  # wide enough that bends stand out of what measuring scatters

Point = tuple[float, ...]


@dataclass(frozen=True)
class Combination:
    """One choice of values, struck and measured.

    values : part -> its value. [SI unit]
    measured, misses : goal -> what it measures in its own unit, and how far that is from what was wanted, in the unit
        of `miss_unit`.
    off : root mean square of the misses, each counted in the tolerance that packs meet that goal within.
    """

    values: Mapping[str, float]
    measured: Mapping[str, float]
    misses: Mapping[str, float]
    off: float


@dataclass(frozen=True)
class Fit:
    """What was asked, and the best combinations, the nearest first.

    series : part -> the series its value is taken from.
    before : the circuit as it was; None when the goals cannot all be measured of it.
    free : values that would meet the goals, from no series.
    strikes : how many sounds were rendered.
    """

    circuit: Circuit
    settings: Settings
    goals: tuple[Goal, ...]
    series: Mapping[str, str]
    before: Combination | None
    free: Combination
    best: tuple[Combination, ...]
    strikes: int


def miss_unit(kind: str) -> str:
    """In what people are told how far a goal is missed."""
    return {"pitch": "cents", "drop": "semitones"}.get(kind, "%")


def miss(goal: Goal, value: float) -> float:
    """How far a value is from the goal, in `miss_unit`; above 0 when it is too large."""
    change = GOALS[goal.kind].even(value) - GOALS[goal.kind].even(goal.value)
    return {"cents": 100.0 * change, "semitones": change, "%": 100.0 * math.expm1(change)}[miss_unit(goal.kind)]


def fit(
    circuit: Circuit,
    goals: Sequence[Goal],
    *,
    vary: Sequence[str] = (),
    series: Mapping[str, str] | None = None,
    settings: Settings | None = None,
    count: int = 5,
    options: SoundOptions | None = None,
    jobs: int = 1,
    progress: Progress = lambda done: None,
) -> Fit:
    """Values from preferred series with which the circuit meets goals, as nearly as they allow.

    Parameters
    ----------
    goals : sequence of Goal
        Of distinct kinds.
    vary : sequence of str
        Resistors, capacitors and inductors; by default those that the goals follow most, two more than goals.
    series : mapping, optional
        Kind of part -> series of IEC 60063; by default USUAL_SERIES.
    count : int
        How many combinations to tell, up to MOST_COUNT.
    jobs : int
        Worker processes; no value depends on it.
    progress : function (done) -> None
        Told how many more sounds are rendered.

    Raises
    ------
    InputError
        Fewer parts than goals, a goal that no part moves, goals out of reach, with the range that is within reach.
    SolveError, MeasurementError
        If the circuit cannot be solved, or a goal cannot be measured of it anywhere.
    """
    settings = settings or {}
    faults = _faults(circuit, goals, vary, settings, count, options or SoundOptions())
    if faults:
        raise InputError(faults)
    bench = _Bench(circuit, goals, settings, options or SoundOptions(), jobs, progress)
    parts = tuple(vary) or bench.chosen_parts()
    bench.vary(parts)
    place = _free(bench)
    by_kind = {**USUAL_SERIES, **(series or {})}
    chosen = {name: by_kind[circuit.parts[name].kind] for name in parts}
    best = _snapped(bench, place, chosen, count)
    before = None if bench.measure([bench.start])[0] is None else bench.combination(bench.start)
    free = bench.combination(place.point)
    return Fit(circuit, settings, tuple(goals), chosen, before, free, best, bench.strikes)


def _faults(
    circuit: Circuit, goals: Sequence[Goal], vary: Sequence[str], settings: Settings, count: int, options: SoundOptions
) -> list[Fault]:
    faults = []
    if not 1 <= count <= MOST_COUNT:
        faults.append(Fault("--count", f"found {count}", f"1 to {MOST_COUNT} combinations"))
    known = variable_parts(circuit, settings)
    if 0 < len(vary) < len(goals) or len(known) < len(goals):
        found = f"goals: {len(goals)}, parts to vary: {min(len(vary) or len(known), len(known))}"
        faults.append(Fault("--vary", found, "at least as many parts as goals"))
    longest_s = round((options.longest_s - FADE_S) / 1.03, 3)
    faults += [
        Fault("--goal decay", f"a decay of {goal.value:g} s in a sound of at most {options.longest_s:g} s",
              f"up to {longest_s:g} s")
        for goal in goals
        if goal.kind == "decay" and goal.value > longest_s
    ]  # fmt: skip
    return faults


class _Bench:
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
        keys = [tuple(float(x) for x in point) for point in points]
        new = [key for key in dict.fromkeys(keys) if key not in self.heard]
        if not self.grows_itself:
            growing = {key for key in new if self.grows(np.array(key))}
            self.heard |= dict.fromkeys(growing, None)
            new = [key for key in new if key not in growing]
        variants = [Variant({**self.settings, **self.values(np.array(key))}) for key in new]
        readings = measure_many(
            self.circuit, variants, self.fields, self.options, jobs=self.jobs, progress=self.progress
        )
        self.strikes += len(new)
        for key, reading in zip(new, readings, strict=True):
            self.failure = self.failure or reading.failure
            self.heard[key] = self._goals_of(reading.measurements)
        return [self._scaled(self.heard[key]) for key in keys]

    def _goals_of(self, found: Any) -> tuple[float, ...] | None:
        if found is None or (found.decay_s is not None and found.decay_s > self.options.longest_s - FADE_S):
            return None
        values = tuple(kind.measured(found) for kind in self.kinds)
        return None if None in values else values  # type: ignore[return-value]

    def _scaled(self, values: Sequence[float] | None) -> Floats | None:
        if values is None:
            return None
        return np.array([kind.scaled(value) for kind, value in zip(self.kinds, values, strict=True)])

    def combination(self, point: Floats) -> Combination:
        """A point that was struck, as told to people."""
        values = self.heard[tuple(float(x) for x in point)]
        scaled = self._scaled(values)
        assert values is not None and scaled is not None
        measured = {goal.kind: value for goal, value in zip(self.goals, values, strict=True)}
        misses = {goal.kind: miss(goal, measured[goal.kind]) for goal in self.goals}
        return Combination(self.values(point), measured, misses, size(scaled - self.wanted))

    def chosen_parts(self) -> tuple[str, ...]:
        """The parts that the goals follow most: first one for each goal, as far apart in what they do as can be."""
        from scipy.linalg import qr  # slow to import

        (measured,) = self.measure([self.start])
        if measured is None:
            raise self.unmeasured()
        slopes, _ = slopes_at(self.measure, self.start, measured, self.box, _BEND_STEP)
        self.check_followed(slopes)
        shares = slopes / np.abs(slopes).max(axis=1, keepdims=True)
        order = qr(shares, mode="r", pivoting=True)[1]
        first = [int(k) for k in order[: len(self.goals)]]
        others = sorted(set(range(len(self.parts))) - set(first), key=lambda k: -float(np.linalg.norm(shares[:, k])))
        taken = {*first, *others[:MORE_THAN_GOALS]}
        return tuple(name for k, name in enumerate(self.parts) if k in taken)

    def check_followed(self, slopes: Floats) -> None:
        """Refuse goals that none of the parts moves; raises InputError."""
        faults = [
            Fault(
                f"--goal {goal.kind}",
                f"none of {', '.join(self.parts)} moves it from {kind.shown(self.heard_at_start()[k])}",
                "parts to vary that do, see 'kickrender study sensitivity'",
            )
            for k, (goal, kind) in enumerate(zip(self.goals, self.kinds, strict=True))
            if np.abs(slopes[k]).max() < DEAF and abs(kind.scaled(self.heard_at_start()[k]) - self.wanted[k]) > 1.0
        ]
        if faults:
            raise InputError(faults)

    def heard_at_start(self) -> tuple[float, ...]:
        values = self.heard[tuple(float(x) for x in self.start)]
        assert values is not None
        return values

    def unmeasured(self) -> MeasurementError:
        names = " and ".join(goal.kind for goal in self.goals)
        return MeasurementError(self.failure or f"'{self.circuit.name}': no {names} can be measured of it")


def size(errors: Floats) -> float:
    """Root mean square."""
    return float(np.sqrt(np.mean(errors**2)))


def _free(bench: _Bench) -> Place:
    """The place where the goals are met, were there parts of any value; raises InputError when there is none."""
    (measured,) = bench.measure([bench.start])
    starts = [bench.start]
    if measured is not None:
        slopes, _ = slopes_at(bench.measure, bench.start, measured, bench.box, _BEND_STEP)
        bench.check_followed(slopes)
        promised = _by_poles(bench)
        starts = [bench.start] if promised is None else [promised, bench.start]
    places: list[Place] = []
    for start in starts:
        place = approach(bench.measure, start, bench.wanted, bench.box)
        if place is not None:
            places.append(place)
            if place.off <= 1.0:
                return place
    places += _from_survey(bench)
    if not places:
        raise bench.unmeasured()
    best = min(places, key=lambda place: place.off)
    if best.off > 1.0:
        raise InputError(_out_of_reach(bench, best))
    return best


def _by_poles(bench: _Bench) -> Floats | None:
    """Where the poles of the circuit at rest promise pitch and decay: a start that costs no render.

    The pole that is heard lies near the settled pitch; what its frequency and decay differ by from what was measured is
    taken to stay so. None where there is no such pole, or no goal that it decides.
    """
    kinds = [goal.kind for goal in bench.goals]
    rows = [k for k, kind in enumerate(kinds) if kind in ("pitch", "decay")]
    if not rows or "pitch" not in kinds:
        return None
    start_hz = bench.heard_at_start()[kinds.index("pitch")]

    def of_pole(point: Floats, near_hz: float) -> Floats | None:
        ringing = [pole for pole in bench.poles(point) if pole.q > _RINGS_ABOVE_Q and pole.decay_s > 0.0]
        pole = min(ringing, key=lambda pole: abs(math.log(pole.frequency_hz / near_hz)), default=None)
        if pole is None:
            return None
        hz = pole.frequency_hz * math.sqrt(1.0 - 1.0 / (4.0 * pole.q**2))
        value = {"pitch": hz, "decay": pole.decay_s}
        return np.array([bench.kinds[k].scaled(value[kinds[k]]) for k in rows])

    at_start = of_pole(bench.start, start_hz)
    (measured,) = bench.measure([bench.start])
    if at_start is None or measured is None:
        return None
    pitch = rows.index(kinds.index("pitch"))
    offset = measured[rows] - at_start
    if abs(offset[pitch]) > 12.0 * math.log2(1.0 + _SAME_PITCH) / GOALS["pitch"].tolerance:
        return None
    wanted = bench.wanted[rows] - offset
    goal_hz = bench.goals[kinds.index("pitch")].value
    place = approach(
        lambda points: [of_pole(point, math.sqrt(start_hz * goal_hz)) for point in points],
        bench.start,
        wanted,
        bench.box,
    )
    return None if place is None else place.point


def _from_survey(bench: _Bench) -> list[Place]:
    """Searches from the best of many points all over the box, as long as the goals are not met."""
    from scipy.stats import qmc  # slow to import

    shares = qmc.Sobol(len(bench.parts), scramble=False).random(_SURVEY)
    points = [bench.box.low + share * (bench.box.high - bench.box.low) for share in shares]
    found = [(size(y - bench.wanted), k) for k, y in enumerate(bench.measure(points)) if y is not None]
    places: list[Place] = []
    for _, k in sorted(found)[:_SURVEY_STARTS]:
        place = approach(bench.measure, points[k], bench.wanted, bench.box)
        if place is not None:
            places.append(place)
            if place.off <= 1.0:
                break
    return places


def _out_of_reach(bench: _Bench, best: Place) -> list[Fault]:
    """Every goal that is missed at the best place, with the range it was heard in over all that was struck."""
    heard = [values for values in bench.heard.values() if values is not None]
    values = bench.heard[tuple(float(x) for x in best.point)]
    assert values is not None
    faults = []
    for k, (goal, kind) in enumerate(zip(bench.goals, bench.kinds, strict=True)):
        if abs(best.measured[k] - bench.wanted[k]) <= 1.0:
            continue
        low, high = min(row[k] for row in heard), max(row[k] for row in heard)
        others = " and ".join(f"{other.kind} {other.shown}" for other in bench.goals if other is not goal)
        found = f"{goal.kind} {goal.shown} is "
        # A goal within the range it was heard in is only too much beside the others.
        found += "missed" if low <= goal.value <= high and others else "out of reach"
        found += f" with {others}" if others else ""
        found += f": no nearer than {kind.shown(values[k])} by {', '.join(bench.parts)}"
        reach = f"{kind.shown(low)} to {kind.shown(high)} was heard, with values from a tenth to ten times as large"
        faults.append(Fault(f"--goal {goal.kind}", found, reach))
    return faults


def _snapped(bench: _Bench, place: Place, series: Mapping[str, str], count: int) -> tuple[Combination, ...]:
    """The best combinations of values from the series, the nearest first."""
    slopes, bends = slopes_at(bench.measure, place.point, place.measured, bench.box, _BEND_STEP)
    grid = _combinations(bench, place, series)

    def foretold(points: Floats) -> Floats:
        away = points - place.point
        return place.measured + away @ slopes.T + 0.5 * away**2 @ bends.T

    plain = foretold(grid)
    order = np.argsort(_sizes(plain - bench.wanted), kind="stable")[:_MOST_CORRECTED]
    grid, promised = grid[order], plain[order]
    struck = np.zeros(len(grid), dtype=bool)
    measured = np.full_like(promised, np.nan)
    for _ in range(_BATCHES):
        now = np.where(struck, np.inf, _sizes(_corrected(grid, promised, struck, measured) - bench.wanted))
        batch = [int(k) for k in np.argsort(now, kind="stable")[:_BATCH] if np.isfinite(now[k])]
        kept = np.sort(_sizes(measured[struck & np.isfinite(measured).all(axis=1)] - bench.wanted))
        if not batch or (len(kept) >= count and now[batch[0]] > 2.0 * kept[count - 1]):
            break
        for k, found in zip(batch, bench.measure([grid[k] for k in batch]), strict=True):
            struck[k] = True
            if found is not None:
                measured[k] = found
    good = np.flatnonzero(struck & np.isfinite(measured).all(axis=1))
    ranked = good[np.argsort(_sizes(measured[good] - bench.wanted), kind="stable")][:count]
    if not len(ranked):
        raise bench.unmeasured()
    return tuple(bench.combination(grid[k]) for k in ranked)


def _combinations(bench: _Bench, place: Place, series: Mapping[str, str]) -> Floats:
    """Points of all combinations of values near the place: (combinations, parts)."""
    each = max(1, int(0.5 * _MOST_COMBINATIONS ** (1.0 / len(bench.parts))))
    lines = []
    for k, name in enumerate(bench.parts):
        low, high = math.exp(bench.box.low[k]), math.exp(bench.box.high[k])
        logs = np.log(values_between(series[name], 0.5 * low, 2.0 * high))
        below, above = logs[logs < place.point[k]][::-1], logs[logs >= place.point[k]]
        near = [
            line[: max(1, min(each, int(np.sum(np.abs(line - place.point[k]) < _REACH))))] for line in (below, above)
        ]
        lines.append(np.concatenate(near))
    return np.array(list(product(*lines)))


def _corrected(grid: Floats, promised: Floats, struck: Any, measured: Floats) -> Floats:
    """What is foretold, moved by what the nearest struck combination was off."""
    known = np.flatnonzero(struck & np.isfinite(measured).all(axis=1))
    if not len(known):
        return promised
    nearest = known[np.argmin(((grid[:, None, :] - grid[None, known, :]) ** 2).sum(axis=2), axis=1)]
    return promised + (measured - promised)[nearest]


def _sizes(errors: Floats) -> Floats:
    """Root mean square of each row."""
    return np.sqrt(np.mean(errors**2, axis=1))
