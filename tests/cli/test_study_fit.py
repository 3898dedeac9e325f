"""`study fit`, by what it prints and writes."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from tests.cli.conftest import Run
from tests.study.circuits import BRIDGED_T, DISCHARGE


@pytest.fixture(autouse=True)
def circuits(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    Path("bell.toml").write_text(BRIDGED_T)
    Path("discharge.toml").write_text(DISCHARGE)


def test_combinations_are_printed_and_the_best_renders(run: Run) -> None:
    ran = run("study", "fit", "bell.toml", "--goal", "pitch=272Hz", "--goal", "decay=0.11s", "--vary", "R_bridge,R_leg",
              "--series", "resistor=E12", "--count", "3", "--out", "fits")  # fmt: skip
    assert (ran.code, ran.err) == (0, "fits: bell-fit.toml, fit.csv, fit.png, fit.svg, fit.json\n")
    lines = [" ".join(line.split()) for line in ran.out.splitlines()]
    assert lines[0].startswith("Bare bridged-T: pitch 272 Hz, decay 0.11 s; ")
    assert "R_bridge R_leg pitch, Hz cents decay, s % off drop, semitones loudness, LUFS" in lines
    assert "series E12 E12" in lines
    assert [line.split()[0] for line in lines[5:]] == ["before", "free", "1", "2", "3"]
    assert lines[5].startswith("before 1M0 1K0 335.")
    assert lines[7].startswith("1 1M0 1K5 27")
    assert run("render", "fits/bell-fit.toml", "--out", "fit.wav").code == 0


def test_json_holds_all_of_it(run: Run) -> None:
    facts = json.loads(run("study", "fit", "discharge.toml", "--goal", "decay=29ms", "--vary", "C1", "--json").out)
    assert facts["goals"] == {"decay": {"value": 0.029, "unit": "s", "miss_unit": "%"}}
    assert facts["varied"] == {"C1": {"kind": "capacitor", "series": "E12", "unit": "F"}}
    assert len(facts["best"]) == 5
    assert facts["best"][0]["codes"] == {"C1": "390n"}


@pytest.mark.parametrize(
    ("arguments", "code", "message"),
    [
        ("bell.toml", 2, "--goal: no goal; allowed: NAME=VALUE, of pitch, decay, drop, drop_time, centroid"),
        ("bell.toml --goal loud=3", 2, "nothing called 'loud' can be a goal"),
        ("bell.toml --goal pitch=300Hz --vary R_leeg", 2, "--vary: no part 'R_leeg'; allowed: R_bridge, R_leg, C_left, "
                                                          "C_right; did you mean 'R_leg'?"),
        ("bell.toml --goal pitch=300Hz --vary U_ring", 2, "'U_ring' (operational amplifier) is not chosen by"),
        ("bell.toml --goal pitch=300Hz --series E42", 2, "--series: no series 'E42'; allowed: E3, E6, E12, E24, E48, "
                                                         "E96, E192; did you mean"),
        ("bell.toml --goal pitch=300Hz --series coil=E12", 2, "no series for 'coil'; allowed: resistor, capacitor, "
                                                              "inductor"),
        ("bell.toml --goal pitch=60Hz --vary R_leg", 2, "pitch 60 Hz is out of reach"),
        ("bell.toml --goal pitch=300Hz --count 0", 2, "--count: found 0; allowed: 1 to 50 combinations"),
        ("bell.toml --goal pitch=300Hz --jobs 0", 2, "--jobs: found '0'"),
        ("discharge.toml --goal pitch=100Hz --vary C1", 1, "'discharge': no pitch can be measured of it"),
    ],
)  # fmt: skip
def test_what_is_wrong_is_told(arguments: str, code: int, message: str, run: Run) -> None:
    ran = run("study", "fit", *arguments.split(), "--out", "fits")
    assert (ran.code, ran.out) == (code, "")
    assert message in ran.err
    assert "Traceback" not in ran.err
    assert not Path("fits").exists()
