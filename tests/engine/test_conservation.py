"""What nature keeps, the solver must keep: charge on capacitors, energy between a coil and a capacitor."""

from __future__ import annotations

import numpy as np
import pytest

from kickrender.engine import DEFAULT_TOLERANCE, rest_state, solve
from tests.engine.circuits import circuit

STILL = 'constant = "0V"'


def test_charge_on_a_lone_capacitor_stays():
    """Beside 1 Tohm, tau is 1e6 s: in a second a millionth leaks, by e^(-t/RC), and nothing else."""
    chosen = circuit({"C": "capacitor 1u out ground", "S": "switch false out in"}, inputs={"in": STILL})
    solution = solve(chosen, 1.0, start={"out": 3.0}, tolerance=1e-10)
    found = solution.sample(100.0, 101)
    np.testing.assert_allclose(found, 3.0 * np.exp(-np.arange(101) / 100.0 / 1e6), rtol=1e-12)


def test_charge_on_a_floating_capacitor_moves_with_its_plates():
    """Driven from one side, open at the other: v_out = v_in + const, whatever the input does."""
    chosen = circuit(
        {"C": "capacitor 100n in out", "S": "switch false out ground"},
        inputs={"in": 'sine = { amplitude = "3V", frequency = "123Hz" }'},
    )
    found = solve(chosen, 0.1, start={"out": 1.0}, tolerance=1e-10).sample(48_000.0, 4800)
    driven = 3.0 * np.sin(2 * np.pi * 123.0 * np.arange(4800) / 48_000.0)
    np.testing.assert_allclose(found, 1.0 + driven, rtol=0, atol=1e-5)  # 1 Tohm takes 1e-6 of it in 0.1 s


@pytest.mark.parametrize("sizes", [("1u", "330n"), ("1n", "1u")])
def test_charge_is_shared_not_lost(sizes):
    """Two capacitors through a resistor end at (C1 V1 + C2 V2)/(C1 + C2); the sum of charges never moves."""
    farads = [{"1u": 1e-6, "330n": 330e-9, "1n": 1e-9}[size] for size in sizes]
    chosen = circuit(
        {
            "C1": f"capacitor {sizes[0]} a ground",
            "C2": f"capacitor {sizes[1]} out ground",
            "R": "resistor 10k a out",
            "S": "switch false a in",
        },
        inputs={"in": STILL},
    )
    solution = solve(chosen, 0.1, probes=("a",), start={"a": 5.0, "out": -1.0})
    a, out = (solution.sample(48_000.0, 4800, net=net) for net in ("a", "out"))
    charge = farads[0] * a + farads[1] * out
    # 1 Tohm takes a little: below 1e-4 in 0.1 s from 1 nF
    np.testing.assert_allclose(charge, charge[0], rtol=2e-4 if min(farads) < 1e-8 else 1e-6)
    assert out[-1] == pytest.approx(charge[0] / sum(farads), rel=1e-3)


PERIODS = 1000
DRIFT = {1e-8: 2e-6, DEFAULT_TOLERANCE: 5e-4}  # stated bounds on the energy lost over 1,000 periods


@pytest.mark.parametrize("tolerance", DRIFT)
def test_energy_in_a_lossless_lc(tolerance):
    """Over 1,000 periods the energy drifts by less than stated: 2e-6 at 1e-8, 5e-4 (0.002 dB) at the default."""
    henry, farad, volts = 0.1, 1e-6, 2.0
    chosen = circuit({"L": "inductor 0.1 out ground", "C": "capacitor 1u out ground"})
    (current,) = set(rest_state(chosen)) - {"out"}
    period = 2 * np.pi * np.sqrt(henry * farad)
    solution = solve(chosen, PERIODS * period, probes=(current,), start={"out": volts}, tolerance=tolerance)
    count = 8 * PERIODS
    rate = 8.0 / period
    v, i = solution.sample(rate, count), solution.sample(rate, count, net=current)
    energy = 0.5 * farad * v**2 + 0.5 * henry * i**2
    assert np.max(np.abs(energy / energy[0] - 1.0)) < DRIFT[tolerance]
    # and the phase: after 1,000 periods the swing is still where it should be
    true = volts * np.cos(2 * np.pi * np.arange(count) / 8.0)
    assert np.max(np.abs(v - true)) < volts * 10 * DRIFT[tolerance]


def test_energy_drift_is_loss_or_gain_of_the_method_alone():
    """Halving the step by 32 times the tolerance loses 2^5 to 2^6 times less: the drift is the method's own error."""
    henry, farad = 0.1, 1e-6
    chosen = circuit({"L": "inductor 0.1 out ground", "C": "capacitor 1u out ground"})
    period = 2 * np.pi * np.sqrt(henry * farad)
    lost = []
    for tolerance in (1e-6, 1e-6 / 32):
        x = solve(chosen, 100 * period, start={"out": 1.0}, tolerance=tolerance).sample(8.0 / period, 801)
        lost.append(abs(x[800] - 1.0))
    assert 20.0 < lost[0] / lost[1] < 100.0
