"""Device laws, their derivatives and their capacitances against mpmath at 40 digits, walking the table of laws."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest

from kickrender.circuit import Model, ResolvedPart
from kickrender.circuit.kinds import KINDS
from kickrender.engine.laws import LAWS as ENGINE_LAWS
from kickrender.engine.laws import STAMPS
from tests.engine.law_bench import measured, topology_with
from tests.engine.reference_laws import LAWS, LINEAR

NONLINEAR = sorted(set(STAMPS) - LINEAR)
TEMPERATURES_K = (273.15, 298.15, 333.15)
RELATIVE = 2e-12  # some roundings of an argument near 40, and of what cancels


def part_of(kind: str, values: dict[str, float]) -> ResolvedPart:
    roles = [role for roles in KINDS[kind].wirings[0].values() for role in roles]
    return ResolvedPart("X", kind, {role: role for role in roles}, {}, Model("m", kind, dict(values)))


def test_every_kind_has_a_row_in_the_reference_table():
    assert set(NONLINEAR) <= set(LAWS)
    assert set(STAMPS) == set(KINDS)
    laws = {device.law for kind in NONLINEAR for device in topology_with(part_of(kind, LAWS[kind].models[0])).devices}
    assert laws == set(ENGINE_LAWS)


@pytest.mark.parametrize("temperature_k", TEMPERATURES_K)
@pytest.mark.parametrize("kind", NONLINEAR)
def test_currents(kind, temperature_k):
    """Truth: the equations of the device contract, in mpmath at 40 digits."""
    with mpmath.workdps(40):
        for values in LAWS[kind].models:
            part = part_of(kind, values)
            for volts in LAWS[kind].points():
                found, _, _ = measured(part, volts, temperature_k)
                exact = {net: mpmath.mpf(value) for net, value in volts.items()}
                true, yardstick = LAWS[kind].law(values, exact, temperature_k)
                for row, value in found.items():
                    error = abs(mpmath.mpf(value) - true.get(row, 0))
                    assert error <= RELATIVE * yardstick, (row, volts, value, true.get(row))


@pytest.mark.parametrize("temperature_k", TEMPERATURES_K[::2])
@pytest.mark.parametrize("kind", NONLINEAR)
def test_slopes(kind, temperature_k):
    """Truth: mpmath's numerical derivative of the same equations, at 40 digits."""
    with mpmath.workdps(40):
        for values in LAWS[kind].models:
            part = part_of(kind, values)
            for volts in LAWS[kind].points(10):
                _, found, _ = measured(part, volts, temperature_k)
                columns = topology_with(part, temperature_k).unknowns
                rows = {row for row, _ in found}
                exact = {net: mpmath.mpf(value) for net, value in volts.items()}
                true = {}
                for column in columns:
                    low, high = (
                        LAWS[kind].law(values, {**exact, column: exact[column] + side}, temperature_k)[0]
                        for side in (mpmath.mpf("-1e-13"), mpmath.mpf("1e-13"))
                    )
                    for row in rows:
                        true[row, column] = -(high.get(row, 0) - low.get(row, 0)) / mpmath.mpf("2e-13")
                largest = max(abs(value) for value in true.values())
                for place, value in true.items():
                    error = abs(mpmath.mpf(found.get(place, 0.0)) - value)
                    assert error <= RELATIVE * largest + mpmath.mpf("1e-23"), (place, volts, found.get(place), value)


@pytest.mark.parametrize("kind", NONLINEAR)
def test_currents_balance(kind):
    """What flows into a part flows out of it, unless its output is driven or its rails lend the current."""
    if KINDS[kind].drives or "rail_high" in [role for roles in KINDS[kind].wirings[0].values() for role in roles]:
        return
    for values in LAWS[kind].models:
        for volts in LAWS[kind].points(6):
            found, slopes, _ = measured(part_of(kind, values), volts, 298.15)
            _, yardstick = LAWS[kind].law(values, {net: mpmath.mpf(value) for net, value in volts.items()}, 298.15)
            assert abs(sum(found.values())) <= 1e-14 * yardstick + 1e-25
            for column in {column for _, column in slopes}:
                entries = [value for (_, to), value in slopes.items() if to == column]
                assert abs(sum(entries)) <= 1e-13 * sum(map(abs, entries)) + 1e-25


