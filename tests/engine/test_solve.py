"""Solving as a whole: lanes against lone hits, failures as named values, and how much work a hit may take."""

from __future__ import annotations

import pickle
import re
from dataclasses import replace
from importlib import import_module

import numpy as np
import pytest

from kickrender.circuit import ResolvedPart, read_circuit, shipped_circuits
from kickrender.engine import DEFAULT_TOLERANCE, Solution, solve, solve_each
from kickrender.engine.outcome import NAME_OF_STATUS, OUTCOMES
from kickrender.errors import SolveError
from tests.engine.circuits import RAILS, VOICES, circuit, comparator, ladder, resonator

solving = import_module("kickrender.engine.solve")  # the package's own name `solve` is the function
LEGS = ("470", "1k", "1k5", "2k2", "3k3", "4k7", "6k8", "10k", "15k", "22k", "33k")


def bytes_of(solution: Solution | SolveError) -> bytes:
    assert isinstance(solution, Solution)
    count = int(solution.length_s * 96e3)
    return solution.sample(96e3, count).tobytes() + repr(dict(solution.counters)).encode()


def mixed() -> tuple[list, list[float]]:
    """Hits of several structures, settings and lengths, shuffled together."""
    hits = [resonator(leg) for leg in LEGS]
    hits += [resonator("1k", f'pulse = {{ rest = "0V", strike = "{v}V", length = "{v}ms" }}') for v in (1, 9, 60)]
    hits += [build() for build in VOICES.values()] + [ladder(5), ladder(5, ohm="10k"), comparator()]
    lengths = [0.004 + 0.003 * (k * 7 % 5) for k in range(len(hits))]
    order = np.random.default_rng(11).permutation(len(hits))
    return [hits[k] for k in order], [lengths[k] for k in order]


@pytest.fixture(scope="module")
def alone() -> list[bytes]:
    return [bytes_of(solve_each([hit], [length])[0]) for hit, length in zip(*mixed(), strict=True)]


def test_lanes_give_the_bytes_of_lone_hits(alone):
    assert [bytes_of(solution) for solution in solve_each(*mixed())] == alone


def test_the_order_of_a_batch_is_nothing(alone):
    hits, lengths = mixed()
    backwards = solve_each(hits[::-1], lengths[::-1])
    assert [bytes_of(solution) for solution in backwards[::-1]] == alone


@pytest.mark.parametrize("size", [2, 3, 7])
def test_the_size_of_a_batch_is_nothing(alone, size):
    hits, lengths = mixed()
    found = []
    for first in range(0, len(hits), size):
        found += solve_each(hits[first : first + size], lengths[first : first + size])
    assert [bytes_of(solution) for solution in found] == alone


def test_the_number_of_lanes_is_nothing(alone, monkeypatch):
    monkeypatch.setattr(solving, "_BATCH", 5)
    assert [bytes_of(solution) for solution in solve_each(*mixed())] == alone


def test_a_failing_neighbour_is_nothing(alone, monkeypatch):
    """One hit of a batch runs out of steps; the others do not notice."""
    hits, lengths = mixed()
    long = resonator("1k")
    monkeypatch.setattr(solving, "_MOST_STEPS_PER_HIT", 1500)
    outcomes = solve_each([*hits, long, *hits], [*lengths, 5.0, *lengths])
    assert isinstance(outcomes[len(hits)], SolveError)
    assert [bytes_of(solution) for solution in outcomes[: len(hits)]] == alone
    assert [bytes_of(solution) for solution in outcomes[len(hits) + 1 :]] == alone


def test_running_out_of_room_changes_no_byte(alone, monkeypatch):
    """Steps are kept in arrays of a guessed size; a hit that needs more is solved again with more."""
    monkeypatch.setattr(solving, "_ROOM", 20)
    monkeypatch.setattr(solving, "_ROOM_PER_SECOND", 0)
    hits, lengths = mixed()
    assert [bytes_of(solution) for solution in solve_each(hits, lengths)] == alone


def test_solving_twice_gives_the_same_bytes(alone):
    hits, lengths = mixed()
    assert bytes_of(solve(hits[0], lengths[0])) == alone[0]
    assert bytes_of(solve(hits[0], lengths[0])) == alone[0]


def test_no_hits_are_no_outcomes():
    assert solve_each([], []) == []


# Failures


def runaway():
    """A latch of two ideal inverters without any capacitance, struck over its threshold: it would have to jump."""
    parts = {
        "R1": "resistor 4k7 plus c1",
        "R2": "resistor 4k7 plus c2",
        "Rx": "resistor 47k c1 b2",
        "Ry": "resistor 47k c2 b1",
        "Q1": "npn q c1 b1 ground",
        "Q2": "npn q c2 b2 ground",
        "Rs": "resistor 100k gate b1",
    }
    model = '{ kind = "npn", saturation_current = "10f", forward_gain = 100, reverse_gain = 1 }'
    gates = 'points = [["0s", "0V"], ["1ms", "5V"], ["2ms", "-5V"], ["3ms", "5V"]]'
    return circuit(parts, inputs={"gate": gates}, nets={"plus": "5V"}, models={"q": model}, output="c1", name="runaway")


def test_step_too_small():
    """A jump is no solution of the equations; the message says where, when, and what to do."""
    with pytest.raises(SolveError) as caught:
        solve(runaway(), 5e-3)
    error = caught.value
    assert error.reason == "step too small"
    assert error.circuit == "runaway"
    assert 0.0 < error.time_s < 5e-3
    assert 0.0 < error.step_s < 1e-14
    assert error.net in ("c1", "c2", "b1", "b2")
    assert error.residual is not None
    assert re.match(
        r"step too small \(circuit 'runaway', t = \S+ s, step \S+ s, worst net '\w\d', residual \S+\)\. The circuit "
        r"moves faster .* a few picofarads there",
        str(error),
    )


