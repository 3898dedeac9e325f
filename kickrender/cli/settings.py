"""The options that several commands share, and how their texts become values."""

from __future__ import annotations

import sys
from collections.abc import Callable, Sequence
from typing import Any

import click

from kickrender.errors import Fault, InputError

set_option: Callable[[Any], Any] = click.option(
    "--set",
    "settings",
    metavar="NAME=VALUE",
    multiple=True,
    help="Turn a control, or set a part's value, an input's level or the temperature. May be given again.",
)
json_option: Callable[[Any], Any] = click.option("--json", "as_json", is_flag=True, help="Print JSON, for programs.")


def read_settings(texts: Sequence[str]) -> dict[str, str]:
    """The settings in `--set NAME=VALUE` texts; see `read_pairs`."""
    return read_pairs(texts, "--set", "decay=0.7")


def read_pairs(texts: Sequence[str], option: str, example: str) -> dict[str, str]:
    """The pairs in `NAME=VALUE` texts of an option; a name given again counts once, at its last place.

    Raises
    ------
    InputError
        For every text without a name or a value.
    """
    pairs: dict[str, str] = {}
    faults = []
    for text in texts:
        name, _, value = (piece.strip() for piece in text.partition("="))
        if name and value:
            pairs.pop(name, None)
            pairs[name] = value
        else:
            faults.append(Fault(option, f"'{text}'", f"NAME=VALUE, for instance {example}"))
    if faults:
        raise InputError(faults)
    return pairs


def print_json(value: object) -> None:
    """Write `value` to stdout as indented JSON."""
    import json

    click.echo(json.dumps(value, indent=2, ensure_ascii=False))


def note(message: str) -> None:
    """Say something about progress, where it does not mix with results."""
    click.echo(message, file=sys.stderr)
