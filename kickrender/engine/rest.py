"""The rest state: where the circuit has settled before the strike, f(x) = 0 with every input at its t = 0 level.

Newton's method from all nets at 0 V, its steps shortened where a junction's exponential would run away; if that
fails, source stepping (all held and input voltages raised from zero); if that fails too, pseudo-transient
continuation: the circuit's own motion in ever longer implicit steps.

Source: C. T. Kelley and D. E. Keyes, Convergence analysis of pseudo-transient continuation, SIAM Journal on
Numerical Analysis 35 (1998), for the growth of the pseudo step with the fall of the residual. The shortening of
junction steps is common practice in circuit analysis.
"""

from __future__ import annotations

import numpy as np

from kickrender.engine.compile import allocating_kernel, inner_kernel, kernel, shared_kernel
from kickrender.engine.elementary import logarithm
from kickrender.engine.equations import assemble, evaluate_devices, residual, spread_conductances
from kickrender.engine.lanes import FLAT, load, spread, store

SETTLED, NOT_SETTLED = 0, 1

LIMITS = np.array([120, 1])  # Newton iterations for a state, and for one pseudo step
_SOURCE_STEPS = 200
_PSEUDO_STEPS = 3000
_CLOSE_V = 1e-7  # a full Newton step below this is convergence; rounding decides what is below
_STEEP_ARGUMENT = 20.0  # of an exponential: beyond, it may grow by little more than its logarithm in one step
_FIRST_PSEUDO_STEP_S = 1e-6
_NO_STEP_S = 1e-15


@allocating_kernel
def settle(code, hit_numbers, hit_inputs, hit_x, results, worst, work_w, work_f, limits, width):
    """Rest states of a batch.

    Parameters
    ----------
    code : program.Code.
    hit_numbers : (hits, code.numbers). hit_inputs : (hits, inputs), voltages at t = 0. [V]
    hit_x : (hits, code.size), receives the states. [V], [A]
    results : (hits, 3) int64: SETTLED or NOT_SETTLED, iterations in all, row of the largest residual.
    worst : (hits,) that residual. [A], or [V/s] in an op-amp's row
    work_w, work_f : (size, size) and (code.coefficients,); scratch.
    limits : LIMITS. width : lanes.LONE. Arguments, since the compiler makes a version of its own for every constant.
    """
    size = code.size
    numbers = np.zeros(code.numbers + len(FLAT))
    vectors = np.zeros(code.vectors + len(FLAT))
    arguments = np.zeros(code.exponentials)
    before = np.zeros(code.exponentials)
    exp_slopes = np.zeros(code.exponentials)
    exp_values = np.zeros(code.exponentials)
    tanhs = np.zeros(code.tanhs + len(FLAT))
    slopes = np.zeros(code.slopes)
    rate = np.zeros(code.stride)
    base = np.zeros(code.coefficients - code.first_w)
    x = np.zeros(size)
    kept = np.zeros(size)
    dx = np.zeros(size)
    for hit in range(hit_numbers.shape[0]):
        _fill(x, 0.0)
        iterations = 0
        level = 1.0  # of the sources
        state = (numbers, vectors, arguments, before, exp_slopes, exp_values, tanhs, slopes, rate, base, x, dx)
        _set_sources(code, hit_numbers[hit], hit_inputs[hit], 1.0, numbers, vectors, work_f, base)
        done, count = _newton(code, state, work_w, work_f, 0.0, limits[0], width)
        iterations += count
        if not done:
            _fill(x, 0.0)
            _fill(kept, 0.0)
            level, stride = 0.0, 0.1
            for _ in range(_SOURCE_STEPS):
                trial = min(1.0, level + stride)
                _set_sources(code, hit_numbers[hit], hit_inputs[hit], trial, numbers, vectors, work_f, base)
                done, count = _newton(code, state, work_w, work_f, 0.0, limits[0], width)
                iterations += count
                if done:
                    level = trial
                    _copy(x, kept)
                    stride *= 1.5
                    if level == 1.0:
                        break
                else:
                    _copy(kept, x)
                    stride *= 0.25
                    if stride < 1e-4:
                        break
            done = done and level == 1.0
        if not done:
            _fill(x, 0.0)
            _set_sources(code, hit_numbers[hit], hit_inputs[hit], 1.0, numbers, vectors, work_f, base)
            pseudo_step = _FIRST_PSEUDO_STEP_S
            for index in range(_PSEUDO_STEPS):
                done, count = _newton(code, state, work_w, work_f, 1.0 / pseudo_step, limits[1], width)
                iterations += count
                longest = 0.0
                for row in range(size):
                    longest = max(longest, abs(dx[row]))
                if not longest < np.inf:
                    break
                pseudo_step *= 0.5 if longest > 2.0 else (2.0 if longest < 0.5 else 1.0)
                if longest < 1e-3 and index % 8 == 7:
                    done, count = _newton(code, state, work_w, work_f, 0.0, limits[0], width)
                    iterations += count
                    if done:
                        break
        for row in range(size):
            hit_x[hit, row] = x[row]
        results[hit, 0] = SETTLED if done else NOT_SETTLED
        results[hit, 1] = iterations
        _evaluate(code, state, work_f, width)
        results[hit, 2] = 0
        for row in range(size):
            if not abs(vectors[code.v_y + row]) <= abs(vectors[code.v_y + results[hit, 2]]):
                results[hit, 2] = row
        worst[hit] = vectors[code.v_y + results[hit, 2]]


