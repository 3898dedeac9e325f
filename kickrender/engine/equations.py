"""The equations of one topology at given voltages: inputs, devices, W, its factors, the right-hand side.

Every function works on lanes: a row of a flat array is len(width) floats, one per lane. Sections and index arrays
are those of program.Code.
"""

from __future__ import annotations

import numpy as np

from kickrender.engine.compile import allocating_kernel, inner_kernel
from kickrender.engine.elementary import exponential, hyperbolic_tangent, sine_of_turns
from kickrender.engine.lanes import FLAT, any_less, gather, load, pick_less, spread, store
from kickrender.engine.laws import evaluate as evaluate_laws
from kickrender.engine.method import RODAS5P

_PER_GAMMA = 1.0 / RODAS5P.gamma
_HIGHEST_ARGUMENT = 80.0  # of an exponential; continued linearly above
_LOWEST_ARGUMENT = -80.0  # below, e^x counts as nothing: beside what it is added to it would vanish in rounding
_TWO_PI = 6.283185307179586
_BEYOND = 1e300  # any growth


@inner_kernel
def evaluate_devices(code, numbers, vectors, arguments, exp_slopes, exp_values, tanhs, slopes, with_slopes, width):
    """Outputs (in `vectors`) and, if asked, slopes of all devices at the voltages in `vectors`; in place.

    The exponentials of all junctions and limits are evaluated together, in passes over flat memory; a block of which
    none counts is passed over. A lone lane's voltages go into these passes straight from where they are: written one
    by one and read back as a block they would hold the processor up.
    """
    lanes = len(width)
    scale, offset = code.n_exponentials, code.n_exponentials + code.exponentials
    per_input, per_own = code.n_tanhs, code.n_tanhs + code.tanhs
    nothing = spread(0.0, FLAT)
    if lanes > 1:
        for e in range(code.exponentials):
            v = load(vectors, code.exp_plus[e] * lanes, width) - load(vectors, code.exp_minus[e] * lanes, width)
            x = v * load(numbers, (scale + e) * lanes, width) + load(numbers, (offset + e) * lanes, width)
            store(arguments, e * lanes, x)
        for k in range(code.tanhs):
            v = load(vectors, code.tanh_plus[k] * lanes, width) - load(vectors, code.tanh_minus[k] * lanes, width)
            own = load(vectors, code.tanh_own[k] * lanes, width) * load(numbers, (per_own + k) * lanes, width)
            store(tanhs, k * lanes, v * load(numbers, (per_input + k) * lanes, width) - own)
    for start in range(0, code.exponentials * lanes, len(FLAT)):
        if lanes == 1:
            v = gather(vectors, code.exp_plus, start, FLAT) - gather(vectors, code.exp_minus, start, FLAT)
            x = v * load(numbers, scale + start, FLAT) + load(numbers, offset + start, FLAT)
            store(arguments, start, x)
        else:
            x = load(arguments, start, FLAT)
        if any_less(_LOWEST_ARGUMENT, x):
            bounded = pick_less(_HIGHEST_ARGUMENT, x, _HIGHEST_ARGUMENT, x)
            slope = pick_less(x, _LOWEST_ARGUMENT, 0.0, exponential(bounded))
            store(exp_slopes, start, slope)
            store(exp_values, start, slope + slope * (x - bounded))
        else:
            store(exp_slopes, start, nothing)
            store(exp_values, start, nothing)
    for start in range(0, code.tanhs * lanes, len(FLAT)):
        if lanes == 1:
            v = gather(vectors, code.tanh_plus, start, FLAT) - gather(vectors, code.tanh_minus, start, FLAT)
            own = gather(vectors, code.tanh_own, start, FLAT) * load(numbers, per_own + start, FLAT)
            x = v * load(numbers, per_input + start, FLAT) - own
        else:
            x = load(tanhs, start, FLAT)
        store(tanhs, start, hyperbolic_tangent(x))
    evaluate_laws(code.spans, numbers, arguments, exp_slopes, exp_values, tanhs, vectors, slopes, with_slopes, width)


