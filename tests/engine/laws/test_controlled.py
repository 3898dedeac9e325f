"""Controlled sources in circuits with closed forms: filters, gyrators, loops, and sources driven by other sources."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import signal

from kickrender.circuit import ResolvedCircuit, read_circuit_text
from kickrender.engine import poles, rest_state, solve

RAMP = "[inputs.in]\npoints = [[0, 0], [0.0001, 5], [0.002, 5], [0.0021, -1]]\n"
RATE, COUNT = 100_000, 800


def bench(*parts: str, inputs: str = RAMP) -> ResolvedCircuit:
    return read_circuit_text(inputs + "\n[parts]\n" + "\n".join(parts) + '\n[output]\nnet = "out"\n').resolve()


def driven(system: tuple) -> np.ndarray:  # type: ignore[type-arg]
    """scipy's answer to the ramps, exact for piecewise linear inputs."""
    times = np.arange(COUNT) / RATE
    u = np.interp(times, [0.0, 1e-4, 2e-3, 2.1e-3], [0.0, 5.0, 5.0, -1.0])
    return np.asarray(signal.lsim(system, u, times)[1])


def amplifier(name: str, gain: float, plus: str, minus: str, out: str) -> str:
    return (
        f'{name} = {{ kind = "controlled-voltage", value = {gain}, plus = "{plus}", minus = "{minus}", out = "{out}" }}'
    )


def current(name: str, siemens: float, plus: str, minus: str, a: str, b: str) -> str:
    return (
        f'{name} = {{ kind = "controlled-current", value = {siemens}, plus = "{plus}", minus = "{minus}", '
        f'between = ["{a}", "{b}"] }}'
    )


def resistor(name: str, ohm: float, a: str, b: str) -> str:
    return f'{name} = {{ kind = "resistor", value = {ohm}, between = ["{a}", "{b}"] }}'


def capacitor(name: str, farad: float, a: str, b: str) -> str:
    return f'{name} = {{ kind = "capacitor", value = {farad}, between = ["{a}", "{b}"] }}'


@pytest.mark.parametrize("gain", [1.0, 2.5, -4.0])
def test_sallen_key(gain: float) -> None:
    """H = K/(1 + s (R_1 C_1 (1 - K) + (R_1 + R_2) C_2) + s^2 R_1 R_2 C_1 C_2).

    Source: R. P. Sallen and E. L. Key, A practical method of designing RC active filters (1955), from memory.
    """
    r_1, r_2, c_1, c_2 = 10e3, 22e3, 15e-9, 4.7e-9
    circuit = bench(
        resistor("R1", r_1, "in", "x"),
        resistor("R2", r_2, "x", "y"),
        capacitor("C1", c_1, "x", "out"),
        capacitor("C2", c_2, "y", "ground"),
        amplifier("K", gain, "y", "ground", "out"),
    )
    denominator = [r_1 * r_2 * c_1 * c_2, r_1 * c_1 * (1.0 - gain) + (r_1 + r_2) * c_2, 1.0]
    found = solve(circuit, 0.0081, tolerance=1e-9).sample(RATE, COUNT)
    truth = driven(([gain], denominator))
    assert found == pytest.approx(truth, abs=1e-8 * np.max(np.abs(truth)))


def test_gyrator_is_an_inductor() -> None:
    """Two current sources back to back turn a capacitor into L = C/g^2: f_0 = g/(2 pi sqrt(C_0 C))."""
    circuit = bench(
        resistor("R", 200e3, "in", "out"),
        capacitor("C0", 100e-9, "out", "ground"),
        current("G1", 1e-4, "out", "ground", "ground", "y"),
        current("G2", 1e-4, "y", "ground", "out", "ground"),
        capacitor("C", 22e-9, "y", "ground"),
        resistor("R2", 1e12, "y", "ground"),
    )
    (pole,) = poles(circuit)
    assert pole.frequency_hz == pytest.approx(1e-4 / (2.0 * np.pi * np.sqrt(100e-9 * 22e-9)), rel=1e-7)
    henry = 22e-9 / 1e-8
    truth = driven(([henry / 200e3, 0.0], [henry * 100e-9, henry / 200e3, 1.0]))
    found = solve(circuit, 0.0081, tolerance=1e-9).sample(RATE, COUNT)
    assert found == pytest.approx(truth, abs=2e-7 * np.max(np.abs(truth)))


def test_source_on_a_source() -> None:
    """A chain of voltage sources follows the input itself, and a capacitor behind them takes its slope.

    y = -3 (u/2 - u) = 1.5 u through C into R: s R C/(1 + s R C) of it; nothing before the capacitor moves of itself.
    """
    circuit = bench(
        amplifier("A", 0.5, "in", "ground", "x"),
        amplifier("B", -3.0, "x", "in", "y"),
        capacitor("C", 47e-9, "y", "out"),
        resistor("R", 10e3, "out", "ground"),
    )
    truth = driven(([1.5 * 4.7e-4, 0.0], [4.7e-4, 1.0]))
    assert solve(circuit, 0.0081, tolerance=1e-9).sample(RATE, COUNT) == pytest.approx(truth, abs=1e-8)


@pytest.mark.parametrize("gain", [10.0, 1e6])
def test_loop_of_gain(gain: float) -> None:
    """With A and a divider of b in the loop the output rests at A u/(1 + A b)."""
    circuit = bench(
        amplifier("A", gain, "in", "m", "out"),
        resistor("R1", 9e3, "out", "m"),
        resistor("R2", 1e3, "m", "ground"),
        inputs='[inputs.in]\nconstant = "0.3V"\n',
    )
    assert rest_state(circuit)["out"] == pytest.approx(gain * 0.3 / (1.0 + 0.1 * gain), rel=1e-9)


def test_current_goes_from_first_to_second_net() -> None:
    circuit = bench(
        current("G", 1e-3, "in", "ground", "x", "out"),
        resistor("R1", 1e3, "x", "ground"),
        resistor("R2", 2e3, "out", "ground"),
        inputs='[inputs.in]\nconstant = "0.5V"\n',
    )
    found = rest_state(circuit)
    assert (found["x"], found["out"]) == (pytest.approx(-0.5, rel=1e-12), pytest.approx(1.0, rel=1e-12))
