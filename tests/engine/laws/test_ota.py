"""The transconductance amplifier: its law at 40 digits, its slopes, its published equation, and small circuits."""

from __future__ import annotations

from functools import partial

import mpmath
import numpy as np
import pytest
from scipy.special import wrightomega

from kickrender.circuit import read_circuit_text
from kickrender.circuit.records import Model, ResolvedPart
from kickrender.engine import rest_state, solve
from tests.engine.laws.one_part import ROOM_K, evaluate, thermal

VALUES = {"saturation_current": 1e-14, "ideality": 1.1, "headroom_high": 1.0, "headroom_low": 0.5, "band_gap": 1.11}
ROLES = ("plus", "minus", "bias", "out", "rail_high", "rail_low")
V_T = 0.02569257912108585


def part() -> ResolvedPart:
    return ResolvedPart("U", "ota", {role: role for role in ROLES}, {}, Model("m", "ota", VALUES))


def law(*volts: mpmath.mpf) -> dict[str, mpmath.mpf]:
    """Currents into the nets of `out`, `bias` and the lower rail, written out again, at 25 C."""
    plus, minus, bias, out, high, low = volts
    v_t, knee = thermal(ROOM_K), mpmath.mpf("0.05")
    above, below = out - (high - VALUES["headroom_high"]), low + VALUES["headroom_low"] - out
    i_b = VALUES["saturation_current"] * mpmath.expm1((bias - low) / (VALUES["ideality"] * v_t))
    leak = mpmath.mpf("1e-12") * (bias - low)
    share = mpmath.tanh((plus - minus) / (2 * v_t)) - mpmath.exp(above / knee) + mpmath.exp(below / knee)
    return {"out": i_b * share, "bias": -i_b - leak, "rail_low": i_b + leak}


def slopes_of(volts: list[mpmath.mpf]) -> dict[tuple[str, str], mpmath.mpf]:
    """Central differences of every current by every voltage."""

    def current(net: str, column: int, v: mpmath.mpf) -> mpmath.mpf:
        return law(*(v if k == column else volt for k, volt in enumerate(volts)))[net]

    return {
        (net, role): mpmath.diff(partial(current, net, column), volts[column], h=mpmath.mpf("1e-18"))
        for column, role in enumerate(ROLES)
        for net in ("out", "bias", "rail_low")
    }


POINTS = [
    (difference + 1.0, 1.0, bias, out, 9.0, -9.0)
    for difference in (-0.3, -0.02, 0.0, 0.001, 0.05)
    for bias in (-9.2, -8.6, -8.4)
    for out in (-8.6, -8.0, 0.5, 7.9, 8.1)
]


def test_currents_and_slopes_at_40_digits() -> None:
    """Against mpmath; the slopes against central differences of the law at 40 digits."""
    with mpmath.workdps(40):
        for point in POINTS:
            found = evaluate(part(), dict(zip(ROLES, point, strict=True)))
            exact = [mpmath.mpf(v) for v in point]
            truth = law(*exact)
            size = max(abs(current) for current in truth.values())
            for net, current in truth.items():
                assert found.into[net] == pytest.approx(float(current), abs=float(1e-13 * size))
            slopes = slopes_of(exact)
            size = max(abs(slope) for slope in slopes.values())
            for at, slope in slopes.items():
                assert found.slope.get(at, 0.0) == pytest.approx(float(slope), abs=float(1e-13 * size))


def test_published_tanh_law() -> None:
    """i = I_B tanh(v_d/(2 V_T)), transconductance I_B/(2 V_T) at the origin: 9.73 mS for 0.5 mA at 25 C.

    Source: P. R. Gray and R. G. Meyer, Analysis and Design of Analog Integrated Circuits, chapter 3; from memory.
    """
    bias = -9.0 + VALUES["ideality"] * V_T * np.log1p(0.5e-3 / VALUES["saturation_current"])
    still = {"minus": 0.0, "bias": bias, "out": 0.0, "rail_high": 9.0, "rail_low": -9.0}
    for v_d in (-0.2, -0.0257, 0.01, 0.06):
        found = evaluate(part(), {**still, "plus": v_d})
        assert found.into["out"] == pytest.approx(0.5e-3 * np.tanh(v_d / (2.0 * V_T)), rel=1e-9)
    found = evaluate(part(), {**still, "plus": 0.0})
    assert found.slope["out", "plus"] == pytest.approx(9.73e-3, rel=1e-3)


