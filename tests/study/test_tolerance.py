"""Tolerance studies: builds, statistics, limits, yield, files."""

from __future__ import annotations

import csv
import json
import math
import statistics as library
from pathlib import Path

import pytest
from scipy.stats import beta

from kickrender.circuit import read_circuit, read_circuit_text
from kickrender.circuit.spread import Deviations
from kickrender.errors import InputError, MeasurementError, WriteError
from kickrender.pack.plan import plan_pack
from kickrender.pack.read import read_pack_text
from kickrender.sound.loaded import LoadedCircuit
from kickrender.study.limits import KEPT, Limit, read_limits
from kickrender.study.tolerance import (
    CONFIDENCE,
    Build,
    Tolerance,
    read_study_spread,
    statistics,
    tolerance,
)
from kickrender.study.tolerance_report import headline, tolerance_facts, write_tolerance
from tests.study.circuits import BRIDGED_T, DISCHARGE, NEARLY_GROWING

BELL = read_circuit_text(BRIDGED_T, "bell.toml")
SPREAD = read_study_spread(BELL, {"resistor": "2%", "C_left": "10%"}, "drawer")


def study(count: int = 12, **more) -> Tolerance:
    return tolerance(BELL, SPREAD, count=count, **more)


def made(kept: int, count: int) -> Tolerance:
    """A study of builds that were never struck, the first of which keep the one limit."""
    builds = [
        Build(number, Deviations({}), {"pitch": 50.0 if number <= kept else 60.0}, {}) for number in range(1, count + 1)
    ]
    limit = Limit("pitch", 40.0, 55.0, text="pitch=40..55")
    builds = [
        Build(b.number, b.drawn, b.values, {"pitch": limit.verdict(b.values["pitch"], 50.0)}, b.failure) for b in builds
    ]
    return Tolerance(BELL, {}, SPREAD, (limit,), {"pitch": 50.0}, tuple(builds))


def test_build_seven_is_take_seven_of_a_pack():
    pack = """
        title = "Takes"
        circuit = "bridged-t"
        [takes]
        count = 7
        seed = "night"
        spread = { resistor = "1%", npn.forward_gain = "30%", Q_bend.saturation_current = "20%", temperature = "3C" }
        [files]
        name = "{take}"
    """
    hit = plan_pack(read_pack_text(pack)).hits[6]
    circuit = read_circuit("bridged-t")
    given = {"resistor": "1%", "npn.forward_gain": "30%", "Q_bend.saturation_current": "20%", "temperature": "3C"}
    found = tolerance(circuit, read_study_spread(circuit, given, "night"), count=7)
    assert hit.resolved(circuit).spread == found.builds[6].drawn.flat
    assert found.builds[6].drawn.flat != found.builds[5].drawn.flat


def test_a_build_is_what_its_parts_sound_like():
    """Set the drawn values by hand, and render: the same pitch, decay and loudness."""
    build = study(3).builds[2]
    drawn = {name.removesuffix(".value"): factor for name, factor in build.drawn.flat.items()}
    assert set(drawn) == {"R_bridge", "R_leg", "C_left"}
    values = {name: BELL.parts[name].values["value"] * factor for name, factor in drawn.items()}
    alone = LoadedCircuit(BELL).render(values).facts["measurements"]
    assert build.values["pitch"] == alone["settled_hz"]
    assert build.values["decay"] == alone["decay_s"]
    assert build.values["loudness"] == alone["momentary_lufs"]
    assert build.values["drop"] == pytest.approx(12 * math.log2(alone["start_hz"] / alone["settled_hz"]), abs=1e-5)


def test_settings_and_seeds_and_counts():
    few, more = study(3), study(5)
    assert more.builds[:3] == few.builds
    other = tolerance(BELL, read_study_spread(BELL, {"resistor": "2%", "C_left": "10%"}, "shelf"), count=3)
    assert other.exact == few.exact
    assert other.builds != few.builds
    assert study(3, settings={"R_leg": "2k"}).exact["pitch"] == pytest.approx(
        few.exact["pitch"] / math.sqrt(2), rel=1e-3
    )


