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
    "centroid_hz": "centroid, Hz",
    "true_peak_dbtp": "true peak, dBTP",
    "integrated_lufs": "integrated, LUFS",
    "momentary_lufs": "momentary, LUFS",
}


@click.command()
@click.argument("sides", nargs=-1, required=True, metavar="SIDE SIDE...")
@click.option("--out", type=click.Path(path_type=Path), required=True, metavar="DIR", help="Folder for all files.")
@set_option
@click.option("--rate", metavar="HZ", help="Samples per second.  [default: 48000]")
@click.option("--length", metavar="SECONDS", help="Common length.  [default: until the longest has died away]")
@json_option
def compare(
    sides: tuple[str, ...], out: Path, settings: tuple[str, ...], rate: str | None, length: str | None, as_json: bool
) -> None:
    """Compare circuits or settings: sounds matched in loudness and aligned, numbers, pictures, residual.

    A SIDE is a circuit, with settings of its own after it, all in quotes. --set turns something on every side. Every
    further side is held against the first.

    \b
    Examples:
      kickrender compare bridged-t twin-t --out resonators
      kickrender compare bridged-t "bridged-t R_shape=12k" --set drive=0.8 --out shaper
      kickrender compare "bridged-t decay=0.3" "bridged-t decay=0.6" "bridged-t decay=0.9" --out decays
    """
    from kickrender.sound.options import read_options

    options = read_options({"rate": rate, "length": length}, place=lambda name: f"--{name}")
    common = read_settings(settings)
    from kickrender.study.sides import read_side

    read = [read_side(text, common, f"side '{text}'") for text in sides]
    ready_solver()
    from kickrender.study.compare import compare as compare_sides
    from kickrender.study.compare import write_comparison

    comparison = compare_sides(read, options)
    names = write_comparison(comparison, out)
    if as_json:
        print_json(comparison.facts)
    else:
        _print(comparison.facts)
    note(f"{out}: {len(names)} files")


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
