"""Folders of good and bad circuit files: what the good ones hold, and every word said about the bad ones."""

import copy
import hashlib
import os
import pickle
import tomllib
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from kickrender.circuit import read_circuit, read_circuit_text, shipped_circuits
from kickrender.circuit.kinds import KINDS
from kickrender.circuit.lines import Lines
from kickrender.circuit.reader import circuit_of
from kickrender.circuit.records import Constant, Control, Points, Pulse, Sine
from kickrender.circuit.source import Source
from kickrender.errors import InputError

DATA = Path(__file__).with_name("data")
GOOD, BAD = DATA / "good", DATA / "bad"
EVERY_KIND = (GOOD / "every_kind.toml").read_text("utf-8")


@pytest.mark.parametrize("path", sorted(BAD.glob("*.toml")), ids=lambda path: path.stem)
def test_bad_file(path: Path) -> None:
    """The .txt beside each bad file holds every fault that must be told, word for word; SHIPPED, the shipped names."""
    with pytest.raises(InputError) as caught:
        read_circuit(path)
    expected = path.with_suffix(".txt").read_text("utf-8").replace("SHIPPED", ", ".join(shipped_circuits()))
    assert str(caught.value).replace(f"{BAD}{os.sep}", "") + "\n" == expected
    assert caught.value.exit_code == 2


@pytest.mark.parametrize("path", sorted(GOOD.glob("*.toml")), ids=lambda path: path.stem)
def test_good_file_reads_and_resolves(path: Path) -> None:
    circuit = read_circuit(path)
    assert circuit.name == path.stem
    assert circuit.path == path
    assert list(circuit.resolve().parts) == sorted(circuit.parts)


@pytest.mark.parametrize("name", shipped_circuits())
def test_shipped_circuit_reads_and_resolves(name: str) -> None:
    circuit = read_circuit(name)
    assert circuit.name == name
    assert circuit.resolve().output == circuit.output


def test_every_kind() -> None:
    circuit = read_circuit(GOOD / "every_kind.toml")
    assert (circuit.title, circuit.about) == ("Every kind", "One of each.")
    assert circuit.temperature_k == 303.15
    assert circuit.nets == {"plus": 12.0, "minus": -12.0}
    assert circuit.inputs == {
        "gate": Pulse(0.0, 5.0, 4e-3, 5e-6, 3e-6),
        "accent": Constant(3.0),
        "hum": Sine(0.1, 100.0, 1.0, 90.0),
        "bend": Points((0.0, 1e-3), (0.0, 5.0)),
    }
    assert circuit.controls == {
        "decay": Control("decay", "turns", "P1", 0.0, 1.0, 0.6, "linear", ""),
        "accent": Control("accent", "drives", "accent", 0.0, 5.0, 4.0, "linear", "V"),
        "tune": Control("tune", "sets", "R2", 10e3, 1e6, 47e3, "geometric", "ohm"),
        "colour": Control("colour", "sets", "C1", 100e-9, 10e-9, 18e-9, "linear", "F"),
    }
    assert circuit.goals == {"pitch": "tune", "decay": "decay"}
    assert (circuit.output, circuit.full_scale_v) == ("out", 5.0)
    assert circuit.parts["P2"].values == {"value": 50e3, "at": 0.5}
    mine = circuit.models["mine"].values
    assert (mine["reverse_saturation_current"], mine["early_voltage"], mine["ideality"]) == (0.0, 80.0, 1.0)
    assert circuit.parts["T1"].values == {"primary_inductance": 0.1, "secondary_inductance": 0.4, "coupling": 0.99}
    further = {"small-n-jfet", "small-p-jfet", "small-zener", "transconductor"}
    assert set(circuit.models) == {"silicon", "small-npn", "mine", "fet-input"} | further


def test_every_row_of_the_table_of_kinds_is_read() -> None:
    circuit = read_circuit(GOOD / "every_kind.toml")
    assert {part.kind for part in circuit.parts.values()} == set(KINDS)
    for part in circuit.resolve().parts.values():
        assert set(part.values) <= set(KINDS[part.kind].units)
        assert bool(part.values) == bool(KINDS[part.kind].units)


