"""`kickrender study sensitivity`: which parts decide how a circuit sounds."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import TYPE_CHECKING

import click

from kickrender.cli.pack import cores, read_jobs
from kickrender.cli.settings import json_option, note, print_json, read_settings, set_option
from kickrender.cli.solver import ready_solver
from kickrender.cli.study_tolerance import StudyFailed
from kickrender.cli.tables import print_table

if TYPE_CHECKING:
    from kickrender.study.sensitivity import Sensitivity, Slope

LOOKED_AT = ("pitch", "start", "decay", "loudness")  # as in kickrender.study.sensitivity, which help must not load


@click.command()
@click.argument("circuit")
@set_option
@click.option("--by", type=click.Choice(LOOKED_AT), default="pitch", show_default=True, help="What to rank by.")
@click.option("--top", type=click.IntRange(min=1), default=20, show_default=True, help="How many to print.")
@click.option("--out", type=click.Path(path_type=Path), metavar="DIR", help="Folder for table, bars and JSON.")
@click.option("--jobs", metavar="N", help="Worker processes.  [default: one per core]")
@json_option
def sensitivity(
    circuit: str, settings: tuple[str, ...], by: str, top: int, out: Path | None, jobs: str | None, as_json: bool
) -> None:
    """Rank the parts of CIRCUIT by what a percent of each does.

    Tells cents of pitch and start pitch, milliseconds of decay and dB of loudness. Every number of every part (values,
    a pot's track, a device's gain, saturation current ...) is moved half a percent down and up, and the sounds are
    measured. The noise of measuring is measured too; what lies below it is shown as "<" and that noise floor.

    \b
    Examples:
      kickrender study sensitivity bridged-t
      kickrender study sensitivity bridged-t --by decay --top 10 --out sensitivity
      kickrender study sensitivity lc --set pitch=1 --json
    """
    workers = cores() if jobs is None else read_jobs(jobs)
    from kickrender.circuit import read_circuit

    turned = read_settings(settings)
    loaded = read_circuit(circuit)
    loaded.resolve(turned, "--set")
    ready_solver()
    from kickrender.study.files import open_folder
    from kickrender.study.sensitivity import sensitivity as study_sensitivity
    from kickrender.study.sensitivity import strikes
    from kickrender.study.sensitivity_report import JSON_NAME, sensitivity_facts, write_sensitivity

    if out is not None:
        open_folder(out, JSON_NAME)  # what is wrong with it is told now, not after the rendering
    with click.progressbar(
        length=strikes(loaded), label=f"striking {loaded.title}", file=sys.stderr, hidden=not sys.stderr.isatty()
    ) as bar:
        found = study_sensitivity(loaded, settings=turned, jobs=workers, progress=bar.update)
    if as_json:
        print_json(sensitivity_facts(found, by))
    else:
        _print(found, by, top)
    if out is not None:
        note(f"{out}: {len(write_sensitivity(found, out, by))} files")
    if failed := [slope for slope in found.slopes if slope.failure]:
        raise StudyFailed("\n".join(f"{slope.name}: {slope.failure}" for slope in failed))


def _print(found: Sensitivity, by: str, top: int) -> None:
    from kickrender.study.aspects import ASPECTS
    from kickrender.study.sensitivity_report import slope_value

    click.echo(f"{found.circuit.title}: change per percent of each part, ranked by {by}")
    ranked = found.ranked(by)
    told = [slope for slope in ranked if any(found.tells(slope, name) for name in LOOKED_AT)]
    print_table(
        "Parts",
        ("", "value", *(f"{name}, {ASPECTS[name].change_unit}" for name in LOOKED_AT)),
        [(s.name, slope_value(s), *(_slope(found, s, name) for name in LOOKED_AT)) for s in told[:top]],
    )
    if len(told) > top:
        click.echo(f"  and {len(told) - top} more; --top {len(told)} prints them")
    noise = [f"{floor:.2g} {ASPECTS[name].change_unit}" for name, floor in found.floor.items() if floor is not None]
    click.echo(
        f"\n{len(ranked) - len(told)} of {len(ranked)} numbers move nothing above the noise ({', '.join(noise)})"
    )


def _slope(found: Sensitivity, slope: Slope, name: str) -> str:
    value, floor = slope.slopes[name], found.floor[name]
    if value is None or floor is None:
        return "-"
    return f"{value:+.3g}" if found.tells(slope, name) else f"<{floor:.2g}"
