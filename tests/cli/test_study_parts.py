"""`study parts`, by what it prints and writes."""

import csv
import json
from pathlib import Path

import pytest

from kickrender.study.parts import CAUTION
from tests.cli.conftest import Run


def test_list_loads_and_caution_are_printed(run: Run, folder: Path) -> None:
    ran = run("study", "parts", "voice.toml", "--set", "R1=4k7", "--csv", "parts.csv")
    assert (ran.code, ran.err) == (0, "parts.csv: 5 parts\n")
    lines = [" ".join(line.split()) for line in ran.out.splitlines()]
    assert lines[0] == "Plain (voice): 5 parts"
    assert "1 resistor 4K7 R1" in lines
    assert "1 pot 10K linear P1" in lines
    assert any(line.startswith("R1 ") and line.count("W") == 2 for line in lines)
    assert lines[-1] == CAUTION
    rows = list(csv.DictReader(Path("parts.csv").read_text().splitlines()))
    assert [row["part"] for row in rows] == ["R1", "C1", "C2", "P1", "S1"]
    assert float(rows[0]["peak_voltage_v"]) == pytest.approx(3.0, rel=0.1)


def test_json_holds_all_of_it(run: Run, folder: Path) -> None:
    facts = json.loads(run("study", "parts", "voice.toml", "--worst", "--json").out)
    assert (facts["hits"], facts["walked"], facts["caution"]) == (4, ["tone", "accent"], CAUTION)
    assert facts["list"][0] == {"quantity": 1, "kind": "resistor", "value": "47K", "model": "", "parts": ["R1"]}
    assert facts["bears"]["C1"]["peak_voltage"]["settings"]["accent"]["value"] == 5.0


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ("voice.toml --set R9=1k", "--set R9: unknown setting 'R9'"),
        ("voice.toml --csv parts.json", "--csv: found 'parts.json'; allowed: a file name that ends in .csv"),
        ("viice", "no circuit 'viice'"),
    ],
)
def test_wrong_input_is_told(arguments: str, message: str, run: Run, folder: Path) -> None:
    ran = run("study", "parts", *arguments.split())
    assert (ran.code, ran.out) == (2, "")
    assert message in ran.err
