"""RC and RLC circuits against their closed forms, as any textbook of circuit theory has them."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import signal

from kickrender.engine import poles, solve
from tests.engine.circuits import circuit, rc, residual_db

RATE_HZ = 96_000.0
DEFAULT_DB, TIGHT_DB = -100.0, -170.0
STEP = 'points = [["0s", "0V"], ["1us", "1V"]]'


def times(count: int) -> np.ndarray:
    return np.arange(count) / RATE_HZ


def ramp_response(step_response, t: np.ndarray, rise: float) -> np.ndarray:
    """Answer to a ramp from 0 to 1 over `rise`, from the integral of the step response: (S(t) - S(t - rise))/rise."""
    return (step_response(np.maximum(t, 0.0)) - step_response(np.maximum(t - rise, 0.0))) / rise


def solved(chosen, count: int, tolerance: float | None) -> np.ndarray:
    keywords = {} if tolerance is None else {"tolerance": tolerance}
    return solve(chosen, count / RATE_HZ, **keywords).sample(RATE_HZ, count)


@pytest.mark.parametrize(("tolerance", "db"), [(None, DEFAULT_DB), (1e-10, TIGHT_DB)])
def test_rc_step(tolerance, db):
    """v = 1 - e^(-t/RC), its integral t - RC (1 - e^(-t/RC)) for the ramp."""
    tau = 1e-3
    true = ramp_response(lambda t: t - tau * (1 - np.exp(-t / tau)), times(500), 1e-6)
    assert residual_db(solved(rc(STEP, "10k", "100n"), 500, tolerance), true) < db


@pytest.mark.parametrize(("tolerance", "db"), [(None, DEFAULT_DB), (1e-10, TIGHT_DB)])
def test_rc_pulse(tolerance, db):
    """A pulse is a ramp up and, from 1 ms, a ramp down over 50 us, at its slope each."""
    tau = 0.47e-3
    pulse = 'pulse = { rest = "1V", strike = "4V", length = "1ms", rise = "2us", fall = "50us" }'
    t = times(500)

    def integral(t):
        return t - tau * (1 - np.exp(-t / tau))

    true = 1.0 + 3.0 * (ramp_response(integral, t, 2e-6) - ramp_response(integral, t - 1e-3, 50e-6))
    assert residual_db(solved(rc(pulse, "4k7", "100n"), 500, tolerance), true) < db


def test_rc_sine_from_rest():
    """Gain, phase and the transient from the state the sine held before t = 0."""
    tau, omega, phase = 1e-3, 2 * np.pi * 440.0, np.radians(-35.0)
    t, gain, delay = times(2000), 1 / np.hypot(1, omega * tau), np.arctan(omega * tau)
    sine = 'sine = { amplitude = "2V", frequency = "440Hz", offset = "0.5V", phase = "-35deg" }'
    start = 2.0 * np.sin(phase) - 2.0 * gain * np.sin(phase - delay)
    true = 0.5 + 2.0 * gain * np.sin(omega * t + phase - delay) + start * np.exp(-t / tau)
    assert residual_db(solved(rc(sine, "10k", "100n"), 2000, 1e-10), true) < TIGHT_DB


def test_rc_high_pass_passes_an_edge():
    """A capacitor tied to the input: v = (RC/rise)(1 - e^(-t/RC)) on the edge, with the edge's own sign."""
    tau, rise = 1e-3, 20e-6
    chosen = circuit(
        {"C": "capacitor 100n in out", "R": "resistor 10k out ground"},
        inputs={"in": 'points = [["0s", "0V"], ["20us", "5V"]]'},
    )
    true = 5.0 * ramp_response(lambda t: tau * (1 - np.exp(-t / tau)), times(500), rise)
    assert residual_db(solved(chosen, 500, 1e-10), true) < TIGHT_DB


@pytest.mark.parametrize("ohm", [20.0, 632.455532, 5000.0])
@pytest.mark.parametrize(("tolerance", "db"), [(None, DEFAULT_DB), (1e-10, -165.0)])
def test_series_rlc_step(ohm, tolerance, db):
    """Capacitor voltage under-, critically and over-damped, from the roots of s^2 + s R/L + 1/(LC)."""
    henry, farad = 10e-3, 100e-9
    chosen = circuit(
        {"R": f"resistor {ohm!r} in a", "L": "inductor 10m a out", "C": "capacitor 100n out ground"},
        inputs={"in": STEP},
    )
    first, second = np.roots([1.0, ohm / henry, 1.0 / (henry * farad)]).astype(complex)

    def integral(t):  # of 1 + (s2 e^(s1 t) - s1 e^(s2 t))/(s1 - s2)
        a, b = second / (first - second), first / (first - second)
        return (t + a * np.expm1(first * t) / first - b * np.expm1(second * t) / second).real

    if abs(first - second) < 1e-2 * abs(first):
        mean = (first + second).real / 2

        def integral(t):  # of 1 - (1 - s t) e^(s t)
            e = np.exp(mean * t)
            return t - np.expm1(mean * t) / mean + (t * e - np.expm1(mean * t) / mean)

    true = ramp_response(integral, times(400), 1e-6)
    assert residual_db(solved(chosen, 400, tolerance), true) < db


def test_parallel_rlc_rings_as_its_poles_say():
    """w0 = 1/sqrt(LC), Q = R sqrt(C/L), time to -60 dB = ln(1000) 2 R C."""
    chosen = circuit(
        {"L": "inductor 1.5 out ground", "C": "capacitor 2u out ground", "R": "resistor 10k out ground"},
    )
    (pole,) = poles(chosen)
    assert pole.frequency_hz == pytest.approx(1 / (2 * np.pi * np.sqrt(1.5 * 2e-6)), rel=1e-12)
    assert pole.q == pytest.approx(1e4 * np.sqrt(2e-6 / 1.5), rel=1e-9)
    assert pole.decay_s == pytest.approx(np.log(1000) * 2 * 1e4 * 2e-6, rel=1e-9)


def test_a_ladder_against_a_matrix_exponential():
    """Six RC sections as a state-space system, by scipy.signal.lsim, whose hold is exact for piecewise linear input."""
    count, ohm, farad = 6, 2.2e3, 22e-9
    a = (np.diag(np.full(count, -2.0)) + np.diag(np.ones(count - 1), 1) + np.diag(np.ones(count - 1), -1)) / ohm / farad
    a[-1, -1] /= 2.0
    b = np.zeros((count, 1))
    b[0] = 1 / (ohm * farad)
    corners = [(0.0, 0.0), (1e-3, 2.0), (1.5e-3, -1.0), (3e-3, 0.5)]
    text = "points = [" + ", ".join(f"[{t!r}, {v!r}]" for t, v in corners) + "]"
    parts = {}
    for k in range(count):
        parts[f"R{k}"] = f"resistor 2k2 {'in' if k == 0 else f'n{k - 1}'} n{k}"
        parts[f"C{k}"] = f"capacitor 22n n{k} ground"
    found = solved(circuit(parts, inputs={"in": text}, output="n5"), 480, 1e-10)
    t = times(480)
    u = np.interp(t, *np.array(corners).T)
    _, true, _ = signal.lsim((a, b, np.eye(count)[-1:], np.zeros((1, 1))), u, t)
    assert residual_db(found, true.ravel()) < -160.0
