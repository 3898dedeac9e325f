"""Small-signal responses against scipy.signal and closed forms, 10 Hz to 100 kHz."""

import numpy as np
import pytest
from scipy import signal

from kickrender.circuit import read_circuit_text
from kickrender.engine import response

FREQUENCIES_HZ = np.geomspace(10.0, 100e3, 61)

RLC = """
[inputs.in]
constant = "0V"
[parts]
R1 = { kind = "resistor", value = "220", between = ["in", "a"] }
L1 = { kind = "inductor", value = "10m", between = ["a", "out"] }
C1 = { kind = "capacitor", value = "100n", between = ["out", "ground"] }
[output]
net = "out"
"""

COUPLED = """
[inputs.in]
constant = "1V"
[parts]
C1 = { kind = "capacitor", value = "47n", between = ["in", "out"] }
R1 = { kind = "resistor", value = "10k", between = ["out", "ground"] }
D1 = { kind = "diode", model = "plain", anode = "bias", cathode = "out" }
R2 = { kind = "resistor", value = "100k", between = ["bias", "supply"] }
C2 = { kind = "capacitor", value = "1u", between = ["bias", "ground"] }
[nets]
supply = "5V"
[models.plain]
kind = "diode"
saturation_current = "1n"
ideality = 2.0
[output]
net = "out"
"""


def test_series_resonance_against_scipy_signal():
    """H(s) = 1/(L C s^2 + R C s + 1), evaluated by scipy.signal.freqs."""
    answer = response(read_circuit_text(RLC).resolve(), "in", FREQUENCIES_HZ)
    _, expected = signal.freqs([1.0], [10e-3 * 100e-9, 220 * 100e-9, 1.0], 2 * np.pi * FREQUENCIES_HZ)
    np.testing.assert_allclose(answer["out"], expected, rtol=1e-10)


def test_a_diode_answers_as_its_slope_at_rest():
    """A nodal solution by hand with the diode's conductance I/(n V_T) (Shockley), at its own rest current."""
    circuit = read_circuit_text(COUPLED).resolve()
    answer = response(circuit, "in", FREQUENCIES_HZ)["out"]
    from scipy.optimize import brentq

    scale = 2.0 * 1.380649e-23 * 298.15 / 1.602176634e-19

    def surplus(i):  # supply = i 100k + diode + i 10k
        return 5.0 - i * 110e3 - scale * np.log1p(i / 1e-9)

    current = brentq(surplus, 0.0, 1e-4, xtol=1e-18)
    slope = (current + 1e-9) / scale
    s = 2j * np.pi * FREQUENCIES_HZ
    expected = []
    for value in s:
        matrix = np.array(
            [[value * 47e-9 + 1e-4 + slope, -slope], [-slope, slope + 1e-5 + value * 1e-6]], dtype=complex
        )
        expected.append(np.linalg.solve(matrix, np.array([value * 47e-9, 0.0]))[0])
    np.testing.assert_allclose(answer, expected, rtol=1e-6)


def test_an_unknown_input_is_named():
    with pytest.raises(ValueError, match="no input 'gate'; inputs: in"):
        response(read_circuit_text(RLC).resolve(), "gate", [100.0])
