"""The rest state: Newton's method and each of its fall-backs, and the error when there is none."""

from __future__ import annotations

import os
import re
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from kickrender.circuit import Constant, ResolvedCircuit, ResolvedPart, read_circuit, shipped_circuits
from kickrender.engine import rest, rest_state, solve, solve_each
from kickrender.errors import SolveError
from tests.engine.circuits import RAILS, VOICES, circuit, ladder
from tests.outside.second_writing import SecondWriting

ROOT = Path(__file__).parents[2]
LATCH = {
    "R1": "resistor 4k7 plus c1",
    "R2": "resistor 4k7 plus c2",
    "Rx": "resistor 47k c1 b2",
    "Ry": "resistor 47k c2 b1",
    "Q1": "npn small-npn c1 b1 ground",
    "Q2": "npn small-npn c2 b2 ground",
    "Rs": "resistor 100k gate b1",
}


def latch(gate: str = 'constant = "0V"', **changes: str):
    return circuit(LATCH | changes, inputs={"gate": gate}, nets={"plus": "5V"}, output="c1")


def trigger():
    """A comparator with positive feedback and its threshold away from the middle."""
    return circuit(
        {
            "U": "opamp fet-input p ground out plus minus",
            "R1": "resistor 10k in p",
            "R2": "resistor 22k out p",
        },
        inputs={"in": 'constant = "1V"'},
        nets=RAILS,
    )


def bridge(volts: str = "9V"):
    """A full-wave bridge into a load."""
    return circuit(
        {
            "D1": "diode silicon a out",
            "D2": "diode silicon b out",
            "D3": "diode silicon low a",
            "D4": "diode silicon low b",
            "R": "resistor 1k out low",
            "Ra": "resistor 10 in a",
            "Rb": "resistor 10 b ground",
        },
        inputs={"in": f'constant = "{volts}"'},
    )


def follower_chain():
    """Transistors stacked so that a bare Newton iteration has far to go."""
    parts = {"R0": "resistor 100k plus b0"}
    for k in range(5):
        parts[f"Q{k}"] = f"npn small-npn plus b{k} b{k + 1}"
        parts[f"R{k + 1}"] = f"resistor {10 ** (6 - k)} b{k + 1} minus"
    return circuit(parts, inputs={}, nets=RAILS, output="b5")


CIRCUITS = {
    "latch": latch,
    "trigger": trigger,
    "bridge": bridge,
    "follower chain": follower_chain,
    "reverse bridge": lambda: bridge("-9V"),
    **VOICES,
    "ladder": lambda: ladder(30),
}


def currents(chosen, state: dict[str, float]) -> np.ndarray:
    """F of the second writing at a state over its row's largest slope: how far every net is from balance. [V]"""
    independent = SecondWriting(chosen)
    names = {name: name.replace(":inner", ".junction").replace(":", ".") for name in independent.names}
    y = np.array([state[names[name]] for name in independent.names])
    out = np.zeros(independent.size)
    independent.residual(0.0, y, np.zeros(independent.size), out)
    out -= independent.capacitance[:, independent.size :] @ independent._full_slope[independent.size :]
    return out / np.abs(independent.slopes(0.0, y)[:, : independent.size]).max(axis=1)


@pytest.mark.parametrize("name", CIRCUITS)
def test_currents_balance_at_rest(name):
    """By equations written a second time (tests/outside/second_writing.py)."""
    chosen = CIRCUITS[name]()
    assert np.max(np.abs(currents(chosen, rest_state(chosen)))) < 1e-9


@pytest.mark.parametrize("name", shipped_circuits())
def test_shipped_circuits_rest(name):
    chosen = read_circuit(name).resolve()
    state = rest_state(chosen)
    assert np.max(np.abs(currents(chosen, state))) < 1e-9


@pytest.mark.parametrize("name", shipped_circuits())
def test_a_circuit_that_is_not_struck_stays_at_rest(name):
    """With every input held at its t = 0 level the output moves by less than a microvolt in a tenth of a second."""
    chosen = read_circuit(name).resolve()
    state = rest_state(chosen)
    held = replace(chosen, inputs={net: Constant(state[net]) for net in chosen.inputs})
    x = solve(held, 0.1).sample(48_000.0, 4800)
    assert np.max(np.abs(x - state[chosen.output])) < 1e-6


def test_rest_names_every_net_and_inner_quantity():
    state = rest_state(VOICES["lopsided"]())
    nets = {"base", "knot", "out", "far", "low", "drain"}
    assert set(state) == nets | {"L1.current"} | {"gate", "hum", "slope", "bias"} | {"plus"}
    assert (state["plus"], state["bias"], state["hum"], state["gate"]) == (3.0, 0.5, 1.0, 0.0)


def test_inputs_rest_at_their_levels_of_time_zero():
    """A pulse at `rest`, a sine at offset + A sin(phase), points at the first voltage."""
    for wave, volts in (
        ('pulse = { rest = "1.5V", strike = "9V", length = "1ms" }', 1.5),
        ('sine = { amplitude = "2V", frequency = "50Hz", offset = "1V", phase = "30deg" }', 2.0),
        ('points = [["1ms", "-0.25V"], ["2ms", "7V"]]', -0.25),
        ('constant = "3V"', 3.0),
    ):
        chosen = circuit({"R1": "resistor 1k in out", "R2": "resistor 1k out ground"}, inputs={"in": wave})
        assert rest_state(chosen)["out"] == pytest.approx(volts / 2, abs=1e-12)


def test_of_two_rest_states_the_one_newton_reaches_from_zero():
    """A latch with a hair's difference falls to one side, always the same; alike on both sides it stays between."""
    found = rest_state(latch(Rx="resistor 47k1 c1 b2"))
    assert rest_state(latch(Rx="resistor 47k1 c1 b2")) == found
    assert np.max(np.abs(currents(latch(Rx="resistor 47k1 c1 b2"), found))) < 1e-9


