"""What parts bear, against closed forms and the conservation of energy."""

from __future__ import annotations

import numpy as np
import pytest

from kickrender.circuit import read_circuit, read_circuit_text
from kickrender.circuit.kinds import KINDS
from kickrender.circuit.records import GROUND
from kickrender.engine.currents import terminal_currents
from kickrender.errors import SolveError
from kickrender.study.stress import LOADS, Motion, flows, loads, strike_each

PLAIN = """
[nets]
plus = "12V"
minus = "-12V"
[inputs.gate]
pulse = {{ rest = "0V", strike = "{strike}", length = "4ms" }}
[parts]
R1 = {{ kind = "resistor", value = "1k", between = ["gate", "core"] }}
C1 = {{ kind = "capacitor", value = "1u", between = ["core", "ground"] }}
D1 = {{ kind = "diode", model = "silicon", anode = "ground", cathode = "gate" }}
U1 = {{ kind = "opamp", model = "fet-input", plus = "core", minus = "out", out = "out", rails = ["plus", "minus"] }}
R2 = {{ kind = "resistor", value = "10k", between = ["out", "ground"] }}
P1 = {{ kind = "pot", value = "10k", at = 0.25, ends = ["gate", "ground"], wiper = "tap" }}
R3 = {{ kind = "resistor", value = "1M", between = ["tap", "ground"] }}
[models.silicon]
kind = "diode"
saturation_current = "2.5n"
ideality = 1.75
[output]
net = "out"
"""


def struck(text: str) -> tuple[dict[str, dict[str, float]], Motion]:
    circuit = read_circuit_text(text).resolve()
    (motion,) = strike_each([circuit], 4.0)
    assert isinstance(motion, Motion)
    return loads(circuit, motion), motion


def test_every_kind_has_loads() -> None:
    assert set(LOADS) == set(KINDS)


def test_a_charged_capacitor_and_what_charges_it() -> None:
    """Five volts for four time constants: v = 5 (1 - e^-4), and the resistor heats as much as is stored, twice over."""
    found, motion = struck(PLAIN.format(strike="5V"))
    top = 5.0 * (1.0 - np.exp(-4.0))
    assert found["C1"]["peak_voltage"] == pytest.approx(top, rel=1e-3)
    assert found["C1"]["lowest_voltage"] == pytest.approx(0.0, abs=1e-6)
    assert found["R1"]["peak_power"] == pytest.approx(25.0 / 1e3, rel=5e-3)  # the edge takes 2 us of the 1 ms
    # R1's heat: charging, C V^2/2 (1 - e^-8); letting go, C top^2/2
    joules = 0.5e-6 * (25.0 * (1.0 - np.exp(-8.0)) + top * top)
    assert found["R1"]["average_power"] * motion.length_s == pytest.approx(joules, rel=2e-3)


def test_a_driven_output_gives_what_its_net_takes() -> None:
    found, _ = struck(PLAIN.format(strike="5V"))
    assert found["U1"]["peak_voltage"] == pytest.approx(5.0 * (1.0 - np.exp(-4.0)), rel=2e-3)
    assert found["U1"]["peak_current"] == pytest.approx(found["U1"]["peak_voltage"] / 10e3, rel=1e-6)


def test_a_pot_heats_over_its_whole_track() -> None:
    found, _ = struck(PLAIN.format(strike="5V"))
    lower = 1.0 / (1.0 / 7501.0 + 1.0 / 1e6)
    current = 5.0 / (2501.0 + lower)
    watts = current**2 * 2501.0 + (current * lower) ** 2 / 7501.0
    assert found["P1"]["peak_power"] == pytest.approx(watts, rel=1e-6)
    assert found["P1"]["peak_current"] == pytest.approx(current, rel=1e-6)


@pytest.mark.parametrize(("strike", "forward"), [("5V", False), ("-0.6V", True)])
def test_a_diode_both_ways(strike: str, forward: bool) -> None:
    found, _ = struck(PLAIN.format(strike=strike))
    if forward:
        thermal = 1.380649e-23 * 298.15 / 1.602176634e-19
        current = 2.5e-9 * np.expm1(0.6 / (1.75 * thermal))
        assert found["D1"]["peak_current"] == pytest.approx(current, rel=1e-6)
        assert found["D1"]["peak_power"] == pytest.approx(0.6 * current, rel=1e-6)
        assert found["D1"]["peak_reverse_voltage"] == 0.0
    else:
        assert found["D1"]["peak_reverse_voltage"] == pytest.approx(5.0, rel=1e-9)
        assert found["D1"]["peak_current"] == 0.0


def test_currents_are_those_of_any_one_state() -> None:
    circuit = read_circuit("bridged-t").resolve()
    (motion,) = strike_each([circuit], 4.0)
    assert isinstance(motion, Motion)
    found = flows(circuit, motion)
    state = {name: float(values[300, 2]) for name, values in motion.values.items()}
    for part, row in terminal_currents(circuit, state).items():
        if circuit.parts[part].kind in ("resistor", "pot"):
            for role, current in row.items():
                assert float(found[part].amperes[role][300, 2]) == pytest.approx(current, rel=1e-9, abs=1e-15)
        elif circuit.parts[part].kind == "npn":
            watts = sum(state[circuit.parts[part].terminals[role]] * current for role, current in row.items())
            assert float(found[part].watts[300, 2]) == pytest.approx(watts, rel=1e-9, abs=1e-15)


def test_what_supplies_and_gate_give_is_heat_or_stored() -> None:
    """Conservation of energy over a hit of a circuit whose every part has its power in its terminals: no op-amp."""
    circuit = read_circuit("one-transistor").resolve()
    (motion,) = strike_each([circuit], 4.0)
    assert isinstance(motion, Motion)
    found = flows(circuit, motion)
    held = {*circuit.nets, *circuit.inputs}
    given = np.zeros_like(motion.values[GROUND])
    heat, stored = 0.0, 0.0
    for name, part in circuit.parts.items():
        flow = found[name]
        for role, net in part.terminals.items():
            if net in held:
                given += motion.values[net] * flow.amperes[role]
        if part.kind == "capacitor":
            across = flow.across("a", "b")
            stored += 0.5 * part.values["capacitance"] * float(across[-1, -1] ** 2 - across[0, 0] ** 2)
        else:
            heat += motion.mean(flow.watts) * motion.length_s
    joules = motion.mean(given) * motion.length_s
    assert heat > 1e-4
    assert joules == pytest.approx(heat + stored, rel=1e-4)


def test_circuits_of_one_structure_are_struck_together() -> None:
    circuits = [read_circuit_text(PLAIN.format(strike=f"{volts}V")).resolve() for volts in (1, 2)]
    outcomes = strike_each(circuits, 4.0)
    assert not any(isinstance(outcome, SolveError) for outcome in outcomes)
    first, second = (outcome for outcome in outcomes if isinstance(outcome, Motion))
    assert second.values["core"].max() == pytest.approx(2.0 * first.values["core"].max(), rel=1e-4)
