"""From resolved circuits to solutions: prepare, find the rest states, step, and try again where there is a way.

Circuits of one structure are solved side by side. How they are grouped never shows in a result: each one's
arithmetic is its own (see stepper), and an order of elimination follows from the structure alone.
"""

from __future__ import annotations

import functools
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from kickrender.circuit.records import ResolvedCircuit
from kickrender.engine import rest, stepper
from kickrender.engine.equations import matrix_at
from kickrender.engine.lanes import LONE, PADDING
from kickrender.engine.method import RODAS5P
from kickrender.engine.outcome import NAME_OF_STATUS, OUTCOMES
from kickrender.engine.plan import Plan, choose, plan_for
from kickrender.engine.program import Program, build_program
from kickrender.engine.solution import Solution
from kickrender.engine.topology import Numbers, Topology, numbers_of, stamp_all, topology_of
from kickrender.engine.waves import Segments, segments_of
from kickrender.errors import SolveError

ENGINE_VERSION = "2"  # moves whenever a render's bytes may move

DEFAULT_TOLERANCE = 2e-6  # error of one step, relative to a voltage
ABSOLUTE_SHARE = 0.3  # volts (or amperes) below which the tolerance no longer shrinks with the value
SIDE_BY_SIDE = (0,) * 8  # lanes
_BATCH = 64  # hits prepared at once: bounds memory
_ROOM = 4000  # steps kept for any hit, and then per second of it
_ROOM_PER_SECOND = 8000
_MOST_STEPS_PER_HIT = 2_000_000
_MOST_PLANS = 50
_CONSISTENT_V = 1e-3  # a start state still moves by less in the last iteration: large currents into picofarads


@dataclass(frozen=True, eq=False)
class _Hit:
    """One circuit ready for the kernel, in its topology's order."""

    circuit: ResolvedCircuit
    topology: Topology
    numbers: Numbers
    segments: Segments
    length_s: float
    probes: tuple[str, ...]
    start: Mapping[str, float] | None = None


def solve(
    circuit: ResolvedCircuit,
    length_s: float,
    *,
    probes: Sequence[str] = (),
    tolerance: float = DEFAULT_TOLERANCE,
    start: Mapping[str, float] | None = None,
) -> Solution:
    """Strike a circuit and follow it for `length_s`.

    Parameters
    ----------
    circuit : the circuit under its settings.
    length_s : how long to follow it. [s]
    probes : further nets to keep beside the output.
    tolerance : error allowed in one step, relative to each voltage.
    start : net -> voltage at t = 0 (inductor current under the name `rest_state` gives it), in place of the rest
        state; nets left out start at rest. Charges on capacitors follow from it; nets without a charge of their
        own move to where their currents balance. [V], [A]

    Returns
    -------
    Solution, readable at any time from 0 to length_s.

    Raises
    ------
    SolveError
        With the named reason, circuit, time, step, worst net and advice.
    ValueError
        If a probe or a net of `start` is not solved for, or the length is not above 0 s and finite.
    """
    hit = _prepare(circuit, length_s, tuple(probes), start)
    outcome = _solve_batch([hit], tolerance)[0]
    if isinstance(outcome, SolveError):
        raise outcome
    return outcome


def solve_each(
    circuits: Sequence[ResolvedCircuit],
    lengths_s: Sequence[float],
    *,
    probes: Sequence[str] = (),
    tolerance: float = DEFAULT_TOLERANCE,
) -> list[Solution | SolveError]:
    """Strike many circuits; those of one structure are solved side by side. A failure stops no other hit."""
    outcomes: list[Solution | SolveError | None] = [None] * len(circuits)
    groups: dict[int, list[tuple[int, _Hit]]] = {}
    for index, (circuit, length_s) in enumerate(zip(circuits, lengths_s, strict=True)):
        hit = _prepare(circuit, length_s, tuple(probes))
        groups.setdefault(id(hit.topology), []).append((index, hit))
    for group in groups.values():
        for first in range(0, len(group), _BATCH):
            batch = group[first : first + _BATCH]
            for (index, _), outcome in zip(batch, _solve_batch([hit for _, hit in batch], tolerance), strict=True):
                outcomes[index] = outcome
    return [outcome for outcome in outcomes if outcome is not None]


