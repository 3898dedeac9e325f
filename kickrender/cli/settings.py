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
    """The settings in `--set NAME=VALUE` texts; a name given again counts once, at its last place.

    Raises
    ------
    InputError
        For every text without a name or a value.
    """
    settings: dict[str, str] = {}
    faults = []
    for text in texts:
        name, _, value = (piece.strip() for piece in text.partition("="))
        if name and value:
            settings.pop(name, None)
            settings[name] = value
        else:
            faults.append(Fault("--set", f"'{text}'", "NAME=VALUE, for instance decay=0.7"))
    if faults:
        raise InputError(faults)
    return settings


def print_json(value: object) -> None:
    """Write `value` to stdout as indented JSON."""
    import json

    click.echo(json.dumps(value, indent=2, ensure_ascii=False))


def note(message: str) -> None:
    """Say something about progress, where it does not mix with results."""
    click.echo(message, file=sys.stderr)
