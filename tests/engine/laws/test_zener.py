"""The zener diode: its law at 40 digits, its slope, what its keys mean, and a shunt regulator at rest."""

from __future__ import annotations

import math

import mpmath
import pytest
from scipy.optimize import brentq
from scipy.special import wrightomega

from kickrender.circuit import ResolvedCircuit, read_circuit_text
from kickrender.circuit.records import Model, ResolvedPart
from kickrender.engine import rest_state
from tests.engine.laws.one_part import evaluate, thermal

SOFT = {
    "saturation_current": 2e-15,
    "ideality": 1.2,
    "band_gap": 1.11,
    "breakdown_voltage": 4.7,
    "breakdown_current": 5e-3,
    "breakdown_ideality": 10.0,
}
SHARP = {**SOFT, "breakdown_voltage": 2.0, "breakdown_ideality": 1.0}


def part(values: dict[str, float]) -> ResolvedPart:
    return ResolvedPart("Z", "zener", {"anode": "a", "cathode": "c"}, {}, Model("m", "zener", values))


def law(values: dict[str, float], v: mpmath.mpf) -> mpmath.mpf:
    """Current from anode to cathode, written out again, with the smallest conductance, at 25 C."""
    v_t = thermal(298.15)
    back, v_b = values["breakdown_ideality"] * v_t, mpmath.mpf(values["breakdown_voltage"])
    forward = values["saturation_current"] * mpmath.expm1(v / (values["ideality"] * v_t))
    reverse = values["breakdown_current"] * (mpmath.exp(-(v + v_b) / back) - mpmath.exp(-v_b / back))
    return forward - reverse + mpmath.mpf("1e-12") * v


@pytest.mark.parametrize("values", [SOFT, SHARP], ids=["soft", "sharp"])
def test_current_and_slope_at_40_digits(values: dict[str, float]) -> None:
    """Against mpmath, the slope against central differences; error that of arguments rounded to double precision."""
    with mpmath.workdps(40):
        for share in (-1.06, -1.0, -0.9, -0.5, -0.01, 0.0, 0.01, 0.1, 0.15):
            v = share * values["breakdown_voltage"]
            found = evaluate(part(values), {"a": v + 0.25, "c": 0.25})
            exact = mpmath.mpf(v + 0.25) - mpmath.mpf("0.25")
            truth = float(law(values, exact))
            assert found.into["c"] == pytest.approx(truth, rel=3e-14, abs=1e-28)
            assert found.into["a"] == -found.into["c"]
            slope = float(mpmath.diff(lambda x: law(values, x), exact, h=mpmath.mpf("1e-18")))
            for at, sign in ((("a", "a"), -1), (("a", "c"), 1), (("c", "a"), 1), (("c", "c"), -1)):
                assert found.slope[at] == pytest.approx(sign * slope, rel=3e-14)


@pytest.mark.parametrize(("temperature_k", "values"), [(298.15, SOFT), (298.15, SHARP), (330.0, SHARP)])
def test_keys_mean_what_they_say(temperature_k: float, values: dict[str, float]) -> None:
    """The breakdown current flows at the breakdown voltage, ten times as much 2.3 n_B V_T further; none at 0 V."""
    decade = float(values["breakdown_ideality"] * thermal(temperature_k) * mpmath.log(10))
    for further, current in ((0.0, 5e-3), (decade, 50e-3)):
        found = evaluate(part(values), {"a": 0.0, "c": values["breakdown_voltage"] + further}, temperature_k)
        assert found.into["a"] == pytest.approx(current, rel=1e-7)
    assert evaluate(part(values), {"a": 0.0, "c": 0.0}, temperature_k).into["a"] == pytest.approx(0.0, abs=1e-30)


def test_forward_through_a_resistor() -> None:
    """Series resistor and forward junction have the exact solution i = (a/R) omega(ln(I_s R/a) + (V + I_s R)/a) - I_s.

    omega is the Wright omega function (scipy.special); breakdown and its 1e-12 S are far away.
    """
    circuit = regulator("-5V")
    a = 1.2 * 0.02569257912108585
    i_s, r = 2e-15, 1000.0
    current = a / r * wrightomega(math.log(i_s * r / a) + (5.0 + i_s * r) / a).real - i_s
    assert rest_state(circuit)["out"] == pytest.approx(-(5.0 - current * r), rel=1e-8)


@pytest.mark.parametrize("supply", ["5V", "9V", "24V"])
def test_shunt_regulator(supply: str) -> None:
    """1 kohm from the supply into the reversed diode: the node by bisection on the law (scipy brentq)."""
    volts = float(supply[:-1])
    node = brentq(lambda v: (volts - v) / 1000.0 + float(law(SOFT, mpmath.mpf(-v))), 0.0, volts, xtol=1e-13)
    assert rest_state(regulator(supply))["out"] == pytest.approx(node, rel=1e-9)


def regulator(supply: str) -> ResolvedCircuit:
    keys = "\n".join(f"{key} = {value}" for key, value in SOFT.items())
    return read_circuit_text(
        f"""
        [nets]
        supply = "{supply}"
        [parts]
        R = {{ kind = "resistor", value = "1k", between = ["supply", "out"] }}
        Z = {{ kind = "zener", model = "soft", anode = "ground", cathode = "out" }}
        [models.soft]
        kind = "zener"
        {keys}
        [output]
        net = "out"
        """
    ).resolve()
