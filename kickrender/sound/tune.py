"""Finds control positions whose measured renders meet goals, several at once.

A coarse survey of renders over the controls' ways gives each wish a start, and a search by Broyden's method does the
rest, see `search`. Wishes are followed side by side, because many hits are solved together for little more than the
price of a few. (The poles of the linearised circuit would give a start as well, but for pitch and decay only, and
only after guessing which pole is the one heard.) The answer to a wish depends on nothing but the wish.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from kickrender.circuit import Circuit
from kickrender.circuit.settings import control_value
from kickrender.errors import Fault, InputError
from kickrender.sound.goals import GOALS, Goal
from kickrender.sound.measure import Measurements
from kickrender.sound.options import SoundOptions
from kickrender.sound.render import Settings, Take, hear_each
from kickrender.sound.search import Search, Survey, Walk, survey_walks

RANGE_POINTS = 9  # from which a reachable range is told
FADE_S = 0.01  # the end of a file, where a decay can no longer be told from the fade
_SIDE_BY_SIDE = 64  # hits rendered together: bounds memory


@dataclass(frozen=True)
class Wish:
    """One sound that is wanted.

    settings : everything that is set and not sought.
    goals : of distinct kinds; `places` is where each was asked for, for faults.
    """

    circuit: Circuit
    settings: Settings
    goals: tuple[Goal, ...]
    places: tuple[str, ...]

    @property
    def controls(self) -> list[str]:
        """The control that answers to each goal."""
        return [self.circuit.goals[goal.kind] for goal in self.goals]

    def settings_at(self, walk: Walk) -> dict[str, float]:
        """The sought controls' values at these shares of their ways."""
        found = zip(self.controls, walk, strict=True)
        return {name: control_value(self.circuit.controls[name], share) for name, share in found}


@dataclass(frozen=True)
class Tuned:
    """The answer to a wish.

    settings : control -> its value, in its own units.
    positions : control -> the share of its way, 0 to 1, that this value lies at.
    measured : goal kind -> what the render under these settings measures, in the goal's unit.
    """

    settings: Mapping[str, float]
    positions: Mapping[str, float]
    measured: Mapping[str, float]


def tune_each(wishes: Sequence[Wish], options: SoundOptions) -> list[Tuned]:
    """Control positions for every wish, in order, each found by rendering.

    Parameters
    ----------
    wishes : sequence of Wish
    options : SoundOptions
        How the sounds will be rendered: they are measured as they will be.

    Raises
    ------
    InputError
        With every fault: a goal no control answers to, two goals on one control, a control both set and sought, a
        decay longer than the file, and goals out of reach, with the range that is within reach.

    Source: C. G. Broyden, "A class of methods for solving nonlinear simultaneous equations", Mathematics of
    Computation 19 (1965), his first method.
    """
    faults = [fault for wish in wishes for fault in wish_faults(wish, options)]
    if faults:
        raise InputError(list(dict.fromkeys(faults)))
    runs = [_Run(wish, options) for wish in wishes]
    # The first survey is made under the circuit's own starts, so that all wishes can share it.
    _follow(runs, [{}] * len(runs))
    lost = [run for run in runs if not run.search.met]
    _follow(lost, [run.wish.settings for run in lost])
    lost = [run for run in lost if not run.search.met]
    if lost:
        raise InputError(_out_of_reach(lost))
    return [run.answer() for run in runs]


def wish_faults(wish: Wish, options: SoundOptions) -> list[Fault]:
    """What is wrong with a wish before anything is rendered."""
    faults = []
    answers: dict[str, str] = {}
    for goal, place in zip(wish.goals, wish.places, strict=True):
        here = f"{place} (circuit '{wish.circuit.name}')"
        control = wish.circuit.goals.get(goal.kind)
        if control is None:
            known = ", ".join(kind for kind in GOALS if kind in wish.circuit.goals)
            found = f"no control of the circuit answers to '{goal.kind}'"
            faults.append(Fault(here, found, f"goals of the circuit's table [goals]: {known or 'none'}"))
            continue
        if control in answers:
            found = f"control '{control}' answers to '{answers[control]}' as well as to '{goal.kind}'"
            faults.append(Fault(here, found, "one of the two"))
        if control in wish.settings:
            found = f"control '{control}' is set, and sought for '{goal.kind}'"
            faults.append(Fault(here, found, "one of the two"))
        answers[control] = goal.kind
        longest_s = round((options.longest_s - FADE_S) / 1.03, 3)
        if goal.kind == "decay" and goal.value > longest_s:
            found = f"a decay of {goal.value:g} s in a file of at most {options.longest_s:g} s"
            faults.append(Fault(here, found, f"up to {longest_s:g} s, or a longer length in [sound]"))
    return faults


class _Run:
    """A wish, its search, and what was heard at each position."""

    def __init__(self, wish: Wish, options: SoundOptions) -> None:
        self.wish, self.options = wish, options
        self.kinds = tuple(goal.kind for goal in wish.goals)
        self.search = Search([GOALS[goal.kind].scaled(goal.value) for goal in wish.goals])
        self.heard: dict[Walk, tuple[float, ...]] = {}

    def place(self, k: int) -> str:
        return f"{self.wish.places[k]} (circuit '{self.wish.circuit.name}')"

    def error(self, k: int) -> float:
        """How far goal k is off at the best position, in tolerances."""
        kind, best = GOALS[self.kinds[k]], self.search.best
        return kind.scaled(self.heard[best][k]) - kind.scaled(self.wish.goals[k].value) if best else 0.0

    def hear(self, walk: Walk, values: tuple[float, ...] | None) -> None:
        if values is not None:
            self.heard[walk] = values
        self.search.tell(_scaled(self.kinds, values))

    def answer(self) -> Tuned:
        walk = self.search.best
        assert walk is not None
        return Tuned(
            self.wish.settings_at(walk),
            dict(zip(self.wish.controls, walk, strict=True)),
            dict(zip(self.kinds, self.heard[walk], strict=True)),
        )


