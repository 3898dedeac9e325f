"""Combinations of series' values, against trying all of them, where slopes alone would mislead."""

from __future__ import annotations

import math
from itertools import product
from typing import Any, cast

import numpy as np
import pytest

from kickrender.circuit.series import values_between
from kickrender.study.approach import Box, Place
from kickrender.study.fit_bench import Bench
from kickrender.study.fit_snap import snapped

SERIES = {"R1": "E24", "R2": "E24", "C1": "E12"}
PLACE = np.log([10e3, 22e3, 1e-8])


class Bent:
    """Two goals over three parts that bend far from straight lines within a factor two, and one that cannot be told."""

    parts = tuple(SERIES)
    box = Box(PLACE - math.log(10.0), PLACE + math.log(10.0))
    wanted = np.array([100.0, -50.0])

    def __init__(self) -> None:
        self.struck = 0

    def measure(self, points: list[Any]) -> list[Any]:
        self.struck += len(points)
        return [self.value(np.asarray(point)) for point in points]

    def value(self, point: Any) -> Any:
        x, y, z = point - PLACE
        if x > 0.5:
            return None
        bent = 40.0 * x + 25.0 * math.sin(4.0 * (y + z)) + 60.0 * (math.exp(y - x) - 1.0 - (y - x))
        return self.wanted + np.array([30.0 * (y - z) + 20.0 * x * z, bent])


@pytest.mark.parametrize("count", [1, 5])
def test_the_nearest_of_all_is_found_and_the_others_are_near(count: int) -> None:
    bench = Bent()
    found = snapped(cast(Bench, bench), Place(PLACE, bench.wanted, 0.0), SERIES, count)
    lines = [
        [value for value in values_between(series, 1e-9, 1e6) if abs(math.log(value) - PLACE[k]) < 0.7]
        for k, series in enumerate(SERIES.values())
    ]
    every = {}
    for values in product(*lines):
        value = bench.value(np.log(values))
        if value is not None:
            every[values] = float(np.sqrt(np.mean((value - bench.wanted) ** 2)))
    ranks = {values: rank for rank, values in enumerate(sorted(every, key=lambda values: every[values]))}
    told = [ranks[tuple(float(f"{math.exp(x):.12g}") for x in point)] for point in found]
    assert len(told) == count
    assert told[0] == 0
    assert told == sorted(told)
    assert max(told) < 0.01 * len(every)
    assert bench.struck < 0.1 * len(every)


def test_a_part_of_one_value_leaves_the_others_to_choose() -> None:
    """Combinations that all lie in a plane still correct one another."""
    bench = Bent()
    flat = Box(np.array([bench.box.low[0], bench.box.low[1], PLACE[2]]), bench.box.high)
    bench.box = flat  # type: ignore[misc]
    found = snapped(cast(Bench, bench), Place(PLACE, bench.wanted, 0.0), {**SERIES, "C1": "E3"}, 3)
    assert len(found) == 3
