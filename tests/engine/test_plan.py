"""The order of elimination: it solves what numpy solves, on sound pivots, and is chosen again when a pivot is lost."""

from __future__ import annotations

from importlib import import_module

import numpy as np
import pytest

from kickrender.engine import equations, solve, solve_each
from kickrender.engine.lanes import FLAT, LONE
from kickrender.engine.plan import SOUND_PIVOT, Plan, _typical_matrices, choose
from kickrender.engine.program import build_program
from kickrender.engine.solve import _prepare, _program, _run, _settle
from tests.engine.circuits import RAILS, VOICES, circuit, ladder, lopsided, residual_db, resonator
from tests.engine.doors import back_substitute, evaluate_devices, growth_of, residual

solving = import_module("kickrender.engine.solve")  # the package's own name `solve` is the function


def eliminated(matrix: np.ndarray, plan: Plan, right: np.ndarray) -> tuple[np.ndarray, float]:
    """Solve by the plan, in plain numpy; and the smallest pivot over the largest entry left in its column."""
    a = matrix / np.abs(matrix).max(axis=1, keepdims=True)
    b = right / np.abs(matrix).max(axis=1)
    left = list(range(len(a)))
    soundness = 1.0
    for row, column in zip(plan.rows, plan.columns, strict=True):
        soundness = min(soundness, abs(a[row, column]) / np.abs(a[left, column]).max())
        left.remove(row)
        for other in left:
            factor = a[other, column] / a[row, column]
            a[other] -= factor * a[row]
            b[other] -= factor * b[row]
    x = np.zeros(len(a))
    for row, column in reversed(list(zip(plan.rows, plan.columns, strict=True))):
        x[column] = (b[row] - sum(a[row, c] * x[c] for c in range(len(a)) if c != column)) / a[row, column]
    return x, soundness


def random_matrices(seed: int, count: int = 3) -> np.ndarray:
    """A few matrices of one sparse pattern, rows of very different size."""
    random = np.random.default_rng(seed)
    size = int(random.integers(2, 16))
    pattern = random.uniform(size=(size, size)) < 0.25
    pattern[np.arange(size), random.permutation(size)] = True
    rows = 10.0 ** random.uniform(-6, 6, size=size)
    return random.normal(size=(count, size, size)) * pattern * rows[:, None]


@pytest.mark.parametrize("seed", range(40))
def test_a_chosen_order_solves_and_is_sound(seed):
    """Against numpy.linalg.solve, on every matrix it was chosen for."""
    matrices = random_matrices(seed)
    if min(abs(np.linalg.det(m / np.abs(m).max(axis=1, keepdims=True))) for m in matrices) < 1e-6:
        with_order = [m for m in matrices if np.linalg.cond(m / np.abs(m).max(axis=1, keepdims=True)) < 1e8]
        if len(with_order) < len(matrices):
            pytest.skip("a singular draw")
    plan = choose(matrices)
    size = matrices.shape[1]
    assert sorted(plan.rows) == sorted(plan.columns) == list(range(size))
    for matrix in matrices:
        right = matrix @ np.arange(1.0, size + 1.0)
        found, soundness = eliminated(matrix, plan, right)
        np.testing.assert_allclose(found, np.linalg.solve(matrix, right), rtol=1e-7)
        assert soundness >= min(SOUND_PIVOT, 1e-6)


def test_sparse_rows_go_first():
    """Markowitz: an arrow pointing the wrong way is eliminated without any fill."""
    size = 12
    matrix = np.eye(size) * 4.0
    matrix[0, :] = matrix[:, 0] = 1.0
    plan = choose(matrix[None])
    assert plan.rows.index(0) >= size - 2
    assert plan.columns.index(0) >= size - 2


def test_a_pivot_must_be_sound_in_every_matrix():
    """The diagonal is fine in one matrix and vanishes in the other."""
    one, other = np.array([[1.0, 1.0], [1.0, 2.0]]), np.array([[0.0, 1.0], [1.0, 2.0]])
    plan = choose(np.array([one, other]))
    assert (plan.rows[0], plan.columns[0]) != (0, 0)


def test_rows_are_scaled_before_pivots_are_judged():
    """A row 1e12 times larger is no sounder for it."""
    small = np.array([[1.0, 0.5, 0.1], [0.5, 1.0, 0.2], [0.3, 0.2, 1.0]])
    assert choose(small[None]) == choose((small * np.array([[1.0], [1e12], [1e-12]]))[None])


