"""Static device facts against exact solutions and the trade's own figures.

Sources: SI 2019 constants; Wright's omega function (scipy.special), by which a junction behind a resistor has an exact
current (T. C. Banwell and A. Jayakumar, Electronics Letters 36 (2000), from memory); data/devices.json, whose points
were computed with mpmath at 40 digits; common practice where said so.
"""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
from scipy.special import lambertw, wrightomega

from kickrender.circuit import ResolvedCircuit
from kickrender.engine import rest_state
from kickrender.engine.physics import saturation_current, thermal_voltage
from tests.engine.circuits import circuit

DATA = json.loads((Path(__file__).parent / "data" / "devices.json").read_text())
POINTS = DATA["series_R_diode_oracle"]["rows"]
FORWARD = DATA["diode_forward_voltage_25C"]
ONE_VOLT = DATA["one_volt_through_100k_fact"]["solutions_25C"]
LEAK_S = 1e-12  # the smallest conductance across a junction, which the exact solutions do not have


def diode_behind(ohm: float, volts: float, model: str, temperature: str = "25C") -> ResolvedCircuit:
    return circuit(
        {"R": f"resistor {ohm!r} in out", "D": "diode d out ground"},
        inputs={"in": f"constant = {volts!r}"},
        models={"d": model},
        temperature=temperature,
    )


def model_of(saturation: float, ideality: float, series_ohm: float = 0.0) -> str:
    return (
        f'{{ kind = "diode", saturation_current = {saturation!r}, ideality = {ideality!r}, '
        f"series_resistance = {series_ohm!r} }}"
    )


def exact_current(volts: float, ohm: float, i_s: float, scale: float) -> float:
    """Through a resistance and a junction: (a/R) omega(ln(I_s R/a) + (V + I_s R)/a) - I_s. [A]"""
    return float(scale / ohm * wrightomega(np.log(i_s * ohm / scale) + (volts + i_s * ohm) / scale) - i_s)


@pytest.mark.parametrize("point", POINTS, ids=lambda point: f"{point[0]}-{point[3]:g}-{point[4]:g}")
def test_stored_points(point):
    """36 exact currents, to 1e-9 beside what flows through the smallest conductance."""
    _, i_s, ideality, ohm, volts, current, across = point
    found = rest_state(diode_behind(ohm, volts, model_of(i_s, ideality)))["out"]
    leak = abs(across) * LEAK_S
    assert (volts - found) / ohm == pytest.approx(current, rel=1e-9, abs=1.01 * leak + 1e-16 * abs(volts) / ohm)
    assert found == pytest.approx(across, rel=1e-9, abs=1.01 * leak * ohm)


@pytest.mark.parametrize("volts", [-3.0, 0.2, 0.5, 0.7, 2.0, 12.0, 100.0])
@pytest.mark.parametrize("series_ohm", [0.5, 700.0])
@pytest.mark.parametrize("temperature_c", [0, 25, 55])
def test_series_resistance_and_temperature(volts, series_ohm, temperature_c):
    """The inner net behind a diode's own resistance, at other temperatures."""
    kelvin, i_s, ideality, ohm = 273.15 + temperature_c, 2.52e-9, 1.752, 1e4
    thermal = 1.380649e-23 * kelvin / 1.602176634e-19
    ratio = kelvin / 298.15
    at_temperature = i_s * ratio ** (3 / ideality) * np.exp((ratio - 1) * 1.11 / (ideality * thermal))
    current = exact_current(volts, ohm + series_ohm, at_temperature, ideality * thermal)
    found = rest_state(diode_behind(ohm, volts, model_of(i_s, ideality, series_ohm), f"{temperature_c}C"))
    flowing = (volts - found["out"]) / ohm
    assert flowing == pytest.approx(current, rel=1e-9, abs=1.1e-12 * abs(found["out"]) + 1e-15 * abs(volts) / ohm)


@pytest.mark.parametrize("volts", [0.5, 1.0, 5.0])
def test_wright_and_lambert_agree(volts):
    """The exact solution itself, by the other function, where that does not overflow."""
    i_s, ohm, scale = 2.52e-9, 1e4, 0.045
    other = scale / ohm * lambertw(i_s * ohm / scale * np.exp((volts + i_s * ohm) / scale)).real - i_s
    assert exact_current(volts, ohm, i_s, scale) == pytest.approx(float(other), rel=1e-12)


@pytest.mark.parametrize("name", sorted(set(FORWARD) - {"formula", "currents_A"}))
def test_forward_voltages(name):
    """N V_T ln(1 + I/I_s) + I R_s of widely reprinted cards, printed to 0.1 mV."""
    card = DATA["diodes"][name]
    for current, volts in zip(FORWARD["currents_A"], FORWARD[name], strict=True):
        source = 1e6  # as good as a current source, in megohms and megavolts
        found = rest_state(diode_behind(source, current * source + volts, model_of(card["Is"], card["N"], card["Rs"])))
        assert found["out"] == pytest.approx(volts, abs=6e-5)


