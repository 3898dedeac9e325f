"""`kickrender compare`: circuits or settings side by side."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from kickrender.cli.settings import json_option, note, print_json, read_settings, set_option
from kickrender.cli.solver import ready_solver
from kickrender.cli.tables import print_table

_SHOWN = {
    "settled_hz": "settled pitch, Hz",
    "start_hz": "start pitch, Hz",
    "decay_s": "decay to -60 dB, s",
    "attack_s": "attack, s",
    "drop_s": "time of the drop, s",
    "centroid_hz": "centroid, Hz",
    "true_peak_dbtp": "true peak, dBTP",
    "integrated_lufs": "integrated, LUFS",
    "momentary_lufs": "momentary, LUFS",
}


@click.command()
@click.argument("sides", nargs=-1, metavar="SIDE SIDE...")
@click.option("--out", type=click.Path(path_type=Path), metavar="DIR", help="Folder for all files.")
@set_option
@click.option("--rate", metavar="HZ", help="Samples per second.  [default: 48000]")
@click.option("--length", metavar="SECONDS", help="Common length.  [default: until the longest has died away]")
@click.option("--trials", type=int, help="Trials of the blind listening page.  [default: 16]")
@click.option("--pool", is_flag=True, help="Take the arguments as results of a blind page, and count them together.")
@json_option
def compare(
    sides: tuple[str, ...],
    out: Path | None,
    settings: tuple[str, ...],
    rate: str | None,
    length: str | None,
    trials: int | None,
    pool: bool,
    as_json: bool,
) -> None:
    """Compare circuits or settings: sounds matched in loudness and aligned, numbers, pictures, residual, blind page.

    A SIDE is a circuit, with settings of its own after it, all in quotes. --set turns something on every side. Every
    further side is held against the first. The blind listening pages (listen-1-2.html ...) open in a browser, with no
    network; what they save can be pooled.

    \b
    Examples:
      kickrender compare bridged-t twin-t --out resonators
      kickrender compare bridged-t "bridged-t R_shape=12k" --set drive=0.8 --out shaper
      kickrender compare "bridged-t decay=0.3" "bridged-t decay=0.6" "bridged-t decay=0.9" --out decays
      kickrender compare --pool results/*.json
    """
    if pool:
        _pool(sides, as_json)
        return
    if not sides:
        raise click.UsageError("Missing argument 'SIDE SIDE...'.")
    if out is None:
        raise click.UsageError("Missing option '--out'.")
    from kickrender.sound.options import read_options

    options = read_options({"rate": rate, "length": length}, place=lambda name: f"--{name}")
    common = read_settings(settings)
    from kickrender.study.sides import read_side

    read = [read_side(text, common, f"side '{text}'") for text in sides]
    ready_solver()
    from kickrender.study.blind import DEFAULT_TRIALS
    from kickrender.study.compare import compare as compare_sides
    from kickrender.study.compare import write_comparison

    comparison = compare_sides(read, options)
    names = write_comparison(comparison, out, DEFAULT_TRIALS if trials is None else trials)
    if as_json:
        print_json(comparison.facts)
    else:
        _print(comparison.facts)
    note(f"{out}: {len(names)} files")


def _pool(paths: tuple[str, ...], as_json: bool) -> None:
    """Results of blind listening pages, counted together."""
    from dataclasses import asdict

    from kickrender.study.pool import pool_results

    pooled = pool_results(paths)
    if as_json:
        print_json(asdict(pooled))
        return
    click.echo(f"{pooled.labels[0]} against {pooled.labels[1]}: {pooled.sittings} sittings")
    click.echo(f"{pooled.correct} of {pooled.trials} right; by guessing, so many or more: p = {pooled.p_value:.4g}")
    rows = [(Path(file).name, listener, f"{correct}/{trials}") for file, listener, correct, trials in pooled.each]
    print_table("Each sitting", ("file", "listener", "right"), rows)


def _print(facts: dict[str, Any]) -> None:
    for number, side in enumerate(facts["sides"], 1):
        moved = f", moved by {side['shift_samples']} samples" if side["shift_samples"] else ""
        other_way = ", swings the other way" if side["swings_the_other_way"] else ""
        click.echo(f"{number} {side['label']}: {side['gain_db']:+.2f} dB to match{moved}{other_way}")
    for number, entry in enumerate(facts["against_the_first"], 2):
        residual = entry["null_residual"]["overall_db"]
        click.echo(f"\n{number} against 1: null residual {'none' if residual is None else f'{residual:.1f} dB'}")
        print_table(
            "Measurements",
            ("", "1", str(number), "difference"),
            [_row(title, entry["measurements"][name]) for name, title in _SHOWN.items()],
        )
        octaves = entry["null_residual"]["octaves_db"]
        print_table(
            "Null residual per octave, dB of the first side's own level there",
            [f"{float(hz):g}" for hz in octaves],
            [["-" if value is None else f"{value:.1f}" for value in octaves.values()]],
        )
        print_table("Netlist", ("part", "", "1", str(number)), _netlist(entry["netlist"]["parts"]))


def _row(title: str, entry: dict[str, Any]) -> tuple[str, str, str, str]:
    reference, other = ("-" if entry[key] is None else f"{entry[key]:.5g}" for key in ("reference", "other"))
    difference = "-" if entry["difference"] is None else f"{entry['difference']:+.3g} {entry['unit']}"
    return title, reference, other, difference


def _netlist(parts: dict[str, Any]) -> list[tuple[str, str, str, str]]:
    rows = [(name, "removed", part["kind"], "") for name, part in parts["removed"].items()]
    rows += [(name, "added", "", part["kind"]) for name, part in parts["added"].items()]
    for name, changes in parts["changed"].items():
        rows += [(name, key, _short(change["from"]), _short(change["to"])) for key, change in changes.items()]
    return rows


def _short(value: object) -> str:
    if isinstance(value, dict):
        return " ".join(f"{role}={net}" for role, net in value.items())
    return "-" if value is None else f"{value:.6g}" if isinstance(value, float) else str(value)