@pytest.mark.parametrize("matrix", [np.zeros((3, 3)), np.ones((3, 3)), np.array([[1.0, 1.0], [1.0, 1.0]])])
def test_a_singular_matrix_has_no_order(matrix):
    with pytest.raises(ValueError, match="empty|no sound pivot"):
        choose(matrix[None])


@pytest.mark.parametrize("name", [*VOICES, "ladder"])
def test_the_kernels_elimination_is_numpys_solve(name):
    """assemble, factorise, residual and back_substitute on a state of the circuit, against numpy.linalg.solve."""
    hit = _prepare(ladder(9) if name == "ladder" else VOICES[name](), 1e-3, ())
    program = _program(hit.topology)
    code, layout = program.code, program.layout(hit.numbers)
    random = np.random.default_rng(5)
    numbers = np.append(layout, np.zeros(len(FLAT)))
    coefficients = np.zeros(code.coefficients)
    coefficients[: code.g] = layout[: code.g]
    coefficients[code.g : code.g + 2] = 1.0, -1.0
    coefficients[code.first_ch :][: code.ch] = layout[code.n_c : code.n_b] / 3e-6
    vectors = np.zeros(code.vectors + len(FLAT))
    vectors[: code.size] = random.uniform(-0.3, 0.6, code.size)
    vectors[code.stride + code.inputs :][: code.known - code.inputs] = layout[code.n_held :]
    none = np.zeros(code.inputs)
    # the matrix, unfactored
    equations.matrix_at(
        code, numbers, coefficients, vectors, 0.0, np.zeros(1), none, none, np.zeros(3 * code.inputs), LONE
    )
    matrix = np.zeros((code.size, code.size))
    for entry, (row, column) in enumerate(program.pattern):
        matrix[row, column] = coefficients[code.first_w + entry]
    per_pivot, row_size, per_row_size, rate, solution = np.zeros((5, code.stride))
    assert growth_of(code, coefficients, per_pivot, row_size, per_row_size, np.zeros(1)) < 1e8
    arguments, exp_slopes, exp_values = np.zeros((3, code.exponentials + len(FLAT)))
    tanhs, slopes = np.zeros(code.tanhs + len(FLAT)), np.zeros(code.slopes)
    # right-hand side: f itself, once with the factors (forward substitution) and once without them
    evaluated = vectors.copy()
    evaluate_devices(code, numbers, evaluated, arguments, exp_slopes, exp_values, tanhs, slopes, False, LONE)
    plain, unfactored = evaluated.copy(), coefficients.copy()
    unfactored[code.first_w :] = 0.0
    residual(code, numbers, unfactored, plain, rate, 0.0, LONE)
    right = plain[code.v_y : code.v_y + code.size]
    residual(code, numbers, coefficients, evaluated, rate, 0.0, LONE)
    back_substitute(code, coefficients, per_pivot, evaluated, solution, 0, LONE)
    scale = np.abs(matrix).max(axis=1)
    true = np.linalg.solve(matrix / scale[:, None], right / scale)
    np.testing.assert_allclose(solution[: code.size], true, rtol=1e-8, atol=1e-12 * np.abs(true).max())


def test_a_pivot_of_nothing_is_seen_whatever_comes_after():
    """Zero over zero is not a number, and must not be forgotten when the next multiplier is sound."""
    ladders = ("in a", "a b", "b ground", "in c", "c d", "d ground")
    parts = {f"R{k}": f"resistor 1k {nets}" for k, nets in enumerate(ladders)}
    hit = _prepare(circuit(parts, inputs={"in": 'constant = "1V"'}, output="d"), 1e-3, ())
    order = tuple(hit.topology.unknowns.index(net) for net in "abcd")
    program = build_program(hit.topology, Plan(order, order))
    code = program.code
    for pivot, below in ((0.0, 0.0), (0.0, 1e-3), (np.nan, 1e-3)):
        coefficients = np.zeros(code.coefficients)
        for entry, place in enumerate(program.pattern):
            values = {(0, 0): pivot, (1, 0): below, (0, 1): 1e-3}
            coefficients[code.first_w + entry] = values.get(place, 2e-3 if place[0] == place[1] else -1e-3)
        per_pivot, row_size, per_row_size = np.zeros((3, code.stride))
        assert growth_of(code, coefficients, per_pivot, row_size, per_row_size, np.zeros(1)) > 1e200


@pytest.fixture
def bad_order(monkeypatch):
    """The worst order there is: pivots chosen to be small, so that one is lost sooner or later."""
    solving._program.cache_clear()
    monkeypatch.setattr(solving, "plan_for", lambda topology: worst_plan(_typical_matrices(topology)))
    yield
    solving._program.cache_clear()


