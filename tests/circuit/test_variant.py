"""A variant that is written reads back as what it was written from."""

from pathlib import Path

import pytest

from kickrender.circuit import read_circuit, read_circuit_text
from kickrender.circuit.variant import variant_text

TEXT = """
title = "All sorts"
[inputs.gate]
pulse = { rest = "0V", strike = "5V", length = "4ms", fall = "3us" }
[inputs.hum]
sine = { amplitude = "0.1V", frequency = "100Hz", phase = "90deg" }
[inputs.level]
constant = "3V"
[parts]
R1 = { kind = "resistor", value = "47k", between = ["gate", "core"] }
R2 = { kind = "resistor", value = "47k", between = ["hum", "core"] }
C1 = { kind = "capacitor", value = "18n", between = ["core", "ground"] }
L1 = { kind = "inductor", value = "10m", between = ["core", "out"] }
P1 = { kind = "pot", value = "10k", taper = "log", at = 0.2, ends = ["out", "level"], wiper = "tap" }
S1 = { kind = "switch", closed = false, between = ["tap", "ground"] }
G1 = { kind = "controlled-current", value = "1mS", plus = "core", minus = "ground", between = ["out", "ground"] }
[controls.tone]
turns = "P1"
[controls.level]
drives = "level"
from = "0V"
to = "5V"
[controls.size]
sets = "C1"
from = "1n"
to = "100n"
law = "geometric"
start = "18n"
[output]
net = "out"
"""
CHANGES = [
    {"R1": 3.3e3},
    {"L1": 4.7e-3, "R2": 1.234567891e6},
    {"S1": True},
    {"G1": 2e-3},
    {"tone": 0.7, "level": 4.5, "size": 2.2e-8},
    {"gate": 3.3, "hum": 0.25},
    {"temperature": 310.0},
]


@pytest.mark.parametrize("settings", CHANGES)
def test_a_variant_is_the_circuit_under_its_settings(settings: dict[str, float], tmp_path: Path) -> None:
    (tmp_path / "base.toml").write_text(TEXT)
    circuit = read_circuit(tmp_path / "base.toml")
    below = tmp_path / "fits"
    below.mkdir()
    (below / "variant.toml").write_text(variant_text(circuit, settings, below, 'A "new" one', "From tests."))
    variant = read_circuit(below / "variant.toml")
    wanted, found = circuit.resolve(settings), variant.resolve()
    for field in ("temperature_k", "nets", "inputs", "parts", "output", "full_scale_v"):
        assert getattr(found, field) == getattr(wanted, field)
    assert variant.title == 'A "new" one'
    assert variant.controls.keys() == circuit.controls.keys()
    assert all(variant.controls[name].law == control.law for name, control in circuit.controls.items())


def test_a_shipped_circuit_is_called_by_name(tmp_path: Path) -> None:
    text = variant_text(read_circuit("bridged-t"), {"R_bridge": 1.8e6}, tmp_path, "Other", "From tests.")
    assert 'based_on = "bridged-t"\n' in text
    assert 'R_bridge = { kind = "resistor", value = "1M8", between = ["ring", "sum"] }' in text


def test_a_text_has_nothing_to_be_based_on(tmp_path: Path) -> None:
    with pytest.raises(ValueError, match="is no file"):
        variant_text(read_circuit_text(TEXT), {"R1": 1e3}, tmp_path, "Other", "From tests.")