def test_statistics_are_those_of_the_standard_library():
    values = [3.0, 1.0, 4.0, 1.0, 5.0, 9.0, 2.0, 6.0]
    row = statistics(values)
    assert row["mean"] == pytest.approx(library.mean(values))
    assert row["standard_deviation"] == pytest.approx(library.stdev(values))
    quarters = library.quantiles(values, n=4, method="inclusive")
    assert [row["p25"], row["p50"], row["p75"]] == pytest.approx(quarters)
    assert (row["min"], row["max"]) == (1.0, 9.0)
    assert statistics([1.0]) is None


@pytest.mark.parametrize(("kept", "count"), [(0, 100), (3, 10), (95, 100), (100, 100)])
def test_the_interval_is_clopper_and_pearsons(kept, count):
    """Their bounds are quantiles of beta distributions; with none kept the upper one is 1 - (0.025)^(1/n)."""
    achieved = made(kept, count).achieved()
    assert (achieved.kept, achieved.count, achieved.share) == (kept, count, kept / count)
    tail = (1.0 - CONFIDENCE) / 2.0
    assert achieved.low == pytest.approx(0.0 if kept == 0 else beta.ppf(tail, kept, count - kept + 1))
    assert achieved.high == pytest.approx(1.0 if kept == count else beta.ppf(1.0 - tail, kept + 1, count - kept))
    if kept == 0:
        assert achieved.high == pytest.approx(1.0 - tail ** (1.0 / count))


def test_a_yield_is_counted_limit_by_limit():
    limits = read_limits(["pitch=-20..20cents", "decay=..0.104s", "centroid=1..20000Hz"], "--limit")
    found = study(30, limits=limits)
    facts = tolerance_facts(found)
    exact, pitches = found.exact["pitch"], found.values("pitch")
    cents = [1200 * math.log2(hz / exact) for hz in pitches]
    pitch, decay, centroid = facts["limits"]
    assert (pitch["below"], pitch["above"]) == (sum(c < -20 for c in cents), sum(c > 20 for c in cents))
    assert pitch["missed"] == pitch["below"] + pitch["above"] > 0
    assert decay["above"] == decay["missed"] == sum(s > 0.104 for s in found.values("decay"))
    assert centroid["missed"] == 0
    both = sum(abs(c) <= 20 and s <= 0.104 for c, s in zip(cents, found.values("decay"), strict=True))
    assert facts["yield"]["kept"] == both
    assert 0 < both < 30
    assert headline(found).startswith(
        f"30 builds, {both} of them within every limit ({100 * both / 30:.1f} %; 95 % conf"
    )


def test_what_nobody_asks_for_is_not_measured():
    assert set(study(2).exact) == {"pitch", "start", "drop", "decay", "loudness"}
    assert set(study(2, limits=read_limits(["attack=..1s"], "")).exact) == {
        "pitch", "start", "drop", "decay", "loudness", "attack"
    }  # fmt: skip


def test_a_sound_without_a_pitch_has_none_and_misses_its_limit():
    circuit = read_circuit_text(DISCHARGE, "discharge.toml")
    found = tolerance(
        circuit, read_study_spread(circuit, {}), count=4, limits=read_limits(["pitch=1..2Hz", "decay=1..9ms"], "")
    )
    facts = tolerance_facts(found)
    assert facts["aspects"]["pitch"]["statistics"] is None
    assert facts["aspects"]["pitch"]["builds_without"] == 4
    assert [(limit["missed"], limit["none"]) for limit in facts["limits"]] == [(4, 4), (0, 0)]
    assert facts["yield"]["kept"] == 0