@inner_kernel
def set_inputs(code, time, segment_t, segment_v, segment_slope, sines, vectors, second, width):
    """Voltages and slopes of the inputs at `time` (a lane vector) and their second derivatives; in place.

    Input m is segment_v + segment_slope (t - segment_t), and a sine on top where code.is_sine:
    sines holds rows of amplitude, frequency and phase in turns, three per input.
    """
    lanes = len(width)
    for m in range(code.inputs):
        slope = load(segment_slope, m * lanes, width)
        v = load(segment_v, m * lanes, width) + slope * (time - load(segment_t, 0, width))
        bend = spread(0.0, width)
        if code.is_sine[m]:
            amplitude = load(sines, 3 * m * lanes, width)
            frequency = load(sines, (3 * m + 1) * lanes, width)
            turns = frequency * time + load(sines, (3 * m + 2) * lanes, width)
            omega = _TWO_PI * frequency
            sine = amplitude * sine_of_turns(turns)
            v = v + sine
            slope = slope + amplitude * omega * sine_of_turns(turns + 0.25)
            bend = bend - omega * omega * sine
        store(vectors, (code.stride + m) * lanes, v)
        store(vectors, (code.v_du + m) * lanes, slope)
        store(second, m * lanes, bend)


@inner_kernel
def spread_conductances(code, coefficients, base, lane, lanes):
    """G of one lane where W's entries lie, into `base`, shape (rows of w,); in place."""
    for e in range(code.w):
        base[e * lanes + lane] = 0.0
    for p in range(code.assemble_g.shape[0]):
        base[code.assemble_g[p, 0] * lanes + lane] -= coefficients[code.assemble_g[p, 1] * lanes + lane]


@inner_kernel
def assemble(code, coefficients, base, slopes, width):
    """W = C/(gamma h) + G + device slopes into its section of `coefficients`, whose section ch holds C/h.

    base : what spread_conductances left of G.
    """
    lanes = len(width)
    first = code.first_w
    for p in range(0, code.w * lanes, len(FLAT)):
        store(coefficients, first * lanes + p, load(base, p, FLAT))
    for p in range(code.assemble_c.shape[0]):
        at = (first + code.assemble_c[p, 0]) * lanes
        c = load(coefficients, (code.first_ch + code.assemble_c[p, 1]) * lanes, width)
        store(coefficients, at, load(coefficients, at, width) + c * _PER_GAMMA)
    for p in range(code.assemble_slope.shape[0]):
        at = (first + code.assemble_slope[p, 0]) * lanes
        slope = load(slopes, code.assemble_slope[p, 1] * lanes, width) * code.assemble_sign[p]
        store(coefficients, at, load(coefficients, at, width) + slope)


@inner_kernel
def factorise(code, coefficients, per_pivot, row_size, per_row_size, width):
    """Eliminate in place: multipliers (negated) below the pivots, U above, reciprocal pivots in `per_pivot`.

    Returns the largest multiplier between rows scaled to equal size, one per lane; _BEYOND where a pivot was zero.
    """
    lanes = len(width)
    first = code.first_w
    for row in range(code.size):
        size = spread(0.0, width)
        for e in range(code.w_start[row], code.w_start[row + 1]):
            w = load(coefficients, (first + e) * lanes, width)
            w = pick_less(w, 0.0, 0.0 - w, w)
            size = pick_less(size, w, w, size)
        store(row_size, row * lanes, size)
    for p in range(0, code.size * lanes, len(FLAT)):
        store(per_row_size, p, 1.0 / load(row_size, p, FLAT))
    for k in range(code.size):
        reciprocal = 1.0 / load(coefficients, (first + code.diagonal[k]) * lanes, width)
        store(per_pivot, k * lanes, reciprocal)
        for p in range(code.scale_start[k], code.scale_start[k + 1]):
            at = (first + code.scale_w[p]) * lanes
            store(coefficients, at, 0.0 - load(coefficients, at, width) * reciprocal)
        for p in range(code.update_start[k], code.update_start[k + 1]):
            at = (first + code.update[p, 0]) * lanes
            multiplier = load(coefficients, (first + code.update[p, 1]) * lanes, width)
            w = load(coefficients, (first + code.update[p, 2]) * lanes, width)
            store(coefficients, at, load(coefficients, at, width) + multiplier * w)
    worst = spread(0.0, width)
    for p in range(code.growth.shape[0]):
        multiplier = load(coefficients, (first + code.growth[p, 0]) * lanes, width)
        growth = multiplier * load(row_size, code.growth[p, 2] * lanes, width)
        growth = growth * load(per_row_size, code.growth[p, 1] * lanes, width)
        growth = pick_less(growth, 0.0, 0.0 - growth, growth)
        growth = pick_less(growth, _BEYOND, growth, _BEYOND)  # and where a pivot was nothing: 0/0 is not a number
        worst = pick_less(growth, worst, worst, growth)
    return worst