def test_circuits_travel_to_other_processes() -> None:
    circuit = read_circuit(GOOD / "every_kind.toml")
    there = pickle.loads(pickle.dumps(circuit))
    assert there == circuit
    assert there.resolve({"tune": "20k"}) == circuit.resolve({"tune": "20k"})


def test_other_ways_of_toml() -> None:
    circuit = read_circuit(GOOD / "styles.toml")
    assert circuit.title == "styles"
    assert circuit.inputs == {"gate": Pulse(0.0, 5.0, 4e-3, 2e-6, 2e-6)}
    assert circuit.parts["R1"].values == {"value": 1e3}
    assert circuit.parts["C1"].terminals == {"a": "out", "b": "ground"}
    assert (circuit.temperature_k, circuit.full_scale_v) == (298.15, 1.0)


def test_variant_replaces_adds_and_takes_away() -> None:
    base, variant = read_circuit(GOOD / "every_kind.toml"), read_circuit(GOOD / "variant.toml")
    assert set(variant.parts) == set(base.parts) - {"S1"} | {"D2"}
    assert set(variant.controls) == set(base.controls) - {"tune"}
    assert variant.goals == {"decay": "decay"}
    assert variant.parts["R1"].values == {"value": 10e3}
    assert variant.parts["C1"] == base.parts["C1"]
    for diode in ("D1", "D2"):
        model = variant.parts[diode].model
        assert model is not None
        assert model.values["saturation_current"] == 1e-9
    assert (variant.title, variant.temperature_k, variant.output) == ("Every kind", 298.15, "out")


def test_variant_of_a_variant() -> None:
    circuit = read_circuit(GOOD / "variant_of_variant.toml")
    assert {"D1", "S1"} & set(circuit.parts) == set()
    assert circuit.inputs["accent"] == Constant(2.0)
    assert circuit.controls["accent"].start == 4.0


def test_text_is_based_on_a_file_beside_it() -> None:
    text = 'based_on = "every_kind.toml"\nabout = "Another."'
    circuit = read_circuit_text(text, "mine.toml", GOOD)
    assert (circuit.name, circuit.path, circuit.about) == ("mine", None, "Another.")
    assert circuit.digest == read_circuit(GOOD / "every_kind.toml").digest


def test_byte_order_mark_is_no_fault(tmp_path: Path) -> None:
    path = tmp_path / "marked.toml"
    path.write_text(EVERY_KIND, "utf-8-sig")
    assert read_circuit(str(path)).title == "Every kind"


def test_unknown_name_and_unreadable_path(tmp_path: Path) -> None:
    with pytest.raises(
        InputError, match=r"circuit 'nothing-like-it': no circuit 'nothing-like-it'; allowed: a shipped"
    ):
        read_circuit("nothing-like-it")
    with pytest.raises(InputError, match="cannot read .*away.toml: No such file"):
        read_circuit(tmp_path / "away.toml")
    (tmp_path / "folder.toml").mkdir()
    with pytest.raises(InputError, match="cannot read .*folder.toml: Is a directory"):
        read_circuit(tmp_path / "folder.toml")


# --- digest -----------------------------------------------------------------------------------------------------


LOW_PASS = """
title = "Low-pass"
[inputs.gate]
constant = "1V"
[parts]
R1 = { kind = "resistor", value = "4k7", between = ["gate", "out"] }
D1 = { kind = "diode", model = "mine", anode = "out", cathode = "ground" }
[models.mine]
kind = "diode"
saturation_current = "1n"
[controls.level]
drives = "gate"
from = "0V"
to = "2V"
[output]
net = "out"
"""


