"""Meets a fit's goals as if parts came in any value: from where poles promise them, then by renders."""

from __future__ import annotations

import math

import numpy as np

from kickrender.errors import Fault, InputError
from kickrender.sound.goals import GOALS
from kickrender.study.approach import BEND_STEP, Floats, Place, approach, slopes_at
from kickrender.study.fit_bench import Bench, key_of, size
from kickrender.study.fit_parts import check_followed

_RINGS_ABOVE_Q = 1.0
_SAME_PITCH = 0.1  # a pole this near to the heard pitch is the one that is heard
_SURVEY = 64  # strikes all over the box, when the search from the circuit's own values fails
_SURVEY_STARTS = 3


def free_place(bench: Bench) -> Place:
    """The place where the goals are met, were there parts of any value; raises InputError when there is none."""
    (measured,) = bench.measure([bench.start])
    starts = [bench.start]
    if measured is not None:
        slopes, _ = slopes_at(bench.measure, bench.start, measured, bench.box, BEND_STEP)
        check_followed(bench, slopes)
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


def _by_poles(bench: Bench) -> Floats | None:
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


def _from_survey(bench: Bench) -> list[Place]:
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


def _out_of_reach(bench: Bench, best: Place) -> list[Fault]:
    """Every goal that is missed at the best place, with the range it was heard in over all that was struck."""
    heard = [values for values in bench.heard.values() if values is not None]
    values = bench.heard[key_of(best.point)]
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
        reach = f"{kind.shown(low)} to {kind.shown(high)}"
        allowed = f"{reach} was heard, with values from a tenth to ten times as large; other or more parts to vary"
        faults.append(Fault(f"--goal {goal.kind}", found, allowed))
    return faults