def common_emitter(saturation: float, forward: float, reverse: float, collector_v: float) -> dict[str, float]:
    return rest_state(
        circuit(
            {
                "Rb": "resistor 100k base_feed base",
                "Rc": "resistor 1m collector_feed collector",
                "Q": "npn q collector base ground",
            },
            inputs={"base_feed": 'constant = "1V"', "collector_feed": f"constant = {collector_v!r}"},
            models={
                "q": f'{{ kind = "npn", saturation_current = {saturation!r}, forward_gain = {forward!r}, '
                f"reverse_gain = {reverse!r} }}"
            },
            output="collector",
        )
    )


@pytest.mark.parametrize("solution", [s for s in ONE_VOLT if s["VAF"] is None], ids=lambda s: f"{s['betaF']:g}")
@pytest.mark.parametrize("collector_v", [1.0, -1.0])
def test_one_volt_through_100k(solution, collector_v):
    """Base and collector current of sets solved with mpmath; the current is measured across 1 milliohm."""
    found = common_emitter(solution["Is"], solution["betaF"], solution["betaR"], collector_v)
    true = solution[f"VC={'+' if collector_v > 0 else '-'}1"]
    assert found["base"] == pytest.approx(true["VB"], abs=1e-6)
    assert (1.0 - found["base"]) / 1e5 == pytest.approx(true["IB"], rel=1e-6)


def test_lopsided_currents_to_six_digits():
    """The set I_s = 1e-14, gains 107 and 0.05: +398.956 and -16.1023 uA, across 1 ohm."""
    solution = next(s for s in ONE_VOLT if s["betaR"] == 0.05 and s["Is"] == 1e-14)
    for collector_v, key in ((1.0, "VC=+1"), (-1.0, "VC=-1")):
        true = solution[key]["IC"]
        parts = {
            "Rb": "resistor 100k base_feed base",
            "Rc": "resistor 1 feed collector",
            "Q": "npn q collector base ground",
        }
        model = '{ kind = "npn", saturation_current = 1e-14, forward_gain = 107, reverse_gain = 0.05 }'
        inputs = {"base_feed": 'constant = "1V"', "feed": f"constant = {collector_v + true!r}"}
        found = rest_state(circuit(parts, inputs=inputs, models={"q": model}, output="collector"))
        assert collector_v + true - found["collector"] == pytest.approx(true, rel=1e-6)


@pytest.mark.parametrize(("kelvin", "key"), [(293.15, "VT_20C"), (298.15, "VT_25C"), (300.15, "VT_27C")])
def test_thermal_voltage(kelvin, key):
    """kT/q with the exact constants of the SI of 2019."""
    assert thermal_voltage(kelvin) == pytest.approx(DATA["constants"][key], rel=1e-15)


def test_sixty_millivolts_a_decade():
    """59.159 mV for ten times the current at 25 C and ideality 1."""
    volts = [
        rest_state(diode_behind(1e6, 1e6 * current + 0.6, model_of(1e-14, 1.0)))["out"] for current in (1e-5, 1e-4)
    ]
    measured = DATA["constants"]["mV_per_decade_25C_N1"] * 1e-3
    currents = [(1e6 * current + 0.6 - v) / 1e6 for current, v in zip((1e-5, 1e-4), volts, strict=True)]
    assert (volts[1] - volts[0]) / np.log10(currents[1] / currents[0]) == pytest.approx(measured, rel=1e-6)


def test_a_silicon_junction_loses_about_two_millivolts_per_kelvin():
    """Common practice, no source: 2 mV/K at 1 mA for I_s around 1e-14 A."""
    volts = [
        rest_state(diode_behind(1e4, 10.65, model_of(1e-14, 1.0), temperature))["out"] for temperature in ("20C", "30C")
    ]
    assert (volts[1] - volts[0]) / 10.0 == pytest.approx(-2e-3, rel=0.2)


def test_saturation_current_doubles_every_five_to_six_kelvin():
    """The law I_s (T/T0)^(3/n) exp((T/T0 - 1) E_g/(n V_T)) for n = 1 and silicon, by plain floats."""
    model = {"saturation_current": 1e-14, "ideality": 1.0, "band_gap": 1.11}
    for kelvin in (253.15, 298.15, 343.15):
        thermal = 1.380649e-23 * kelvin / 1.602176634e-19
        true = 1e-14 * (kelvin / 298.15) ** 3 * np.exp((kelvin / 298.15 - 1) * 1.11 / thermal)
        assert saturation_current(model, kelvin) == pytest.approx(true, rel=1e-13)
    growth = saturation_current(model, 303.65) / 1e-14
    assert 1.9 < growth < 2.4
