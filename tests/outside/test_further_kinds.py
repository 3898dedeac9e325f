"""JFETs, zener diodes, transconductance amplifiers, windings and controlled sources against SUNDIALS IDA.

Every circuit is written a second time (further_writing) and solved by an independent multistep method at tight
tolerance; the engine, as it renders, must agree within -100 dB, RMS error over peak.
"""

from __future__ import annotations

import numpy as np
import pytest

from kickrender.circuit import read_circuit_text
from kickrender.engine import solve
from tests.engine.circuits import residual_db
from tests.outside.second_writing import SecondWriting

STRIKE = '[inputs.gate]\npulse = { rest = "0V", strike = "5V", length = "4ms", rise = "20us", fall = "20us" }\n'
NETS = '[nets]\nplus = "9V"\nminus = "-9V"\n'

# A channel as the leg of an LC tank, closed by a decaying gate voltage, with a zener clamp.
SWEPT_TANK = """
[parts]
R_in = { kind = "resistor", value = "10k", between = ["gate", "tank"] }
C_tank = { kind = "capacitor", value = "100n", between = ["tank", "ground"] }
L_tank = { kind = "inductor", value = 2, between = ["tank", "leg"] }
J_n = { kind = "n-jfet", model = "small-n-jfet", drain = "leg", gate = "bend", source = "ground" }
J_p = { kind = "p-jfet", model = "small-p-jfet", drain = "leg", gate = "gate", source = "ground" }
R_leg = { kind = "resistor", value = "2k2", between = ["leg", "ground"] }
C_bend = { kind = "capacitor", value = "10n", between = ["gate", "bend"] }
R_bend = { kind = "resistor", value = "470k", between = ["bend", "minus"] }
R_out = { kind = "resistor", value = "10k", between = ["tank", "out"] }
Z_up = { kind = "zener", model = "hard", anode = "mid", cathode = "out" }
Z_down = { kind = "zener", model = "small-zener", anode = "mid", cathode = "ground" }
[models.hard]
kind = "zener"
saturation_current = "1fA"
breakdown_voltage = "1V"
breakdown_current = "1mA"
breakdown_ideality = 2
capacitance = "50p"
"""

# Two transconductors and their capacitors as a resonator, its bias swept by the gate.
SWEPT_PAIR = """
[parts]
R_in = { kind = "resistor", value = "220k", between = ["gate", "a"] }
C_a = { kind = "capacitor", value = "22n", between = ["a", "ground"] }
R_a = { kind = "resistor", value = "100k", between = ["a", "ground"] }
C_b = { kind = "capacitor", value = "22n", between = ["b", "ground"] }
R_b = { kind = "resistor", value = "1M", between = ["b", "ground"] }
R_tap = { kind = "resistor", value = "100k", between = ["a", "tap"] }
R_low = { kind = "resistor", value = "1k", between = ["tap", "ground"] }
R_tap2 = { kind = "resistor", value = "100k", between = ["b", "tap2"] }
R_low2 = { kind = "resistor", value = "1k", between = ["tap2", "ground"] }
U_1 = { kind = "ota", model = "transconductor", plus = "tap", minus = "ground", bias = "x", out = "b", rails = RAILS }
U_2 = { kind = "ota", model = "transconductor", plus = "ground", minus = "tap2", bias = "y", out = "a", rails = RAILS }
R_x = { kind = "resistor", value = "150k", between = ["gate", "x"] }
R_y = { kind = "resistor", value = "120k", between = ["gate", "y"] }
C_x = { kind = "capacitor", value = "100n", between = ["x", "minus"] }
E_out = { kind = "controlled-voltage", value = -1.5, plus = "b", minus = "a", out = "out" }
"""

# Windings between a current source and a resonant load.
WOUND = """
[parts]
R_in = { kind = "resistor", value = "10k", between = ["gate", "hot"] }
C_in = { kind = "capacitor", value = "22n", between = ["gate", "cold"] }
R_cold = { kind = "resistor", value = "330", between = ["cold", "ground"] }
C_hot = { kind = "capacitor", value = "47n", between = ["hot", "ground"] }
R_lift = { kind = "resistor", value = "1k", between = ["low", "ground"] }
C_out = { kind = "capacitor", value = "470n", between = ["out", "ground"] }
R_out = { kind = "resistor", value = "4k7", between = ["out", "ground"] }
D_up = { kind = "diode", model = "silicon", anode = "out", cathode = "ground" }
G = { kind = "controlled-current", value = "50 uS", plus = "out", minus = "low", between = ["hot", "low"] }
[parts.T]
kind = "transformer"
primary_inductance = "0.9 H"
secondary_inductance = "0.1 H"
coupling = COUPLING
primary = ["hot", "cold"]
secondary = ["low", "out"]
"""


@pytest.mark.parametrize(
    "parts",
    [SWEPT_TANK, SWEPT_PAIR, WOUND.replace("COUPLING", "0.97"), WOUND.replace("COUPLING", "1")],
    ids=["jfets and zeners", "transconductors", "loose windings", "perfect windings"],
)
def test_solution_against_ida(parts: str) -> None:
    text = STRIKE + NETS + parts.replace("RAILS", '["plus", "minus"]') + '[output]\nnet = "out"\n'
    circuit = read_circuit_text(text).resolve()
    times = np.arange(1, 1200) / 48_000
    truth = SecondWriting(circuit).solve(times, rtol=1e-10, atol=1e-12).volts["out"]
    rest = SecondWriting(circuit).rest()[SecondWriting(circuit).place["out"]]
    solution = solve(circuit, 0.026)
    found = solution.sample(48_000, len(times), first=1)
    assert np.ptp(truth) > 0.2
    assert solution.rest["out"] == pytest.approx(rest, abs=1e-7)
    assert residual_db(found, truth) < -100.0