CAPACITANCES = {
    "diode": {"capacitance": ("X.junction", "cathode")},
    "zener": {"capacitance": ("X.junction", "cathode")},
    "npn": {"base_emitter_capacitance": ("base", "emitter"), "base_collector_capacitance": ("base", "collector")},
    "pnp": {"base_emitter_capacitance": ("base", "emitter"), "base_collector_capacitance": ("base", "collector")},
    "n-jfet": {"gate_source_capacitance": ("gate", "source"), "gate_drain_capacitance": ("gate", "drain")},
    "p-jfet": {"gate_source_capacitance": ("gate", "source"), "gate_drain_capacitance": ("gate", "drain")},
}


@pytest.mark.parametrize("kind", NONLINEAR)
def test_capacitances_lie_across_the_junctions(kind):
    keys = {key for key in KINDS[kind].model if key.endswith("capacitance")}
    assert keys == set(CAPACITANCES.get(kind, {}))
    values = dict(LAWS[kind].models[-1]) | {key: 1e-12 * (1 + index) for index, key in enumerate(sorted(keys))}
    part = part_of(kind, values)
    volts = LAWS[kind].points(1)[0]
    _, _, found = measured(part, volts, 298.15)
    true: dict[tuple[str, str], float] = {}
    for key, (a, b) in CAPACITANCES.get(kind, {}).items():
        for row, column, sign in ((a, a, 1), (a, b, -1), (b, a, -1), (b, b, 1)):
            true[row, column] = true.get((row, column), 0.0) + sign * values[key]
    if KINDS[kind].drives:
        true = {("out.driven", "out"): 1.0}
    assert {place: pytest.approx(value) for place, value in true.items()} == found


def test_an_early_voltage_that_is_absent_is_infinite():
    values = dict(LAWS["npn"].models[1])
    del values["early_voltage"]
    volts = {"collector": 5.0, "base": 0.6, "emitter": 0.0}
    without = measured(part_of("npn", values), volts, 298.15)[0]["collector"]
    far = measured(part_of("npn", {**values, "early_voltage": 1e15}), volts, 298.15)[0]["collector"]
    assert without == pytest.approx(far, rel=1e-12)


LINEAR_PARTS = {
    "resistor": ({"resistance": 4.7e3}, {("a", "a"): 1 / 4.7e3, ("a", "b"): -1 / 4.7e3}),
    "switch": ({"resistance": 1e-2}, {("a", "a"): 1e2, ("b", "a"): -1e2}),
    "pot": (
        {"first_leg": 1e3, "second_leg": 3e3},
        {("end_a", "end_a"): 1e-3, ("wiper", "wiper"): 1e-3 + 1 / 3e3, ("end_b", "wiper"): -1 / 3e3},
    ),
    "inductor": (
        {"inductance": 0.1},
        {("a", "X.current"): 1.0, ("b", "X.current"): -1.0, ("X.current", "a"): -1.0, ("X.current", "b"): 1.0},
    ),
}


@pytest.mark.parametrize("kind", LINEAR_PARTS)
def test_linear_parts_are_their_conductances(kind):
    values, true = LINEAR_PARTS[kind]
    roles = [role for roles in KINDS[kind].wirings[0].values() for role in roles]
    part = ResolvedPart("X", kind, {role: role for role in roles}, values)
    random = np.random.default_rng(1)
    volts = {name: float(random.normal()) for name in topology_with(part).unknowns}
    found, slopes, _ = measured(part, volts, 298.15)
    for place, value in true.items():
        assert slopes[place] == pytest.approx(value, rel=1e-14)
    for row, value in found.items():
        current = -sum(slope * volts[column] for (to, column), slope in slopes.items() if to == row)
        assert value == pytest.approx(current, rel=1e-12)
