"""Device models: the shipped ones, and a model record from its table."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from functools import lru_cache
from pathlib import Path
from typing import Any

from kickrender.circuit.document import model_table
from kickrender.circuit.kinds import KINDS
from kickrender.circuit.records import Model

SHIPPED_MODELS = Path(__file__).with_name("models.toml")


def model_record(name: str, table: Any) -> Model:
    """The model of a checked table: every key of its kind filled in, terms that are off left out."""
    values: dict[str, float] = {}
    for key, rule in KINDS[table.kind].model.items():
        value = getattr(table, key)
        if value is None and isinstance(rule.default, str):
            value = values[rule.default]
        if value is not None:
            values[key] = value
    return Model(name, table.kind, values, table.source)


@lru_cache(maxsize=1)
def shipped_models() -> Mapping[str, Model]:
    """Name -> model, of every model that comes with kickrender."""
    raw = tomllib.loads(SHIPPED_MODELS.read_text("utf-8"))
    return {name: model_record(name, model_table(table["kind"]).model_validate(table)) for name, table in raw.items()}
