"""Finds values at which measured goals are as wanted, as if parts came in any value: a damped Newton search.

Values are natural logarithms of what parts are, goals count in their own tolerances on their even scales (semitones,
logarithms): there a resonator's pitch and decay are nearly straight lines. With more parts than goals the smallest
step that helps is taken, so that parts stay near what they were.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Evaluate = Callable[[Sequence[Floats]], list[Floats | None]]  # points -> what each measures; None where nothing can

AIM = 0.1  # tolerances: where the search ends
ROUNDS = 8
LONGEST_STEP = 1.1  # three times as large or small
SHORTER = (1.0, 0.5, 0.2, 0.05)  # shares of a step, tried side by side
SLOPE_STEP = 0.02
BEND_STEP = 0.06  # wide enough that bends stand out of what measuring scatters
DEAF = 0.5  # tolerances by a factor e: a goal that moves less does not follow the parts
_SMALLEST_SHARE = 1e-3  # of the largest singular value: what lies below is noise


@dataclass(frozen=True, eq=False)
class Box:
    """Where values may lie: logarithms, (n,) each."""

    low: Floats
    high: Floats

    def clipped(self, point: Floats) -> Floats:
        return np.clip(point, self.low, self.high)


@dataclass(frozen=True, eq=False)
class Place:
    """Where a search has come to: the point (n,), what it measures (m,), and how far the worst goal is off there."""

    point: Floats
    measured: Floats
    off: float


def approach(evaluate: Evaluate, start: Floats, wanted: Floats, box: Box) -> Place | None:
    """The nearest place to be found from `start`; None when nothing can be measured there.

    Source: the Gauss-Newton step of least norm (A. Bjorck, Numerical Methods for Least Squares Problems, 1996, from
    memory), made shorter where it does not help.
    """
    (measured,) = evaluate([start])
    if measured is None:
        return None
    best = Place(start, measured, _worst(measured - wanted))
    for _ in range(ROUNDS):
        if best.off <= AIM:
            break
        slopes, _ = slopes_at(evaluate, best.point, best.measured, box, SLOPE_STEP)
        step = least_step(slopes, wanted - best.measured, best.point, box)
        size = float(np.abs(step).max(initial=0.0))
        if size < 1e-9:
            break
        step *= min(1.0, LONGEST_STEP / size)
        points = [box.clipped(best.point + share * step) for share in SHORTER]
        tried = [
            Place(point, found, _worst(found - wanted))
            for point, found in zip(points, evaluate(points), strict=True)
            if found is not None
        ]
        nearest = min(tried, key=lambda place: _size(place.measured - wanted), default=best)
        if _size(nearest.measured - wanted) >= _size(best.measured - wanted):
            break
        best = nearest
    return best


def slopes_at(evaluate: Evaluate, point: Floats, measured: Floats, box: Box, step: float) -> tuple[Floats, Floats]:
    """First and second derivatives of every goal along every value, (m, n) each, by central differences.

    Where one side cannot be measured or lies outside the box, the other side alone gives the slope.
    """
    count = len(point)
    ends = [box.clipped(point + sign * step * np.eye(count)[k]) for k in range(count) for sign in (-1.0, 1.0)]
    found = evaluate(ends)
    slopes, bends = np.zeros((2, len(measured), count))
    for k in range(count):
        low, high = ends[2 * k][k] - point[k], ends[2 * k + 1][k] - point[k]
        below, above = found[2 * k], found[2 * k + 1]
        below, above = (None if low == 0.0 else below), (None if high == 0.0 else above)
        if below is not None and above is not None:
            down, up = (below - measured) / low, (above - measured) / high
            bends[:, k] = 2.0 * (up - down) / (high - low)
            slopes[:, k] = down - 0.5 * bends[:, k] * low
        elif below is not None:
            slopes[:, k] = (below - measured) / low
        elif above is not None:
            slopes[:, k] = (above - measured) / high
    return slopes, bends


def least_step(slopes: Floats, change: Floats, point: Floats, box: Box) -> Floats:
    """The smallest step that changes the goals so, by these slopes; (n,). Values at an end of the box stay there."""
    step = np.zeros(len(point))
    free = np.ones(len(point), dtype=bool)
    while free.any():
        left = change - slopes @ step
        rows = np.abs(slopes[:, free]).max(axis=1)
        rows[rows == 0.0] = 1.0
        found = np.linalg.lstsq(slopes[:, free] / rows[:, None], left / rows, rcond=_SMALLEST_SHARE)[0]
        moved = point[free] + found
        beyond = (moved < box.low[free]) | (moved > box.high[free])
        if not beyond.any():
            step[free] = found
            break
        names = np.flatnonzero(free)[beyond]
        step[names] = box.clipped(point + _placed(found, free))[names] - point[names]
        free[names] = False
    return step


def _placed(values: Floats, where: NDArray[np.bool_]) -> Floats:
    whole = np.zeros(len(where))
    whole[where] = values
    return whole


def _worst(errors: Floats) -> float:
    return float(np.abs(errors).max())


def _size(errors: Floats) -> float:
    return float(np.sqrt(np.mean(errors**2)))
