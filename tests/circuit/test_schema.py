"""The JSON Schema for editors, held against an independent validator and the folders of good and bad files."""

import tomllib
from pathlib import Path

import jsonschema
import pytest

from kickrender.circuit.kinds import KINDS, MODEL_KINDS
from kickrender.circuit.schema import circuit_schema

DATA = Path(__file__).with_name("data")
SCHEMA = circuit_schema()
VALIDATOR = jsonschema.Draft202012Validator(SCHEMA)


def test_schema_is_a_schema() -> None:
    jsonschema.Draft202012Validator.check_schema(SCHEMA)


@pytest.mark.parametrize("path", sorted((DATA / "good").glob("*.toml")), ids=lambda path: path.stem)
def test_good_files_pass(path: Path) -> None:
    VALIDATOR.validate(tomllib.loads(path.read_text("utf-8")))


@pytest.mark.parametrize("name", ["unknown_keys", "kinds_and_models", "values", "sections", "base_number"])
def test_bad_shapes_fail(name: str) -> None:
    assert list(VALIDATOR.iter_errors(tomllib.loads((DATA / "bad" / f"{name}.toml").read_text("utf-8"))))


def test_every_kind_is_in_it() -> None:
    shapes = SCHEMA["$defs"]
    assert {f"{kind}_part" for kind in KINDS} | {f"{kind}_model" for kind in MODEL_KINDS} <= set(shapes)
    assert shapes["npn_part"]["required"] == ["kind", "model", "collector", "base", "emitter"]
    assert shapes["capacitor_part"]["properties"]["value"]["anyOf"][0] == {"type": "number", "exclusiveMinimum": 0.0}


def test_defaults_stay_where_they_belong() -> None:
    sine, inputs = SCHEMA["$defs"]["SineTable"], SCHEMA["$defs"]["InputTable"]
    assert sine["properties"]["offset"]["default"] == 0.0
    assert "default" not in inputs["properties"]["constant"]["anyOf"][0]
