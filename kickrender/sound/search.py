"""Solves for positions between 0 and 1 at which measured values are as wanted: ask where to measure, tell what was.

Values count in tolerances, positions in shares of a control's way; value k is mainly answered by position k. A search
starts from a survey of measured points and goes on by Broyden's method: Newton steps over slopes that each new
measurement corrects. A step that makes things worse is taken back and the next one is shorter; a position that would
leave its way stays at the end, and the others go on without it.

Plain arithmetic only, and positions are rounded, so that the same measurements give the same bits on every machine.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from itertools import product

Walk = tuple[float, ...]
Slopes = list[list[float]]  # [value][position]

POSITION_DIGITS = 6
AIM = 0.12  # tolerances: where a search ends, so that another estimator still finds the goal met
LONGEST_STEP = 0.3
MOST_ROUNDS = 16
SURVEY_POINTS = {1: 9, 2: 5, 3: 4, 4: 3}  # positions sought -> points along each


def survey_walks(count: int) -> list[Walk]:
    """The points of a survey over so many positions: an even grid with both ends."""
    points = SURVEY_POINTS[count]
    return list(product([round(k / (points - 1), POSITION_DIGITS) for k in range(points)], repeat=count))


class Survey:
    """What was measured on a grid; None where a point has no value."""

    def __init__(self, values: Mapping[Walk, Sequence[float] | None]) -> None:
        self.values = {walk: row for walk, row in values.items() if row is not None}
        self.slopes = {walk: slopes for walk in self.values if (slopes := self._slopes_at(walk))}

    def _slopes_at(self, walk: Walk) -> Slopes | None:
        """Differences over the nearest measured points on both sides along each position."""
        columns = []
        for k in range(len(walk)):
            line = [other for other in self.values if other[:k] + other[k + 1 :] == walk[:k] + walk[k + 1 :]]
            below = max((other for other in line if other[k] < walk[k]), default=walk)
            above = min((other for other in line if other[k] > walk[k]), default=walk)
            if below == above:
                return None
            pair = zip(self.values[below], self.values[above], strict=True)
            columns.append([(high - low) / (above[k] - below[k]) for low, high in pair])
        return [list(row) for row in zip(*columns, strict=True)]

    def start(self, wanted: Sequence[float]) -> tuple[Walk, Walk, Slopes] | None:
        """The point whose Newton step is the shortest, where that step leads, and the slopes it trusts."""
        best: tuple[float, Walk, Walk, Slopes] | None = None
        for walk, slopes in self.slopes.items():
            errors = [value - wish for value, wish in zip(self.values[walk], wanted, strict=True)]
            step = newton_step(walk, errors, slopes)
            if step is None:
                continue
            # What a position at its end leaves unmet counts as a step, too: an answer within reach comes first.
            left = [error + _dot(row, step) for error, row in zip(errors, slopes, strict=True)]
            length = max(map(abs, step)) + (1.0 if _worst(left) > 1.0 else 0.0)
            if best is None or length < best[0]:
                best = length, walk, _moved(walk, step, LONGEST_STEP), slopes
        return best and best[1:]


class Search:
    """One search. `best` is where it has come to, `error` how far the worst value is off there."""

    def __init__(self, wanted: Sequence[float]) -> None:
        self.wanted = tuple(wanted)
        self.next: Walk | None = None
        self.best: Walk | None = None
        self._origin: Walk = ()
        self._last: Walk = ()
        self._errors: list[float] = []
        self._slopes: Slopes = []
        self._radius = LONGEST_STEP
        self._tried: set[Walk] = set()

    def begin(self, survey: Survey) -> None:
        """Start, or start again, from a survey."""
        start = survey.start(self.wanted)
        if start is not None:
            self._origin, self.next, slopes = start
            self._slopes = [list(row) for row in slopes]
            self.best, self._radius, self._tried = None, LONGEST_STEP, set()

    @property
    def error(self) -> float:
        return _worst(self._errors) if self.best else math.inf

    @property
    def met(self) -> bool:
        """Whether every value is within its tolerance at `best`."""
        return self.error <= 1.0

    def tell(self, values: Sequence[float] | None) -> None:
        """Go on from the values measured at `next`; None says that there are none. `next` is then None at the end."""
        walk = self.next
        assert walk is not None
        self._tried.add(walk)
        self._last = walk
        if values is None:
            self._shorten(walk)
        else:
            errors = [value - wish for value, wish in zip(values, self.wanted, strict=True)]
            if self.best is not None:
                self._correct(self.best, walk, errors)
            if self.best is None or self._left(walk, errors) < self._left(self.best, self._errors):
                self.best, self._errors = walk, errors
                self._radius = min(LONGEST_STEP, 2.0 * self._radius)
            else:
                self._shorten(walk)
        self.next = self._ask()

    def _ask(self) -> Walk | None:
        if self.error <= AIM or len(self._tried) >= MOST_ROUNDS:
            return None
        if self.best is None:  # nothing to measure at the first point: back towards where there was something
            back = [origin - last for origin, last in zip(self._origin, self._last, strict=True)]
            walk = _moved(self._last, [way / 2.0 for way in back], 1.0)
        else:
            step = newton_step(self.best, self._errors, self._slopes)
            if step is None:
                return None
            walk = _moved(self.best, step, self._radius)
        return None if walk in self._tried else walk

    def _left(self, walk: Walk, errors: Sequence[float]) -> float:
        """How far the slopes think there is still to go: a distance that no choice of units moves."""
        step = newton_step(walk, errors, self._slopes)
        return math.inf if step is None else max(map(abs, step))

    def _shorten(self, walk: Walk) -> None:
        if self.best is not None:
            self._radius = max(abs(a - b) for a, b in zip(walk, self.best, strict=True)) / 2.0

    def _correct(self, old_walk: Walk, walk: Walk, errors: Sequence[float]) -> None:
        """Broyden's correction: the least change of the slopes that explains what was measured."""
        moved = [new - old for new, old in zip(walk, old_walk, strict=True)]
        square = _dot(moved, moved)
        for row, new, old in zip(self._slopes, errors, self._errors, strict=True):
            share = (new - old - _dot(row, moved)) / square
            row[:] = [slope + share * move for slope, move in zip(row, moved, strict=True)]


