"""Coupled windings against closed forms: k below 1, k = 1 with and without capacitors across, and the way between."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import linalg, signal

from kickrender.circuit import ResolvedCircuit, read_circuit_text
from kickrender.engine import poles, rest_state, solve
from kickrender.engine.linearise import linearised

L_1, L_2 = 0.8, 0.2  # [H], two to one in turns
N = 0.5
RAMP = "[inputs.in]\npoints = [[0, 0], [0.0001, 5], [0.002, 5], [0.0021, -1]]\n"
RAMP_T, RAMP_V = [0.0, 1e-4, 2e-3, 2.1e-3], [0.0, 5.0, 5.0, -1.0]
RATE, COUNT = 100_000, 800  # every corner of the input on a sample, as lsim takes it straight between them


def transformer(l_1: float, l_2: float, coupling: float, primary: str, secondary: str) -> str:
    return (
        f'T = {{ kind = "transformer", primary_inductance = {l_1}, secondary_inductance = {l_2}, '
        f"coupling = {coupling}, primary = [{primary}], secondary = [{secondary}] }}"
    )


def bench(coupling: float, *parts: str, output: str = "out", inputs: str = RAMP) -> ResolvedCircuit:
    lines = "\n".join(parts)
    return read_circuit_text(
        f"""
        {inputs}
        [parts]
        {transformer(L_1, L_2, coupling, '"a", "ground"', '"out", "ground"')}
        R_1 = {{ kind = "resistor", value = "1k", between = ["in", "a"] }}
        R_2 = {{ kind = "resistor", value = "470", between = ["out", "ground"] }}
        {lines}
        [output]
        net = "{output}"
        """
    ).resolve()


C_1 = 'C_1 = { kind = "capacitor", value = "100n", between = ["a", "ground"] }'
C_2 = 'C_2 = { kind = "capacitor", value = "220n", between = ["out", "ground"] }'


def ramp() -> tuple[np.ndarray, np.ndarray]:
    times = np.arange(COUNT) / RATE
    return times, np.interp(times, RAMP_T, RAMP_V)


@pytest.mark.parametrize("coupling", [0.2, 0.9, 0.999])
def test_loose_coupling(coupling: float) -> None:
    """Two windings with series resistances, straight from the textbook: i' = L^-1 (v - R i), v_2 = -R_2 i_2.

    Solved by scipy.signal.lsim, exact for piecewise linear inputs.
    """
    mutual = coupling * np.sqrt(L_1 * L_2)
    inverse = np.linalg.inv([[L_1, mutual], [mutual, L_2]])
    system = (-inverse @ np.diag([1e3, 470.0]), inverse @ [[1.0], [0.0]], [[0.0, -470.0]], [[0.0]])
    times, u = ramp()
    truth = signal.lsim(system, u, times)[1]
    found = solve(bench(coupling), 0.0081, tolerance=1e-9).sample(RATE, COUNT)
    assert np.max(np.abs(truth)) > 0.5 * coupling
    assert found == pytest.approx(truth, abs=3e-8)


def test_perfect_coupling_into_resistors() -> None:
    """One state is left, the flux: L_1 m' = v_1, (u - v_1)/R_1 = m + N^2 v_1/R_2."""
    share = 1.0 / (1e-3 + N * N / 470.0)
    system = ([[-share / L_1]], [[share * 1e-3 / L_1]], [[-N * share]], [[N * share * 1e-3]])
    times, u = ramp()
    truth = signal.lsim(system, u, times)[1]
    found = solve(bench(1.0), 0.0081, tolerance=1e-9).sample(RATE, COUNT)
    assert np.max(np.abs(truth)) > 1.0
    assert found == pytest.approx(truth, abs=3e-8)


def test_perfect_coupling_with_capacitors_across_both_windings() -> None:
    """Both capacitors ring as one, C_1 + N^2 C_2 across L_1: with the ratio alone as an equation this is index 2."""
    farad, siemens = 100e-9 + N * N * 220e-9, 1e-3 + N * N / 470.0
    system = ([[-siemens / farad, -1.0 / farad], [1.0 / L_1, 0.0]], [[1e-3 / farad], [0.0]], [[N, 0.0]], [[0.0]])
    times, u = ramp()
    truth = signal.lsim(system, u, times)[1]
    solution = solve(bench(1.0, C_1, C_2), 0.0081, tolerance=1e-9, probes=["a"])
    found = solution.sample(RATE, COUNT)
    assert np.max(np.abs(truth)) > 1.0
    assert found == pytest.approx(truth, abs=3e-8)
    assert N * solution.sample(RATE, COUNT, net="a") == pytest.approx(found, abs=1e-13)  # the ratio never drifts
    assert solve(bench(1.0, C_1, C_2), 0.0081).counters["steps"] < 300


@pytest.mark.parametrize("parts", [(), (C_1,), (C_2,), (C_1, C_2)], ids=["bare", "first", "second", "both"])
def test_perfect_coupling_has_index_1(parts: tuple[str, ...]) -> None:
    """Index 1: with W and N the left and right null spaces of `rates`, W^T `matrix` N is regular.

    Criterion: E. Hairer and G. Wanner, Solving Ordinary Differential Equations II, section VI.1; from memory. Rows are
    brought to one size first.
    """
    linear = linearised(bench(1.0, *parts))
    rates = linear.rates / np.maximum(np.abs(linear.rates).max(axis=1, keepdims=True), 1e-300)
    matrix = linear.matrix / np.abs(linear.matrix).max(axis=1, keepdims=True)
    left, right = linalg.null_space(rates.T), linalg.null_space(rates)
    assert left.shape[1] == right.shape[1] > 0
    assert np.linalg.svd(left.T @ matrix @ right, compute_uv=False)[-1] > 1e-6


