"""The parts list: what is equal stands together, and the worst of many hits is kept."""

from __future__ import annotations

import pytest

import kickrender
from kickrender.circuit import read_circuit, read_circuit_text
from kickrender.errors import InputError
from kickrender.study.parts import CAUTION, list_parts
from tests.pack.texts import VOICE


def test_equal_parts_stand_together() -> None:
    circuit = read_circuit("bridged-t")
    found = list_parts(circuit)
    lines = {line.parts: (line.kind, line.value, line.model) for line in found.lines}
    assert lines["C_edge", "C_left", "C_right"] == ("capacitor", "10n", "")
    assert lines["P_bright", "P_drive"] == ("pot", "47K reverse-log", "")
    assert lines["Q_dump", "Q_hit"] == ("pnp", "", "small-pnp")
    assert sorted(name for line in found.lines for name in line.parts) == sorted(circuit.parts)
    assert set(found.bears) == set(circuit.parts)


def test_the_same_from_a_name() -> None:
    assert kickrender.study_parts("twin-t").facts == list_parts(read_circuit("twin-t")).facts


def test_a_part_that_is_set_is_listed_as_set() -> None:
    found = list_parts(read_circuit_text(VOICE), {"R1": "4k7"})
    assert ("resistor", "4K7") in [(line.kind, line.value) for line in found.lines]


def test_the_worst_of_all_ends_is_kept() -> None:
    circuit = read_circuit_text(VOICE.replace('from = "0V"', 'from = "-4V"'))
    found = list_parts(circuit, worst=True)
    assert (found.hits, found.walked) == (4, ("tone", "accent"))
    corners = [
        list_parts(circuit, {"tone": tone, "accent": accent}).bears for tone in (0.0, 1.0) for accent in (-4.0, 5.0)
    ]
    worst = found.bears["P1"]["peak_power"]
    assert worst.value == pytest.approx(max(bears["P1"]["peak_power"].value for bears in corners), rel=1e-6)
    assert worst.settings["accent"] == 5.0
    least = found.bears["C1"]["lowest_voltage"]
    assert least.value == pytest.approx(min(bears["C1"]["lowest_voltage"].value for bears in corners), rel=1e-6)
    assert least.settings["accent"] == -4.0


def test_a_set_control_is_not_walked() -> None:
    assert list_parts(read_circuit_text(VOICE), {"accent": 1.0}, worst=True).walked == ("tone",)


def test_too_many_controls_to_walk_are_told() -> None:
    resistors = "\n".join(
        f'P{k} = {{ kind = "pot", value = "10k", between = ["core", "ground"] }}\n' for k in range(2, 10)
    )
    controls = "\n".join(f'[controls.c{k}]\nturns = "P{k}"\n' for k in range(2, 10))
    text = VOICE.replace("[parts]", f"[parts]\n{resistors}").replace("[controls.tone]", f"{controls}[controls.tone]")
    with pytest.raises(InputError, match="10 controls to walk, 1024 hits; allowed: up to 8: hold some with --set"):
        list_parts(read_circuit_text(text), worst=True)


def test_facts_and_table_say_the_same() -> None:
    found = list_parts(read_circuit_text(VOICE), worst=True)
    facts = found.facts
    assert facts["caution"] == CAUTION
    assert facts["bears"]["R1"]["peak_power"]["unit"] == "W"
    assert facts["bears"]["R1"]["peak_power"]["settings"]["accent"] == {"value": 5.0, "unit": "V"}
    row = {row["part"]: row for row in found.table}["R1"]
    assert row["peak_power_w"] == facts["bears"]["R1"]["peak_power"]["value"]
    assert row["peak_reverse_voltage_v"] == ""
    assert (row["kind"], row["value"]) == ("resistor", "47K")
