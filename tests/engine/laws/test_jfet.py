"""The field-effect transistor: its law at 40 digits, its slopes, its published equations, and small circuits."""

from __future__ import annotations

from functools import partial

import mpmath
import numpy as np
import pytest

from kickrender.circuit import read_circuit_text
from kickrender.circuit.records import Model, ResolvedPart
from kickrender.engine import rest_state, solve
from tests.engine.laws.one_part import ROOM_K, evaluate, thermal

VALUES = {
    "drain_current": 4e-3,
    "pinch_off": 2.0,
    "saturation_current": 1e-14,
    "ideality": 1.1,
    "early_voltage": 80.0,
    "band_gap": 1.11,
}
PLAIN = {key: value for key, value in VALUES.items() if key != "early_voltage"}
NODES = ("d", "g", "s")


def part(kind: str = "n-jfet", values: dict[str, float] = VALUES) -> ResolvedPart:
    return ResolvedPart(
        "J", kind, dict(zip(("drain", "gate", "source"), NODES, strict=True)), {}, Model("m", kind, values)
    )


def law(values: dict[str, float], d: mpmath.mpf, g: mpmath.mpf, s: mpmath.mpf) -> dict[str, mpmath.mpf]:
    """Currents into the three nets of an n-channel, written out again, with the smallest conductances."""
    v_p = mpmath.mpf(values["pinch_off"])
    at_source, at_drain = max(g - s + v_p, 0), max(g - d + v_p, 0)
    early = 1 + abs(d - s) / values["early_voltage"] if "early_voltage" in values else 1
    channel = values["drain_current"] / v_p**2 * (at_source**2 - at_drain**2) * early
    scale = values["ideality"] * thermal(ROOM_K)
    i_s = mpmath.mpf(values["saturation_current"])
    to_source, to_drain = (i_s * mpmath.expm1((g - net) / scale) + mpmath.mpf("1e-12") * (g - net) for net in (s, d))
    return {"d": -channel + to_drain, "s": channel + to_source, "g": -to_source - to_drain}


def slopes_of(values: dict[str, float], volts: list[mpmath.mpf]) -> dict[tuple[str, str], mpmath.mpf]:
    """Central differences of every current by every voltage."""

    def current(net: str, column: int, v: mpmath.mpf) -> mpmath.mpf:
        return law(values, *(v if k == column else volt for k, volt in enumerate(volts)))[net]

    return {
        (net, name): mpmath.diff(partial(current, net, column), volts[column], h=mpmath.mpf("1e-18"))
        for column, name in enumerate(NODES)
        for net in NODES
    }


POINTS = [
    (v_d, v_g, 0.3)
    for v_g in (-3.0, -1.7, -1.699, -1.2, 0.3, 0.6, 1.0)
    for v_d in (-4.7, -2.1, -0.7, 0.2, 0.299999, 0.3, 0.300001, 0.4, 1.3, 5.3)
    if v_g - v_d < 1.1  # a junction's current stays one that could flow
]


@pytest.mark.parametrize("values", [VALUES, PLAIN], ids=["early", "plain"])
def test_currents_and_slopes_at_40_digits(values: dict[str, float]) -> None:
    """Against mpmath; the slopes against central differences of the law at 40 digits.

    The allowed error is that of voltages (some 1e-15 V) and exponentials rounded to double precision.
    """
    with mpmath.workdps(40):
        for point in POINTS:
            found = evaluate(part(values=values), dict(zip(NODES, point, strict=True)))
            exact = [mpmath.mpf(v) for v in point]
            truth = law(values, *exact)
            slopes = slopes_of(values, exact)
            steepest = max(abs(slope) for slope in slopes.values())
            size = max(abs(current) for current in truth.values())
            for net in NODES:
                allowed = float(2e-14 * size + 2e-15 * steepest)
                assert found.into[net] == pytest.approx(float(truth[net]), abs=allowed)
            for at, slope in slopes.items():
                assert found.slope[at] == pytest.approx(float(slope), abs=float(2e-14 * steepest + 1e-17))


@pytest.mark.parametrize("point", POINTS[::5])
def test_p_channel_is_the_n_channel_reversed(point: tuple[float, float, float]) -> None:
    n = evaluate(part("n-jfet"), dict(zip(NODES, point, strict=True)))
    p = evaluate(part("p-jfet"), {net: -v for net, v in zip(NODES, point, strict=True)})
    assert p.into == {net: -current for net, current in n.into.items()}
    assert p.slope == n.slope


@pytest.mark.parametrize("point", POINTS[::7])
def test_drain_and_source_change_places(point: tuple[float, float, float]) -> None:
    d, g, s = point
    one, other = evaluate(part(), {"d": d, "g": g, "s": s}), evaluate(part(), {"d": s, "g": g, "s": d})
    assert one.into["d"] == other.into["s"]
    assert one.slope["d", "g"] == pytest.approx(other.slope["s", "g"], rel=1e-14)


