"""RC-active resonators against their textbook formulas: by poles, and as measured from the rendered ringing.

Source: data/resonators.json, eleven netlists and three twin-Ts with exact frequency, Q and decay, derived by nodal
analysis and checked by generalised eigenvalues and at 40 digits; names after S. Franco, Design with Operational
Amplifiers and Analog Integrated Circuits, and M. E. Van Valkenburg, Analog Filter Design (both from memory).
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from kickrender.circuit import ResolvedCircuit, read_circuit_text
from kickrender.engine import DEFAULT_TOLERANCE, Pole, poles, solve

DATA = json.loads((Path(__file__).parent / "data" / "resonators.json").read_text())
TWIN_T = DATA["twin_T_in_feedback"]["cases"]
CASES = {entry["name"]: entry for entry in DATA["resonators"]} | {f"twin_T_{case['a']}": case for case in TWIN_T}
IDEAL_HZ = 1e12  # gain-bandwidth at which an op-amp is as good as ideal


def circuit_of(entry: dict[str, Any], gain_bandwidth_hz: float = IDEAL_HZ) -> ResolvedCircuit:
    """The netlist as a circuit text; the output is the first op-amp's."""
    parts, index = [], 0
    for part in entry["netlist"]:
        name, nodes = part["name"], ["ground" if node == "0" else f"n{node}" for node in part["nodes"]]
        if part["type"] in "RC":
            kind = {"R": "resistor", "C": "capacitor"}[part["type"]]
            parts.append(f'{name} = {{ kind = "{kind}", value = {part["value"]!r}, between = {json.dumps(nodes)} }}')
        elif part["type"] == "OPAMP":
            parts.append(_opamp(name, *nodes))
        else:
            index += 1
            parts += _controlled(name, nodes, part["gain"], index)
    (out, *_) = (f"n{part['nodes'][2]}" for part in entry["netlist"] if part["type"] == "OPAMP")
    text = "\n".join(
        [
            "[nets]",
            "plus = 1e6",
            "minus = -1e6",
            "[parts]",
            *parts,
            "[models.ideal]",
            'kind = "opamp"',
            f"gain_bandwidth = {gain_bandwidth_hz!r}",
            "slew_rate = 1e18",
            "headroom_high = 0",
            "headroom_low = 0",
            "dc_gain = 1e15",
            "[output]",
            f'net = "{out}"',
            "full_scale = 1",
        ]
    )
    return read_circuit_text(text, "resonator.toml").resolve()


def _opamp(name: str, plus: str, minus: str, out: str) -> str:
    return (
        f'{name} = {{ kind = "opamp", model = "ideal", plus = "{plus}", minus = "{minus}", out = "{out}", '
        'rails = ["plus", "minus"] }'
    )


def _controlled(name: str, nodes: list[str], gain: float, index: int) -> list[str]:
    """A voltage-controlled source from ground, by resistors and an op-amp."""
    out, ground, control, _ = nodes
    assert ground == "ground"
    if gain < 0:
        return [
            f'{name}a = {{ kind = "resistor", value = 1e4, between = ["{control}", "v{index}"] }}',
            f'{name}b = {{ kind = "resistor", value = {-gain * 1e4!r}, between = ["v{index}", "{out}"] }}',
            _opamp(name, "ground", f"v{index}", out),
        ]
    return [  # a divider, then a follower
        f'{name}a = {{ kind = "resistor", value = {1e4 * (1 / gain - 1)!r}, between = ["{control}", "v{index}"] }}',
        f'{name}b = {{ kind = "resistor", value = 1e4, between = ["v{index}", "ground"] }}',
        _opamp(name, f"v{index}", out, out),
    ]


def ringing(chosen: ResolvedCircuit) -> Pole:
    """The one pole pair that rings."""
    (pair,) = [pole for pole in poles(chosen) if pole.rings and pole.frequency_hz < 1e6]
    return pair


@pytest.mark.parametrize("name", CASES)
def test_poles(name):
    entry = CASES[name]
    pole = ringing(circuit_of(entry))
    assert pole.frequency_hz == pytest.approx(entry["f0"], rel=1e-6)
    assert pole.q == pytest.approx(entry["Q"], rel=1e-4)
    assert pole.decay_s == pytest.approx(np.log(1000.0) * entry["tau"], rel=1e-4)


