"""Component spread: what deviates, by how much, and that a take stays what it is."""

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from kickrender.circuit import Circuit
from kickrender.circuit.reader import read_circuit_text
from kickrender.circuit.spread import (
    Deviations,
    Spread,
    deviations,
    read_spread,
    read_tolerance,
    resolve_spread,
    spread_faults,
)
from kickrender.errors import InputError

TEXT = """
title = "Spread"
[nets]
plus = "9V"
[inputs.gate]
pulse = { rest = "0V", strike = "5V", length = "4ms" }
[parts]
R1 = { kind = "resistor", value = "10k", between = ["gate", "b"] }
R2 = { kind = "resistor", value = "1k", between = ["plus", "c"] }
C1 = { kind = "capacitor", value = "10n", between = ["c", "out"] }
P1 = { kind = "pot", value = "10k", at = 0.25, ends = ["out", "ground"], wiper = "w" }
R3 = { kind = "resistor", value = "1M", between = ["w", "ground"] }
Q1 = { kind = "npn", model = "own", collector = "c", base = "b", emitter = "ground" }
Q2 = { kind = "npn", model = "own", collector = "c", base = "b", emitter = "ground" }
[models.own]
kind = "npn"
saturation_current = "10 fA"
forward_gain = 200
reverse_gain = 5
[controls.leg]
sets = "R1"
from = "5k"
to = "20k"
[output]
net = "out"
"""


STORED = {
    "R1.value": 1.0042993581172797,
    "R2.value": 0.9997884003901026,
    "R3.value": 1.001357545515848,
    "Q1.forward_gain": 0.9437098245913683,
    "Q2.forward_gain": 1.0543558731389986,
    "temperature": -0.26728340619779356,
}
STORED_UNIFORM = 1.006069550410345


@pytest.fixture
def circuit() -> Circuit:
    return read_circuit_text(TEXT, "spread.toml")


def place(*keys: str) -> str:
    return ".".join(("p.toml", *keys))


def test_a_take_is_the_same_for_ever(circuit: Circuit) -> None:
    """Stored draws guard against change: they hold on every machine and in every later version."""
    spread = Spread("night", {"resistor": 0.01, "npn.forward_gain": 0.3}, room_k=3.0)
    assert deviations(circuit, spread, 7).flat == STORED
    uniform = replace(spread, distribution="uniform")
    assert deviations(circuit, uniform, 7).flat["R1.value"] == STORED_UNIFORM


def test_a_draw_depends_on_seed_part_and_take_alone(circuit: Circuit) -> None:
    alone = deviations(circuit, Spread("night", {"R2": 0.01}), 7).flat
    beside = deviations(circuit, Spread("night", {"R2": 0.01, "capacitor": 0.2, "R1": 0.3}, room_k=2.0), 7).flat
    assert alone["R2.value"] == beside["R2.value"]
    fewer = replace(circuit, parts={name: part for name, part in circuit.parts.items() if name in ("R2", "C1")})
    assert deviations(fewer, Spread("night", {"resistor": 0.01}), 7).flat == alone
    others = [deviations(circuit, Spread(seed, {"resistor": 0.01}), take).flat for seed, take in
              (("night", 7), ("night", 8), ("day", 7))]  # fmt: skip
    drawn = [value for flat in others for value in flat.values()]
    assert len(set(drawn)) == len(drawn) == 9


@pytest.mark.parametrize("tolerance", [0.01, 0.2])
def test_normal_draws_are_a_normal_distribution_cut_off_at_the_tolerance(circuit: Circuit, tolerance: float) -> None:
    """scipy.stats.truncnorm as the truth; a 1 in 1000 chance would be a fault, and the draws are fixed."""
    spread = Spread("many", {"resistor": tolerance})
    drawn = np.array([d - 1 for take in range(1500) for d in deviations(circuit, spread, take).flat.values()])
    truth = stats.truncnorm(-3, 3, scale=tolerance / 3)
    assert stats.kstest(drawn, truth.cdf).pvalue > 1e-3
    assert np.abs(drawn).max() < tolerance
    assert drawn.std() == pytest.approx(truth.std(), rel=0.03)


def test_uniform_draws_fill_the_tolerance_evenly(circuit: Circuit) -> None:
    """scipy.stats.uniform as the truth."""
    spread = Spread("many", {"resistor": 0.05}, distribution="uniform")
    drawn = np.array([d - 1 for take in range(1500) for d in deviations(circuit, spread, take).flat.values()])
    assert stats.kstest(drawn, stats.uniform(-0.05, 0.1).cdf).pvalue > 1e-3
    assert 0.0498 < np.abs(drawn).max() < 0.05


def test_draws_of_different_parts_are_independent(circuit: Circuit) -> None:
    spread = Spread("many", {"resistor": 0.01})
    rows = np.array([list(deviations(circuit, spread, take).flat.values()) for take in range(2000)])
    correlation = np.corrcoef(rows.T) - np.eye(3)
    assert np.abs(correlation).max() < 0.08  # 3.6 standard errors
    assert abs(np.corrcoef(rows[:-1, 0], rows[1:, 0])[0, 1]) < 0.08


def test_the_closest_tolerance_wins(circuit: Circuit) -> None:
    r1, q1 = circuit.parts["R1"], circuit.parts["Q1"]
    spread = Spread("s", {"resistor": 0.1, "resistor.value": 0.2, "R1": 0.3, "R1.value": 0.4, "npn.forward_gain": 0.5})
    assert spread.tolerance(r1, "value") == 0.4
    assert spread.tolerance(circuit.parts["R2"], "value") == 0.2
    assert replace(spread, tolerances={"resistor": 0.1, "R1": 0.3}).tolerance(r1, "value") == 0.3
    assert spread.tolerance(q1, "forward_gain") == 0.5
    assert spread.tolerance(q1, "saturation_current") == 0.0
    assert replace(spread, tolerances={"npn.forward_gain": 0.5, "Q1.forward_gain": 0.1}).tolerance(
        q1, "forward_gain"
    ) == 0.1  # fmt: skip


