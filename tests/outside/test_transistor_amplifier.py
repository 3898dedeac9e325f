"""The transistor amplifier, a stiff index-1 benchmark, as a circuit file through the reader and the engine.

Source: Test Set for IVP Solvers (F. Mazzia and C. Magherini, University of Bari; earlier CWI), problem "transamp",
eight equations, reference solution at t = 0.2 s; the trajectory in between was computed with SciPy's Radau at
rtol 1e-12 (data/ivp_transistor_amplifier.json says how, and how the problem's transistor maps onto ours: a reverse
saturation current of 0, a forward gain of 99, and an ideality that makes n V_T the problem's 0.026 V).
"""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest

from kickrender.circuit import ResolvedCircuit, read_circuit_text
from kickrender.engine import DEFAULT_TOLERANCE, Solution, rest_state, solve
from kickrender.engine.laws import transistor

DATA = json.loads((Path(__file__).parent / "data" / "ivp_transistor_amplifier.json").read_text())
NETS = tuple(f"n{k}" for k in range(1, 9))
IDEALITY = 0.026 / (1.380649e-23 * 298.15 / 1.602176634e-19)
START = dict(zip(NETS, DATA["y0"], strict=True))
LENGTH_S = DATA["time"]["t1"]


def amplifier(ideality: float = IDEALITY, reverse: str = "0") -> ResolvedCircuit:
    lines = ["[nets]", 'ub = "6V"', "[inputs.in]", 'sine = { amplitude = "0.1V", frequency = "100Hz" }', "[parts]"]
    for part in DATA["netlist"]:
        nets = [{"0": "ground", "in": "in", "ub": "ub"}.get(node, f"n{node}") for node in part["nodes"]]
        if part["type"] in "RC":
            kind = {"R": "resistor", "C": "capacitor"}[part["type"]]
            lines.append(
                f'{part["name"]} = {{ kind = "{kind}", value = {part["value"]!r}, between = {json.dumps(nets)} }}'
            )
        elif part["type"] == "NPN":
            c, b, e = nets
            lines.append(
                f'{part["name"]} = {{ kind = "npn", model = "q", collector = "{c}", base = "{b}", emitter = "{e}" }}'
            )
    lines += [
        "[models.q]",
        'kind = "npn"',
        "saturation_current = 9.9e-7",
        f"reverse_saturation_current = {reverse}",
        "forward_gain = 99",
        "reverse_gain = 99",
        f"ideality = {ideality!r}",
        "[output]",
        'net = "n8"',
        "full_scale = 1",
    ]
    return read_circuit_text("\n".join(lines), "amplifier.toml").resolve()


def states(solution: Solution, time_s: float) -> np.ndarray:
    return np.array([solution.sample(1.0 / time_s, 1, first=1, net=net)[0] for net in NETS])


def digits(solution: Solution) -> float:
    """Correct digits of the worst of the eight voltages at t = 0.2 s, as the Test Set counts them."""
    truth = np.array(DATA["reference_t1"])
    return float(-np.log10(np.max(np.abs(states(solution, LENGTH_S) / truth - 1.0))))


def test_reference_solution_at_tight_tolerance():
    """At least 6 digits; it is the smallest conductance across our junctions, 1e-12 S, that ends them at 7.3."""
    assert digits(solve(amplifier(), LENGTH_S, probes=NETS, tolerance=1e-9, start=START)) > 7.0


@pytest.fixture
def no_leak(monkeypatch):
    """The problem's transistors have no conductance across their junctions."""
    monkeypatch.setattr(transistor, "MINIMUM_CONDUCTANCE_S", 0.0)


@pytest.mark.usefixtures("no_leak")
def test_ten_digits_of_the_problem_as_it_stands():
    assert digits(solve(amplifier(), LENGTH_S, probes=NETS, tolerance=1e-10, start=START)) > 10.0


def test_default_tolerance_is_good_for_six_digits():
    assert digits(solve(amplifier(), LENGTH_S, probes=NETS, start=START)) > 6.0


@pytest.mark.usefixtures("no_leak")
def test_tightening_gains_digits():
    """A hundred times tighter gains at least a digit."""
    found = [
        digits(solve(amplifier(), LENGTH_S, probes=NETS, tolerance=tolerance, start=START))
        for tolerance in (DEFAULT_TOLERANCE, DEFAULT_TOLERANCE / 100.0)
    ]
    assert found[1] > found[0] + 1.0


def test_reference_trajectory():
    """All eight voltages at eight times, by the dense output."""
    solution = solve(amplifier(), LENGTH_S, probes=NETS, tolerance=1e-9, start=START)
    for time_s, truth in zip(DATA["own_trajectory"]["t"], DATA["own_trajectory"]["y"], strict=True):
        np.testing.assert_allclose(states(solution, time_s), truth, rtol=3e-7, atol=3e-8)


def test_initial_state_is_the_problems_own():
    solution = solve(amplifier(), 1e-3, probes=NETS, start=START)
    np.testing.assert_allclose([solution.rest[net] for net in NETS], DATA["y0"], rtol=0, atol=1e-7)


def test_initial_slopes():
    """y' at t = 0 as the problem's driver gives it, from the first 10 ns."""
    solution = solve(amplifier(), 1e-3, probes=NETS, tolerance=1e-11, start=START)
    slope = [(solution.sample(1e8, 1, first=1, net=net)[0] - solution.rest[net]) / 1e-8 for net in NETS]
    np.testing.assert_allclose(slope, DATA["yprime0"], rtol=2e-3, atol=0.05)


def test_operating_point():
    """The point the amplifier would rest at, from a root search in mpmath (not published)."""
    rest, truth = rest_state(amplifier()), DATA["dc_operating_point"]
    for nets, key in ((("n2", "n5"), "y_base"), (("n3", "n6"), "y_emitter"), (("n4", "n7"), "y_collector")):
        for net in nets:
            assert rest[net] == pytest.approx(truth[key], rel=1e-9)


def test_an_ordinary_transistor_differs_as_it_should():
    """With a reverse junction of the same saturation current: two other integrators agree on it to 9 digits."""
    solution = solve(amplifier(reverse="9.9e-7"), LENGTH_S, probes=NETS, tolerance=1e-9, start=START)
    truth = DATA["reciprocal_ebers_moll_variant"]["t1"]["betaR=99"]
    np.testing.assert_allclose(states(solution, LENGTH_S), truth, rtol=1e-6)
