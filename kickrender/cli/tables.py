"""Plain tables on a terminal."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import click

from kickrender.errors import Fault, InputError


def print_table(title: str, head: Sequence[str], rows: Sequence[Sequence[str]]) -> None:
    """A title, a line of column names and the rows, columns as wide as they need to be; nothing without rows."""
    if not rows:
        return
    widths = [max(len(row[column]) for row in (head, *rows)) for column in range(len(head))]
    click.echo(f"\n{title}")
    for row in (head, *rows):
        click.echo("  " + "  ".join(cell.ljust(width) for cell, width in zip(row, widths, strict=True)).rstrip())


def check_table_name(path: Path, place: str = "--csv") -> None:
    """Refuse a file name that does not end in .csv: a sound or a sidecar of that name would be lost."""
    if path.suffix.lower() != ".csv":
        raise InputError(Fault(place, f"found '{path}'", "a file name that ends in .csv"))