def rest_state(circuit: ResolvedCircuit) -> dict[str, float]:
    """Voltage of every net (and current of every inductor) before the strike. [V], [A]

    Raises
    ------
    SolveError
        If no rest state is found; the message gives circuit, net and residual.
    """
    hit = _prepare(circuit, 1.0, ())
    program = _program(hit.topology)
    x, errors, _ = _settle(program, [hit], program.layout(hit.numbers)[None, :])
    if errors[0] is not None:
        raise errors[0]
    return _by_name(program, hit, x[0])


def _prepare(
    circuit: ResolvedCircuit, length_s: float, probes: tuple[str, ...], start: Mapping[str, float] | None = None
) -> _Hit:
    if not 0.0 < length_s < np.inf:
        raise ValueError(f"the length must be above 0 s and finite, not {length_s}")
    stamps = stamp_all(circuit)
    topology = topology_of(circuit, stamps)
    for net in (circuit.output, *probes, *(start or ())):
        if net not in topology.unknowns:
            raise ValueError(f"net '{net}' is not solved for; solved for: {', '.join(topology.unknowns)}")
    return _Hit(
        circuit,
        topology,
        numbers_of(circuit, topology, stamps),
        segments_of(list(circuit.inputs.values()), length_s),
        length_s,
        tuple(dict.fromkeys((circuit.output, *probes))),
        start,
    )


@functools.lru_cache(maxsize=256)
def _program(topology: Topology) -> Program:
    return build_program(topology, plan_for(topology))


@functools.lru_cache(maxsize=256)
def _program_in_order(topology: Topology, plan: Plan) -> Program:
    return build_program(topology, plan)


def _solve_batch(hits: list[_Hit], tolerance: float) -> list[Solution | SolveError]:
    """Hits of one structure, from rest to end."""
    program = _program(hits[0].topology)
    numbers = np.array([program.layout(hit.numbers) for hit in hits])
    x, errors, iterations = _settle(program, hits, numbers)
    outcomes: list[Solution | SolveError] = list(errors)  # type: ignore[arg-type]
    for i, hit in enumerate(hits):
        if hit.start is not None and errors[i] is None:
            x[i] = _started(program, hit, numbers[i], x[i])
    sound = [index for index, error in enumerate(errors) if error is None]
    if not sound:
        return outcomes
    runs = _run(program, [hits[i] for i in sound], numbers[sound], x[sound], tolerance)
    for i, run in zip(sound, runs, strict=True):
        outcomes[i] = _finish(program, hits[i], x[i], int(iterations[i]), run, tolerance)
    return outcomes


def _settle(
    program: Program, hits: list[_Hit], numbers: NDArray[np.float64]
) -> tuple[NDArray[np.float64], list[SolveError | None], NDArray[np.int64]]:
    code = program.code
    inputs = np.array([[_at_zero(hit.segments, m) for m in range(code.inputs)] for hit in hits]).reshape(len(hits), -1)
    x = np.zeros((len(hits), code.size))
    results = np.zeros((len(hits), 3), dtype=np.int64)
    worst = np.zeros(len(hits))
    scratch = np.zeros((code.size, code.size)), np.zeros(code.coefficients)
    rest.settle(code, numbers, inputs, x, results, worst, *scratch, rest.LIMITS, LONE)
    errors = [
        None
        if results[i, 0] == rest.SETTLED
        else SolveError(
            "no rest state",
            hit.circuit.name,
            OUTCOMES["no rest state"],
            net=program.unknowns[results[i, 2]],
            residual=float(worst[i]),
        )
        for i, hit in enumerate(hits)
    ]
    return x, errors, results[:, 1]