def worst_plan(matrices: np.ndarray) -> Plan:
    """An order that takes the smallest nonzero pivot there is, in the first matrix, at every turn."""
    a = matrices[0] / np.abs(matrices[0]).max(axis=1, keepdims=True)
    rows, columns = list(range(len(a))), list(range(len(a)))
    plan_rows, plan_columns = [], []
    for _ in range(len(a)):
        live = np.abs(a[np.ix_(rows, columns)])
        places = np.argwhere(live > 1e-13)
        values = live[tuple(places.T)]
        i, j = places[int(np.argmin(values))]
        row, column = rows.pop(i), columns.pop(j)
        plan_rows.append(row)
        plan_columns.append(column)
        for other in rows:
            a[other] -= a[other, column] / a[row, column] * a[row]
    return Plan(tuple(plan_rows), tuple(plan_columns))


@pytest.mark.parametrize("name", ["resonator", "lopsided"])
def test_a_lost_pivot_is_noticed_and_a_new_order_chosen(name, request):
    """With the worst of all orders to begin with, the solution is the one of a good order."""
    good = solve(VOICES[name](), 6e-3)
    assert good.counters["plans"] == 1
    request.getfixturevalue("bad_order")
    found = solve(VOICES[name](), 6e-3)
    assert found.counters["plans"] > 1
    assert residual_db(found.sample(96e3, 576), good.sample(96e3, 576)) < -100.0


@pytest.mark.usefixtures("bad_order")
def test_an_order_found_on_the_way_does_not_depend_on_neighbours():
    """A hit that had to be planned again gives the same bytes alone and beside others."""
    alone = solve(lopsided(), 6e-3)
    assert alone.counters["plans"] > 1
    for other in solve_each([lopsided()] * 3, [6e-3] * 3):
        assert other.counters == alone.counters
        assert other.sample(96e3, 576).tobytes() == alone.sample(96e3, 576).tobytes()


def overdriven():
    """An inverting amplifier driven far into its limits: where its tanh saturates, its row loses its inputs."""
    return circuit(
        {
            "R1": "resistor 1k gate sum",
            "R2": "resistor 100k sum out",
            "C": "capacitor 1n sum out",
            "U": "opamp general-purpose ground sum out plus minus",
        },
        inputs={"gate": 'points = [["0s", "0V"], ["0.2ms", "5V"], ["0.8ms", "-5V"], ["1ms", "0V"]]'},
        nets=RAILS,
    )


def test_an_op_amp_that_saturates_takes_its_pivot_with_it(monkeypatch):
    """A pivot on an op-amp's row at its own input vanishes exactly, and no shorter step brings it back."""
    good = solve(overdriven(), 2e-3)
    topology = _prepare(overdriven(), 1e-3, ()).topology
    row, column = topology.rows["out.driven"], topology.columns["sum"]
    linear = next(m for m in _typical_matrices(topology) if abs(m[row, column]) > 1e6)
    reduced = linear - np.outer(linear[:, column], linear[row]) / linear[row, column]
    rows, columns = ([k for k in range(len(linear)) if k != taken] for taken in (row, column))
    after = choose(reduced[np.ix_(rows, columns)][None])
    plan = Plan((row, *(rows[k] for k in after.rows)), (column, *(columns[k] for k in after.columns)))
    solving._program.cache_clear()
    monkeypatch.setattr(solving, "plan_for", lambda _: plan)
    found = solve(overdriven(), 2e-3)
    solving._program.cache_clear()
    assert found.counters["plans"] > 1
    assert np.max(np.abs(found.sample(96e3, 192))) > 10.0
    assert residual_db(found.sample(96e3, 192), good.sample(96e3, 192)) < -100.0


def test_orders_come_from_the_structure_alone():
    """Other values, same structure, same order; so that a pack's other hits never show in a hit."""
    first, second = (_prepare(resonator(leg), 1e-3, ()).topology for leg in ("1k", "47k"))
    assert first is second


def test_build_program_accepts_any_order_of_pivots():
    """Any order with sound pivots gives the same solution: here forwards and backwards through a ladder."""
    hit = _prepare(ladder(7), 1e-3, ())
    size = hit.topology.size
    samples = []
    for order in (range(size), range(size - 1, -1, -1)):
        program = build_program(hit.topology, Plan(tuple(order), tuple(order)))
        layout = program.layout(hit.numbers)[None, :]
        x, _, _ = _settle(program, [hit], layout)
        (run,) = _run(program, [hit], layout, x, 1e-8)
        samples.append(dict(zip(program.unknowns, run.x, strict=True)))
    for net, volts in samples[0].items():
        assert volts == pytest.approx(samples[1][net], abs=1e-8)
