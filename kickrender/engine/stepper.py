"""The one kernel: many hits of one program, side by side in lanes, each with its own time, step and error.

A lane takes the next hit as soon as its own is done. What it computes for a hit depends on that hit's numbers
alone: every operation works lane by lane, and steps, rejections and break points are the lane's own.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from kickrender.engine.compile import kernel
from kickrender.engine.elementary import exponential, logarithm
from kickrender.engine.equations import (
    assemble,
    back_substitute,
    evaluate_devices,
    factorise,
    residual,
    set_inputs,
    spread_conductances,
    time_derivative,
)
from kickrender.engine.lanes import FLAT, load, pick_less, spread, store
from kickrender.engine.method import RODAS5P
from kickrender.engine.program import Code

STAGES = RODAS5P.c.size
_A, _C, _D, _C_TIME, _DENSE = RODAS5P.a, RODAS5P.c_rows, RODAS5P.d, RODAS5P.c, RODAS5P.dense
_ORDER = RODAS5P.order

# step control; err is a root mean square of the error estimate in units of the tolerance, over no more unknowns than
# move at once in a voice: those at rest must not make the others' tolerance looser
_MOVING = 8
_SAFETY = 0.75
_LEAST_FACTOR, _MOST_FACTOR = 0.2, 6.0
_FIRST_STEP_S = 1e-6  # after a break point, where x' jumps; never more than a thousandth of the way to the next
_LEAST_STEP_S = 1e-15
_MOST_OF_A_PERIOD = 0.025  # of a sine's: where nothing has a memory, no error would hold the step back
_GROWTH_LIMIT = 1e8  # of a multiplier between rows of equal size: half the digits are lost beyond

DONE, STEP_TOO_SMALL, NOT_FINITE, TOO_MANY_STEPS, NO_ROOM, PIVOT_COLLAPSED, RUNNING = 0, 1, 2, 3, 4, 5, 6
FREE, IDLE = -1, -2  # lanes without a hit

Array = NDArray[np.float64] | NDArray[np.int64]


class Work(NamedTuple):
    """Arrays the steps work in. A kernel that made them itself would count references to them in its loops."""

    numbers: Array
    coefficients: Array
    base: Array
    vectors: Array
    x: Array
    x_new: Array
    k: Array
    error: Array
    rate: Array
    per_pivot: Array
    row_size: Array
    per_row_size: Array
    arguments: Array
    exp_slopes: Array
    exp_values: Array
    tanhs: Array
    slopes: Array
    second: Array
    now_t: Array  # start of the lane's segment, and the inputs over it
    now_v: Array
    now_slope: Array
    sines: Array
    dense: Array
    t: Array
    h: Array
    step: Array
    square: Array
    factor: Array
    growth: Array
    hit_of: Array
    segment: Array
    pieces: Array
    tried: Array
    rejected: Array
    streak: Array  # rejections in a row
    last_step: Array  # of the last accepted step, 0 after a break point
    last_factor: Array
    longest_step: Array  # a sine's share of its period


def work_for(code: Code, probes: int, lanes: int) -> Work:
    """New arrays for one call of `solve`; a row is one float per lane."""
    rows = code.stride * lanes
    return Work(
        numbers=np.zeros(code.numbers * lanes + len(FLAT)),
        coefficients=np.zeros(code.coefficients * lanes),
        base=np.zeros((code.coefficients - code.first_w) * lanes),
        vectors=np.zeros(code.vectors * lanes + len(FLAT)),
        x=np.zeros(rows),
        x_new=np.zeros(rows),
        k=np.zeros(STAGES * rows),
        error=np.zeros(rows),
        rate=np.zeros(rows),
        per_pivot=np.zeros(rows),
        row_size=np.zeros(rows),
        per_row_size=np.zeros(rows),
        arguments=np.zeros(code.exponentials * lanes),
        exp_slopes=np.zeros(code.exponentials * lanes),
        exp_values=np.zeros(code.exponentials * lanes),
        tanhs=np.zeros(code.tanhs * lanes + len(FLAT)),
        slopes=np.zeros(code.slopes * lanes),
        second=np.zeros(code.inputs * lanes),
        now_t=np.zeros(lanes),
        now_v=np.zeros(code.inputs * lanes),
        now_slope=np.zeros(code.inputs * lanes),
        sines=np.zeros(3 * code.inputs * lanes),
        dense=np.zeros(5 * probes * lanes),
        t=np.zeros(lanes),
        h=np.ones(lanes),
        step=np.ones(lanes),
        square=np.zeros(lanes),
        factor=np.zeros(lanes),
        growth=np.zeros(lanes),
        hit_of=np.full(lanes, FREE),
        segment=np.zeros(lanes, np.int64),
        pieces=np.zeros(lanes, np.int64),
        tried=np.zeros(lanes, np.int64),
        rejected=np.zeros(lanes, np.int64),
        streak=np.zeros(lanes, np.int64),
        last_step=np.zeros(lanes),
        last_factor=np.zeros(lanes),
        longest_step=np.zeros(lanes),
    )


@kernel
def solve(
    code,
    hit_numbers,
    hit_x,
    hit_t,
    hit_h,
    segment_count,
    segment_end,
    segment_v,
    segment_slope,
    hit_sines,
    probes,
    tolerance,
    most_steps,
    piece_t,
    piece_h,
    piece_c,
    results,
    end_x,
    end_t,
    end_h,
    end_worst,
    work,
    width,
):
    """Solve every hit of a batch from its start state to the end of its last segment.

    Parameters
    ----------
    code : program.Code.
    hit_numbers : (hits, code.numbers). hit_x : (hits, code.size), a consistent state at hit_t, shape (hits,) [s];
        hit_h : (hits,) first step to try, or 0 for the usual one [s].
    segment_count : (hits,). segment_end : (hits, most) ends of the pieces of the inputs [s]; the last is the end.
    segment_v, segment_slope : (hits, most, inputs), voltage at the segment's start and slope [V], [V/s].
        A segment starts where the one before ends, the first at 0.
    hit_sines : (hits, inputs, 3), see set_inputs.
    probes : (probes,) positions of the unknowns to keep.
    tolerance : (2,), absolute [V or A] and relative, of the error of one step.
    piece_t, piece_h : (hits, room), start and length of every accepted step. [s]
    piece_c : (hits, room, probes, 5): x, x_new, K_0, K_1, K_2 of method.RODAS5P.dense.
    results : (hits, 5) int64: status, pieces, steps tried, steps rejected, worst unknown.
    end_x, end_t, end_h, end_worst : state where each hit ended, whatever its status; the largest error there.
    work : of work_for, for as many lanes as `width` has.
    All from piece_t on are changed in place.

    Status is DONE, STEP_TOO_SMALL, NOT_FINITE, TOO_MANY_STEPS, NO_ROOM (for more pieces) or PIVOT_COLLAPSED.
    """
    lanes = len(width)
    hits = hit_numbers.shape[0]
    rows = code.stride * lanes
    numbers = work.numbers
    coefficients = work.coefficients
    base = work.base
    vectors = work.vectors
    x = work.x
    x_new = work.x_new
    k = work.k
    error = work.error
    rate = work.rate
    per_pivot = work.per_pivot
    row_size = work.row_size
    per_row_size = work.per_row_size
    arguments = work.arguments
    exp_slopes = work.exp_slopes
    exp_values = work.exp_values
    tanhs = work.tanhs
    slopes = work.slopes
    second = work.second
    now_t = work.now_t
    now_v = work.now_v
    now_slope = work.now_slope
    sines = work.sines
    dense = work.dense
    t = work.t
    h = work.h
    step = work.step
    square = work.square
    factor = work.factor
    growth = work.growth
    hit_of = work.hit_of
    segment = work.segment
    pieces = work.pieces
    tried = work.tried
    rejected = work.rejected
    streak = work.streak
    last_step = work.last_step
    last_factor = work.last_factor
    longest_step = work.longest_step

    next_hit = 0
    for lane in range(lanes):
        coefficients[code.g * lanes + lane] = 1.0
        coefficients[(code.g + 1) * lanes + lane] = -1.0
    running = lanes
    fresh = True
    while running > 0:
        # give free lanes their next hit
        if fresh:
            fresh = False
            for lane in range(lanes):
                if hit_of[lane] != FREE:
                    continue
                if next_hit >= hits:
                    hit_of[lane] = IDLE  # idle: its arithmetic goes on, its results go nowhere
                    running -= 1
                    continue
                hit = next_hit
                next_hit += 1
                hit_of[lane] = hit
                for row in range(code.numbers):
                    numbers[row * lanes + lane] = hit_numbers[hit, row]
                for row in range(code.g):
                    coefficients[row * lanes + lane] = hit_numbers[hit, row]
                spread_conductances(code, coefficients, base, lane, lanes)
                for row in range(code.cu):
                    coefficients[(code.first_cu + row) * lanes + lane] = hit_numbers[hit, code.g + row]
                for row in range(code.known - code.inputs):
                    vectors[(code.stride + code.inputs + row) * lanes + lane] = hit_numbers[hit, code.n_held + row]
                for row in range(code.size):
                    x[row * lanes + lane] = hit_x[hit, row]
                for m in range(code.inputs):
                    for part in range(3):
                        sines[(3 * m + part) * lanes + lane] = hit_sines[hit, m, part]
                t[lane] = hit_t[hit]
                s = 0
                while s < segment_count[hit] - 1 and segment_end[hit, s] <= t[lane]:
                    s += 1
                segment[lane] = s
                now_t[lane] = segment_end[hit, s - 1] if s > 0 else 0.0
                for m in range(code.inputs):
                    now_v[m * lanes + lane] = segment_v[hit, s, m]
                    now_slope[m * lanes + lane] = segment_slope[hit, s, m]
                longest_step[lane] = np.inf
                for m in range(code.inputs):
                    if code.is_sine[m]:
                        longest_step[lane] = min(longest_step[lane], _MOST_OF_A_PERIOD / hit_sines[hit, m, 1])
                h[lane] = hit_h[hit]
                if h[lane] == 0.0:
                    h[lane] = min(_FIRST_STEP_S, 1e-3 * (segment_end[hit, s] - t[lane]))
                pieces[lane] = 0
                tried[lane] = 0
                rejected[lane] = 0
                streak[lane] = 0
                last_step[lane] = 0.0
            if running == 0:
                break

        # the step each lane will try: to the break point if near, half the way if two steps reach it
        for lane in range(lanes):
            if hit_of[lane] >= 0:
                step[lane] = min(h[lane], longest_step[lane])
                left = segment_end[hit_of[lane], segment[lane]] - t[lane]
                if step[lane] * 1.000001 >= left:
                    step[lane] = left
                elif 2.0 * step[lane] > left:
                    step[lane] = 0.5 * left

        step_s = load(step, 0, width)
        start_t = load(t, 0, width)
        per_step = 1.0 / step_s
        for p in range(code.ch):
            store(coefficients, (code.first_ch + p) * lanes, load(numbers, (code.n_c + p) * lanes, width) * per_step)
        for stage in range(STAGES):
            if stage == 0:
                for p in range(0, code.size * lanes, len(FLAT)):
                    store(vectors, p, load(x, p, FLAT))
                    store(vectors, code.v_zc * lanes + p, spread(0.0, FLAT))
            elif stage < 6:
                for p in range(0, code.size * lanes, len(FLAT)):
                    k_j = load(k, p, FLAT)
                    v = load(x, p, FLAT) + _A[stage, 0] * k_j
                    zc = _C[stage, 0] * k_j
                    for j in range(1, stage):
                        k_j = load(k, j * rows + p, FLAT)
                        v = v + _A[stage, j] * k_j
                        zc = zc + _C[stage, j] * k_j
                    store(vectors, p, v)
                    store(vectors, code.v_zc * lanes + p, zc)
            else:
                for p in range(0, code.size * lanes, len(FLAT)):
                    zc = _C[stage, 0] * load(k, p, FLAT)
                    for j in range(1, stage):
                        zc = zc + _C[stage, j] * load(k, j * rows + p, FLAT)
                    store(vectors, p, load(vectors, p, FLAT) + load(k, (stage - 1) * rows + p, FLAT))
                    store(vectors, code.v_zc * lanes + p, zc)
            set_inputs(code, start_t + _C_TIME[stage] * step_s, now_t, now_v, now_slope, sines, vectors, second, width)
            evaluate_devices(
                code, numbers, vectors, arguments, exp_slopes, exp_values, tanhs, slopes, stage == 0, width
            )
            if stage == 0:
                assemble(code, coefficients, base, slopes, width)
                store(growth, 0, factorise(code, coefficients, per_pivot, row_size, per_row_size, width))
                time_derivative(code, coefficients, slopes, vectors, second, rate, width)
            residual(code, numbers, coefficients, vectors, rate, _D[stage] * step_s, width)
            back_substitute(code, coefficients, per_pivot, vectors, k, stage * code.stride, width)

        # error in units of the tolerance
        for p in range(0, code.size * lanes, len(FLAT)):
            last = load(k, (STAGES - 1) * rows + p, FLAT)
            old = load(x, p, FLAT)
            new = load(vectors, p, FLAT) + last
            store(x_new, p, new)
            size_old = pick_less(old, 0.0, 0.0 - old, old)
            size_new = pick_less(new, 0.0, 0.0 - new, new)
            size = pick_less(size_old, size_new, size_new, size_old)
            store(error, p, last / (tolerance[0] + tolerance[1] * size))
        total = spread(0.0, width)
        other = spread(0.0, width)  # by turns into two sums, as in residual
        for row in range(0, code.size, 2):
            e = load(error, row * lanes, width)
            total = total + e * e
            e = load(error, (row + 1) * lanes, width)
            other = other + e * e
        total = (total + other) * (1.0 / min(code.size, _MOVING))
        store(square, 0, total)
        bounded = pick_less(total, 1e-12, 1e-12, total)
        store(factor, 0, _SAFETY * exponential(logarithm(bounded) * (-0.5 / _ORDER)))
        for position in range(probes.size):
            row = probes[position] * lanes
            d0 = spread(0.0, width)
            d1 = spread(0.0, width)
            d2 = spread(0.0, width)
            for j in range(STAGES):
                k_j = load(k, j * rows + row, width)
                d0 = d0 + _DENSE[0, j] * k_j
                d1 = d1 + _DENSE[1, j] * k_j
                d2 = d2 + _DENSE[2, j] * k_j
            at = 5 * position * lanes
            store(dense, at, load(x, row, width))
            store(dense, at + lanes, load(x_new, row, width))
            store(dense, at + 2 * lanes, d0)
            store(dense, at + 3 * lanes, d1)
            store(dense, at + 4 * lanes, d2)

        # each lane accepts or rejects for itself
        for lane in range(lanes):
            hit = hit_of[lane]
            if hit < 0:
                square[lane] = np.inf
                continue
            tried[lane] += 1
            status = RUNNING
            good = square[lane] < 1.0 and growth[lane] < _GROWTH_LIMIT
            if good:
                n = pieces[lane]
                piece_t[hit, n] = t[lane]
                piece_h[hit, n] = step[lane]
                for position in range(probes.size):
                    for part in range(5):
                        piece_c[hit, n, position, part] = dense[(5 * position + part) * lanes + lane]
                pieces[lane] = n + 1
                end = segment_end[hit, segment[lane]]
                # what the last two steps say about the trend: the error a step of the same size would have next
                grow = factor[lane]
                if last_step[lane] > 0.0:
                    grow = min(grow, step[lane] / last_step[lane] * grow * grow / last_factor[lane])
                    if grow < _MOST_FACTOR:
                        grow = min(grow, np.sqrt(np.sqrt(grow)))  # larger steps are tried little by little
                grow = min(max(grow, _LEAST_FACTOR), _MOST_FACTOR)
                last_step[lane] = step[lane]
                last_factor[lane] = factor[lane]
                if streak[lane] > 0:
                    grow = min(grow, 1.0)
                streak[lane] = 0
                if step[lane] == end - t[lane]:
                    t[lane] = end
                    last_step[lane] = 0.0
                    if segment[lane] == segment_count[hit] - 1:
                        status = DONE
                    else:
                        segment[lane] += 1
                        s = segment[lane]
                        now_t[lane] = end
                        for m in range(code.inputs):
                            now_v[m * lanes + lane] = segment_v[hit, s, m]
                            now_slope[m * lanes + lane] = segment_slope[hit, s, m]
                        h[lane] = min(_FIRST_STEP_S, 1e-3 * (segment_end[hit, s] - end))
                else:
                    t[lane] = t[lane] + step[lane]
                    h[lane] = max(step[lane] * grow, _LEAST_STEP_S)
                if status == RUNNING and pieces[lane] >= piece_t.shape[1]:
                    status = NO_ROOM
            else:
                rejected[lane] += 1
                streak[lane] += 1
                shrink = 0.25
                if square[lane] >= 1.0 and square[lane] < np.inf:
                    shrink = min(max(factor[lane], _LEAST_FACTOR), 0.9)
                h[lane] = step[lane] * shrink
                if growth[lane] >= _GROWTH_LIMIT:
                    h[lane] = step[lane]
                    status = PIVOT_COLLAPSED
                elif h[lane] < _LEAST_STEP_S:
                    status = STEP_TOO_SMALL if square[lane] < np.inf else NOT_FINITE
                square[lane] = np.inf  # keeps x as it is below
            if status == RUNNING and tried[lane] >= most_steps:
                status = TOO_MANY_STEPS
            if status != RUNNING:
                worst = 0
                for row in range(code.size):
                    e = abs(error[row * lanes + lane])
                    if not e <= abs(error[worst * lanes + lane]):
                        worst = row
                results[hit, 0] = status
                results[hit, 1] = pieces[lane]
                results[hit, 2] = tried[lane]
                results[hit, 3] = rejected[lane]
                results[hit, 4] = worst
                end_worst[hit] = error[worst * lanes + lane]
                end_t[hit] = t[lane]
                end_h[hit] = h[lane]
                for row in range(code.size):
                    end_x[hit, row] = x_new[row * lanes + lane] if good else x[row * lanes + lane]
                hit_of[lane] = FREE
                fresh = True
        accepted = load(square, 0, width)
        for row in range(code.size):
            at = row * lanes
            store(x, at, pick_less(accepted, 1.0, load(x_new, at, width), load(x, at, width)))
