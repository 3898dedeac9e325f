"""How the engine's cost grows: with nets, with length, and what a neighbour in the next lane saves."""

from __future__ import annotations

from dataclasses import dataclass
from statistics import median
from time import perf_counter

from bench.circuits import Case
from kickrender.circuit import Circuit, ResolvedCircuit
from kickrender.engine import solve, solve_each

LENGTHS_S = (0.25, 0.5, 1.0, 2.0, 4.0)
WALK = tuple(k / 31 for k in range(32))  # positions of a control over the hits solved side by side


@dataclass(frozen=True)
class Lanes:
    """Seconds per hit, alone and side by side, over the same hits."""

    lone_s: float
    lane_s: float


def solve_s(circuit: ResolvedCircuit, length_s: float, repeats: int) -> tuple[float, int]:
    """Time of a lone solve, nothing sampled, and its steps."""
    steps = solve(circuit, length_s).counters["steps"]
    return median(_timed(lambda: solve(circuit, length_s)) for _ in range(repeats)), steps


def growth_with_nets(cases: list[Case], length_s: float, repeats: int) -> list[tuple[Case, float, int]]:
    """Time and steps of every case."""
    return [(case, *solve_s(case.circuit, length_s, repeats)) for case in cases]


def growth_with_length(circuit: ResolvedCircuit, repeats: int) -> list[tuple[float, float, int]]:
    """Time and steps for every length."""
    return [(length_s, *solve_s(circuit, length_s, repeats)) for length_s in LENGTHS_S]


def lanes(circuit: Circuit, settings: dict[str, float], control: str, length_s: float, repeats: int) -> Lanes:
    """A walk of one control, its hits solved one by one and side by side, nothing sampled."""
    low, high = circuit.controls[control].low, circuit.controls[control].high
    hits = [circuit.resolve({**settings, control: low + (high - low) * at}) for at in WALK]
    lengths = [length_s] * len(hits)
    solve(hits[0], length_s)
    solve_each(hits[:2], lengths[:2])
    lone = median(_timed(lambda: [solve(hit, length_s) for hit in hits]) for _ in range(repeats))
    side = median(_timed(lambda: solve_each(hits, lengths)) for _ in range(repeats))
    return Lanes(lone / len(hits), side / len(hits))


def _timed(work) -> float:  # type: ignore[no-untyped-def]
    begin = perf_counter()
    work()
    return perf_counter() - begin
