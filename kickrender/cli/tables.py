"""Plain tables on a terminal."""

from __future__ import annotations

from collections.abc import Sequence

import click


def print_table(title: str, head: Sequence[str], rows: Sequence[Sequence[str]]) -> None:
    """A title, a line of column names and the rows, columns as wide as they need to be; nothing without rows."""
    if not rows:
        return
    widths = [max(len(row[column]) for row in (head, *rows)) for column in range(len(head))]
    click.echo(f"\n{title}")
    for row in (head, *rows):
        click.echo("  " + "  ".join(cell.ljust(width) for cell, width in zip(row, widths, strict=True)).rstrip())