BENCH = """
    [nets]
    high = "9V"
    low = "-9V"
    [parts]
    R_bias = { kind = "resistor", value = "100k", between = ["high", "bias"] }
    U = { kind = "ota", model = "m", plus = "PLUS", minus = "MINUS", bias = "bias", out = "out", rails = RAILS }
    LOAD
    [models.m]
    kind = "ota"
    saturation_current = "10fA"
    headroom_high = "1V"
    headroom_low = "1V"
    [output]
    net = "out"
    """.replace("RAILS", '["high", "low"]')


def bias_current() -> float:
    """Through 100 kohm and the bias junction across 18 V, by the Wright omega function. [A]"""
    r, i_s = 100e3, 1e-14
    return float(V_T / r * wrightomega(np.log(i_s * r / V_T) + (18.0 + i_s * r) / V_T).real - i_s)


@pytest.mark.parametrize("u", [-0.06, -0.01, 0.002, 0.03, 0.2])
def test_voltage_amplifier(u: float) -> None:
    """u into the difference, a resistor at the output: v = R I_B tanh(u/(2 V_T)), well inside the rails."""
    text = BENCH.replace("PLUS", "in").replace("MINUS", "ground")
    load = 'R = { kind = "resistor", value = "10k", between = ["out", "ground"] }'
    circuit = read_circuit_text(f"[inputs.in]\nconstant = {u}\n" + text.replace("LOAD", load)).resolve()
    assert rest_state(circuit)["out"] == pytest.approx(10e3 * bias_current() * np.tanh(u / (2.0 * V_T)), rel=1e-8)


def test_follower_with_a_capacitor() -> None:
    """Output tied to the inverting input, a capacitor to ground, the input stepped: sinh(e/(2 V_T)) dies exponentially.

    C de/dt = -I_B tanh(e/(2 V_T)) integrates to sinh(e/(2 V_T)) = sinh(e_0/(2 V_T)) exp(-I_B t/(2 V_T C)).
    """
    text = BENCH.replace("PLUS", "in").replace("MINUS", "out")
    load = 'C = { kind = "capacitor", value = "100n", between = ["out", "ground"] }'
    load += '\nR = { kind = "resistor", value = "1T", between = ["out", "ground"] }'
    wave = '[inputs.in]\npoints = [[0, 0], ["1us", "0.4V"]]\n'
    solution = solve(read_circuit_text(wave + text.replace("LOAD", load)).resolve(), 0.4e-3, tolerance=1e-9)
    rate, first = 1e6, 10
    error = 0.4 - solution.sample(rate, 380, first)
    times = np.arange(380) / rate
    growth = np.sinh(error[0] / (2.0 * V_T)) * np.exp(-bias_current() * times / (2.0 * V_T * 100e-9))
    assert error == pytest.approx(2.0 * V_T * np.arcsinh(growth), abs=2e-7)
    assert error[-1] < 0.05 * error[0]


@pytest.mark.parametrize(("u", "limit"), [("0.5V", 8.0), ("-0.5V", -8.0)])
def test_output_stops_inside_the_rails(u: str, limit: float) -> None:
    """Fully driven into 1 Mohm: tanh - exp((v - V_hi)/50 mV) = v/(R I_B) at rest, solved for v - V_hi."""
    text = BENCH.replace("PLUS", "in").replace("MINUS", "ground")
    load = 'R = { kind = "resistor", value = "1M", between = ["out", "ground"] }'
    found = rest_state(read_circuit_text(f'[inputs.in]\nconstant = "{u}"\n' + text.replace("LOAD", load)).resolve())
    v = abs(found["out"])
    left = np.tanh(0.5 / (2.0 * V_T)) - v / (1e6 * bias_current())
    assert v == pytest.approx(abs(limit) + 0.05 * np.log(left), rel=1e-9)
    assert found["out"] * limit > 0.0


def test_no_bias_no_output() -> None:
    """Without bias current the output is open and its load rests at ground."""
    text = BENCH.replace("PLUS", "in").replace("MINUS", "ground").replace('["high", "bias"]', '["low", "bias"]')
    load = 'R = { kind = "resistor", value = "1M", between = ["out", "ground"] }'
    found = rest_state(read_circuit_text('[inputs.in]\nconstant = "1V"\n' + text.replace("LOAD", load)).resolve())
    assert found["out"] == pytest.approx(0.0, abs=1e-9)
