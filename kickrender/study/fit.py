"""Part values for wanted goals, in values that parts are made in: the best few combinations, each one rendered."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from kickrender.circuit import Circuit
from kickrender.errors import Fault, InputError
from kickrender.pack.workers import Progress
from kickrender.sound.goals import Goal
from kickrender.sound.options import SoundOptions
from kickrender.sound.render import Settings
from kickrender.sound.tune import FADE_S
from kickrender.study.fit_bench import Bench, Combination
from kickrender.study.fit_free import free_place
from kickrender.study.fit_parts import chosen_parts
from kickrender.study.fit_read import USUAL_SERIES, variable_parts
from kickrender.study.fit_snap import snapped

MOST_COUNT = 50


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
        Resistors, capacitors and inductors; by default those that move the goals and little besides, two more than
        goals.
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
    bench = Bench(circuit, goals, settings, options or SoundOptions(), jobs, progress)
    parts = tuple(vary) or chosen_parts(bench)
    bench.vary(parts)
    place = free_place(bench)
    by_kind = {**USUAL_SERIES, **(series or {})}
    chosen = {name: by_kind[circuit.parts[name].kind] for name in parts}
    best = snapped(bench, place, chosen, count)
    before, free, *combinations = bench.told([bench.start, place.point, *best])
    assert free is not None
    ranked = tuple(each for each in combinations if each is not None)
    return Fit(circuit, settings, tuple(goals), chosen, before, free, ranked, bench.strikes)


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
