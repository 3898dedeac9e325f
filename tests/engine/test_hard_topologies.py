"""Topologies meant to hurt: each solves right, or fails with a named error and useful advice; none hangs."""

from __future__ import annotations

import time
from collections.abc import Iterator

import numpy as np
import pytest
from scipy.linalg import expm

from kickrender.circuit import Constant, ResolvedCircuit, ResolvedPart, read_circuit_text
from kickrender.engine import Solution, poles, rest_state, solve, solve_each
from kickrender.errors import InputError, SolveError
from tests.engine.circuits import RAILS, circuit, ladder, residual_db
from tests.outside.second_writing import SecondWriting

RATE_HZ = 48_000.0
MOST_SECONDS = 60.0  # far above what any of these takes, far below a hang


@pytest.fixture(autouse=True)
def bounded() -> Iterator[None]:
    started = time.monotonic()
    yield
    assert time.monotonic() - started < MOST_SECONDS


def independent_db(chosen: ResolvedCircuit, length_s: float, **keywords: float) -> float:
    """Residual of the output against SUNDIALS IDA on the second writing. [dB]"""
    count = round(length_s * RATE_HZ)
    true = SecondWriting(chosen).solve(np.arange(count) / RATE_HZ, **keywords).volts[chosen.output]
    return residual_db(solve(chosen, length_s).sample(RATE_HZ, count), true)


@pytest.mark.parametrize("count", [60, 200])
def test_long_ladders(count):
    """Against the modes of the ladder's own state equations, under a ramp of 1 us.

    The error norm is a mean over all nets, so the more nets are still at rest the more those that move may err: hence
    3e-7 at a tolerance of 1e-9 for 200 nets.
    """
    ohm, farad, rise = 1e3, 1e-9, 1e-6
    chosen = ladder(count, 'points = [["0s", "0V"], ["1us", "1V"]]', "1k", "1n")
    a = (np.diag(np.full(count, -2.0)) + np.diag(np.ones(count - 1), 1) + np.diag(np.ones(count - 1), -1)) / ohm / farad
    a[-1, -1] /= 2.0
    times = np.arange(1, 40) * (count / 60) ** 2 * 1e-4
    found = solve(chosen, times[-1], tolerance=1e-9).sample(1.0 / times[0], len(times), first=1)
    # x = 1 - e^(At) 1 after a step; its mean over the rise for a ramp: A^-1 (e^(At) - e^(A(t - rise)))/rise
    rates, shapes = np.linalg.eigh(a)
    share = shapes[-1] * shapes.sum(axis=0) / (rates * rise)
    true = [1.0 - share @ (np.exp(rates * t) - np.exp(rates * (t - rise))) for t in times]
    np.testing.assert_allclose(found, true, rtol=0, atol=3e-7)


def test_a_ladder_of_diodes():
    """Sixty nets with a junction on each."""
    parts = {}
    for k in range(60):
        parts[f"R{k}"] = f"resistor 100 {'in' if k == 0 else f'n{k - 1}'} n{k}"
        parts[f"C{k}"] = f"capacitor 10n n{k} ground"
        parts[f"D{k}"] = f"diode plain n{k} ground" if k % 2 else f"diode plain ground n{k}"
    chosen = circuit(
        parts,
        inputs={"in": 'sine = { amplitude = "3V", frequency = "1kHz" }'},
        models={"plain": '{ kind = "diode", saturation_current = "1n", ideality = 1.8 }'},
        output="n9",
    )
    assert independent_db(chosen, 3e-3) < -100.0


