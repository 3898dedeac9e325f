"""`kickrender study`: questions about a circuit that take many renders; one file per question."""

from __future__ import annotations

import click

from kickrender.cli.study_parts import parts
from kickrender.cli.study_sensitivity import sensitivity
from kickrender.cli.study_tolerance import tolerance
from kickrender.cli.usage import Commands


@click.group(cls=Commands)
def study() -> None:
    """Ask what a circuit does when its parts are not what they say.

    \b
    Examples:
      kickrender study tolerance bridged-t --limit pitch=-30..30cents
      kickrender study sensitivity bridged-t
      kickrender study parts bridged-t
    """


for command in (tolerance, sensitivity, parts):
    study.add_command(command)
