"""`kickrender study tolerance` and `study sensitivity`: exit code, what is said, what is written."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import pytest

import kickrender
from tests.cli.conftest import Run
from tests.study.circuits import BRIDGED_T, DISCHARGE, NEARLY_GROWING


@pytest.fixture(autouse=True)
def circuits(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    for name, text in (("bell", BRIDGED_T), ("discharge", DISCHARGE), ("growing", NEARLY_GROWING)):
        Path(f"{name}.toml").write_text(text)


def lines(text: str) -> list[str]:
    return [" ".join(line.split()) for line in text.splitlines()]


def test_study_alone_names_its_questions(run: Run) -> None:
    ran = run("study")
    assert (ran.code, ran.err) == (0, "")
    assert ran.out == run("study", "--help").out
    assert {"tolerance", "sensitivity"} <= {line.split()[0] for line in ran.out.splitlines() if line.startswith("  ")}


def test_help_loads_no_compiler() -> None:
    program = (
        "import sys\nfrom kickrender.cli.main import main\nmain(['study', 'tolerance', '--help'])\n"
        "print(*sorted({n.partition('.')[0] for n in sys.modules} & {'numba', 'numpy', 'scipy'}), file=sys.stderr)"
    )
    ran = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)
    assert "Examples:" in ran.stdout
    assert ran.stderr.split() == []


def test_a_misspelt_question_is_told(run: Run) -> None:
    ran = run("study", "tolerence", "bell.toml")
    assert ran.code == 2
    assert "unknown command 'tolerence'" in ran.err
    assert "did you mean 'tolerance'?" in ran.err


def test_tolerance_prints_a_table_and_a_yield(run: Run) -> None:
    ran = run("study", "tolerance", "bell.toml", "--count", 20, "--limit", "pitch=-500..500cents")
    assert (ran.code, ran.err) == (0, "")
    said = lines(ran.out)
    # None of 20 fail: the lower bound is 0.025^(1/20).
    assert said[0] == (
        "Bare bridged-T: 20 builds, 20 of them within every limit (100.0 %; 95 % confidence: 83.2 to 100.0 %)"
    )
    assert said[1] == "Spread: resistor 1 %, capacitor 5 %; normal, seed 1"
    assert "exact mean s.d. min 5 % 25 % 50 % 75 % 95 % max" in said
    assert any(line.startswith("pitch, Hz 335.4 ") for line in said)
    assert any(line.startswith("pitch, cents from exact 0 ") for line in said)
    assert "pitch=-500..500cents 0 0 0 0" in said


def test_tolerance_as_json_is_the_file_and_the_function(run: Run) -> None:
    given = ("--spread", "resistor=2%", "--spread", "temperature=3C", "--distribution", "uniform", "--seed", "shelf")
    ran = run("study", "tolerance", "bell.toml", "--count", 3, *given, "--set", "R_leg=2k", "--out", "builds", "--json")
    assert ran.code == 0
    assert ran.err == "builds: 4 files\n"
    facts = json.loads(ran.out)
    assert facts == json.loads(Path("builds/tolerance.json").read_bytes())
    found = kickrender.study_tolerance(
        "bell.toml",
        {"R_leg": "2k"},
        spread={"resistor": "2%", "temperature": "3C"},
        distribution="uniform",
        seed="shelf",
        count=3,
    )
    assert [build["pitch"] for build in facts["builds"]] == found.values("pitch")
    assert facts["spread"] == {
        "seed": "shelf",
        "distribution": "uniform",
        "tolerances": {"resistor": 0.02},
        "temperature_k": 3.0,
    }


def test_no_yield_is_said_and_is_a_failure(run: Run) -> None:
    """With none of 10 kept the upper bound is 1 - 0.025^(1/10) = 31 %. Table and files are there."""
    ran = run(
        "study", "tolerance", "bell.toml", "--count", 10, "--limit", "pitch=..100Hz", "--limit", "decay=..1s",
        "--out", "builds"
    )  # fmt: skip
    assert ran.code == 1
    assert "pitch=..100Hz 10 0 10 0" in lines(ran.out)
    assert ran.err.splitlines()[-1] == (
        "kickrender: no build of 10 keeps every limit (missed: pitch=..100Hz by 10); with 95 % confidence the yield is "
        "below 31 %. Exact parts miss pitch=..100Hz, too"
    )
    assert Path("builds/builds.csv").exists()


def test_builds_that_cannot_be_solved_are_a_failure(run: Run) -> None:
    ran = run("study", "tolerance", "growing.toml", "--count", 20, "--spread", "G_undo=8%")
    assert ran.code == 1
    assert ran.err.startswith("kickrender: build ")
    assert "circuit 'growing'" in ran.err


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["--limit", "pitsch=1..2Hz"], "--limit pitsch=1..2Hz: nothing called 'pitsch' is measured"),
        (["--limit", "pitch=48..52s"], "pitch is not measured in s; allowed: Hz or kHz or cents"),
        (["--spread", "resitor=1%"], "--spread resitor: nothing called 'resitor' to spread"),
        (["--spread", "resistor"], "--spread: 'resistor'; allowed: NAME=VALUE, for instance resistor=1%"),
        (["--distribution", "flat"], "--distribution: unknown word 'flat'; allowed: normal, uniform"),
        (["--count", "1"], "--count: found 1; allowed: 2 to 10,000 builds"),
        (["--count", "many"], "--count: 'many' is not a valid integer"),
        (["--set", "R_legg=1k"], "unknown setting 'R_legg'"),
        (["--jobs", "0"], "--jobs: found '0'"),
    ],
)
def test_wrong_input_is_told(run: Run, arguments: list[str], message: str) -> None:
    ran = run("study", "tolerance", "bell.toml", *arguments, "--out", "builds")
    assert ran.code == 2
    assert message in ran.err
    assert ran.out == ""
    assert not Path("builds").exists()


def test_silence_is_a_failure(run: Run) -> None:
    for question in ("tolerance", "sensitivity"):
        ran = run("study", question, "discharge.toml", "--set", "gate=0V")
        assert (ran.code, ran.out) == (1, "")
        assert ran.err == "kickrender: 'discharge' is silent: there is nothing to measure\n"


def test_sensitivity_prints_ranks_and_its_noise(run: Run) -> None:
    ran = run("study", "sensitivity", "bell.toml", "--by", "decay", "--top", 2)
    assert (ran.code, ran.err) == (0, "")
    said = lines(ran.out)
    assert said[0] == "Bare bridged-T: change per percent of each part, ranked by decay"
    head = said.index("value pitch, cents start, cents decay, ms loudness, dB")
    assert said[head + 1].startswith("R_bridge 1M -8.6")
    assert said[head + 2].startswith("C_")
    assert said[head + 3] == "and 3 more; --top 5 prints them"
    assert said[-1].startswith("5 of 10 numbers move nothing above the noise (0.00")


def test_sensitivity_marks_what_is_noise(run: Run) -> None:
    """The strike's size is no matter to a linear circuit's pitch."""
    (line,) = [x for x in lines(run("study", "sensitivity", "bell.toml").out) if x.startswith("G_kick")]
    name, value, pitch, start, decay, loudness = line.split()
    assert (name, value, loudness) == ("G_kick", "30uS", "+0.087")
    assert pitch.startswith("<0.0")
    assert decay.startswith("<0.0")


def test_sensitivity_as_json_is_the_file_and_the_function(run: Run) -> None:
    ran = run("study", "sensitivity", "discharge.toml", "--set", "size=5k", "--by", "decay", "--out", "parts", "--json")
    assert ran.code == 0
    assert ran.err == "parts: 4 files\n"
    facts = json.loads(ran.out)
    assert facts == json.loads(Path("parts/sensitivity.json").read_bytes())
    found = kickrender.study_sensitivity("discharge.toml", {"size": "5k"})
    assert {x["part"]: x["decay"] for x in facts["slopes"]} == {
        x.part: pytest.approx(x.slopes["decay"], abs=1e-6) for x in found.slopes
    }


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["--by", "warmth"], "'warmth' is not one of 'pitch', 'start', 'decay', 'loudness'"),
        (["--top", "0"], "0 is not in the range"),
        (["--set", "size=1"], "'1' is out of range"),
    ],
)
def test_wrong_input_of_sensitivity_is_told(run: Run, arguments: list[str], message: str) -> None:
    ran = run("study", "sensitivity", "discharge.toml", *arguments)
    assert ran.code == 2
    assert message in ran.err
