"""Every nonlinear part kind's law written a second time, for mpmath: the table that the law tests walk.

One row per kind that takes a device model: its law, the models and voltages to try it at. A kind of the engine's
table of stamps without a row here (or among `LINEAR`) fails the tests.

A law takes the model's values, the voltages and the temperature, and returns the current *into* every net from the
part (which is f of C x' = f), an op-amp's output under `net.driven` its rate in V/s; and a yardstick, the size of
the largest term that cancels in them, to measure errors by.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import mpmath
import numpy as np

Volts = Mapping[str, Any]
Values = Mapping[str, float]

LINEAR = {
    "resistor",
    "switch",
    "pot",
    "capacitor",
    "inductor",
    "transformer",
    "controlled-voltage",
    "controlled-current",
}
G_MIN = mpmath.mpf("1e-12")  # [S] across every junction
KNEE = mpmath.mpf("0.05")  # [V]
T0 = mpmath.mpf("298.15")


def thermal(temperature_k: float) -> mpmath.mpf:
    return mpmath.mpf("1.380649e-23") * mpmath.mpf(temperature_k) / mpmath.mpf("1.602176634e-19")


def bounded_exp(x: mpmath.mpf) -> mpmath.mpf:
    """exp, continued linearly above 80."""
    return mpmath.exp(x) if x <= 80 else mpmath.exp(80) * (1 + x - 80)


def saturation(values: Values, temperature_k: float, key: str = "saturation_current") -> mpmath.mpf:
    ratio, n = mpmath.mpf(temperature_k) / T0, mpmath.mpf(values["ideality"])
    gap = mpmath.mpf(values["band_gap"])
    current = mpmath.mpf(values.get(key, values["saturation_current"]))
    return current * ratio ** (3 / n) * mpmath.exp((ratio - 1) * gap / (n * thermal(temperature_k)))


def diode(values: Values, v: Volts, temperature_k: float) -> tuple[dict[str, Any], Any]:
    inner = "X.junction" if values["series_resistance"] else "anode"
    across = v[inner] - v["cathode"]
    i_s = saturation(values, temperature_k)
    i = i_s * (bounded_exp(across / (values["ideality"] * thermal(temperature_k))) - 1)
    total = i + G_MIN * across
    rows = {inner: -total, "cathode": total}
    through = 0
    if values["series_resistance"]:
        ohm = mpmath.mpf(values["series_resistance"])
        rows["anode"] = -(v["anode"] - v[inner]) / ohm
        rows[inner] -= rows["anode"]
        through = (abs(v["anode"]) + abs(v[inner])) / ohm
    return rows, abs(i) + i_s + through


def transistor(sign: int, values: Values, v: Volts, temperature_k: float) -> tuple[dict[str, Any], Any]:
    scale = values["ideality"] * thermal(temperature_k)
    v_be, v_bc = sign * (v["base"] - v["emitter"]), sign * (v["base"] - v["collector"])
    i_f = saturation(values, temperature_k) * (bounded_exp(v_be / scale) - 1)
    i_r = saturation(values, temperature_k, "reverse_saturation_current") * (bounded_exp(v_bc / scale) - 1)
    early = 1 - v_bc / mpmath.mpf(values["early_voltage"]) if "early_voltage" in values else mpmath.mpf(1)
    i_c = (i_f - i_r) * early - i_r / mpmath.mpf(values["reverse_gain"])
    i_b = i_f / mpmath.mpf(values["forward_gain"]) + i_r / mpmath.mpf(values["reverse_gain"])
    leak_e, leak_c = G_MIN * v_be, G_MIN * v_bc
    rows = {
        "collector": -sign * (i_c - leak_c),
        "base": -sign * (i_b + leak_e + leak_c),
        "emitter": sign * (i_c + i_b + leak_e),
    }
    size = (abs(i_f) + abs(i_r)) * abs(early) + abs(i_r / mpmath.mpf(values["reverse_gain"]))
    return rows, size + mpmath.mpf(values["saturation_current"])


def opamp(values: Values, v: Volts, temperature_k: float) -> tuple[dict[str, Any], Any]:
    slew, w_t = mpmath.mpf(values["slew_rate"]), 2 * mpmath.pi * mpmath.mpf(values["gain_bandwidth"])
    high = v["rail_high"] - mpmath.mpf(values["headroom_high"])
    low = v["rail_low"] + mpmath.mpf(values["headroom_low"])
    drive = w_t * (v["plus"] - v["minus"] - v["out"] / mpmath.mpf(values["dc_gain"])) / slew
    above, below = bounded_exp((v["out"] - high) / KNEE), bounded_exp((low - v["out"]) / KNEE)
    # at a large drive one rounding of a voltage moves the tanh by its argument's own rounding
    size = slew * (1 + above + below) + w_t * (abs(v["plus"]) + abs(v["minus"])) * mpmath.sech(drive) ** 2
    return {"out.driven": slew * mpmath.tanh(drive) - slew * above + slew * below}, size


def jfet(sign: int, values: Values, v: Volts, temperature_k: float) -> tuple[dict[str, Any], Any]:
    v_gs, v_gd = sign * (v["gate"] - v["source"]), sign * (v["gate"] - v["drain"])
    pinch = mpmath.mpf(values["pinch_off"])
    beta = mpmath.mpf(values["drain_current"]) / pinch**2
    growth = 1 + abs(v_gs - v_gd) / mpmath.mpf(values["early_voltage"]) if "early_voltage" in values else 1
    ends = [max(end + pinch, mpmath.mpf(0)) ** 2 * beta * growth for end in (v_gs, v_gd)]
    channel = ends[0] - ends[1]
    scale, i_s = values["ideality"] * thermal(temperature_k), saturation(values, temperature_k)
    to_source, to_drain = (i_s * (bounded_exp(end / scale) - 1) + G_MIN * end for end in (v_gs, v_gd))
    rows = {
        "drain": -sign * (channel - to_drain),
        "source": sign * (channel + to_source),
        "gate": -sign * (to_source + to_drain),
    }
    return rows, sum(ends) + abs(to_source) + abs(to_drain) + i_s


def zener(values: Values, v: Volts, temperature_k: float) -> tuple[dict[str, Any], Any]:
    rows, size = diode(values, v, temperature_k)
    inner = "X.junction" if values["series_resistance"] else "anode"
    across = v[inner] - v["cathode"]
    scale = mpmath.mpf(values["breakdown_ideality"]) * thermal(temperature_k)
    breakdown = mpmath.mpf(values["breakdown_voltage"])
    current = mpmath.mpf(values["breakdown_current"])
    back = current * (mpmath.exp(-(across + breakdown) / scale) - mpmath.exp(-breakdown / scale))
    rows[inner] += back
    rows["cathode"] -= back
    return rows, size + abs(back)


def ota(values: Values, v: Volts, temperature_k: float) -> tuple[dict[str, Any], Any]:
    i_s, above_low = saturation(values, temperature_k), v["bias"] - v["rail_low"]
    i_b = i_s * (bounded_exp(above_low / (values["ideality"] * thermal(temperature_k))) - 1)
    high = v["rail_high"] - mpmath.mpf(values["headroom_high"])
    low = v["rail_low"] + mpmath.mpf(values["headroom_low"])
    above, below = bounded_exp((v["out"] - high) / KNEE), bounded_exp((low - v["out"]) / KNEE)
    share = mpmath.tanh((v["plus"] - v["minus"]) / (2 * thermal(temperature_k))) - above + below
    into_bias = i_b + G_MIN * above_low
    return {"out": i_b * share, "bias": -into_bias, "rail_low": into_bias}, (abs(i_b) + i_s) * (1 + above + below)


@dataclass(frozen=True)
class Law:
    """law : the equations. models : sets of values. ranges : net -> lowest and highest voltage to try. [V]"""

    law: Callable[[Values, Volts, float], tuple[dict[str, Any], Any]]
    models: tuple[Values, ...]
    ranges: Mapping[str, tuple[float, float]]
    further: tuple[Mapping[str, float], ...] = ()

    def points(self, count: int = 24) -> list[dict[str, float]]:
        """Random voltages, the same every time, and the further ones."""
        random = np.random.default_rng(7)
        found = [{net: float(random.uniform(*span)) for net, span in self.ranges.items()} for _ in range(count)]
        return [*found, *map(dict, self.further)]


_PLAIN_DIODE = {
    "saturation_current": 2.5e-9,
    "ideality": 1.75,
    "series_resistance": 0.0,
    "capacitance": 0.0,
    "band_gap": 1.11,
}
_FULL_DIODE = {**_PLAIN_DIODE, "series_resistance": 0.6, "capacitance": 4e-12, "band_gap": 0.67}
_PLAIN_TRANSISTOR = {
    "saturation_current": 1e-14,
    "forward_gain": 107.0,
    "reverse_gain": 0.05,
    "ideality": 1.0,
    "reverse_saturation_current": 1e-14,
    "base_emitter_capacitance": 0.0,
    "base_collector_capacitance": 0.0,
    "band_gap": 1.11,
}
_FULL_TRANSISTOR = {
    **_PLAIN_TRANSISTOR,
    "ideality": 1.2,
    "early_voltage": 74.0,
    "reverse_saturation_current": 3e-14,
    "base_emitter_capacitance": 8e-12,
    "base_collector_capacitance": 4e-12,
}
_TRANSISTOR_MODELS = (_PLAIN_TRANSISTOR, _FULL_TRANSISTOR, {**_FULL_TRANSISTOR, "reverse_saturation_current": 0.0})
_TRANSISTOR_RANGES = {"collector": (-1.0, 1.0), "base": (-0.4, 0.4), "emitter": (-0.4, 0.4)}
_TRANSISTOR_POINTS = (
    {"collector": 0.0, "base": 0.0, "emitter": 0.0},
    {"collector": 12.0, "base": 0.65, "emitter": 0.0},
    {"collector": 0.05, "base": 0.72, "emitter": 0.0},
    {"collector": -12.0, "base": -0.65, "emitter": 0.0},
    {"collector": -3.0, "base": 2.0, "emitter": -2.0},  # beyond the exponential's reach
)
_JFET = {
    "drain_current": 5e-3,
    "pinch_off": 2.0,
    "saturation_current": 1e-14,
    "ideality": 1.0,
    "gate_source_capacitance": 0.0,
    "gate_drain_capacitance": 0.0,
    "band_gap": 1.11,
}
_JFET_RANGES = {"drain": (-2.0, 2.0), "gate": (-2.5, 0.5), "source": (-1.0, 1.0)}

LAWS: Mapping[str, Law] = {
    "diode": Law(
        diode,
        (_PLAIN_DIODE, _FULL_DIODE),
        {"anode": (-0.5, 0.6), "cathode": (-0.2, 0.1), "X.junction": (-0.5, 0.6)},
        (
            {"anode": 0.0, "cathode": 0.0, "X.junction": 0.0},
            {"anode": 1e-6, "cathode": 0.0, "X.junction": 1e-6},
            {"anode": -40.0, "cathode": 5.0, "X.junction": -40.0},
            {"anode": 7.0, "cathode": 0.0, "X.junction": 6.5},  # beyond the exponential's reach
        ),
    ),
    "npn": Law(lambda *given: transistor(1, *given), _TRANSISTOR_MODELS, _TRANSISTOR_RANGES, _TRANSISTOR_POINTS),
    "pnp": Law(lambda *given: transistor(-1, *given), _TRANSISTOR_MODELS, _TRANSISTOR_RANGES, _TRANSISTOR_POINTS),
    "opamp": Law(
        opamp,
        (
            {
                "gain_bandwidth": 3e6,
                "slew_rate": 13e6,
                "headroom_high": 1.5,
                "headroom_low": 1.2,
                "dc_gain": 2e5,
            },
        ),
        {
            "plus": (-0.5, 0.5),
            "minus": (-0.5, 0.5),
            "out": (-11.0, 11.0),
            "rail_high": (11.0, 13.0),
            "rail_low": (-13.0, -11.0),
        },
        (
            {"plus": 0.0, "minus": 0.0, "out": 0.0, "rail_high": 12.0, "rail_low": -12.0},
            {"plus": 1e-3, "minus": 2e-3, "out": 10.4, "rail_high": 12.0, "rail_low": -12.0},
            {"plus": -5.0, "minus": 5.0, "out": -10.7, "rail_high": 12.0, "rail_low": -12.0},
            {"plus": 0.0, "minus": 0.0, "out": 30.0, "rail_high": 12.0, "rail_low": -12.0},
        ),
    ),
    "n-jfet": Law(
        lambda *given: jfet(1, *given), (_JFET, {**_JFET, "early_voltage": 50.0, "ideality": 1.1}), _JFET_RANGES
    ),
    "p-jfet": Law(
        lambda *given: jfet(-1, *given),
        (_JFET, {**_JFET, "early_voltage": 50.0}),
        {net: (-high, -low) for net, (low, high) in _JFET_RANGES.items()},
    ),
    "zener": Law(
        zener,
        tuple(
            {**model, "breakdown_voltage": 5.6, "breakdown_current": 5e-3, "breakdown_ideality": n}
            for model, n in ((_PLAIN_DIODE, 1.0), (_FULL_DIODE, 2.5))
        ),
        {"anode": (-5.8, 0.6), "cathode": (-0.2, 0.1), "X.junction": (-5.8, 0.6)},
        ({"anode": 0.0, "cathode": 0.0, "X.junction": 0.0},),
    ),
    "ota": Law(
        ota,
        (
            {
                "saturation_current": 1e-14,
                "ideality": 1.0,
                "headroom_high": 1.0,
                "headroom_low": 0.8,
                "band_gap": 1.11,
            },
        ),
        {
            "plus": (-0.1, 0.1),
            "minus": (-0.1, 0.1),
            "bias": (-11.5, -11.2),
            "out": (-11.2, 11.2),
            "rail_high": (11.9, 12.1),
            "rail_low": (-12.1, -11.9),
        },
    ),
}