@allocating_kernel
def project(code, hit_numbers, inputs, x, work_w, work_f, limits, width):
    """Move x, in place, to the state next to it whose algebraic equations hold; charges and fluxes stay.

    Newton's method on implicit steps C dx/h = f(x + dx) of h = 1e-15 s, in which no capacitor charges noticeably.

    hit_numbers : (code.numbers,). inputs : (inputs,). [V] x : (code.size,). [V], [A] work_w, work_f, limits,
    width : as in settle.
    Returns how far the last iteration still moved any unknown.
    """
    numbers = np.zeros(code.numbers + len(FLAT))
    vectors = np.zeros(code.vectors + len(FLAT))
    arguments = np.zeros(code.exponentials)
    before = np.zeros(code.exponentials)
    exp_slopes = np.zeros(code.exponentials)
    exp_values = np.zeros(code.exponentials)
    tanhs = np.zeros(code.tanhs + len(FLAT))
    slopes = np.zeros(code.slopes)
    rate = np.zeros(code.stride)
    base = np.zeros(code.coefficients - code.first_w)
    dx = np.zeros(code.size)
    state = (numbers, vectors, arguments, before, exp_slopes, exp_values, tanhs, slopes, rate, base, x, dx)
    _set_sources(code, hit_numbers, inputs, 1.0, numbers, vectors, work_f, base)
    longest = np.inf
    for _ in range(limits[0]):
        last = longest
        _newton(code, state, work_w, work_f, 1.0 / _NO_STEP_S, limits[1], width)
        longest = 0.0
        for row in range(code.size):
            if not abs(dx[row]) <= longest:
                longest = abs(dx[row])
        if longest < _CLOSE_V and longest >= 0.5 * last:
            break
    return longest


# Loops where numpy would take one line: for a slice on the left side the compiler also compiles the wording of numpy's
# complaints about it, some seconds of them.
@inner_kernel
def _fill(target, value):
    """Set every element, in place."""
    for k in range(target.size):
        target[k] = value


@inner_kernel
def _copy(source, target):
    """Copy into an array of the same size, in place."""
    for k in range(target.size):
        target[k] = source[k]


@shared_kernel
def _set_sources(code, hit_numbers, inputs, level, numbers, vectors, coefficients, base):
    """Load one hit's numbers with all its sources scaled by `level`; no capacitor current, no factors."""
    for row in range(code.numbers):
        numbers[row] = hit_numbers[row]
    _fill(vectors, 0.0)
    _fill(coefficients, 0.0)
    for row in range(code.g):
        coefficients[row] = hit_numbers[row]
    coefficients[code.g] = 1.0
    coefficients[code.g + 1] = -1.0
    spread_conductances(code, coefficients, base, 0, 1)
    for row in range(code.size):
        numbers[code.n_b + row] *= level
    for m in range(code.inputs):
        vectors[code.stride + m] = inputs[m] * level
    for row in range(code.known - code.inputs):
        vectors[code.stride + code.inputs + row] = hit_numbers[code.n_held + row] * level


@shared_kernel
def _evaluate(code, state, coefficients, width):
    """f(x) into section y of the vectors, and every device's slopes."""
    numbers, vectors, arguments, before, exp_slopes, exp_values, tanhs, slopes, rate, base, x, dx = state
    for row in range(code.size):
        vectors[row] = x[row]
    evaluate_devices(code, numbers, vectors, arguments, exp_slopes, exp_values, tanhs, slopes, code.size > 0, width)
    residual(code, numbers, coefficients, vectors, rate, spread(0.0, width), width)


