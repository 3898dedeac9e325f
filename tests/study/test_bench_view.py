"""Currents at rest, poles while the pitch falls, responses as tables, pictures."""

import csv

import numpy as np
import pytest

from kickrender.circuit import read_circuit
from kickrender.circuit.shipped import shipped_circuits
from kickrender.cli.main import main
from kickrender.engine import rest_state, solve
from kickrender.engine.currents import terminal_currents
from kickrender.study.bench_view import poles_with_drop_open, response_table, state_at


@pytest.mark.parametrize("name", sorted(shipped_circuits()))
def test_currents_at_rest_obey_the_current_law(name):
    """Kirchhoff: the currents into the parts at a net that nothing drives add up to nothing."""
    circuit = read_circuit(name).resolve()
    currents = terminal_currents(circuit, rest_state(circuit))
    driven = {"ground", *circuit.nets, *circuit.inputs}
    totals, sizes = {}, {}
    for part in circuit.parts.values():
        driven |= set(part.terminals.values()) if len(currents[part.name]) < len(part.terminals) else set()
        nets = {}
        for terminal, net in part.terminals.items():
            nets[net] = currents[part.name].get(terminal, 0.0)  # terminals on one net share its current
        for net, current in nets.items():
            totals[net] = totals.get(net, 0.0) + current
            sizes[net] = max(sizes.get(net, 0.0), abs(current))
    assert set(totals) - driven
    for net in set(totals) - driven:
        assert abs(totals[net]) <= 1e-9 * sizes[net] + 1e-12, net


def test_the_state_is_the_solution_s():
    circuit = read_circuit("twin-t").resolve()
    state = state_at(circuit, 0.01)
    assert state[circuit.output] == pytest.approx(solve(circuit, 0.02).sample(100.0, 1, first=1)[0], abs=1e-5)
    assert state["gate"] == 0.0  # the gate has fallen by then


def test_the_pitch_stands_higher_with_the_drop_open():
    """The ringing pole about the early state is where the pitch track starts; at rest it is where it settles."""
    from kickrender.sound.loaded import load

    facts = load("bridged-t").render().facts["measurements"]
    circuit = read_circuit("bridged-t").resolve()
    early = max(pole.frequency_hz for pole in poles_with_drop_open(circuit) if pole.q > 2.0)
    assert early == pytest.approx(facts["start_hz"], rel=0.15)


def test_response_table_is_the_response():
    rows = response_table(read_circuit("bridged-t").resolve(), "gate", "edge")
    assert rows[0]["frequency_hz"] == pytest.approx(10.0)
    assert rows[-1]["frequency_hz"] == pytest.approx(100e3)
    levels = np.array([row["gain_db"] for row in rows])
    # a coupling capacitor into a resistor: 20 dB per decade below its corner, flat above
    assert levels[10] - levels[0] == pytest.approx(20.0, abs=1.0)
    assert abs(levels[-1]) < 0.1


def test_show_writes_pictures_and_a_table(tmp_path, capsys):
    arguments = ["show", "twin-t", "--response", "gate:out", "--csv", str(tmp_path / "r.csv")]
    assert main([*arguments, "--plot", str(tmp_path / "plots")]) == 0
    with open(tmp_path / "r.csv", newline="") as file:
        rows = list(csv.DictReader(file))
    assert list(rows[0]) == ["frequency_hz", "gain_db", "phase_deg"]
    names = {path.name for path in (tmp_path / "plots").iterdir()}
    assert {"waveform.png", "pitch.svg", "decay.png", "spectrum.svg", "nets.png", "response.svg"} <= names
    assert "Poles with the drop held open" in capsys.readouterr().out


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["--response", "gate"], "--response: found 'gate'; allowed: INPUT:NET"),
        (["--response", "gat:out"], "did you mean 'gate'?"),
        (["--response", "gate:rign"], "did you mean 'ring'?"),
        (["--csv", "x.csv"], "--csv goes with --response"),
    ],
)
def test_bad_paths_are_named(arguments, message, capsys):
    assert main(["show", "bridged-t", *arguments]) == 2
    assert message in capsys.readouterr().err