def test_the_advice_helps():
    """A few picofarads at the nets near it, as the message says, and it solves."""
    stuck = runaway()
    added = {
        f"C_{net}": ResolvedPart(f"C_{net}", "capacitor", {"a": net, "b": "ground"}, {"capacitance": 4e-12})
        for net in ("b1", "b2", "c1", "c2")
    }
    assert isinstance(solve(replace(stuck, parts={**stuck.parts, **added}), 5e-3), Solution)


def test_too_many_steps(monkeypatch):
    monkeypatch.setattr(solving, "_MOST_STEPS_PER_HIT", 100)
    with pytest.raises(
        SolveError, match=r"^too many steps \(circuit 'test', t = \S+ s, step \S+ s, worst net"
    ) as caught:
        solve(resonator(), 0.1)
    assert 0.0 < caught.value.time_s < 0.1


def test_not_finite():
    """A source that leaves the range of numbers through a nanoohm."""
    chosen = circuit(
        {"R": "resistor 1e-9 in out", "C": "capacitor 1n out ground"},
        inputs={"in": 'points = [["0s", "0V"], ["1us", 1e300]]'},
    )
    with pytest.raises(
        SolveError, match=r"^not finite \(circuit 'test', t = \S+ s, .*A voltage left the range"
    ) as caught:
        solve(chosen, 1e-3)
    assert caught.value.net == "out"


def test_every_status_has_a_name_and_every_name_advice():
    stepper = import_module("kickrender.engine.stepper")
    statuses = {stepper.STEP_TOO_SMALL, stepper.NOT_FINITE, stepper.TOO_MANY_STEPS, stepper.PIVOT_COLLAPSED}
    assert set(NAME_OF_STATUS) == statuses
    assert set(NAME_OF_STATUS.values()) | {"no rest state"} == set(OUTCOMES)
    assert all(len(advice) > 60 for advice in OUTCOMES.values())


def test_an_error_survives_the_way_between_processes():
    with pytest.raises(SolveError) as caught:
        solve(runaway(), 5e-3)
    copy = pickle.loads(pickle.dumps(caught.value))
    assert str(copy) == str(caught.value)
    assert copy.__dict__ == caught.value.__dict__


# Work: a slowdown fails just as a wrong answer does. Ceilings a third above what was measured.

CEILINGS = {
    # name: steps, rejected, for one second at the starting settings
    "bridged-t": (2150, 60),
    "twin-t": (2150, 60),
}
HARDEST_STEPS = 5_800  # for one second of any shipped circuit at any end of its controls


@pytest.mark.parametrize("name", shipped_circuits())
def test_work_ceilings_of_shipped_circuits(name):
    steps, rejected = CEILINGS.get(name, (2400, 80))
    counters = solve(read_circuit(name).resolve(), 1.0).counters
    assert counters["steps"] < steps
    assert counters["rejected"] < rejected
    assert counters["factorisations"] == counters["steps"]
    assert counters["equations"] == 8 * counters["steps"]
    assert counters["plans"] == 1
    assert counters["rest_iterations"] < 150


@pytest.mark.parametrize("name", shipped_circuits())
def test_work_at_the_ends_of_the_controls(name):
    """Also that none of them needs a second order of elimination."""
    loaded = read_circuit(name)
    hits = [
        loaded.resolve({key: end}) for key, control in loaded.controls.items() for end in (control.low, control.high)
    ]
    for solution in solve_each(hits, [1.0] * len(hits)):
        assert isinstance(solution, Solution)
        assert solution.counters["steps"] < HARDEST_STEPS
        assert solution.counters["plans"] == 1


def test_a_circuit_at_rest_costs_next_to_nothing():
    """After the sound has died the steps grow without bound but the end."""
    short, long = (solve(resonator(), length).counters["steps"] for length in (1.0, 30.0))
    assert long < short + 60


def test_work_follows_the_tolerance_not_the_sample_rate():
    loose, tight = (solve(resonator(), 0.1, tolerance=t).counters["steps"] for t in (1e-4, DEFAULT_TOLERANCE))
    assert loose < tight


def test_one_topology_is_planned_once():
    solving._program.cache_clear()
    solve_each([resonator(leg) for leg in LEGS], [1e-3] * len(LEGS))
    assert solving._program.cache_info().misses == 1


def test_rails_are_any_nets():
    """An op-amp fed from a net that sags: its output is held below what is left."""
    chosen = circuit(
        {
            "Rs": "resistor 1k plus supply",
            "Rl": "resistor 1k supply ground",
            "Cs": "capacitor 1u supply ground",
            "U": "opamp fet-input plus ground out supply minus",
            "Rout": "resistor 10k out ground",
        },
        nets=RAILS,
    )
    found = solve(chosen, 0.01).sample(1e3, 10)
    assert found[-1] == pytest.approx(6.0 - 1.5, abs=0.2)


def test_a_sine_through_a_circuit_without_memory():
    """Two resistors have no error to hold a step back; the output is half the sine all the same, at every sample."""
    divider = {"R1": "resistor 1k in out", "R2": "resistor 1k out ground"}
    chosen = circuit(divider, inputs={"in": 'sine = { amplitude = "3V", frequency = "330Hz", phase = "30deg" }'})
    found = solve(chosen, 0.1).sample(48_000.0, 4800)
    times = np.arange(4800) / 48_000.0
    np.testing.assert_allclose(found, 1.5 * np.sin(2 * np.pi * 330.0 * times + np.pi / 6), atol=1e-6)
