"""The benchmarks run, on circuits small enough to take no time; no figure of theirs is judged here."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from bench import tables
from bench.accuracy import Match, error_db, matched
from bench.aliasing import aliasing
from bench.circuits import Case, ladder_text
from bench.compare import LENGTHS_S, Effort, Entry, compare, one_entry, ratio
from bench.equations import NotCovered, compiled, with_mass
from bench.growth import growth_with_nets
from bench.packs import STAGES, PackRun, hits_text
from bench.run import Report
from bench.solvers import Run, competitors, run_engine
from kickrender.circuit import read_circuit_text

SHAPER = """
title = "Shaper"
[nets]
plus = "9V"
minus = "-9V"
[inputs.gate]
pulse = { rest = "0V", strike = "1V", length = "0.5ms" }
[parts]
R1 = { kind = "resistor", value = "10k", between = ["gate", "in"] }
R2 = { kind = "resistor", value = "10k", between = ["in", "mix"] }
C1 = { kind = "capacitor", value = "100n", between = ["in", "ground"] }
U1 = { kind = "opamp", model = "fet-input", plus = "ground", minus = "mix", out = "out", rails = ["plus", "minus"] }
R3 = { kind = "resistor", value = "100k", between = ["mix", "out"] }
D1 = { kind = "diode", model = "signal", anode = "mix", cathode = "out" }
R4 = { kind = "resistor", value = "47k", between = ["out", "base"] }
Q1 = { kind = "npn", model = "small-npn", collector = "drop", base = "base", emitter = "ground" }
R5 = { kind = "resistor", value = "10k", between = ["plus", "drop"] }
[models.signal]
kind = "diode"
saturation_current = "2.5n"
ideality = 1.75
series_resistance = 1
[output]
net = "drop"
full_scale = "1V"
"""


@pytest.fixture(scope="module")
def shaper():
    return read_circuit_text(SHAPER, "shaper.toml").resolve({})


def table_cells(text: str) -> list[list[str]]:
    return [[cell.strip() for cell in line.strip("|").split("|")] for line in text.splitlines() if line]


@pytest.mark.slow
def test_every_solver_reaches_the_engines_solution_and_the_table_shows_it(shaper):
    effort = Effort(length_s=1e-3, rate_hz=48_000.0, repeats=1, limit_s=60.0)
    found = compare(Case("shaper", shaper), effort)
    assert found.agreement_db < -120.0  # equations written twice, two solvers: one solution
    methods = ["IDA", "Radau", "BDF", "LSODA"]
    assert [(entry.name, entry.given) for entry in found.entries] == list(itertools.product(methods, (True, False)))
    assert all(entry.joined.reached and entry.own.error_db < -99.0 for entry in found.entries)
    times, ratios = tables.comparison_tables([found]).split("\n\n")
    assert [row[2] for row in table_cells(times)[2:]] == [
        *("kickrender", "as shipped", "side by side"),
        *(name for name in methods for _ in range(2)),
    ]
    assert [row[3] for row in table_cells(times)[5:]] == ["compiled", "differences"] * 4
    assert all(len(row) == 13 and row[5] == "0.001 s" for row in table_cells(times)[2:])
    assert all(cell.endswith("x") for cell in table_cells(ratios)[2][1:5])


@pytest.mark.slow
def test_every_matrix_form_gives_the_same_samples():
    circuit = read_circuit_text(ladder_text(40), "ladder.toml").resolve({})
    equations = compiled(circuit, explicit=True)
    truth = run_engine(circuit, 1e-3, 48_000.0, 1e-10).samples
    errors = {
        (name, choice.form.kind, given): error_db(choice.run(1e-3, 48_000.0, 1e-9).samples, truth)
        for given in (True, False)
        for name in ("IDA", "Radau", "LSODA")
        for choice in competitors(name, equations, given=given)
    }
    forms = [("IDA", "dense"), ("IDA", "banded"), ("IDA", "sparse"), ("Radau", "dense"), ("Radau", "sparse")]
    forms += [("LSODA", "dense"), ("LSODA", "banded")]
    assert list(errors) == [(*form, given) for given in (True, False) for form in forms]
    assert max(errors.values()) < -100.0


def test_masses_are_added_where_a_net_has_none_and_nowhere_else(shaper):
    massive = with_mass(shaper)
    added = {net for name, part in massive.parts.items() if name not in shaper.parts for net in part.terminals.values()}
    assert added == {"mix", "ground"}  # the transistor's own capacitances join the others to the rest
    assert massive.parts["D1"].model.values["capacitance"] == 1e-12
    inner = compiled(massive).writing.capacitance[:, : compiled(massive).size]
    assert np.linalg.matrix_rank(inner, tol=1e-16) == len(inner)


def test_a_kind_without_compiled_equations_is_named(shaper):
    part = shaper.parts["R1"]
    odd = type(part)("X1", "memristor", part.terminals, part.values)
    strange = type(shaper)(**{**vars(shaper), "parts": {**shaper.parts, "X1": odd}})
    with pytest.raises(NotCovered, match="^memristor$"):
        compiled(strange)


def test_the_loosest_tolerance_that_is_near_enough_is_taken():
    truth = np.array([0.0, 1.0])

    def run(tolerance: float) -> Run:
        return Run(truth + 0.99 * tolerance, 1.0, 10)

    found = matched(run, truth, 10.0, repeats=1)
    assert found.tolerance == pytest.approx(1e-5)  # RMS 1e-5 over peak 1 is -100 dB
    assert found.error_db == pytest.approx(-100.0, abs=0.1)
    assert ratio(found, Match(0.5, -110.0, 1e-6)) == 2.0
    assert ratio(Match(1.0, -60.0, 1e-6), Match(0.5, -110.0, 1e-6)) is None


def test_a_solver_that_takes_too_long_is_stopped_and_said_so():
    def run(tolerance: float) -> Run:
        while True:
            pass

    found = matched(run, np.ones(2), 0.05, repeats=1)
    assert (found.seconds, found.over_s) == (None, 0.05)
    assert tables.least_ratio([], own=True) == "-"
    entry = Entry("BDF", True, "dense", 0.02, found, found, Match(0.5, -110.0, 1e-6))
    assert tables.least_ratio([entry], own=True) == "stopped"


@pytest.mark.slow
def test_a_slow_solver_is_measured_over_a_shorter_sound(shaper):
    effort = Effort(length_s=0.2, rate_hz=48_000.0, repeats=1, run_s=1e-6)
    explicit = compiled(with_mass(shaper), explicit=True)
    truth = run_engine(with_mass(shaper), 0.2, 48_000.0, 1e-10).samples
    over: list[float] = []

    def ours(length_s: float) -> Match:
        over.append(length_s)
        return Match(1.0, -110.0, 1e-6)

    entry = one_entry(competitors("LSODA", explicit), truth, effort, ours)
    assert entry.length_s == LENGTHS_S[0]
    assert over == [entry.length_s]
    assert entry.joined.reached


def test_growth_and_aliasing_of_a_small_circuit(shaper):
    ((_, seconds, steps),) = growth_with_nets([Case("shaper", shaper)], 1e-3, 1)
    assert seconds > 0.0
    assert steps > 10
    assert tables.exponent([10.0, 100.0], [3.0, 300.0]) == pytest.approx(2.0)
    assert len(table_cells(tables.aliasing_table([("shaper", aliasing(shaper, 0.01))]))[2]) == 6


def test_pack_tables():
    run = PackRun(10, 1, 2.0, None, 100.0, 120.0, dict.fromkeys(STAGES, 0.1))
    cells = table_cells(tables.pack_table([("some", run), ("more", PackRun(10, 2, 1.0, 90.0, 80.0, 95.0))]))
    assert cells[2:] == [
        ["some", "10", "1", "2.00", "5.0", "itself", "100", "120"],
        ["more", "10", "2", "1.00", "10.0", "90", "80", "95"],
    ]
    assert table_cells(tables.stage_table(run))[-2] == ["all else", "120", "60 %"]
    assert "steps = 5" in hits_text("bridged-t", 50)
    assert "steps = 10" in hits_text("bridged-t", 50)


def test_targets_say_whether_they_were_reached(capsys):
    report = Report(True, Effort())
    report.target("one", "< 1", 0.5, "0.5", True)
    report.target("two", "< 1", None, "-", False)
    cells = table_cells(tables.target_table(report.targets))
    assert [row[-1] for row in cells[2:]] == ["yes", "not measured"]
