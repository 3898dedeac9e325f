"""Finds the combinations of preferred values that come nearest to a fit's goals.

All combinations around the place where free values meet the goals are foretold from measured slopes and bends. The most
promising are struck; what is measured corrects what is foretold of the rest; and so on until nothing better is
promised.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from itertools import product

import numpy as np
from numpy.typing import NDArray

from kickrender.circuit.series import values_between
from kickrender.study.approach import BEND_STEP, Floats, Place, slopes_at
from kickrender.study.fit_bench import Bench

_BATCH = 24
_BATCHES = 5
_HOPELESS = 4.0  # times as far off as what is kept: no combination is foretold so badly
_REACH = 0.7  # how far from the free values a series' value may lie, as a logarithm: twice as large
_MOST_COMBINATIONS = 200_000
_MOST_CORRECTED = 5_000


def snapped(bench: Bench, place: Place, series: Mapping[str, str], count: int) -> list[Floats]:
    """Points of the best combinations of values from the series, the nearest first."""
    slopes, bends = slopes_at(bench.measure, place.point, place.measured, bench.box, BEND_STEP)
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
        if not batch or (len(kept) >= count and now[batch[0]] > _HOPELESS * kept[count - 1]):
            break
        for k, found in zip(batch, bench.measure([grid[k] for k in batch]), strict=True):
            struck[k] = True
            if found is not None:
                measured[k] = found
    good = np.flatnonzero(struck & np.isfinite(measured).all(axis=1))
    ranked = good[np.argsort(_sizes(measured[good] - bench.wanted), kind="stable")][:count]
    if not len(ranked):
        raise bench.unmeasured()
    return [grid[k] for k in ranked]


def _combinations(bench: Bench, place: Place, series: Mapping[str, str]) -> Floats:
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


def _corrected(grid: Floats, promised: Floats, struck: NDArray[np.bool_], measured: Floats) -> Floats:
    """What is foretold, moved by what the struck combinations were off: cubic splines through those, in many
    dimensions."""
    from scipy.interpolate import RBFInterpolator  # slow to import

    known = np.flatnonzero(struck & np.isfinite(measured).all(axis=1))
    if not len(known):
        return promised
    points, off = grid[known], (measured - promised)[known]
    dimensions = grid.shape[1]
    # cubic ones need a straight line underneath, and points that say how it lies
    whole = len(known) > dimensions and np.linalg.matrix_rank(points - points[0], tol=1e-6) == dimensions
    kernel, degree = ("cubic", 1) if whole else ("linear", 0)
    return promised + RBFInterpolator(points, off, kernel=kernel, degree=degree)(grid)


def _sizes(errors: Floats) -> Floats:
    """Root mean square of each row."""
    return np.sqrt(np.mean(errors**2, axis=1))