@shared_kernel
def _newton(code, state, matrix, coefficients, per_pseudo_step, most, width):
    """Up to `most` damped Newton steps on C x' = f(x) with x' = dx per_pseudo_step; whether it settled, and steps.

    `coefficients` has a zero w section, so that section y of the vectors is f(x) itself.
    """
    numbers, vectors, arguments, before, exp_slopes, exp_values, tanhs, slopes, rate, base, x, dx = state
    size = code.size
    first = code.first_w
    last = np.inf
    for iteration in range(most):
        _evaluate(code, state, coefficients, width)
        for e in range(code.exponentials):
            before[e] = arguments[e]
        for p in range(code.ch):
            # assemble() divides by gamma; a constant factor of the pseudo step does not matter
            coefficients[code.first_ch + p] = numbers[code.n_c + p] * per_pseudo_step
        assemble(code, coefficients, base, slopes, width)
        for row in range(size):
            for column in range(size):
                matrix[row, column] = 0.0
        for row in range(size):
            dx[row] = vectors[code.v_y + row]
            for e in range(code.w_start[row], code.w_start[row + 1]):
                matrix[row, code.w_column[e]] = coefficients[first + e]
        for e in range(code.w):
            coefficients[first + e] = 0.0
        for p in range(code.ch):
            coefficients[code.first_ch + p] = 0.0
        if not solve_dense(matrix, dx):
            dx[0] = np.nan
            return False, iteration + 1
        # shorten the step where an exponential would run away
        share = 1.0
        for e in range(code.exponentials):
            per_volt = numbers[code.n_exponentials + e]
            plus, minus = code.exp_plus[e], code.exp_minus[e]
            change = 0.0
            if plus < size:
                change += dx[plus] * per_volt
            if minus < size:
                change -= dx[minus] * per_volt
            after = before[e] + change
            if after > _STEEP_ARGUMENT and change > 2.0:
                allowed = 1.0 + _log(change, arguments, width)
                if before[e] < _STEEP_ARGUMENT:
                    allowed += _STEEP_ARGUMENT - before[e]
                share = min(share, allowed / change)
        longest = 0.0
        for row in range(size):
            x[row] += share * dx[row]
            if not abs(dx[row]) <= longest:
                longest = abs(dx[row])
        if not longest < np.inf:
            return False, iteration + 1
        if per_pseudo_step == 0.0 and share == 1.0:
            # settled once steps are tiny and no longer shrink: what is left is rounding
            if longest < _CLOSE_V and (longest >= 0.5 * last or longest == 0.0):
                return True, iteration + 1
            last = longest
        else:
            last = np.inf
    return per_pseudo_step == 0.0 and last < _CLOSE_V, most


@inner_kernel
def _log(value, box, width):
    """ln of one float, which `box` carries in its first place."""
    box[0] = value
    store(box, 0, logarithm(load(box, 0, width)))
    return box[0]


@kernel
def solve_dense(matrix, solution):
    """Solve matrix x = solution in place by Gaussian elimination, rows scaled, partial pivoting; both overwritten.

    matrix : (n, n). solution : (n,). Returns False if the matrix is singular.
    """
    size = solution.size
    for row in range(size):
        largest = 0.0
        for column in range(size):
            largest = max(largest, abs(matrix[row, column]))
        if not 0.0 < largest < np.inf:
            return False
        scale = 1.0 / largest
        for column in range(size):
            matrix[row, column] *= scale
        solution[row] *= scale
    for k in range(size):
        pivot = k
        for row in range(k + 1, size):
            if abs(matrix[row, k]) > abs(matrix[pivot, k]):
                pivot = row
        if not abs(matrix[pivot, k]) > 1e-30:
            return False
        if pivot != k:
            for column in range(k, size):
                matrix[k, column], matrix[pivot, column] = matrix[pivot, column], matrix[k, column]
            solution[k], solution[pivot] = solution[pivot], solution[k]
        reciprocal = 1.0 / matrix[k, k]
        for row in range(k + 1, size):
            if matrix[row, k] != 0.0:
                factor = matrix[row, k] * reciprocal
                for column in range(k + 1, size):
                    matrix[row, column] -= factor * matrix[k, column]
                solution[row] -= factor * solution[k]
    for down in range(size):
        row = size - 1 - down
        total = solution[row]
        for column in range(row + 1, size):
            total -= matrix[row, column] * solution[column]
        solution[row] = total / matrix[row, row]
    return True