def _follow(runs: Sequence[_Run], surveyed_under: Sequence[Settings]) -> None:
    """Survey, start, and render round after round until every search has ended."""
    surveys: dict[object, Survey] = {}
    for run, settings in zip(runs, surveyed_under, strict=True):
        key = (id(run.wish.circuit), run.kinds, tuple(settings.items()))
        if key not in surveys:
            surveys[key] = _survey(run, settings)
        run.search.begin(surveys[key])
    while asking := [run for run in runs if run.search.next is not None]:
        walks = [run.search.next or () for run in asking]
        heard = _render([(run, run.wish.settings, walk) for run, walk in zip(asking, walks, strict=True)])
        for run, walk, values in zip(asking, walks, heard, strict=True):
            run.hear(walk, values)


def _survey(run: _Run, settings: Settings) -> Survey:
    walks = survey_walks(len(run.kinds))
    heard = _render([(run, settings, walk) for walk in walks])
    return Survey({walk: _scaled(run.kinds, values) for walk, values in zip(walks, heard, strict=True)})


def _scaled(kinds: Sequence[str], values: Sequence[float] | None) -> list[float] | None:
    return None if values is None else [GOALS[kind].scaled(value) for kind, value in zip(kinds, values, strict=True)]


def _render(asked: Sequence[tuple[_Run, Settings, Walk]]) -> list[tuple[float, ...] | None]:
    """What each goal measures at each position; None where there is no such sound or measurement."""
    found: list[tuple[float, ...] | None] = []
    for first in range(0, len(asked), _SIDE_BY_SIDE):
        batch = asked[first : first + _SIDE_BY_SIDE]
        hits = [(run.wish.circuit, {**settings, **run.wish.settings_at(walk)}) for run, settings, walk in batch]
        takes = hear_each(hits, batch[0][0].options)
        for (run, _, _), take in zip(batch, takes, strict=True):
            found.append(_measured(run, take.measurements) if isinstance(take, Take) else None)
    return found


def _measured(run: _Run, measurements: Measurements) -> tuple[float, ...] | None:
    values = [GOALS[kind].measured(measurements) for kind in run.kinds]
    cut_off = measurements.decay_s is not None and measurements.decay_s > run.options.longest_s - FADE_S
    if "decay" in run.kinds and cut_off:
        return None
    known = tuple(value for value in values if value is not None)
    return known if len(known) == len(values) else None


def _out_of_reach(lost: Sequence[_Run]) -> list[Fault]:
    """Each goal that cannot be met, once for each circuit, with what its control reaches."""
    faults: dict[tuple[str, Goal], Fault] = {}
    for run in lost:
        if run.search.best is None:
            found = f"no {' and '.join(run.kinds)} could be measured anywhere"
            faults.setdefault((run.place(0), run.wish.goals[0]), Fault(run.place(0), found, "settings that sound"))
            continue
        unmet = [k for k in range(len(run.kinds)) if abs(run.error(k)) > 1.0]
        if any((run.place(k), run.wish.goals[k]) in faults for k in unmet):
            continue
        ranges = {k: _reach(run, run.search.best, k) for k in unmet}
        beyond = [k for k in unmet if not ranges[k][0] <= run.wish.goals[k].value <= ranges[k][1]]
        for k in beyond or unmet:
            faults[run.place(k), run.wish.goals[k]] = _reach_fault(run, k, *ranges[k], missed=k not in beyond)
    return list(faults.values())


def _reach(run: _Run, best: Walk, k: int) -> tuple[float, float]:
    """Least and greatest value of goal k along its control's way, the other controls staying where they came to."""
    shares = [round(point / (RANGE_POINTS - 1), 6) for point in range(RANGE_POINTS)]
    heard = _render([(run, run.wish.settings, (*best[:k], share, *best[k + 1 :])) for share in shares])
    reached = [row[k] for row in heard if row is not None] + [run.heard[best][k]]
    return min(reached), max(reached)


def _reach_fault(run: _Run, k: int, low: float, high: float, missed: bool) -> Fault:
    goal, kind = run.wish.goals[k], GOALS[run.kinds[k]]
    here = [f"{other.kind} {other.shown}" for other in run.wish.goals if other is not goal]
    here += [f"{name} {value}" for name, value in run.wish.settings.items()]
    control = run.wish.controls[k]
    if missed:
        nearest = kind.shown(run.heard[run.search.best or ()][k], run.options.concert_pitch_hz)
        found = f"{goal.kind} {goal.shown} is missed by control '{control}', which comes no nearer than {nearest}"
    else:
        found = f"{goal.kind} {goal.shown} is out of reach of control '{control}'"
    found += f" with {', '.join(here)}" if here else ""
    ends = [kind.shown(value, run.options.concert_pitch_hz) for value in (low, high)]
    return Fault(run.place(k), found, " to ".join(ends))
