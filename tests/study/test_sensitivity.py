"""Sensitivity studies: what is varied, the noise floor, ranking, files."""

from __future__ import annotations

import csv
import json
import math
from pathlib import Path

import numpy as np
import pytest

from kickrender.circuit import read_circuit, read_circuit_text
from kickrender.errors import MeasurementError, WriteError
from kickrender.study.sensitivity import DEVIATIONS, LOOKED_AT, Sensitivity, _floor, sensitivity, strikes, varied
from kickrender.study.sensitivity_report import sensitivity_facts, write_sensitivity
from tests.study.circuits import BRIDGED_T, DISCHARGE


@pytest.fixture(scope="module")
def bell() -> Sensitivity:
    return sensitivity(read_circuit_text(BRIDGED_T, "bell.toml"))


@pytest.fixture(scope="module")
def click() -> Sensitivity:
    return sensitivity(read_circuit_text(DISCHARGE, "discharge.toml"), settings={"size": "5k"})


def slope(study, name):
    (found,) = [slope for slope in study.slopes if slope.name == name]
    return found


def test_every_number_that_a_tolerance_spreads_is_varied_but_zeros():
    names = {(part.name, key) for part, key in varied(read_circuit("bridged-t"))}
    assert {("R_bridge", "value"), ("P_pitch", "value"), ("Q_bend", "forward_gain")} <= names
    assert ("Q_bend", "saturation_current") in names
    assert ("P_pitch", "at") not in names  # a position is no part's value
    assert ("D_charge", "series_resistance") not in names  # zero
    assert strikes(read_circuit_text(DISCHARGE, "")) == 1 + 39 + 2 * 3


def test_progress_counts_every_strike():
    told: list[int] = []
    circuit = read_circuit_text(DISCHARGE, "discharge.toml")
    sensitivity(circuit, progress=told.append)
    assert sum(told) == strikes(circuit)


def test_slopes_are_told_for_the_settings_asked_for(click):
    """ln(1000) R C is 3.454 ms at 5k and 100n: a percent of either is 0.03454 ms."""
    assert slope(click, "R1").value == 5e3
    for name in ("R1", "C1"):
        assert slope(click, name).slopes["decay"] == pytest.approx(0.03454, abs=0.0015)
    # Volts go with the charge, 20 log10(1.01) for a percent, which leaves the time as it is.
    assert slope(click, "G_kick").slopes["loudness"] == pytest.approx(20 * math.log10(1.005 / 0.995), abs=0.0015)
    assert not click.tells(slope(click, "G_kick"), "decay")


def test_what_has_no_pitch_has_no_slope_and_no_floor_of_it(click):
    assert slope(click, "R1").slopes["pitch"] is None
    assert click.floor["pitch"] is None
    assert not click.tells(slope(click, "R1"), "pitch")


def test_the_floor_is_the_scatter_of_a_slope():
    """White noise of known size on curves of fifth degree: three deviations of a difference of two readings."""
    rng = np.random.default_rng(3)
    places = np.linspace(-1.0, 1.0, 13)
    floors = []
    for _ in range(400):
        walks = [coefficients @ np.vander(places, 6).T for coefficients in rng.normal(size=(3, 6))]
        floors.append(_floor("decay", 0.0, [1e-3 * (y + 0.01 * rng.normal()) for walk in walks for y in walk]))
    assert math.sqrt(np.mean(np.square(floors))) == pytest.approx(DEVIATIONS * math.sqrt(2) * 0.01, rel=0.03)


def test_what_does_nothing_lies_below_the_floor(bell):
    """Rails, slewing and headroom of an op-amp that is never driven so far; the noise floor is far below any part."""
    for name in ("U_ring.slew_rate", "U_ring.headroom_high"):
        assert not any(bell.tells(slope(bell, name), aspect) for aspect in LOOKED_AT)
    assert bell.floor["pitch"] < 0.01
    assert bell.floor["decay"] < 0.05
    assert bell.floor["loudness"] < 0.005


def test_ranking_puts_the_steepest_first_and_noise_last(bell):
    for aspect in LOOKED_AT:
        ranked = bell.ranked(aspect)
        assert len(ranked) == len(bell.slopes)
        told = [bell.tells(slope, aspect) for slope in ranked]
        assert told == sorted(told, reverse=True)
        sizes = [abs(slope.slopes[aspect]) for slope in ranked][: sum(told)]
        assert sizes == sorted(sizes, reverse=True)
    assert bell.ranked("decay")[0].name == "R_bridge"
    assert bell.ranked("loudness")[0].name == "G_kick"


def test_silence_is_refused():
    with pytest.raises(MeasurementError, match="'discharge' is silent"):
        sensitivity(read_circuit_text(DISCHARGE, "discharge.toml"), settings={"gate": 0.0})


def test_files_hold_all_of_it(tmp_path: Path, bell, click):
    names = write_sensitivity(bell, tmp_path / "bell", "decay")
    assert sorted(names) == sorted(path.name for path in (tmp_path / "bell").iterdir())
    facts = json.loads((tmp_path / "bell" / "sensitivity.json").read_bytes())
    assert facts == sensitivity_facts(bell, "decay")
    assert facts["slopes"][0]["part"] == "R_bridge"
    rows = list(csv.DictReader((tmp_path / "bell" / "sensitivity.csv").read_text().splitlines()))
    assert [row["part"] for row in rows] == [entry["part"] for entry in facts["slopes"]]
    assert float(rows[0]["decay_ms_per_percent"]) == facts["slopes"][0]["decay"]
    assert rows[0]["above_noise"].split() == facts["slopes"][0]["above_noise"]
    assert (tmp_path / "bell" / "sensitivity.png").read_bytes()[:8] == b"\x89PNG\r\n\x1a\n"
    write_sensitivity(click, tmp_path / "click")  # panels with nothing to show are drawn too


def test_somebody_elses_files_stay(tmp_path: Path, bell):
    (tmp_path / "sensitivity.json").write_text("[]")
    with pytest.raises(WriteError, match="was not written by kickrender"):
        write_sensitivity(bell, tmp_path)
    assert [path.name for path in tmp_path.iterdir()] == ["sensitivity.json"]
