"""The JSON Schema of a circuit file, for editors that complete and check TOML.

It says what one file may hold, key by key. What depends on other entries or on the base (names, wiring, ranges of
controls) only the reader checks.
"""

from __future__ import annotations

import operator
from functools import reduce
from typing import Annotated, Any, Literal

from pydantic import Field

from kickrender.circuit.document import (
    ControlTable,
    InputTable,
    Kelvin,
    Name,
    OutputTable,
    Table,
    Text,
    Volts,
    model_table,
    part_table,
)
from kickrender.circuit.draft import GOALS
from kickrender.circuit.kinds import KINDS, MODEL_KINDS


def circuit_schema() -> dict[str, Any]:
    """The JSON Schema (draft 2020-12) of a circuit file, made from the table of kinds."""
    part: Any = reduce(operator.or_, (part_table(kind) for kind in KINDS))
    model: Any = reduce(operator.or_, (model_table(kind) for kind in MODEL_KINDS))

    class CircuitFile(Table):
        """A percussion circuit: nets, inputs, parts, models, controls and the output."""

        title: Text = ""
        about: Text = ""
        temperature: Kelvin = 298.15
        based_on: Text = ""
        without: list[Name] = []
        nets: dict[str, Volts] = {}
        inputs: dict[str, InputTable] = {}
        parts: dict[str, Annotated[part, Field(discriminator="kind")]] = {}
        models: dict[str, Annotated[model, Field(discriminator="kind")]] = {}
        controls: dict[str, ControlTable] = {}
        goals: dict[Literal[GOALS], Name] = {}  # type: ignore[valid-type]
        output: OutputTable | None = None

    schema = CircuitFile.model_json_schema(by_alias=True)
    return {"$schema": "https://json-schema.org/draft/2020-12/schema", **schema}