def test_a_struck_latch_ends_in_the_other_state():
    """Pulled over, it stays: the collector that was high is low at the end, with the gate back at rest."""
    gate = 'pulse = { rest = "0V", strike = "5V", length = "2ms" }'
    chosen = latch(gate, C1="capacitor 1n c1 ground", C2="capacitor 1n c2 ground", Rx="resistor 40k c1 b2")
    solution = solve(chosen, 0.02, probes=("c2",))
    assert solution.sample(1e3, 1, first=19)[0] < 0.3
    assert solution.sample(1e3, 1, first=19, net="c2")[0] > 3.0


# The kernels call one another as compiled code, so the fall-backs are exercised with the compiler off, in a process of
# its own: "sources" lets Newton's method fail once, "pseudo" until a pseudo-transient step was taken, "never" always.
FALL_BACK = """
import sys
import numpy as np
from kickrender.engine import rest, rest_state
from kickrender.errors import SolveError
from tests.engine.test_rest import CIRCUITS, currents
mode, names = sys.argv[1], sys.argv[2:]
newton, set_sources = rest._newton, rest._set_sources
def failing_newton(code, state, matrix, coefficients, per_pseudo_step, *others):
    if per_pseudo_step:
        calls["pseudo"] += 1
    else:
        calls["newton"] += 1
        if mode == "never" or calls["newton"] == 1 or (mode == "pseudo" and not calls["pseudo"]):
            return False, 1
    return newton(code, state, matrix, coefficients, per_pseudo_step, *others)
def counting_sources(code, hit_numbers, inputs, level, *others):
    calls["scaled"] += level != 1.0
    set_sources(code, hit_numbers, inputs, level, *others)
rest._newton, rest._set_sources = failing_newton, counting_sources
if mode == "never":
    rest._PSEUDO_STEPS = 50
for name in names:
    calls = {"newton": 0, "pseudo": 0, "scaled": 0}
    chosen = CIRCUITS[name]()
    try:
        worst = np.max(np.abs(currents(chosen, rest_state(chosen))))
        print(f"{worst:.1e} {calls['scaled']} {calls['pseudo']}")
    except SolveError as error:
        print(error)
"""
SMALL = ("bridge", "latch", "trigger")


def fallen_back(mode: str) -> list[str]:
    environment = dict(os.environ, NUMBA_DISABLE_JIT="1", PYTHONPATH=str(ROOT))
    command = [sys.executable, "-c", FALL_BACK, mode, *SMALL]
    return subprocess.check_output(command, env=environment, text=True).splitlines()


@pytest.mark.slow
@pytest.mark.parametrize("mode", ["sources", "pseudo"])
def test_fall_backs_find_a_rest_state_too(mode):
    """Source stepping when Newton's method fails, and pseudo-transient continuation when that fails as well."""
    for name, line in zip(SMALL, fallen_back(mode), strict=True):
        worst, scaled, pseudo = line.split()
        assert float(worst) < 1e-9, name
        assert int(scaled) > 0, name
        assert (int(pseudo) > 0) == (mode == "pseudo"), name


@pytest.mark.slow
def test_when_all_three_fail_the_error_names_circuit_net_and_residual():
    for line in fallen_back("never"):
        assert re.match(r"no rest state \(circuit 'test', worst net '\S+', residual \S+\)\. No operating point", line)


def floating():
    """Made by hand, since the reader refuses it: a net that only capacitors touch."""
    parts = {
        "C1": ResolvedPart("C1", "capacitor", {"a": "in", "b": "float"}, {"capacitance": 1e-8}),
        "C2": ResolvedPart("C2", "capacitor", {"a": "float", "b": "out"}, {"capacitance": 1e-8}),
        "R": ResolvedPart("R", "resistor", {"a": "out", "b": "ground"}, {"resistance": 1e3}),
    }
    return ResolvedCircuit("floating", 298.15, {}, {"in": Constant(1.0)}, parts, "out", 1.0)


def test_a_circuit_without_a_rest_state_is_a_named_error():
    """Alone and in company, where it stops no other hit."""
    with pytest.raises(SolveError, match=r"^no rest state \(circuit 'floating', worst net '\w+', residual") as caught:
        rest_state(floating())
    assert caught.value.reason == "no rest state"
    assert caught.value.net in ("float", "out")
    assert "resistor to ground often helps" in caught.value.advice
    with pytest.raises(SolveError, match="no rest state"):
        solve(floating(), 1e-3)
    outcomes = solve_each([floating(), ladder(3), floating()], [1e-3] * 3)
    assert [isinstance(outcome, SolveError) for outcome in outcomes] == [True, False, True]


@pytest.mark.parametrize("seed", range(20))
def test_dense_elimination_is_numpys(seed):
    """The rest state's own solver, on rows of very different size; and it says so when there is no answer."""
    random = np.random.default_rng(seed)
    size = int(random.integers(1, 12))
    matrix = random.normal(size=(size, size)) * 10.0 ** random.uniform(-9, 9, (size, 1))
    right = random.normal(size=size)
    true = np.linalg.solve(matrix, right)
    found = right.copy()
    assert rest.solve_dense(matrix.copy(), found)
    np.testing.assert_allclose(found, true, rtol=1e-6)
    matrix[-1] = matrix[0]
    matrix[-1, 0] = matrix[0, 0]
    if size > 1:
        found = right.copy()
        singular = not rest.solve_dense(matrix.copy(), found)
        assert singular or np.max(np.abs(found)) > 1e6 * np.max(np.abs(true))
