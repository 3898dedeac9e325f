"""`kickrender study fit`: part values for wanted goals."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import TYPE_CHECKING

import click

from kickrender.cli.pack import cores, read_jobs
from kickrender.cli.settings import json_option, note, print_json, read_settings, set_option
from kickrender.cli.solver import ready_solver
from kickrender.cli.tables import print_table

if TYPE_CHECKING:
    from kickrender.study.fit import Fit
    from kickrender.study.fit_bench import Combination


@click.command()
@click.argument("circuit")
@click.option(
    "--goal",
    "goals",
    metavar="NAME=VALUE",
    multiple=True,
    help="What to meet: pitch, decay, drop, drop_time, centroid.",
)
@click.option(
    "--vary", metavar="PARTS", multiple=True, help="Parts to change, with commas.  [default: those that matter]"
)
@click.option(
    "--series", metavar="[KIND=]SERIES", multiple=True, help="E3 to E192.  [default: resistors E24, others E12]"
)
@set_option
@click.option("--count", type=int, default=5, show_default=True, help="How many combinations to tell.")
@click.option(
    "--out", type=click.Path(path_type=Path), metavar="DIR", help="Folder for the best as a circuit, and tables."
)
@click.option("--jobs", metavar="N", help="Worker processes.  [default: one per core]")
@json_option
def fit(
    circuit: str,
    goals: tuple[str, ...],
    vary: tuple[str, ...],
    series: tuple[str, ...],
    settings: tuple[str, ...],
    count: int,
    out: Path | None,
    jobs: str | None,
    as_json: bool,
) -> None:
    """Find part values with which CIRCUIT meets goals, from the series in which parts are made (IEC 60063).

    Goals are pitch (Hz or a note), decay (time to -60 dB), drop (start over settled pitch, in semitones: st), drop_time
    (until 1/e of the drop is left) and centroid (Hz). A part stays within a tenth and ten times its value. Every
    combination told was rendered and measured; they are ranked by how far they miss, in the tolerances of a pack's
    goals (2 cents, 3 %, a quarter of a semitone ...).

    \b
    Examples:
      kickrender study fit bridged-t --goal pitch=50Hz --goal decay=0.4s
      kickrender study fit bridged-t --goal pitch=G1 --goal drop=14st --vary R_foot,R_pull --out lower
      kickrender study fit lc --goal pitch=90Hz --series E96 --series capacitor=E6 --set decay=0.7
    """
    workers = cores() if jobs is None else read_jobs(jobs)
    from kickrender.circuit import read_circuit

    turned = read_settings(settings)
    loaded = read_circuit(circuit)
    loaded.resolve(turned, "--set")
    from kickrender.study.fit_read import read_goals, read_series_by_kind, read_varied

    wanted = read_goals(goals, "--goal")
    varied = read_varied(vary, loaded, turned, "--vary")
    by_kind = read_series_by_kind(series, "--series")
    ready_solver()
    from kickrender.study.fit import fit as study_fit
    from kickrender.study.fit_report import fit_facts, write_fit

    with click.progressbar(
        length=_USUAL_STRIKES, label=f"fitting {loaded.title}", file=sys.stderr, hidden=not sys.stderr.isatty()
    ) as bar:
        found = study_fit(
            loaded, wanted, vary=varied, series=by_kind, settings=turned, count=count, jobs=workers, progress=bar.update
        )
        bar.update(_USUAL_STRIKES)  # nobody knows beforehand how many it takes
    if as_json:
        print_json(fit_facts(found))
    else:
        _print(found)
    if out is not None:
        names = write_fit(found, out)
        note(f"{out}: {', '.join(names)}")


_USUAL_STRIKES = 250


def _print(found: Fit) -> None:
    from kickrender.sound.goals import GOALS
    from kickrender.study.aspects import ASPECTS
    from kickrender.study.fit_bench import miss_unit
    from kickrender.study.fit_report import codes

    wanted = ", ".join(f"{goal.kind} {goal.shown}" for goal in found.goals)
    click.echo(f"{found.circuit.title}: {wanted}; {found.strikes} strikes")
    kinds = [goal.kind for goal in found.goals]

    def row(title: str, each: Combination) -> tuple[str, ...]:
        told = [(f"{each.measured[kind]:.5g}", f"{round(each.misses[kind], 3) + 0.0:+.3g}") for kind in kinds]
        besides = ["-" if value is None else f"{round(value, 4) + 0.0:.4g}" for value in each.besides.values()]
        cells = [cell for pair in told for cell in pair]
        return title, *codes(found, each.values).values(), *cells, f"{each.off:.2g}", *besides

    heads = [(f"{kind}, {GOALS[kind].unit}", miss_unit(kind)) for kind in kinds]
    before = [] if found.before is None else [row("before", found.before)]
    others = [f"{name}, {ASPECTS[name].unit}" for name in found.free.besides]
    series = ("series", *found.series.values(), *("" for _ in range(2 * len(kinds) + 1 + len(others))))
    print_table(
        "Combinations, and what each misses by",
        ("", *found.series, *(cell for pair in heads for cell in pair), "off", *others),
        [series, *before, row("free", found.free), *(row(str(k), each) for k, each in enumerate(found.best, 1))],
    )