def test_capacitor_from_an_input_straight_to_a_perfect_winding() -> None:
    """An input's corner makes the secondary current jump; the voltages stay continuous and right.

    (C_0 + C_1 + N^2 C_2) v_1' = C_0 u' - (1/R_1 + N^2/R_2) v_1 + u/R_1 - m, with y = v_1 - share u as the state.
    """
    c_0, c_1, c_2 = 47e-9, 100e-9, 220e-9
    farad, siemens = c_0 + c_1 + N * N * c_2, 1e-3 + N * N / 470.0
    share = c_0 / farad
    system = (
        [[-siemens / farad, -1.0 / farad], [1.0 / L_1, 0.0]],
        [[(1e-3 - siemens * share) / farad], [share / L_1]],
        [[N, 0.0]],
        [[N * share]],
    )
    times, u = ramp()
    truth = signal.lsim(system, u, times)[1]
    straight = 'C_0 = { kind = "capacitor", value = "47n", between = ["in", "a"] }'
    circuit = bench(1.0, C_1, C_2, straight)
    assert solve(circuit, 0.0081, tolerance=1e-9).sample(RATE, COUNT) == pytest.approx(truth, abs=3e-8)
    assert solve(circuit, 0.0081).counters["steps"] < 300


def test_coupling_goes_over_into_perfect() -> None:
    """The leakage inductance 1 - k^2 vanishes smoothly: k a billionth below 1 sounds as k = 1."""
    found = [solve(bench(k, C_1, C_2), 0.0081, tolerance=1e-8).sample(RATE, COUNT) for k in (1.0 - 1e-9, 1.0)]
    assert found[0] == pytest.approx(found[1], abs=1e-6)


@pytest.mark.parametrize("coupling", [0.5, 0.98])
def test_coupled_resonators_split(coupling: float) -> None:
    """Equal tanks, coupled, ring at f_0/sqrt(1 + k) and f_0/sqrt(1 - k): any textbook of radio, from memory."""
    text = f"""
    [parts]
    {transformer(1, 1, coupling, '"a", "ground"', '"out", "ground"')}
    C_1 = {{ kind = "capacitor", value = "1u", between = ["a", "ground"] }}
    C_2 = {{ kind = "capacitor", value = "1u", between = ["out", "ground"] }}
    R = {{ kind = "resistor", value = "1G", between = ["out", "ground"] }}
    [output]
    net = "out"
    """
    found = sorted(pole.frequency_hz for pole in poles(read_circuit_text(text).resolve()))
    f_0 = 1.0 / (2.0 * np.pi * 1e-3)
    assert found == pytest.approx([f_0 / np.sqrt(1.0 + coupling), f_0 / np.sqrt(1.0 - coupling)], rel=1e-9)


@pytest.mark.parametrize("coupling", [0.7, 1.0])
def test_rest(coupling: float) -> None:
    """At rest both windings are short circuits, whatever the coupling; the current is the source's."""
    found = rest_state(bench(coupling, C_1, C_2, inputs='[inputs.in]\nconstant = "2V"\n'))
    assert (found["a"], found["out"]) == (pytest.approx(0.0, abs=1e-12), pytest.approx(0.0, abs=1e-12))
    assert found["T.magnetising_current" if coupling == 1.0 else "T.primary_current"] == pytest.approx(2e-3, rel=1e-9)


@pytest.mark.parametrize("coupling", [0.6, 1.0])
def test_floating_windings_turned_around(coupling: float) -> None:
    """Ends swapped on a winding turn the sign; a winding between two nets works as one to ground does."""
    direct = solve(bench(coupling), 0.005).sample(RATE, 400)
    text = f"""
    {RAMP}
    [parts]
    {transformer(L_1, L_2, coupling, '"in", "a"', '"ground", "out"')}
    R_1 = {{ kind = "resistor", value = "1k", between = ["a", "ground"] }}
    R_2 = {{ kind = "resistor", value = "470", between = ["out", "ground"] }}
    [output]
    net = "out"
    """
    assert solve(read_circuit_text(text).resolve(), 0.005).sample(RATE, 400) == pytest.approx(-direct, abs=2e-5)


def test_matrix_exponential_agrees_with_lsim() -> None:
    """The closed forms above stand on scipy.signal.lsim; one ramp by the matrix exponential says the same."""
    a, b = np.array([[-3e3, -2e3], [1e3, 0.0]]), np.array([[1.0], [0.5]])
    times = np.linspace(0.0, 1e-3, 50)
    by_lsim = signal.lsim((a, b, np.eye(2), np.zeros((2, 1))), times, times)[2]
    block = np.zeros((4, 4))
    block[:2, :2], block[:2, 2:3], block[2, 3] = a, b, 1.0
    assert by_lsim[-1] == pytest.approx((linalg.expm(block * 1e-3) @ [0.0, 0.0, 0.0, 1.0])[:2], rel=1e-9)
