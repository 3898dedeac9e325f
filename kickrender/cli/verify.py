"""`kickrender verify`: say what moved since a pack was locked."""

from __future__ import annotations

import sys
from pathlib import Path

import click

from kickrender.cli.lock import lock_option, read_plan
from kickrender.cli.pack import cores, read_jobs
from kickrender.cli.settings import json_option, print_json, read_pairs
from kickrender.cli.solver import ready_solver
from kickrender.errors import Fault, InputError


@click.command()
@click.argument("pack")
@lock_option
@click.option("--tolerance", is_flag=True, help="Pass, too, what moved within every limit.")
@click.option(
    "--limit",
    "limits",
    metavar="NAME=VALUE",
    multiple=True,
    help="A limit of the inaudible: pitch, brightness (cents), level, null (dB), time, length (ms), offset (dBFS).",
)
@click.option("--jobs", metavar="N", help="Worker processes.  [default: one per core]")
@json_option
@click.option("--junit", metavar="FILE", type=click.Path(path_type=Path), help="Write JUnit XML, for build servers.")
@click.option("--report", metavar="DIR", type=click.Path(path_type=Path), help="Write a page to look and listen.")
@click.pass_context
def verify(
    context: click.Context,
    pack: str,
    lock_file: Path | None,
    tolerance: bool,
    limits: tuple[str, ...],
    jobs: str | None,
    as_json: bool,
    junit: Path | None,
    report: Path | None,
) -> int:
    """Render PACK again, as far as needed, and set every hit against its lock file.

    Each hit is the same, inaudible (other bytes, within every limit), changed, of a changed recipe, added, removed or
    failed. The exit code is 0 when all are the same (with --tolerance: within the limits) and 1 otherwise.

    \b
    Examples:
      kickrender verify my-pack.toml
      kickrender verify my-pack.toml --tolerance --limit null=-70 --junit kickrender.xml
      kickrender verify my-pack.toml --report moved
    """
    workers = cores() if jobs is None else read_jobs(jobs)
    from kickrender.lock.make import lock_path
    from kickrender.lock.moves import read_limits
    from kickrender.lock.text import read_lock

    chosen = read_limits(read_pairs(limits, "--limit", "pitch=2"), "--limit")
    read, plan = read_plan(pack)
    path = lock_file or lock_path(read, pack)
    if not path.exists():
        raise InputError(
            Fault(str(path), "no such lock file", f"a file made by `kickrender lock {pack}`, or --lock FILE")
        )
    locked = read_lock(path)
    ready_solver()
    from kickrender.lock.summary import facts, junit_bytes, summary
    from kickrender.lock.verify import verify_plan
    from kickrender.sound.files import write_whole

    if report is not None:
        from kickrender.lock.report import open_report, write_report

        open_report(report)
    with click.progressbar(
        length=len(plan.hits), label=f"verifying {plan.title}", file=sys.stderr, hidden=not sys.stderr.isatty()
    ) as bar:
        keep = report / "sounds" if report else None
        found = verify_plan(plan, locked, jobs=workers, limits=chosen, progress=bar.update, keep=keep)
    if junit is not None:
        write_whole(junit, junit_bytes(found, tolerance))
    if report is not None:
        write_report(found, report)
    if as_json:
        print_json(facts(found, tolerance))
    else:
        click.echo(f"{path}: {summary(found)}")
    return 0 if found.passes(tolerance) else 1
