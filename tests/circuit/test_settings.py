"""What settings address, in which order they apply, and what is said about bad ones."""

from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from kickrender.circuit import Constant, Pulse, Sine, read_circuit
from kickrender.circuit.records import Control
from kickrender.circuit.settings import control_value, control_walk, unit_of
from kickrender.errors import InputError

CIRCUIT = read_circuit(Path(__file__).with_name("data") / "good" / "every_kind.toml")


def test_starts_override_the_parts_own_values() -> None:
    bare = CIRCUIT.resolve()
    assert bare.inputs["accent"] == Constant(4.0)
    assert bare.parts["R2"].values == {"resistance": 47e3}
    assert bare.parts["P1"].values != CIRCUIT.resolve({"P1": 0.25}).parts["P1"].values
    assert bare.settings == {"accent": 4.0, "colour": 18e-9, "decay": 0.6, "tune": 47e3}
    assert list(bare.settings) == sorted(bare.settings)


def test_each_thing_a_name_can_address() -> None:
    resolved = CIRCUIT.resolve(
        {
            "tune": "100k",
            "accent": "1V",
            "R1": "10k",
            "C1": 22e-9,
            "L1": "1m",
            "P2": 0.0,
            "S1": True,
            "gate": "3V",
            "hum": 0.2,
            "temperature": "40C",
        }
    )
    assert resolved.parts["R2"].values == {"resistance": 100e3}
    assert resolved.parts["R1"].values == {"resistance": 10e3}
    assert resolved.parts["C1"].values == {"capacitance": 22e-9}
    assert resolved.parts["L1"].values == {"inductance": 1e-3}
    assert resolved.parts["P2"].values == {"first_leg": 1.0}
    assert resolved.parts["S1"].values == {"resistance": 10e-3}
    assert resolved.inputs["accent"] == Constant(1.0)
    assert resolved.inputs["gate"] == Pulse(0.0, 3.0, 4e-3, 5e-6, 3e-6)
    assert resolved.inputs["hum"] == Sine(0.2, 100.0, 1.0, 90.0)
    assert resolved.temperature_k == 313.15
    assert resolved.settings["S1"] is True
    assert resolved.settings["temperature"] == 313.15


def test_settings_apply_in_the_order_given() -> None:
    assert CIRCUIT.resolve({"tune": "20k", "R2": "30k"}).parts["R2"].values == {"resistance": 30e3}
    last = CIRCUIT.resolve({"R2": "30k", "tune": "20k"})
    assert last.parts["R2"].values == {"resistance": 20e3}
    assert "R2" not in last.settings


def test_recorded_settings_give_the_same_circuit_again() -> None:
    for given_settings in ({"R2": "30k", "tune": "20k"}, {"tune": "20k", "R2": "30k"}, {"S1": True, "accent": 2}):
        once = CIRCUIT.resolve(given_settings)
        assert CIRCUIT.resolve(once.settings) == once


def test_a_part_may_leave_its_controls_range() -> None:
    """A control's range is the player's; a designer who sets the part itself is not held by it."""
    assert CIRCUIT.resolve({"R2": "1k"}).parts["R2"].values == {"resistance": 1e3}


def test_texts_and_numbers_are_one() -> None:
    assert CIRCUIT.resolve({"accent": "1500 mV", "S1": "true"}) == CIRCUIT.resolve({"accent": 1.5, "S1": True})


def test_every_bad_setting_is_told_at_once() -> None:
    settings = {
        "acent": 1,
        "accent": "6V",
        "decay": "0.5V",
        "tune": 1e3,
        "R1": 0,
        "D1": 1,
        "bend": 1,
        "S1": 0.5,
        "P2": 1.01,
        "P1": True,
        "plus": 9,
        "temperature": "500C",
        "gate": "nan",
    }
    with pytest.raises(InputError) as caught:
        CIRCUIT.resolve(settings, "--set")
    assert str(caught.value).splitlines() == [
        "--set acent: unknown setting 'acent'; allowed: a control (decay, accent, tune, colour), a part, an input or "
        "temperature; did you mean 'accent'?",
        "--set accent: '6V' is out of range; allowed: 0V to 5V",
        "--set decay: '0.5V' has the unit V; this is a plain number; allowed: a plain number (0.5, '200k')",
        "--set tune: 1000.0 is out of range; allowed: 10k to 1M",
        "--set R1: 0 is out of range; allowed: above 0",
        "--set D1: 'D1' is a junction diode, which has no value to set",
        "--set bend: input 'bend' is given by points, which have no level to set",
        "--set S1: 0.5; allowed: true or false",
        "--set P2: 1.01 is out of range; allowed: 0 to 1",
        "--set P1: true is not a number; allowed: a plain number (0.5, '200k')",
        "--set plus: unknown setting 'plus'; allowed: a control (decay, accent, tune, colour), a part, an input or "
        "temperature",
        "--set temperature: '500C' is 773.15 K; allowed: -100C to 200C; a bare number is kelvin",
        "--set gate: 'nan' is not a value; allowed: a value in V ('5V', '100 mV')",
    ]


def test_units_of_settings() -> None:
    names = {"decay": "", "tune": "ohm", "colour": "F", "P2": "", "S1": "", "gate": "V", "temperature": "K"}
    assert {name: unit_of(CIRCUIT, name) for name in names} == names


def control(low: float, high: float, law: str) -> Control:
    return Control("c", "sets", "R1", low, high, low, law, "ohm")  # type: ignore[arg-type]


def test_laws_in_the_middle() -> None:
    assert control_value(control(10.0, 1000.0, "linear"), 0.5) == 505.0
    assert control_value(control(10.0, 1000.0, "geometric"), 0.5) == 100.0
    assert control_value(control(-1000.0, -10.0, "geometric"), 0.5) == -100.0


def test_rounding_does_not_step_over_an_end() -> None:
    assert control_value(control(2.978, 3.765, "geometric"), 1.0 - 2.0**-53) == 3.765


ENDS = st.floats(1e-12, 1e12)


@given(ENDS, ENDS, st.floats(0, 1), st.sampled_from(["linear", "geometric"]))
def test_a_walk_stays_in_range_and_comes_back(low: float, high: float, walk: float, law: str) -> None:
    if low == high:
        return
    there = control(low, high, law)
    value = control_value(there, walk)
    assert min(low, high) <= value <= max(low, high)
    assert (control_value(there, 0.0), control_value(there, 1.0)) == (low, high)
    assert (control_walk(there, low), control_walk(there, high)) == (0.0, 1.0)
    if max(low, high) > 1.001 * min(low, high):  # nearer ends leave too few floats between them to come back
        assert control_walk(there, value) == pytest.approx(walk, abs=1e-9)