@pytest.mark.parametrize("coupling", ["10p", "1n", "10n"])
def test_two_coupled_resonators(coupling):
    """Their poles split; the beat is right over its whole length. Against the exact state equations."""
    chosen = circuit(
        {
            "L1": "inductor 0.5 a ground",
            "C1": "capacitor 100n a ground",
            "R1": "resistor 100k a ground",
            "L2": "inductor 0.5 out ground",
            "C2": "capacitor 100n out ground",
            "R2": "resistor 100k out ground",
            "Cc": f"capacitor {coupling} a out",
        },
        output="out",
    )
    c = {"10p": 10e-12, "1n": 1e-9, "10n": 10e-9}[coupling]
    mass = np.array([[100e-9 + c, -c, 0, 0], [-c, 100e-9 + c, 0, 0], [0, 0, 0.5, 0], [0, 0, 0, 0.5]])
    k = np.array([[-1e-5, 0, -1, 0], [0, -1e-5, 0, -1], [1, 0, 0, 0], [0, 1, 0, 0]])
    system = np.linalg.solve(mass, k)
    found = solve(chosen, 0.3, start={"a": 1.0}, tolerance=1e-8).sample(RATE_HZ, 14_400)
    step = expm(system / RATE_HZ)
    state, true = np.array([1.0, 0, 0, 0]), []
    for _ in range(14_400):
        true.append(state[1])
        state = step @ state
    assert residual_db(found, np.array(true)) < -100.0
    frequencies = sorted({pole.frequency_hz for pole in poles(chosen)})
    expected = sorted({abs(s) / (2 * np.pi) for s in np.linalg.eigvals(system) if s.imag > 0})
    np.testing.assert_allclose(frequencies, expected, rtol=1e-9)


def chattering(hysteresis: str, slew: str = "13 V/us") -> ResolvedCircuit:
    """A comparator that drives its own input back over the threshold: a relaxation oscillator, or worse."""
    return circuit(
        {
            "U": "opamp c p m out plus minus",
            "R1": "resistor 10k out m",
            "C1": "capacitor 10n m ground",
            "R2": f"resistor {hysteresis} out p",
            "R3": "resistor 10k p ground",
            "Rk": "resistor 100k kick m",
        },
        inputs={"kick": 'pulse = { rest = "0V", strike = "5V", length = "0.1ms" }'},
        nets=RAILS,
        models={
            "c": f'{{ kind = "opamp", gain_bandwidth = "10MHz", slew_rate = "{slew}", headroom_high = "1V", '
            'headroom_low = "1V" }'
        },
    )


def test_a_relaxation_oscillator_keeps_its_period():
    """T = 2 RC ln((1 + b)/(1 - b)), b the feedback share; common practice, with a comparator far faster than T."""
    found = solve(chattering("10k", "1000 V/us"), 0.02, tolerance=1e-8).sample(4e6, 80_000)[20_000:]
    rising = np.flatnonzero((found[:-1] < 0) & (found[1:] >= 0)) / 4e6
    period = 2 * 10e3 * 10e-9 * np.log(3.0)
    assert np.mean(np.diff(rising)) == pytest.approx(period, rel=0.01)


@pytest.mark.parametrize("hysteresis", ["1M", "100M"])
def test_comparator_chatter_is_followed_or_named(hysteresis):
    """With next to no hysteresis it chatters at the speed of its slewing: many steps, never a hang."""
    (outcome,) = solve_each([chattering(hysteresis)], [0.02])
    if isinstance(outcome, SolveError):
        assert outcome.reason in ("too many steps", "step too small")
    else:
        x = outcome.sample(1e6, 20_000)
        assert np.isfinite(x).all()
        assert np.max(np.abs(x)) < 12.0


@pytest.mark.parametrize("loaded", [True, False])
def test_diode_bridge(loaded):
    """Rectifies a sine into a resistor, or into a capacitor that is charged in short pulses; against IDA."""
    parts = {
        "D1": "diode silicon a high",
        "D2": "diode silicon b high",
        "D3": "diode silicon low a",
        "D4": "diode silicon low b",
        "R": "resistor 1k high low",
        "Ra": "resistor 10 in a",
        "Rb": "resistor 10 b ground",
        "R1": "resistor 1M high out",
        "R2": "resistor 1M out low",
        "Rg": "resistor 10M low ground",
    }
    if loaded:
        parts["C"] = "capacitor 10u high low"
    chosen = circuit(parts, inputs={"in": 'sine = { amplitude = "10V", frequency = "100Hz" }'}, output="high")
    assert independent_db(chosen, 0.03) < -95.0