GAIN_BANDWIDTHS = {1e5: (319.02684, 16.5450), 1e6: (333.76205, 15.89417), 3e6: (334.93630, 15.83923)}
GAIN_BANDWIDTHS |= {1e7: (335.35022, 15.81977)}


@pytest.mark.parametrize("gain_bandwidth_hz", GAIN_BANDWIDTHS)
def test_poles_with_a_finite_gain_bandwidth(gain_bandwidth_hz):
    """A bridged-T of 1 Mohm, 1 kohm and 15 nF around an op-amp w_t/s; figures derived with the same netlists."""
    frequency_hz, q = GAIN_BANDWIDTHS[gain_bandwidth_hz]
    pole = ringing(circuit_of(CASES["bridged_T_equal_C"], gain_bandwidth_hz))
    assert pole.frequency_hz == pytest.approx(frequency_hz, rel=1e-7)
    assert pole.q == pytest.approx(q, rel=1e-5)


@dataclass(frozen=True)
class Ringing:
    frequency_hz: float
    tau_s: float


def heard(chosen: ResolvedCircuit, frequency_hz: float, cycles: int, tolerance: float) -> Ringing:
    """Frequency by zero crossings and decay by peaks of what rings after a charge was left on a capacitor.

    The first five cycles are left out: there the network's other poles still speak.
    """
    capacitor = next(part for part in chosen.parts.values() if part.kind == "capacitor")
    into = next(net for net in (capacitor.terminals["b"], capacitor.terminals["a"]) if net != "ground")
    rate = 64.0 * round(frequency_hz)
    count = round(64 * (cycles + 6))
    solution = solve(chosen, count / rate, start={into: 1.0}, tolerance=tolerance)
    x = solution.sample(rate, count)[5 * 64 :]
    rising = np.flatnonzero((x[:-1] < 0.0) & (x[1:] >= 0.0))
    crossings = np.array([_crossing(x, k) for k in rising])
    peaks = [k for k in range(2, len(x) - 2) if x[k] > x[k - 1] and x[k] >= x[k + 1]]
    tops = np.array([_peak(x[k - 2 : k + 3]) for k in peaks])
    period = float(np.polyfit(np.arange(len(crossings)), crossings, 1)[0]) / rate
    fall = float(np.polyfit(np.arange(len(tops)), np.log(tops), 1)[0])
    return Ringing(1.0 / period, -period / fall)


def _crossing(x: np.ndarray, k: int) -> float:
    """Where a cubic through four samples crosses zero between k and k + 1."""
    roots = np.roots(np.polyfit(np.arange(-1, 3), x[k - 1 : k + 3], 3)) if k else np.array([-x[0] / (x[1] - x[0])])
    real = roots.real[np.abs(roots.imag) < 1e-9]
    return k + float(real[np.argmin(np.abs(real - 0.5))])


def _peak(five: np.ndarray) -> float:
    """Top of a quartic through five samples."""
    line = np.polyfit(np.arange(-2, 3), five, 4)
    turns = np.roots(np.polyder(line))
    real = turns.real[np.abs(turns.imag) < 1e-9]
    return float(np.polyval(line, real[np.argmin(np.abs(real))]))


@pytest.mark.parametrize("name", CASES)
def test_ringing_as_rendered(name):
    """With op-amps of 1 GHz, whose own share is -Q f0/GBW, below 1e-4 everywhere."""
    entry = CASES[name]
    cycles = min(60, max(6, round(2.5 * entry["Q"])))
    found = heard(circuit_of(entry, 1e9), entry["f0"], cycles, 1e-9)
    damped = entry["f0"] * np.sqrt(1.0 - 0.25 / entry["Q"] ** 2)
    assert found.frequency_hz == pytest.approx(damped, rel=1e-4)
    assert found.tau_s == pytest.approx(entry["tau"], rel=1e-3)


def test_default_tolerance_keeps_pitch_and_decay():
    """What a user gets without asking for anything."""
    entry = CASES["bridged_T_low_pitch"]
    found = heard(circuit_of(entry, 1e9), entry["f0"], 40, DEFAULT_TOLERANCE)
    assert found.frequency_hz == pytest.approx(entry["f_damped"], rel=1e-4)
    assert found.tau_s == pytest.approx(entry["tau"], rel=1e-3)
