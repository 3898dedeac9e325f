"""`kickrender pack`: the main job."""

from __future__ import annotations

import os
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

import click

from kickrender.cli.settings import note
from kickrender.cli.solver import ready_solver
from kickrender.errors import Fault, InputError, KickrenderError

if TYPE_CHECKING:
    from kickrender.pack.cluster import Cluster
    from kickrender.pack.records import Pack, Plan

MOST_NAMES = 20  # of one kind are told


@click.command()
@click.argument("pack")
@click.option("--out", type=click.Path(path_type=Path), help="The folder to fill; made when missing.")
@click.option("--jobs", metavar="N", help="Worker processes.  [default: one per core]")
@click.option(
    "--cluster", metavar="ADDRESS", help="Let the workers of a dask.distributed scheduler render, in place of --jobs."
)
@click.option(
    "--only", type=click.Path(path_type=Path), metavar="FILE", help="Render the hits named in this list alone."
)
@click.option("--drop-duplicates", is_flag=True, help="Leave out hits that can hardly be told from an earlier one.")
@click.option("--dry-run", is_flag=True, help="Check everything; tell the number of hits, time, room and first names.")
def pack(
    pack: str,
    out: Path | None,
    jobs: str | None,
    cluster: str | None,
    only: Path | None,
    drop_duplicates: bool,
    dry_run: bool,
) -> None:
    """Render every hit of PACK: one sound and one sidecar each; pack.json, pack.csv and pack.png over all; and a
    listening sheet, index.html, to hear, sort and choose hits in a browser.

    A second run renders only what is missing or changed. No file depends on the number of workers. The listening
    sheet saves favourites as a list that --only takes; a hit is the same file alone as in the whole pack.

    \b
    Examples:
      kickrender pack night-ferry --out night-ferry
      kickrender pack my-pack.toml --out library --jobs 4
      kickrender pack my-pack.toml --only favourites.txt --out best
      kickrender pack my-pack.toml --drop-duplicates --out library
      kickrender pack my-pack.toml --dry-run
      kickrender pack my-pack.toml --out library --cluster tcp://192.168.0.10:8786
    """
    if out is None and not dry_run:
        raise InputError(Fault("kickrender pack", "--out is missing", "--out FOLDER, or --dry-run"))
    if jobs is not None and cluster is not None:
        raise InputError(Fault("kickrender pack", "--jobs and --cluster", "one of them"))
    workers = cores() if jobs is None else read_jobs(jobs)
    from kickrender.pack.read import read_pack

    read = read_pack(pack)
    if cluster is None:
        _render(read, out, workers, None, only, drop_duplicates, dry_run)
        return
    from kickrender.pack.cluster import connect

    with connect(cluster) as found:
        if found.uncompiled and not dry_run:
            note(f"{found.uncompiled} of {found.count} workers compile the solver first (once, up to a minute) ...")
        _render(read, out, found.count, found, only, drop_duplicates, dry_run)


def _render(
    read: Pack,
    out: Path | None,
    workers: int,
    cluster: Cluster | None,
    only: Path | None,
    drop_duplicates: bool,
    dry_run: bool,
) -> None:
    from kickrender.pack.plan import plan_pack

    if any(block.asks_for_goals for block in read.blocks):
        ready_solver()
    plan = plan_pack(read)
    if only is not None:
        from kickrender.pack.only import keep_only, read_names

        plan = keep_only(plan, read_names(only), str(only))
    if out is None or dry_run:
        _foretell(plan, workers)
        return
    from kickrender.pack.run import render_plan

    ready_solver()
    with click.progressbar(
        length=len(plan.hits), label=plan.title, file=sys.stderr, hidden=not sys.stderr.isatty()
    ) as bar:
        result = render_plan(plan, out, workers, bar.update, cluster, drop_duplicates)
    if result.kept:
        note(f"{len(result.kept)} hits were there already")
    _tell_some([f"{file} is of an earlier run and no hit of this pack any more" for file in result.stale])
    told = "left out: " if result.left_out else ""
    _tell_some([f"{told}{duplicate}" for duplicate in result.duplicates])
    if result.duplicates and not result.left_out:
        note("note: --drop-duplicates leaves near duplicates out")
    summary = f"{out}: {len(result.rendered) + len(result.kept)} hits, {len(result.rendered)} of them rendered now"
    if result.duplicates:
        summary += f", {len(result.duplicates)} near duplicates{' left out' if drop_duplicates else ''}"
    click.echo(summary)
    if result.failed:
        raise HitsFailed("\n".join(f"{name}: {reason}" for name, reason in result.failed.items()))


def _tell_some(notes: Sequence[str]) -> None:
    for text in notes[:MOST_NAMES]:
        note(f"note: {text}")
    if len(notes) > MOST_NAMES:
        note(f"note: and {len(notes) - MOST_NAMES} more of this kind")


def _foretell(plan: Plan, workers: int) -> None:
    """What a run would do: how many hits, at what cost, and the first of their names."""
    from kickrender.pack.estimate import estimate

    ready_solver()
    click.echo(f"{plan.title}: {len(plan.hits)} hits, {estimate(plan, plan.hits, workers)}")
    for hit in plan.hits[:MOST_NAMES]:
        click.echo(f"  {hit.name}{plan.options.ending}")
    if len(plan.hits) > MOST_NAMES:
        click.echo(f"  and {len(plan.hits) - MOST_NAMES} more")


class HitsFailed(KickrenderError):
    """Some hits have no file; the message says which and why."""


def read_jobs(text: str) -> int:
    """A number of worker processes; raises InputError."""
    if not text.isascii() or not text.isdigit() or int(text) == 0:
        raise InputError(Fault("--jobs", f"found '{text}'", "a whole number, 1 or more"))
    return int(text)


def cores() -> int:
    """How many cores this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1