def test_op_amps_in_saturation_at_rest():
    """A comparator against its rail: it rests where S exp((v - V_hi)/50 mV) = S tanh(...), and comes back."""
    chosen = circuit(
        {
            "U": "opamp general-purpose level in out plus minus",
            "R1": "resistor 10k plus level",
            "R2": "resistor 10k level ground",
            "R3": "resistor 10k out ground",
            "U2": "opamp fet-input out level second plus minus",
            "R4": "resistor 10k second ground",
        },
        inputs={"in": 'pulse = { rest = "0V", strike = "9V", length = "3ms" }'},
        nets=RAILS,
        output="second",
    )
    rest = rest_state(chosen)
    assert rest["out"] == pytest.approx(12.0 - 1.5, abs=0.01)
    assert rest["second"] == pytest.approx(12.0 - 1.5, abs=0.01)
    # A comparator's edge is a jump at this rate: compare times of crossing, not samples on the edge
    assert independent_db(chosen, 6e-3) < -60.0
    found = solve(chosen, 6e-3)
    assert found.sample(1e3, 1, first=2)[0] == pytest.approx(-10.5, abs=0.01)
    assert found.sample(1e3, 1, first=5)[0] == pytest.approx(10.5, abs=0.01)


def test_very_stiff():
    """1 ohm with 1 pF beside 1 Mohm with 1 uF: time constants twelve decades apart, both right."""
    chosen = circuit(
        {
            "R1": "resistor 1 in fast",
            "C1": "capacitor 1p fast ground",
            "R2": "resistor 1M fast out",
            "C2": "capacitor 1u out ground",
        },
        inputs={"in": 'points = [["0s", "0V"], ["1us", "1V"]]'},
    )
    solution = solve(chosen, 5.0, probes=("fast",))
    times = np.arange(1, 50) * 0.1
    np.testing.assert_allclose(solution.sample(10.0, 49, first=1), 1.0 - np.exp(-(times - 0.5e-6)), atol=2e-6)
    edge = np.arange(1, 100) * 1e-8
    lag = 1e-12 * (1.0 - np.exp(-edge / 1e-12))
    np.testing.assert_allclose(solution.sample(1e8, 99, first=1, net="fast"), (edge - lag) / 1e-6, atol=3e-6)
    assert solution.counters["steps"] < 1000


def test_a_latch_with_two_rest_states():
    """It rests in one, is thrown into the other by a pulse, and back by the next; against IDA."""
    chosen = circuit(
        {
            "R1": "resistor 4k7 plus out",
            "R2": "resistor 4k7 plus c2",
            "Rx": "resistor 40k out b2",
            "Ry": "resistor 47k c2 b1",
            "Q1": "npn small-npn out b1 ground",
            "Q2": "npn small-npn c2 b2 ground",
            "Rs": "resistor 47k gate b1",
            "C1": "capacitor 1n out ground",
            "C2": "capacitor 1n c2 ground",
        },
        inputs={"gate": 'points = [["1ms", "0V"], ["1.1ms", "5V"], ["2ms", "0V"], ["4ms", "0V"], ["5ms", "-8V"]]'},
        nets={"plus": "5V"},
    )
    found = solve(chosen, 8e-3).sample(1e3, 8)
    assert found[3] < 0.3
    assert found[7] > 3.0
    assert independent_db(chosen, 8e-3) < -90.0


def test_a_capacitor_across_an_input_is_without_effect():
    """Legal, says the contract; so is one across held nets or at an op-amp's output."""
    parts = {
        "R": "resistor 10k in m",
        "R2": "resistor 10k m out",
        "C": "capacitor 10n m out",
        "U": "opamp fet-input ground m out plus minus",
    }
    further = {
        "C1": "capacitor 1u in ground",
        "C2": "capacitor 1u plus minus",
        "C3": "capacitor 1u in plus",
        "C4": "capacitor 1u out ground",
        "C5": "capacitor 1u out in",
    }
    wave = {"in": 'pulse = { rest = "0V", strike = "5V", length = "1ms" }'}
    plain, loaded = (
        solve(circuit(which, inputs=wave, nets=RAILS), 5e-3, tolerance=1e-9).sample(RATE_HZ, 240)
        for which in (parts, parts | further)
    )
    assert residual_db(loaded, plain) < -160.0