@pytest.mark.parametrize("v_gs", [-1.9, -1.0, -0.25, 0.0])
def test_published_square_law(v_gs: float) -> None:
    """Saturated I_DSS (1 - v_gs/V_P)^2, triode I_DSS (2 (1 - v_gs/V_P) v_ds/-V_P - (v_ds/V_P)^2), V_P < 0.

    Source: W. Shockley, Proceedings of the IRE 40 (1952), in the square-law form of the textbooks; from memory.
    """
    i_dss, v_p = PLAIN["drain_current"], -PLAIN["pinch_off"]
    pinched = v_gs - v_p
    for v_ds in (0.1 * pinched, 0.5 * pinched, 0.99 * pinched):
        triode = i_dss * (2.0 * (1.0 - v_gs / v_p) * v_ds / -v_p - (v_ds / v_p) ** 2)
        found = evaluate(part(values=PLAIN), {"d": v_ds, "g": v_gs, "s": 0.0})
        assert found.into["s"] == pytest.approx(triode, abs=1e-11)  # the gate leaks some 1e-12 A
    for v_ds in (pinched, 2.0 * pinched, pinched + 5.0):
        found = evaluate(part(values=PLAIN), {"d": v_ds, "g": v_gs, "s": 0.0})
        assert found.into["s"] == pytest.approx(i_dss * (1.0 - v_gs / v_p) ** 2, abs=1e-11)


def test_resistance_near_zero() -> None:
    """Around v_ds = 0 the channel is a resistance V_P^2/(2 I_DSS (v_gs + V_P)): common practice, no source."""
    found = evaluate(part(), {"d": 0.0, "g": -1.0, "s": 0.0})
    assert -found.slope["d", "d"] == pytest.approx(2.0 * 4e-3 * 1.0 / 4.0, rel=1e-8)


MODELS = """
[models.plain]
kind = "KIND"
drain_current = "4mA"
pinch_off = "2V"
saturation_current = "10fA"
"""


@pytest.mark.parametrize(("kind", "sign"), [("n-jfet", 1.0), ("p-jfet", -1.0)])
@pytest.mark.parametrize(("drain", "source"), [("out", "ground"), ("ground", "out")])
@pytest.mark.parametrize("u", [-8.0, -0.8, -0.01, 0.3, 0.8, 3.0])
def test_divider_follows_the_quadratic(kind: str, sign: float, drain: str, source: str, u: float) -> None:
    """u through 4.7 kohm into a channel as resistance: (u - v)/R = B v (2 (v_g + V_P) - v), solved for v.

    The same whichever end is called drain; the gate is 1 V inside pinch-off, and both ends conduct.
    """
    circuit = read_circuit_text(
        f"""
        [nets]
        in = {u * sign}
        gate = {-sign}
        [parts]
        R = {{ kind = "resistor", value = "4k7", between = ["in", "out"] }}
        J = {{ kind = "{kind}", model = "plain", drain = "{drain}", gate = "gate", source = "{source}" }}
        [output]
        net = "out"
        """
        + MODELS.replace("KIND", kind)
    ).resolve()
    slope = 4.7e3 * 4e-3 / 4.0
    v = ((1.0 + 2.0 * slope) - np.sqrt((1.0 + 2.0 * slope) ** 2 - 4.0 * slope * u)) / (2.0 * slope)
    assert v < 1.0
    assert rest_state(circuit)["out"] == pytest.approx(sign * v, abs=2e-9)


@pytest.mark.parametrize(("kind", "supply"), [("n-jfet", 15.0), ("p-jfet", -15.0)])
def test_self_bias(kind: str, supply: float) -> None:
    """A source resistor R biases the gate: i = I_DSS (1 - i R/V_P)^2, a quadratic in i."""
    circuit = read_circuit_text(
        f"""
        [nets]
        supply = {supply}
        [parts]
        J = {{ kind = "{kind}", model = "plain", drain = "supply", gate = "ground", source = "out" }}
        R = {{ kind = "resistor", value = "1k", between = ["out", "ground"] }}
        [output]
        net = "out"
        """
        + MODELS.replace("KIND", kind)
    ).resolve()
    i_dss, r, v_p = 4e-3, 1e3, 2.0
    b = 2.0 * r / v_p + 1.0 / i_dss
    current = (b - np.sqrt(b * b - 4.0 * (r / v_p) ** 2)) / (2.0 * (r / v_p) ** 2)
    assert rest_state(circuit)["out"] == pytest.approx(np.sign(supply) * current * r, rel=1e-7)


def test_switching_through_pinch_off_converges() -> None:
    """A gate driven far past pinch-off and back: the law's kink costs steps, not accuracy (against 1e-10)."""
    circuit = read_circuit_text(
        """
        [inputs.gate]
        sine = { amplitude = "3V", frequency = "200Hz", offset = "-2.6V" }
        [nets]
        supply = "9V"
        [parts]
        R = { kind = "resistor", value = "2k2", between = ["supply", "out"] }
        C = { kind = "capacitor", value = "47n", between = ["out", "ground"] }
        J = { kind = "n-jfet", model = "small-n-jfet", drain = "out", gate = "gate", source = "ground" }
        [output]
        net = "out"
        """
    ).resolve()
    usual = solve(circuit, 0.02)
    found, truth = usual.sample(96_000, 1900), solve(circuit, 0.02, tolerance=1e-10).sample(96_000, 1900)
    assert np.ptp(truth) > 3.0
    assert np.sqrt(np.mean((found - truth) ** 2)) < 1e-5 * np.max(np.abs(truth))
    assert usual.counters["steps"] < 1200