@inner_kernel
def time_derivative(code, coefficients, slopes, vectors, second, rate, width):
    """df/dt at constant x, through the inputs' slopes and second derivatives, into `rate`; shape (size rows,)."""
    lanes = len(width)
    nothing = spread(0.0, width)
    for row in range(code.size):
        store(rate, row * lanes, nothing)
    for p in range(code.input_g.shape[0]):
        at = code.input_g[p, 0] * lanes
        du = load(vectors, (code.v_du + code.input_g[p, 2]) * lanes, width)
        store(rate, at, load(rate, at, width) + load(coefficients, code.input_g[p, 1] * lanes, width) * du)
    for p in range(code.input_slope.shape[0]):
        at = code.input_slope[p, 0] * lanes
        du = load(vectors, (code.v_du + code.input_slope[p, 2]) * lanes, width)
        slope = load(slopes, code.input_slope[p, 1] * lanes, width) * code.input_sign[p]
        store(rate, at, load(rate, at, width) - slope * du)
    for p in range(code.input_cu.shape[0]):
        at = code.input_cu[p, 0] * lanes
        farad = load(coefficients, (code.first_cu + code.input_cu[p, 1]) * lanes, width)
        store(rate, at, load(rate, at, width) + farad * load(second, code.input_cu[p, 2] * lanes, width))


@inner_kernel
def residual(code, numbers, coefficients, vectors, rate, rate_weight, width):
    """Right-hand side and forward substitution in one dot product per row, into section y of `vectors`.

    The terms of a row go by turns into two sums, so that fewer additions wait for one another.
    """
    lanes = len(width)
    for row in range(code.size):
        total = load(numbers, (code.n_b + row) * lanes, width)
        other = rate_weight * load(rate, row * lanes, width)
        for p in range(code.row_start[row], code.row_start[row + 1], 2):
            a = load(coefficients, code.row_coefficient[p] * lanes, width)
            total = total + a * load(vectors, code.row_vector[p] * lanes, width)
            a = load(coefficients, code.row_coefficient[p + 1] * lanes, width)
            other = other + a * load(vectors, code.row_vector[p + 1] * lanes, width)
        store(vectors, (code.v_y + row) * lanes, total + other)


@inner_kernel
def back_substitute(code, coefficients, per_pivot, vectors, solution, start, width):
    """Solve U k = y; k goes to row `start` and on of `solution`."""
    lanes = len(width)
    first = code.first_w
    for down in range(code.size):
        row = code.size - 1 - down
        total = load(vectors, (code.v_y + row) * lanes, width)
        for p in range(code.back_start[row], code.back_start[row + 1]):
            w = load(coefficients, (first + code.back_w[p]) * lanes, width)
            total = total - w * load(solution, (start + code.back_k[p]) * lanes, width)
        store(solution, (start + row) * lanes, total * load(per_pivot, row * lanes, width))


@allocating_kernel
def matrix_at(code, numbers, coefficients, vectors, time_s, segment_t, segment_v, segment_slope, sines, width):
    """Assemble W of one hit at the voltages in `vectors`, into section w of `coefficients`; returns the slopes.

    width : lanes.LONE.
    """
    arguments = np.zeros(code.exponentials)
    exp_slopes = np.zeros(code.exponentials)
    exp_values = np.zeros(code.exponentials)
    tanhs = np.zeros(code.tanhs + len(FLAT))
    slopes = np.zeros(code.slopes)
    second = np.zeros(code.inputs)
    time = spread(time_s, width)
    set_inputs(code, time, segment_t, segment_v, segment_slope, sines, vectors, second, width)
    evaluate_devices(code, numbers, vectors, arguments, exp_slopes, exp_values, tanhs, slopes, code.size > 0, width)
    base = np.zeros(code.coefficients - code.first_w)
    spread_conductances(code, coefficients, base, 0, 1)
    assemble(code, coefficients, base, slopes, width)
    return slopes


@allocating_kernel
def outputs_at(code, numbers, states, width):
    """Outputs of all devices at the voltages of many states, in place.

    numbers : (code.numbers rows and padding,). states : (count, code.vectors rows), each as `vectors` elsewhere.
    """
    lanes = len(width)
    arguments = np.zeros(code.exponentials * lanes)
    exp_slopes = np.zeros(code.exponentials * lanes)
    exp_values = np.zeros(code.exponentials * lanes)
    tanhs = np.zeros(code.tanhs * lanes + len(FLAT))
    slopes = np.zeros(code.slopes * lanes)
    for k in range(states.shape[0]):
        evaluate_devices(code, numbers, states[k], arguments, exp_slopes, exp_values, tanhs, slopes, False, width)
