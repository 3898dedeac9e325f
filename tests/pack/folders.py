"""What lies in a pack's folder, and whether it keeps to the published schemas."""

import json
from importlib import resources
from pathlib import Path

import jsonschema

SCHEMAS = resources.files("kickrender.pack") / "schemas"


def contents(folder: Path) -> dict[str, bytes]:
    return {path.relative_to(folder).as_posix(): path.read_bytes() for path in folder.rglob("*") if path.is_file()}


def hit_files(folder: Path) -> dict[str, bytes]:
    """The files of the hits, without those over the whole pack."""
    return {name: data for name, data in contents(folder).items() if "/" in name}


def validate(value: object, schema: str) -> None:
    jsonschema.Draft202012Validator(json.loads((SCHEMAS / schema).read_text())).validate(value)