def test_builds_that_cannot_be_solved_are_told_and_stop_no_other():
    circuit = read_circuit_text(NEARLY_GROWING, "growing.toml")
    spread = read_study_spread(circuit, {"G_undo": "8%"})
    found = tolerance(circuit, spread, count=20, limits=read_limits(["decay=..1s"], ""))
    grows = [0.98 * build.drawn.factors["G_undo"]["value"] > 1.0 for build in found.builds]
    assert [bool(build.failure) for build in found.builds] == grows
    assert 0 < sum(grows) < 20
    facts = tolerance_facts(found)
    assert facts["yield"]["kept"] == 20 - sum(grows)
    assert set(facts["failures"]) == {str(number) for number, failed in enumerate(grows, 1) if failed}
    assert facts["limits"][0]["none"] == sum(grows)
    assert tolerance(circuit, spread, count=20).achieved().kept == 20 - sum(grows)  # sounding is all that is asked


@pytest.mark.parametrize("count", [0, 1, 10_001])
def test_counts_out_of_range_are_refused(count):
    with pytest.raises(InputError, match=f"found {count}; allowed: 2 to 10,000 builds"):
        study(count)


def test_silence_is_refused():
    circuit = read_circuit_text(DISCHARGE, "discharge.toml")
    with pytest.raises(MeasurementError, match="'discharge' is silent"):
        tolerance(circuit, read_study_spread(circuit, {}), settings={"gate": 0.0}, count=2)


@pytest.mark.parametrize(
    ("given", "distribution", "message"),
    [
        ({"resitor": "1%"}, "normal", "--spread resitor: nothing called 'resitor' .* did you mean 'resistor'"),
        ({"resistor": "101%"}, "normal", "--spread resistor: a tolerance of 101 %"),
        ({"resistor": "much"}, "normal", "--spread resistor: 'much' is not a tolerance"),
        ({"temperature": "99C"}, "normal", "--spread temperature: '99C' is out of range"),
        (
            {"inductor": "1%"},
            "normal",
            "--spread: nothing in 'bell' deviates by inductor; allowed: a tolerance of one of",
        ),
        ({}, "gauss", "--distribution: unknown word 'gauss'; allowed: normal, uniform"),
    ],
)
def test_spreads_that_are_none_are_told(given, distribution, message):
    with pytest.raises(InputError, match=message):
        read_study_spread(BELL, given, "1", distribution, "--spread")


def test_the_usual_spread_is_of_the_kinds_there_are():
    assert read_study_spread(BELL, {}).tolerances == {"resistor": 0.01, "capacitor": 0.05}
    coil = {"transformer.primary_inductance", "transformer.secondary_inductance"}
    assert set(read_study_spread(read_circuit("lc"), {}).tolerances) == {"resistor", "capacitor", "pot"} | coil


def test_files_hold_all_of_it(tmp_path: Path):
    found = study(6, limits=read_limits(["pitch=-10..10cents"], ""))
    names = write_tolerance(found, tmp_path / "builds")
    assert sorted(names) == sorted(path.name for path in (tmp_path / "builds").iterdir())
    assert json.loads((tmp_path / "builds" / "tolerance.json").read_bytes()) == tolerance_facts(found)
    rows = list(csv.DictReader((tmp_path / "builds" / "builds.csv").read_text().splitlines()))
    assert [row["build"] for row in rows] == ["1", "2", "3", "4", "5", "6"]
    for row, build in zip(rows, found.builds, strict=True):
        assert float(row["pitch_hz"]) == build.values["pitch"]
        assert float(row["C_left.value"]) == build.drawn.factors["C_left"]["value"]
        assert row["kept"] == ("yes" if build.verdicts["pitch"] == KEPT else "no")
    assert (tmp_path / "builds" / "histograms.png").read_bytes()[:8] == b"\x89PNG\r\n\x1a\n"
    assert b"<svg" in (tmp_path / "builds" / "histograms.svg").read_bytes()
    before = {name: (tmp_path / "builds" / name).read_bytes() for name in names}
    write_tolerance(found, tmp_path / "builds")
    assert before == {name: (tmp_path / "builds" / name).read_bytes() for name in names}


def test_somebody_elses_files_stay(tmp_path: Path):
    (tmp_path / "tolerance.json").write_text("[]")
    with pytest.raises(WriteError, match="was not written by kickrender"):
        write_tolerance(study(2), tmp_path)
    assert [path.name for path in tmp_path.iterdir()] == ["tolerance.json"]
