"""`kickrender study tolerance`: a circuit built many times, of real parts."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Any

import click

from kickrender.cli.pack import cores, read_jobs
from kickrender.cli.settings import json_option, note, print_json, read_pairs, read_settings, set_option
from kickrender.cli.solver import ready_solver
from kickrender.cli.tables import print_table
from kickrender.errors import KickrenderError

_COLUMNS = {
    "mean": "mean",
    "standard_deviation": "s.d.",
    "min": "min",
    "p5": "5 %",
    "p25": "25 %",
    "p50": "50 %",
    "p75": "75 %",
    "p95": "95 %",
    "max": "max",
}


class StudyFailed(KickrenderError):
    """A study was made, and found nothing to build, or builds that do not sound; the message says which."""


@click.command()
@click.argument("circuit")
@set_option
@click.option("--count", type=int, default=100, show_default=True, help="How many builds.")
@click.option("--seed", default="1", show_default=True, help="A name or a whole number; another one draws other parts.")
@click.option(
    "--spread",
    "tolerances",
    metavar="NAME=5%",
    multiple=True,
    help="Tolerance of a kind (resistor), a part (R1), a device's number (npn.forward_gain) or the temperature (3C)."
    "  [default: resistors 1 %, capacitors 5 %, coils 10 %, pots 20 %]",
)
@click.option(
    "--distribution", default="normal", show_default=True, help="How values lie in their tolerance: normal or uniform."
)
@click.option(
    "--limit",
    "limits",
    metavar="NAME=LOW..HIGH",
    multiple=True,
    help="What a build has to keep: pitch, start, drop, decay, loudness, peak, drop_time, attack or centroid.",
)
@click.option("--out", type=click.Path(path_type=Path), metavar="DIR", help="Folder for table, histograms and JSON.")
@click.option("--jobs", metavar="N", help="Worker processes.  [default: one per core]")
@json_option
def tolerance(
    circuit: str,
    settings: tuple[str, ...],
    count: int,
    seed: str,
    tolerances: tuple[str, ...],
    distribution: str,
    limits: tuple[str, ...],
    out: Path | None,
    jobs: str | None,
    as_json: bool,
) -> None:
    """Build CIRCUIT many times, of parts that deviate.

    Tells how pitch, start pitch, drop, decay and loudness spread, and how many builds keep given limits. Build 7 has
    the parts of take 7 of a pack with the same seed and tolerances. A limit may leave one end out; cents of a pitch
    and dB of a loudness count from what exact parts give. The yield comes with its exact 95 % confidence interval. The
    exit code is 1 when no build keeps every limit, or when one cannot be solved.

    \b
    Examples:
      kickrender study tolerance bridged-t
      kickrender study tolerance bridged-t --limit pitch=-30..30cents --limit decay=0.4..0.6s --out builds
      kickrender study tolerance bridged-t --spread capacitor=1% --spread npn.forward_gain=50% --count 1000
    """
    workers = cores() if jobs is None else read_jobs(jobs)
    from kickrender.circuit import read_circuit

    given = read_pairs(tolerances, "--spread", "resistor=1%")
    turned = read_settings(settings)
    loaded = read_circuit(circuit)
    loaded.resolve(turned, "--set")
    from kickrender.study.files import open_folder
    from kickrender.study.limits import read_limits
    from kickrender.study.tolerance import check_count, read_study_spread

    bounds = read_limits(limits, "--limit")
    spread = read_study_spread(loaded, given, seed, distribution, "--spread")
    check_count(count, "--count")
    ready_solver()
    from kickrender.study.tolerance import tolerance as study_tolerance
    from kickrender.study.tolerance_report import JSON_NAME, headline, tolerance_facts, write_tolerance

    if out is not None:
        open_folder(out, JSON_NAME)  # what is wrong with it is told now, not after the rendering
    with click.progressbar(
        length=count + 1, label=f"building {loaded.title}", file=sys.stderr, hidden=not sys.stderr.isatty()
    ) as bar:
        found = study_tolerance(
            loaded, spread, settings=turned, count=count, limits=bounds, jobs=workers, progress=bar.update
        )
    facts = tolerance_facts(found)
    if as_json:
        print_json(facts)
    else:
        click.echo(f"{loaded.title}: {headline(found)}")
        _print(facts)
    if out is not None:
        note(f"{out}: {len(write_tolerance(found, out))} files")
    if complaints := _complaints(facts):
        raise StudyFailed("\n".join(complaints))


def _print(facts: dict[str, Any]) -> None:
    spread = facts["spread"]
    each = [f"{name} {100.0 * share:g} %" for name, share in spread["tolerances"].items()]
    each += [f"temperature {spread['temperature_k']:g} K"] if spread["temperature_k"] else []
    click.echo(f"Spread: {', '.join(each)}; {spread['distribution']}, seed {spread['seed']}")
    rows = []
    for name, aspect in facts["aspects"].items():
        if aspect["statistics"] is None:
            rows.append((f"{name}, {aspect['unit']}", _digits(aspect["exact"]), *("-" for _ in _COLUMNS)))
            continue
        rows.append(_row(f"{name}, {aspect['unit']}", aspect["exact"], aspect["statistics"]))
        if aspect["change_unit"] == "cents" and aspect["change_statistics"]:
            rows.append(_row(f"{name}, cents from exact", 0.0, aspect["change_statistics"]))
    print_table("Builds", ("", "exact", *_COLUMNS.values()), rows)
    print_table(
        "Limits",
        ("", "missed", "below", "above", "no value"),
        [(x["limit"], *(str(x[key]) for key in ("missed", "below", "above", "none"))) for x in facts["limits"]],
    )


def _row(title: str, exact: float | None, statistics: dict[str, float]) -> tuple[str, ...]:
    return title, _digits(exact), *(_digits(statistics[key]) for key in _COLUMNS)


def _digits(value: float | None) -> str:
    return "-" if value is None else f"{value:.4g}"


def _complaints(facts: dict[str, Any]) -> list[str]:
    """Why the study ends with exit code 1, in words; nothing when it does not."""
    said = [f"build {number}: {reason}" for number, reason in facts["failures"].items()]
    achieved = facts["yield"]
    if achieved is not None and achieved["kept"] == 0:
        missed = ", ".join(f"{x['limit']} by {x['missed']}" for x in facts["limits"] if x["missed"])
        outside = [x["limit"] for x in facts["limits"] if x["exact_parts"] != "kept"]
        said.append(
            f"no build of {achieved['count']} keeps every limit (missed: {missed}); with 95 % confidence the yield is "
            f"below {100.0 * achieved['high']:.2g} %"
            + (f". Exact parts miss {', '.join(outside)}, too" if outside else "")
        )
    return said
