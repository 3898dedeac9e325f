"""The stepper made to take equal steps, so that its order can be measured."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from kickrender.circuit import ResolvedCircuit
from kickrender.engine.solve import _prepare, _program, _run, _settle

ANY_ERROR = 1e30  # a tolerance that accepts every step


@dataclass(frozen=True)
class Steps:
    """end : net -> voltage at the end. pieces : (steps, 5) of the output, see method.Method.dense."""

    end: dict[str, float]
    pieces: np.ndarray

    def inside(self, theta: float) -> np.ndarray:
        """The output at the same place inside every step, by the dense output."""
        x, x_new, k_0, k_1, k_2 = self.pieces.T
        return (1 - theta) * x + theta * (x_new + (1 - theta) * (k_0 + theta * (k_1 + theta * k_2)))


def fixed_steps(circuit: ResolvedCircuit, length_s: float, count: int) -> Steps:
    """`count` equal steps over the first `length_s`; inputs must have no corners there."""
    hit = _prepare(circuit, length_s, ())
    program = _program(hit.topology)
    numbers = program.layout(hit.numbers)[None, :]
    x, errors, _ = _settle(program, [hit], numbers)
    assert errors == [None]
    assert hit.segments.end.size == 1
    pieces = []
    times = np.arange(count + 1) * (length_s / count)
    for begin, end in zip(times[:-1].tolist(), times[1:].tolist(), strict=True):
        step = replace(hit, segments=replace(hit.segments, end=np.array([end])))
        (run,) = _run(program, [step], numbers, x, ANY_ERROR, start_t=begin, start_h=end - begin, room=4)
        assert (run.status, run.steps) == (0, 1)
        pieces.append(run.piece_c[0, 0])
        x = run.x[None, :].copy()
    return Steps(dict(zip(program.unknowns, x[0].tolist(), strict=True)), np.array(pieces))


def slope_of(counts: list[int], errors: list[float]) -> float:
    """Order of convergence: by least squares, how many decades the error falls for each decade of steps."""
    return float(-np.polyfit(np.log(counts), np.log(errors), 1)[0])