def _started(
    program: Program, hit: _Hit, numbers: NDArray[np.float64], x_rest: NDArray[np.float64]
) -> NDArray[np.float64]:
    """The state at t = 0 that was asked for in place of the rest state, made consistent."""
    code = program.code
    given = hit.start or {}
    x = np.array([given.get(name, at_rest) for name, at_rest in zip(program.unknowns, x_rest, strict=True)])
    inputs = np.array([_at_zero(hit.segments, m) for m in range(code.inputs)])
    scratch = np.zeros((code.size, code.size)), np.zeros(code.coefficients)
    moved = rest.project(code, numbers, inputs, x, *scratch, rest.LIMITS, LONE)
    if not moved < _CONSISTENT_V:
        raise SolveError(
            "no rest state", hit.circuit.name, "No state follows from the start voltages given.", residual=float(moved)
        )
    return x


def _at_zero(segments: Segments, m: int) -> float:
    """Voltage of input m at t = 0. [V]"""
    amplitude, _, turns = segments.sines[m]
    return float(segments.volts[0, m]) + (amplitude * _sine_of_turns(turns) if amplitude else 0.0)


def _sine_of_turns(turns: float) -> float:
    from kickrender.engine.elementary import apply, sine_of_turns  # compiled on first use

    box = np.full(1, turns)
    apply(sine_of_turns, box, box, LONE)
    return float(box[0])


@dataclass(eq=False)
class _Run:
    """What the kernel left of one hit: its status, its pieces and where it stopped."""

    status: int
    steps: int
    rejected: int
    worst: int
    piece_t: NDArray[np.float64]
    piece_h: NDArray[np.float64]
    piece_c: NDArray[np.float64]
    x: NDArray[np.float64]
    t: float
    h: float
    error: float


def _run(
    program: Program,
    hits: list[_Hit],
    numbers: NDArray[np.float64],
    x: NDArray[np.float64],
    tolerance: float,
    *,
    start_t: float = 0.0,
    start_h: float = 0.0,
    room: int = 0,
) -> list[_Run]:
    code, count = program.code, len(hits)
    room = room or _ROOM + int(_ROOM_PER_SECOND * max(hit.length_s for hit in hits))
    most = max(hit.segments.end.size for hit in hits)
    segment_end = np.zeros((count, most))
    segment_v, segment_slope = np.zeros((2, count, most, code.inputs))
    sines = np.zeros((count, code.inputs, 3))
    for i, hit in enumerate(hits):
        used = hit.segments.end.size
        segment_end[i, :used] = hit.segments.end
        segment_v[i, :used], segment_slope[i, :used] = hit.segments.volts, hit.segments.slope
        sines[i] = hit.segments.sines
    place = {name: k for k, name in enumerate(program.unknowns)}
    probed = hits[0].probes
    piece_t, piece_h = np.empty((2, count, room))
    piece_c = np.empty((count, room, len(probed), 5))
    results = np.zeros((count, 5), dtype=np.int64)
    end_x = np.zeros((count, code.size))
    end_t, end_h, end_worst = np.zeros((3, count))
    width = LONE if count == 1 else SIDE_BY_SIDE
    stepper.solve(
        code,
        numbers,
        x,
        np.full(count, start_t),
        np.full(count, start_h),
        np.array([hit.segments.end.size for hit in hits]),
        segment_end,
        segment_v,
        segment_slope,
        sines,
        np.array([place[name] for name in probed], dtype=np.uint32),
        np.array([ABSOLUTE_SHARE * tolerance, tolerance]),
        _MOST_STEPS_PER_HIT,
        piece_t,
        piece_h,
        piece_c,
        results,
        end_x,
        end_t,
        end_h,
        end_worst,
        stepper.work_for(code, len(probed), len(width)),
        width,
    )
    runs = []
    for i in range(count):
        status, pieces, steps, rejected, worst = (int(value) for value in results[i])
        if status == stepper.NO_ROOM:
            again = _run(
                program,
                [hits[i]],
                numbers[i : i + 1],
                x[i : i + 1],
                tolerance,
                start_t=start_t,
                start_h=start_h,
                room=4 * room,
            )
            runs += again
            continue
        runs.append(
            _Run(
                status,
                steps,
                rejected,
                worst,
                piece_t[i, :pieces].copy(),
                piece_h[i, :pieces].copy(),
                piece_c[i, :pieces].copy(),
                end_x[i],
                float(end_t[i]),
                float(end_h[i]),
                float(end_worst[i]),
            )
        )
    return runs