def newton_step(walk: Walk, errors: Sequence[float], slopes: Slopes) -> list[float] | None:
    """The step that the slopes promise to undo the errors; None when they do not say.

    A position at an end of its way that would have to go beyond stays there, and its own value is given up.
    """
    free = list(range(len(walk)))
    while free:
        found = _solved([[slopes[i][k] for k in free] for i in free], [-errors[i] for i in free])
        if found is None:
            return None
        stuck = [k for k, step in zip(free, found, strict=True) if not 0.0 <= walk[k] + _sign(step) * 1e-6 <= 1.0]
        if not stuck:
            step = dict(zip(free, found, strict=True))
            return [step.get(k, 0.0) for k in range(len(walk))]
        free = [k for k in free if k not in stuck]
    return [0.0] * len(walk)


def _solved(matrix: Slopes, right: list[float]) -> list[float] | None:
    """Gaussian elimination with row pivots; None for a singular matrix."""
    rows = [[*row, value] for row, value in zip(matrix, right, strict=True)]
    size = len(rows)
    for k in range(size):
        pivot = max(range(k, size), key=lambda i: abs(rows[i][k]))
        rows[k], rows[pivot] = rows[pivot], rows[k]
        if rows[k][k] == 0.0:
            return None
        for i in range(k + 1, size):
            share = rows[i][k] / rows[k][k]
            rows[i] = [a - share * b for a, b in zip(rows[i], rows[k], strict=True)]
    found = [0.0] * size
    for k in reversed(range(size)):
        known = 0.0
        for j in range(k + 1, size):
            known += rows[k][j] * found[j]
        found[k] = (rows[k][size] - known) / rows[k][k]
    return found


def _moved(walk: Walk, step: Sequence[float], radius: float) -> Walk:
    longest = max(map(abs, step))
    scale = radius / longest if longest > radius else 1.0
    moved = (place + scale * way for place, way in zip(walk, step, strict=True))
    return tuple(round(min(max(place, 0.0), 1.0), POSITION_DIGITS) for place in moved)


def _dot(a: Sequence[float], b: Sequence[float]) -> float:
    total = 0.0
    for x, y in zip(a, b, strict=True):  # one after the other: `sum` of floats changed its way of adding in Python 3.12
        total += x * y
    return total


def _worst(errors: Sequence[float]) -> float:
    return max(map(abs, errors))


def _sign(value: float) -> float:
    return (value > 0.0) - (value < 0.0)
