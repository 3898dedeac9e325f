"""Starting from given voltages in place of the rest state."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.special import wrightomega

from kickrender.engine import rest_state, solve
from tests.engine.circuits import circuit, rc

STILL = 'constant = "0V"'


def test_a_charged_capacitor_discharges():
    """v(t) = v_0 e^(-t/(RC)), and before t = 0 the state it started from."""
    solution = solve(rc(STILL, "10k", "100n"), 5e-3, tolerance=1e-9, start={"out": 2.0})
    times = np.arange(240) / 48_000.0
    np.testing.assert_allclose(solution.sample(48_000.0, 240), 2.0 * np.exp(-times / 1e-3), rtol=0, atol=1e-9)
    np.testing.assert_array_equal(solution.sample(48_000.0, 3, first=-3), solution.rest["out"])
    assert solution.rest["out"] == pytest.approx(2.0, rel=1e-10)


def test_nets_without_charge_move_to_where_currents_balance():
    """A divider below a charged capacitor takes its share whatever voltage was asked for."""
    chosen = circuit(
        {
            "C": "capacitor 1u top ground",
            "R1": "resistor 3k top out",
            "D": "diode plain out below",
            "R2": "resistor 1k below ground",
            "R0": "resistor 1M in top",
        },
        inputs={"in": STILL},
        models={"plain": '{ kind = "diode", saturation_current = "1n" }'},
    )
    asked = ({}, {"out": 3.0, "below": 3.0}, {"out": -5.0, "below": -4.8})
    ends = [solve(chosen, 1e-3, start={"top": 5.0, **nets}, tolerance=1e-10).sample(48e3, 48) for nets in asked]
    np.testing.assert_allclose(ends[0], ends[2], rtol=1e-9)
    np.testing.assert_allclose(ends[0], ends[1], rtol=1e-9)
    true = 5.0 - 3e3 * _current(5.0, 4e3)
    assert ends[0][0] == pytest.approx(true, rel=1e-9)


def _current(volts: float, ohm: float) -> float:
    """Through a resistance and a diode of 1 nA, by Wright's omega function; g_min is below the test's tolerance."""
    scale = 1.380649e-23 * 298.15 / 1.602176634e-19
    return scale / ohm * wrightomega(np.log(1e-9 * ohm / scale) + (volts + 1e-9 * ohm) / scale) - 1e-9


def test_a_start_at_the_rest_state_changes_nothing():
    chosen = circuit(
        {
            "R1": "resistor 47k plus out",
            "Q": "npn small-npn out base ground",
            "R2": "resistor 1M plus base",
            "C": "capacitor 10n in base",
        },
        inputs={"in": 'pulse = { rest = "0V", strike = "1V", length = "1ms" }'},
        nets={"plus": "9V"},
    )
    rest = rest_state(chosen)
    given = {net: volts for net, volts in rest.items() if net not in ("plus", "in")}
    plain, started = solve(chosen, 5e-3), solve(chosen, 5e-3, start=given)
    np.testing.assert_allclose(started.sample(48_000.0, 240), plain.sample(48_000.0, 240), rtol=0, atol=1e-6)


def test_a_coil_starts_with_its_current():
    """i = i_0 e^(-t R/L) through R."""
    chosen = circuit({"L": "inductor 10m out ground", "R": "resistor 100 out ground"})
    (current,) = set(rest_state(chosen)) - {"out"}
    found = solve(chosen, 1e-3, start={current: 0.01}, tolerance=1e-9).sample(1e5, 100)
    np.testing.assert_allclose(found, -1.0 * np.exp(-np.arange(100) / 1e5 * 100.0 / 10e-3), rtol=0, atol=1e-8)


@pytest.mark.parametrize("keywords", [{"start": {"nowhere": 1.0}}, {"start": {"in": 1.0}}, {"probes": ("in",)}])
def test_nets_that_are_not_solved_for_are_refused(keywords):
    with pytest.raises(ValueError, match=r"net '(nowhere|in)' is not solved for; solved for: out"):
        solve(rc(STILL), 1e-3, **keywords)