def _finish(
    program: Program, hit: _Hit, x_rest: NDArray[np.float64], iterations: int, run: _Run, tolerance: float
) -> Solution | SolveError:
    """The solution of one run; where a pivot collapsed, go on from there in a new order."""
    runs, current = [run], program
    while runs[-1].status == stepper.PIVOT_COLLAPSED and len(runs) < _MOST_PLANS:
        last = runs[-1]
        try:
            plan = choose(_matrix_at(current, hit, last)[None, :, :])
        except ValueError:
            break
        renewed = _program_in_order(hit.topology, plan)
        x = _reordered(last.x, current, renewed)
        layout = renewed.layout(hit.numbers)[None, :]
        runs += _run(renewed, [hit], layout, x[None, :], tolerance, start_t=last.t, start_h=last.h)
        current = renewed
    end = runs[-1]
    if end.status != stepper.DONE:
        reason = NAME_OF_STATUS[end.status]
        return SolveError(
            reason,
            hit.circuit.name,
            OUTCOMES[reason],
            time_s=end.t,
            step_s=end.h,
            net=current.unknowns[end.worst],
            residual=end.error,
        )
    steps = sum(part.steps for part in runs)
    return Solution(
        circuit=hit.circuit,
        length_s=hit.length_s,
        nets=hit.probes,
        rest=_by_name(program, hit, x_rest),
        counters={
            "steps": steps,
            "rejected": sum(part.rejected for part in runs),
            "factorisations": steps,
            "equations": steps * RODAS5P.c.size,
            "rest_iterations": iterations,
            "plans": len(runs),
        },
        piece_t=np.concatenate([part.piece_t for part in runs]),
        piece_h=np.concatenate([part.piece_h for part in runs]),
        piece_c=np.concatenate([part.piece_c for part in runs]),
    )


def _by_name(program: Program, hit: _Hit, x: NDArray[np.float64]) -> dict[str, float]:
    value = dict(zip(program.unknowns, x.tolist(), strict=True))
    known = {net: _at_zero(hit.segments, m) for m, net in enumerate(hit.topology.inputs)}
    return {name: value[name] for name in hit.topology.unknowns} | known | dict(hit.circuit.nets)


def _reordered(x: NDArray[np.float64], old: Program, new: Program) -> NDArray[np.float64]:
    place = {name: k for k, name in enumerate(old.unknowns)}
    return np.array([x[place[name]] for name in new.unknowns])


def _matrix_at(program: Program, hit: _Hit, run: _Run) -> NDArray[np.float64]:
    """W where a run stopped, with the topology's own rows and columns; shape (n, n)."""
    code, size = program.code, program.code.size
    layout = program.layout(hit.numbers)
    coefficients, vectors = np.zeros(code.coefficients), np.zeros(code.vectors + 8)
    coefficients[: code.g] = layout[: code.g]
    coefficients[code.first_ch :][: code.ch] = layout[code.n_c : code.n_b] / run.h
    vectors[:size] = run.x
    vectors[code.stride + code.inputs :][: code.known - code.inputs] = layout[code.n_held :]
    segment = int(np.searchsorted(hit.segments.end, run.t, side="right").clip(0, hit.segments.end.size - 1))
    start = hit.segments.end[segment - 1] if segment else 0.0
    set_now = (np.full(1, start), hit.segments.volts[segment].copy(), hit.segments.slope[segment].copy())
    matrix_at(
        code,
        np.append(layout, np.zeros(PADDING)),
        coefficients,
        vectors,
        run.t,
        *set_now,
        hit.segments.sines.ravel().copy(),
        LONE,
    )
    first = code.first_w
    matrix = np.zeros((size, size))
    for entry, (row, column) in enumerate(program.pattern):
        matrix[program.plan.rows[row], program.plan.columns[column]] = coefficients[first + entry]
    return matrix
