"""`kickrender lock`: hold a pack's renders still."""

from __future__ import annotations

import sys
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from kickrender.cli.pack import cores, read_jobs
from kickrender.cli.solver import ready_solver

if TYPE_CHECKING:
    from kickrender.pack.records import Pack, Plan

lock_option: Callable[[Any], Any] = click.option(
    "--lock",
    "lock_file",
    metavar="FILE",
    type=click.Path(path_type=Path),
    help="The lock file.  [default: beside the pack file, .lock for .toml; a shipped pack's in this folder]",
)


@click.command()
@click.argument("pack")
@lock_option
@click.option("--audio", is_flag=True, help="Keep the renders as FLAC too, in a folder beside, to null and hear later.")
@click.option("--jobs", metavar="N", help="Worker processes.  [default: one per core]")
def lock(pack: str, lock_file: Path | None, audio: bool, jobs: str | None) -> None:
    """Render every hit of PACK and write down what it is: digests, gain, measurements, and every part's value.

    The lock file is plain text for version control. An older one stays until the new one is whole.

    \b
    Examples:
      kickrender lock my-pack.toml
      kickrender lock my-pack.toml --audio
      kickrender lock night-ferry --lock locks/night-ferry.lock
    """
    workers = cores() if jobs is None else read_jobs(jobs)
    from kickrender.lock.make import check_target, lock_path, pack_name, write_lock

    read, plan = read_plan(pack)
    path = lock_file or lock_path(read, pack)
    check_target(path)
    ready_solver()
    with click.progressbar(
        length=len(plan.hits), label=f"locking {plan.title}", file=sys.stderr, hidden=not sys.stderr.isatty()
    ) as bar:
        name = pack_name(read, pack, path)
        made = write_lock(plan, path, name, audio=audio, jobs=workers, progress=bar.update)
    click.echo(f"{path}: {len(made.hits)} hits locked" + (f", renders kept in {made.audio_folder}" if audio else ""))


def read_plan(pack: str) -> tuple[Pack, Plan]:
    """A pack and its plan; the solver is made ready first where goals have to be found by rendering."""
    from kickrender.pack.plan import plan_pack
    from kickrender.pack.read import read_pack

    read = read_pack(pack)
    if any(block.asks_for_goals for block in read.blocks):
        ready_solver()
    return read, plan_pack(read)
