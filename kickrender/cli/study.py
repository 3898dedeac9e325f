"""`kickrender study`: a designer's questions about a circuit; one file per question."""

from __future__ import annotations

import click

from kickrender.cli.study_fit import fit
from kickrender.cli.study_parts import parts
from kickrender.cli.study_sensitivity import sensitivity
from kickrender.cli.study_tolerance import tolerance
from kickrender.cli.usage import Commands


@click.group(cls=Commands, invoke_without_command=True)
@click.pass_context
def study(context: click.Context) -> None:
    """Answer a designer's questions about a circuit.

    \b
    Examples:
      kickrender study tolerance bridged-t --limit pitch=-30..30cents
      kickrender study sensitivity bridged-t
      kickrender study parts bridged-t
      kickrender study fit bridged-t --goal pitch=50Hz --goal decay=0.4s
    """
    if context.invoked_subcommand is None:
        click.echo(context.get_help())


for command in (tolerance, sensitivity, parts, fit):
    study.add_command(command)