def test_an_inductor_cut_set_is_a_fault_of_the_file():
    """A net that only inductors touch: the reader says so, with the place."""
    text = """
    [inputs.in]
    constant = 1.0
    [parts]
    L1 = { kind = "inductor", value = "10m", between = ["in", "mid"] }
    L2 = { kind = "inductor", value = "10m", between = ["mid", "out"] }
    R1 = { kind = "resistor", value = "1k", between = ["out", "ground"] }
    [output]
    net = "out"
    full_scale = 1.0
    """
    with pytest.raises(InputError, match="mid"):
        read_circuit_text(text, "cut.toml")


def hand_made(*parts: tuple[str, str, str, float]) -> ResolvedCircuit:
    """A circuit the reader would refuse."""
    field = {"resistor": "resistance", "capacitor": "capacitance", "inductor": "inductance"}
    made = {
        f"X{k}": ResolvedPart(f"X{k}", kind, {"a": a, "b": b}, {field[kind]: value})
        for k, (kind, a, b, value) in enumerate(parts)
    }
    return ResolvedCircuit("hand-made", 298.15, {}, {"in": Constant(1.0)}, made, "out", 1.0)


IMPOSSIBLE = {
    "inductor cut-set": hand_made(
        ("inductor", "in", "mid", 0.01), ("inductor", "mid", "out", 0.01), ("resistor", "out", "ground", 1e3)
    ),
    "loop of inductors": hand_made(
        ("inductor", "in", "out", 0.01), ("inductor", "in", "out", 0.02), ("resistor", "out", "ground", 1e3)
    ),
    "floating net": hand_made(("capacitor", "in", "out", 1e-9), ("capacitor", "out", "ground", 1e-9)),
}


@pytest.mark.parametrize("name", IMPOSSIBLE)
def test_what_passes_the_reader_by_is_a_named_error_or_right(name):
    (outcome,) = solve_each([IMPOSSIBLE[name]], [1e-3])
    if isinstance(outcome, SolveError):
        assert outcome.reason in ("no rest state", "singular equations", "step too small")
        assert "Look for" in outcome.advice
        assert outcome.net or outcome.circuit == "hand-made"
    else:
        assert isinstance(outcome, Solution)
        np.testing.assert_allclose(outcome.sample(48e3, 48), 1.0, atol=1e-9)  # at rest on the input's level


def test_a_closed_switch_beside_microamperes():
    """10 milliohm in series with 1 Mohm: rounding in the switch's current is what Newton must accept."""
    chosen = circuit(
        {"S": "switch true in a", "R": "resistor 1M a out", "C": "capacitor 1n out ground", "S2": "switch true out b"}
        | {"R2": "resistor 10M b ground"},
        inputs={"in": 'pulse = { rest = "0V", strike = "5V", length = "2ms" }'},
    )
    assert independent_db(chosen, 0.01) < -100.0


def test_a_megavolt_and_a_microvolt():
    """Signals far from the usual are still followed: errors are relative above a fraction of a volt, else absolute."""
    for volts, most_db in (("1e6V", -100.0), ("1V", -100.0), ("1mV", -60.0)):
        chosen = ladder(3, f'pulse = {{ rest = "0V", strike = "{volts}", length = "1ms" }}')
        tight = solve(chosen, 5e-3, tolerance=1e-12).sample(RATE_HZ, 240)
        assert residual_db(solve(chosen, 5e-3).sample(RATE_HZ, 240), tight) < most_db


def test_ringing_far_above_the_sample_rate():
    """A resonance at 5 MHz on a strike: followed while it lasts, then left behind."""
    chosen = circuit(
        {
            "R": "resistor 1 in a",
            "L": "inductor 1u a b",
            "C": "capacitor 1n b ground",
            "R2": "resistor 1k b out",
            "C2": "capacitor 100n out ground",
            "R3": "resistor 10k out ground",
        },
        inputs={"in": 'pulse = { rest = "0V", strike = "5V", length = "1ms" }'},
    )
    assert independent_db(chosen, 5e-3) < -100.0
    assert solve(chosen, 1.0).counters["steps"] < 20_000
