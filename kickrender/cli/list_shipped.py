"""`kickrender list`: what is shipped."""

from __future__ import annotations

import click

from kickrender.cli.settings import json_option, print_json


@click.command("list")
@json_option
def list_shipped(as_json: bool) -> None:
    """List the shipped circuits and packs.

    \b
    Examples:
      kickrender list
      kickrender list --json
    """
    from kickrender.pack.shipped import shipped

    found = shipped()
    if as_json:
        print_json(found)
        return
    width = max((len(name) for group in found.values() for name in group), default=0)
    for group, entries in found.items():
        click.echo(f"{group}:")
        for name, title in entries.items():
            click.echo(f"  {name:<{width}}  {title}")
