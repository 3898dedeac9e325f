"""Natural frequencies of linear and nonlinear circuits at rest."""

from __future__ import annotations

import numpy as np
import pytest

from kickrender.circuit import read_circuit, shipped_circuits
from kickrender.engine import poles, rest_state
from tests.engine.circuits import RAILS, circuit, ladder, rc, resonator
from tests.engine.test_rest import floating
from tests.outside.second_writing import SecondWriting


def test_one_real_pole():
    (pole,) = poles(rc('constant = "0V"', "10k", "100n"))
    assert pole.frequency_hz == pytest.approx(1.0 / (2 * np.pi * 1e-3), rel=1e-12)
    assert (pole.q, pole.rings) == (0.5, False)
    assert pole.decay_s == pytest.approx(np.log(1000.0) * 1e-3, rel=1e-12)


def test_a_pair_is_given_once():
    chosen = circuit({"L": "inductor 10m out ground", "C": "capacitor 1u out ground", "R": "resistor 1k out ground"})
    (pole,) = poles(chosen)
    assert pole.rings
    assert pole.frequency_hz == pytest.approx(1.0 / (2 * np.pi * 1e-4), rel=1e-12)
    assert pole.q == pytest.approx(10.0, rel=1e-9)


def test_a_lossless_pair_never_decays():
    (pole,) = poles(circuit({"L": "inductor 10m out ground", "C": "capacitor 1u out ground"}))
    assert abs(pole.q) > 1e9
    assert abs(pole.decay_s) > 1e3


def test_a_growing_pole_has_a_negative_quality_and_decay():
    """An op-amp with more positive than negative feedback."""
    chosen = circuit(
        {
            "U": "opamp fet-input p m out plus minus",
            "R1": "resistor 10k out p",
            "R2": "resistor 10k p ground",
            "R3": "resistor 10k out m",
            "C": "capacitor 1u m ground",
        },
        nets=RAILS,
    )
    slowest = poles(chosen)[0]
    assert slowest.q < 0
    assert slowest.decay_s < 0


def test_poles_come_in_order_of_frequency():
    found = [pole.frequency_hz for pole in poles(ladder(8))]
    assert found == sorted(found)
    # an RC line of n sections, grounded at the input and open at the end: 4 sin^2((2k - 1) pi/(4n + 2))/RC
    k = np.arange(1, 9)
    true = 4 * np.sin((2 * k - 1) * np.pi / (4 * 8 + 2)) ** 2 / (1e3 * 10e-9) / (2 * np.pi)
    np.testing.assert_allclose(found, true, rtol=1e-9)


def test_nets_without_charge_have_no_poles():
    chosen = circuit(
        {
            "R1": "resistor 1k in a",
            "R2": "resistor 1k a out",
            "R3": "resistor 1k out ground",
            "C": "capacitor 1u out ground",
        },
        inputs={"in": 'constant = "0V"'},
    )
    (pole,) = poles(chosen)
    assert pole.frequency_hz == pytest.approx(1 / (2 * np.pi * 1e-6 * 2e3 / 3), rel=1e-9)


def test_junctions_count_with_their_slope_at_rest():
    """A diode at 1 mA is n V_T/I beside its series resistance: a small-signal conductance that moves the pole."""
    chosen = circuit(
        {"R": "resistor 10k in out", "D": "diode d out ground", "C": "capacitor 1u out ground"},
        inputs={"in": 'constant = "10.6V"'},
        models={"d": '{ kind = "diode", saturation_current = 1e-14 }'},
    )
    volts = rest_state(chosen)["out"]
    current = (10.6 - volts) / 1e4
    conductance = (current + 1e-14) / (1.380649e-23 * 298.15 / 1.602176634e-19) + 1e-4
    (pole,) = poles(chosen)
    assert pole.frequency_hz == pytest.approx(conductance / (2 * np.pi * 1e-6), rel=1e-6)


@pytest.mark.parametrize("name", [*shipped_circuits(), "resonator"])
def test_audible_poles_against_the_second_writing(name):
    """Eigenvalues of (-C^-1 times slopes) after the nets without charge are taken out, in plain numpy.

    Poles between 5 Hz and 20 kHz, which is where a designer looks.
    """
    chosen = resonator() if name == "resonator" else read_circuit(name).resolve()
    independent = SecondWriting(chosen)
    y = independent.rest()
    slopes = independent.slopes(0.0, y)[:, : independent.size]
    scale = np.abs(slopes).max(axis=1, keepdims=True)
    # time constants are the eigenvalues of slopes^-1 C
    constants = np.linalg.eigvals(
        -np.linalg.solve(slopes / scale, independent.capacitance[:, : independent.size] / scale)
    )
    s = 1.0 / constants[np.abs(constants) > 1.0 / (2 * np.pi * 20e3)]
    s = s[(np.abs(s) > 2 * np.pi * 5.0) & (s.imag >= -1e-9 * np.abs(s))]
    true = sorted(np.abs(s) / (2 * np.pi))
    found = [pole.frequency_hz for pole in poles(chosen) if 5.0 < pole.frequency_hz < 20e3]
    np.testing.assert_allclose(found, true, rtol=1e-5)


def test_without_a_rest_state_there_are_no_poles():
    from kickrender.errors import SolveError

    with pytest.raises(SolveError, match="no rest state"):
        poles(floating())
