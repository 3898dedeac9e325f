"""The command `kickrender`: gathers the commands and turns every failure into one message and an exit code.

Command files import click and `errors` at the top and the rest inside their functions, so that `--help` answers
at once, without numpy, scipy or numba.
"""

from __future__ import annotations

import os
from collections.abc import Sequence

import click

from kickrender import __version__
from kickrender.cli.compare import compare
from kickrender.cli.list_shipped import list_shipped
from kickrender.cli.lock import lock
from kickrender.cli.pack import pack
from kickrender.cli.render import render
from kickrender.cli.show import show
from kickrender.cli.study import study
from kickrender.cli.usage import Commands, fault_of
from kickrender.cli.verify import verify
from kickrender.errors import KickrenderError

DONE, FAILED, WRONG_INPUT = 0, 1, 2
INTERRUPTED = 130  # 128 + the signal's number, as shells count


@click.group(
    cls=Commands,
    invoke_without_command=True,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
)
@click.version_option(__version__, message="%(prog)s %(version)s")
@click.pass_context
def kickrender(context: click.Context) -> None:
    """Strike percussion circuits, given as netlists, and write finished one-shots.

    CIRCUIT and PACK are the name of a shipped one (see `kickrender list`) or the path of a TOML file.

    \b
    Examples:
      kickrender list
      kickrender show bridged-t
      kickrender render bridged-t --set decay=0.7 --out hit.wav
      kickrender pack night-ferry --out night-ferry
    """
    if context.invoked_subcommand is None:
        click.echo(context.get_help())


for command in (list_shipped, show, render, pack, compare, study, lock, verify):
    kickrender.add_command(command)


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line; returns the exit code (0 done, 1 failed, 2 wrong input).

    A closed pipe (`| head`) ends the process quietly with 1, which click sees to.

    Parameters
    ----------
    arguments : sequence of str, optional
        What follows the program's name; by default what the process was started with.
    """
    try:
        code = kickrender.main(arguments, prog_name="kickrender", standalone_mode=False)
        return int(code or DONE)
    except click.UsageError as error:
        return _complain(str(fault_of(error)), WRONG_INPUT)
    except click.ClickException as error:
        return _complain(error.format_message(), error.exit_code)
    except KickrenderError as error:
        return _complain(str(error), error.exit_code)
    except (KeyboardInterrupt, click.Abort):
        return _complain("stopped; every file that was written is whole", INTERRUPTED)
    except MemoryError:
        return _complain("out of memory; try a shorter length, a lower rate or fewer jobs", FAILED)
    except OSError as error:
        place = error.filename if error.filename is not None else "the operating system"
        return _complain(f"{place}: {error.strerror or error}", FAILED)
    except Exception as error:  # a fault of ours; whoever mends it wants the traceback
        if os.environ.get("KICKRENDER_TRACEBACK"):
            raise
        what = f"unexpected {type(error).__name__}: {error}"
        return _complain(f"{what}. This is a fault of kickrender; KICKRENDER_TRACEBACK=1 shows where", FAILED)


def _complain(message: str, code: int) -> int:
    for line in message.splitlines():
        click.echo(line if line.startswith("kickrender") else f"kickrender: {line}", err=True)
    return code