def test_parts_deviate_from_what_is_set(circuit: Circuit) -> None:
    drawn = Deviations({"R1": {"value": 1.1}, "C1": {"value": 0.9}, "P1": {"value": 1.2}}, room_k=4.0)
    resolved = resolve_spread(circuit, {"leg": "12k", "P1": 0.5}, drawn)
    assert resolved.parts["R1"].values["resistance"] == 12e3 * 1.1
    assert resolved.parts["C1"].values["capacitance"] == pytest.approx(9e-9)
    # The track deviates, not the position, and the ends' contact ohm stays.
    assert resolved.parts["P1"].values == pytest.approx({"first_leg": 6001.0, "second_leg": 6001.0})
    assert resolved.parts["R2"] is circuit.resolve({}).parts["R2"]
    assert resolved.temperature_k == 302.15
    assert resolved.settings == circuit.resolve({"leg": "12k", "P1": 0.5}).settings
    assert resolved.spread == {"R1.value": 1.1, "C1.value": 0.9, "P1.value": 1.2, "temperature": 4.0}


def test_models_deviate_part_by_part(circuit: Circuit) -> None:
    drawn = Deviations({"Q1": {"forward_gain": 1.5, "saturation_current": 0.8}})
    parts = resolve_spread(circuit, {}, drawn).parts
    own, other = parts["Q1"].model, parts["Q2"].model
    assert own is not None
    assert other is not None
    assert own.values["forward_gain"] == 300.0
    assert own.values["saturation_current"] == 8e-15
    assert own.values["reverse_saturation_current"] == 8e-15  # alike junctions stay alike
    assert own.name == "own of Q1"
    assert (other.name, other.values["forward_gain"]) == ("own", 200.0)


def test_junctions_that_differ_deviate_apart() -> None:
    text = TEXT.replace("reverse_gain = 5", 'reverse_gain = 5\nreverse_saturation_current = "20 fA"')
    drawn = Deviations({"Q1": {"saturation_current": 0.5}})
    model = resolve_spread(read_circuit_text(text, "spread.toml"), {}, drawn).parts["Q1"].model
    assert model is not None
    assert model.values["reverse_saturation_current"] == 20e-15


def test_reading() -> None:
    given = {"resistor": "1%", "npn": {"forward_gain": "30 %"}, "R1": 0.002, "temperature": "3C"}
    spread = read_spread(given, "s", "uniform", place)
    assert spread == Spread("s", {"resistor": 0.01, "npn.forward_gain": 0.3, "R1": 0.002}, 3.0, "uniform")
    assert read_tolerance("100%", "p") == 1.0


@pytest.mark.parametrize(
    ("given", "distribution", "fault"),
    [
        ({"resistor": "101%"}, "normal",
         "p.toml.resistor: a tolerance of 101 %; allowed: above 0 % and up to 100 %, such as '5%' or 0.05"),
        ({"npn": {"forward_gain": 5}}, "normal", "p.toml.npn.forward_gain: a tolerance of 500 %; allowed: above 0 % "
                                                 "and up to 100 %, such as '5%' or 0.05"),
        ({"resistor": "-1%"}, "normal",
         "p.toml.resistor: a tolerance of -1 %; allowed: above 0 % and up to 100 %, such as '5%' or 0.05"),
        ({"resistor": "wide"}, "normal",
         "p.toml.resistor: 'wide' is not a tolerance; allowed: above 0 % and up to 100 %, such as '5%' or 0.05"),
        ({"temperature": "80C"}, "normal",
         "p.toml.temperature: '80C' is out of range; allowed: a deviation above 0 and up to 50 C, such as '3C'"),
        ({}, "gauss", "p.toml.distribution: unknown word 'gauss'; allowed: normal, uniform"),
    ],
)  # fmt: skip
def test_wrong_tolerances_are_told(given: dict, distribution: str, fault: str) -> None:
    with pytest.raises(InputError) as caught:
        read_spread(given, "s", distribution, place)
    assert [str(found) for found in caught.value.faults] == [fault]


@pytest.mark.parametrize(
    ("name", "fault"),
    [
        ("resitor", "p.toml.resitor: nothing called 'resitor' to spread; allowed: a kind of part or a part, such as "
                    "resistor, npn.forward_gain or R1; did you mean 'resistor'?"),
        ("Q1.forward_gian", "p.toml.Q1.forward_gian: nothing called 'Q1.forward_gian' to spread; allowed: "
                            "Q1.saturation_current, Q1.forward_gain, Q1.reverse_gain, Q1.ideality, "
                            "Q1.reverse_saturation_current, Q1.base_emitter_capacitance, "
                            "Q1.base_collector_capacitance, Q1.band_gap; did you mean 'Q1.forward_gain'?"),
        ("pot.at", "p.toml.pot.at: nothing called 'pot.at' to spread; allowed: pot, pot.value; did you mean "
         "'pot.value'?"),
    ],
)  # fmt: skip
def test_names_of_nothing_are_told(name: str, fault: str, circuit: Circuit) -> None:
    faults = spread_faults(Spread("s", {name: 0.1, "inductor": 0.1, "npn.early_voltage": 0.1}), [circuit], place)
    assert [str(found) for found in faults] == [fault]
