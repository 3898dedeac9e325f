"""`kickrender study tolerance`: a circuit built many times, of real parts."""

from __future__ import annotations

import sys

import click

from kickrender.cli.pack import cores, read_jobs
from kickrender.cli.settings import json_option, read_settings, set_option
from kickrender.cli.solver import ready_solver
from kickrender.cli.tables import print_table


@click.command()
@click.argument("circuit")
@set_option
@click.option("--count", type=int, default=100, show_default=True, help="Builds to draw.")
@click.option("--jobs", metavar="N", help="Worker processes.  [default: one per core]")
@json_option
def tolerance(circuit: str, settings: tuple[str, ...], count: int, jobs: str | None, as_json: bool) -> None:
    """Build CIRCUIT many times, of parts that deviate, and tell how pitch, drop, decay and loudness spread."""
    workers = cores() if jobs is None else read_jobs(jobs)
    from kickrender.circuit import read_circuit

    loaded = read_circuit(circuit)
    turned = read_settings(settings)
    loaded.resolve(turned, "--set")
    ready_solver()
    from kickrender.study.tolerance import read_study_spread, statistics
    from kickrender.study.tolerance import tolerance as study_tolerance

    spread = read_study_spread(loaded, {})
    with click.progressbar(
        length=count + 1, label=f"building {loaded.title}", file=sys.stderr, hidden=not sys.stderr.isatty()
    ) as bar:
        found = study_tolerance(loaded, spread, settings=turned, count=count, jobs=workers, progress=bar.update)
    rows = []
    for aspect in found.aspects:
        if row := statistics(found.values(aspect)):
            rows.append((aspect, *(f"{value:.5g}" for value in row.values())))
    print_table("Spread", ("", *(row or {})), rows)