def test_digest_byte_for_byte() -> None:
    """The bytes are written out here by hand: another program could compute the same."""
    content = (
        '{"controls":{"level":{"act":"drives","high":2.0,"law":"linear","low":0.0,"start":1.0,"target":"gate"}},'
        '"format":1,"full_scale_v":1.0,"inputs":{"gate":{"constant":{"level":1.0}}},"nets":{},"output":"out",'
        '"parts":{"D1":{"kind":"diode","model":{"band_gap":1.11,"capacitance":0.0,"ideality":1.0,'
        '"saturation_current":1e-09,"series_resistance":0.0},"taper":"linear",'
        '"terminals":{"anode":"out","cathode":"ground"},"values":{}},'
        '"R1":{"kind":"resistor","model":null,"taper":"linear","terminals":{"a":"gate","b":"out"},'
        '"values":{"value":4700.0}}},"temperature_k":298.15}'
    )
    assert read_circuit_text(LOW_PASS).digest == hashlib.sha256(content.encode("ascii")).hexdigest()


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ('title = "Low-pass"', 'about = "Other words."  # and a comment'),
        ('"4k7"', "4.7e3"),
        ("[models.mine]", '[models.mine]\nsource = "a book"'),
        ("[models.mine]", "[models.mine]\nideality = 1"),
        ('net = "out"', 'net = "out"\n[goals]\ndrop = "level"'),
        ("[output]", '[models.spare]\nkind = "diode"\nsaturation_current = "2n"\n[output]'),
        ('"mine"', '"ours"'),
    ],
)
def test_digest_stays(old: str, new: str) -> None:
    text = LOW_PASS.replace(old, new)
    if old == '"mine"':
        text = text.replace("[models.mine]", "[models.ours]")
    assert text != LOW_PASS
    assert read_circuit_text(text, "elsewhere.toml").digest == read_circuit_text(LOW_PASS).digest


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ('"4k7"', "4704.7"),
        ('"1n"', '"1.001n"'),
        ('constant = "1V"', 'constant = "1.5V"'),
        ('to = "2V"', 'to = "3V"'),
        ('to = "2V"', 'to = "2V"\nstart = "0.5V"'),
        ('["gate", "out"]', '["out", "gate"]'),
        ('net = "out"', 'net = "out"\nfull_scale = "5V"'),
        ("[models.mine]", '[nets]\nspare = "5V"\n[models.mine]'),
        ('title = "Low-pass"', 'temperature = "26C"'),
        ('"R1"', '"R2"'),
    ],
)
def test_digest_moves(old: str, new: str) -> None:
    text = LOW_PASS.replace(old, new) if old != '"R1"' else LOW_PASS.replace("R1 =", "R2 =")
    assert text != LOW_PASS
    assert read_circuit_text(text).digest != read_circuit_text(LOW_PASS).digest


def test_one_digest_gives_the_engine_one_order() -> None:
    lines = LOW_PASS.splitlines()
    first, second = (next(i for i, line in enumerate(lines) if line.startswith(name)) for name in ("R1", "D1"))
    lines[first], lines[second] = lines[second], lines[first]
    one, other = read_circuit_text(LOW_PASS), read_circuit_text("\n".join(lines))
    assert list(one.parts) != list(other.parts)
    assert one.digest == other.digest
    assert list(one.resolve().parts.items()) == list(other.resolve().parts.items())


# --- never a traceback ------------------------------------------------------------------------------------------


def _paths(table: Any, at: tuple[Any, ...] = ()) -> list[tuple[Any, ...]]:
    inner = table.items() if isinstance(table, dict) else enumerate(table) if isinstance(table, list) else ()
    return [at, *(path for key, value in inner for path in _paths(value, (*at, key)))] if at or inner else [at]


_RAW = tomllib.loads(EVERY_KIND)
_LEAVES = st.one_of(
    st.booleans(), st.integers(), st.floats(), st.text(max_size=8), st.sampled_from(["ground", "out", "P1", "1k", "5V"])
)
_VALUES = st.recursive(
    _LEAVES, lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=5), inner, max_size=3)
)


@given(st.lists(st.tuples(st.sampled_from([path for path in _paths(_RAW) if path]), _VALUES), min_size=1, max_size=4))
def test_any_file_reads_or_tells_its_faults(changes: list[tuple[tuple[Any, ...], Any]]) -> None:
    raw = copy.deepcopy(_RAW)
    for path, value in changes:
        table: Any = raw
        try:
            for key in path[:-1]:
                table = table[key]
            table[path[-1]] = value
        except (TypeError, KeyError, IndexError):
            continue  # an earlier change took this place away
    try:
        circuit = circuit_of(Source("any.toml", None, raw, Lines(EVERY_KIND)))
    except InputError as error:
        told = error.faults
    else:
        assert circuit.resolve().parts
        assert len(circuit.digest) == 64
        return
    assert told
    assert all(fault.place.startswith("any.toml") and fault.found for fault in told)
