"""`kickrender show`: what a circuit is, and what it does at rest."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from kickrender.cli.settings import json_option, note, print_json, read_settings, set_option
from kickrender.cli.solver import ready_solver
from kickrender.cli.tables import print_table

LEAST_CURRENT_A = 1e-9  # below, a device is off
REST_DIGITS = 9  # below a nanovolt a rest level is the rounding of the solver


@click.command()
@click.argument("circuit")
@set_option
@click.option("--response", "path", metavar="INPUT:NET", help="Small-signal gain from an input to a net, at rest.")
@click.option("--csv", "table", type=click.Path(path_type=Path), metavar="FILE", help="Write the response there.")
@click.option("--plot", "folder", type=click.Path(path_type=Path), metavar="DIR", help="Write pictures of a hit there.")
@json_option
def show(
    circuit: str,
    settings: tuple[str, ...],
    path: str | None,
    table: Path | None,
    folder: Path | None,
    as_json: bool,
) -> None:
    """Show CIRCUIT: its controls, parts, rest voltages and currents, and poles (frequency, Q, decay).

    Poles are those of the circuit at rest, and of its state early in the pitch drop, held still.

    \b
    Examples:
      kickrender show bridged-t
      kickrender show bridged-t --set pitch=0.9 --plot pictures
      kickrender show bridged-t --response gate:out --csv response.csv
      kickrender show my-circuit.toml --json
    """
    if table is not None and path is None:
        raise click.UsageError("--csv goes with --response INPUT:NET")
    from kickrender.circuit import read_circuit

    turned = read_settings(settings)
    loaded = read_circuit(circuit)
    resolved = loaded.resolve(turned, "--set")
    ready_solver()
    from kickrender.study import bench_view
    from kickrender.study.describe import describe
    from kickrender.study.files import write_table

    way = None if path is None else bench_view.read_path(path, resolved, "--response")
    facts = describe(loaded, turned)
    if way is not None:
        facts["response"] = {"input": way[0], "net": way[1], "table": bench_view.response_table(resolved, *way)}
    if folder is not None:
        names = bench_view.write_pictures(loaded, turned, folder, way)
        note(f"{folder}: {len(names)} pictures")
    if table is not None:
        write_table(facts["response"]["table"], table)
    if as_json:
        print_json(facts)
    else:
        _print_facts(facts)


def _print_facts(facts: dict[str, Any]) -> None:
    click.echo(f"{facts['circuit']['title']} ({facts['circuit']['name']})")
    if facts["about"]:
        click.echo(facts["about"])
    print_table(
        "Controls",
        ("name", "value", "from", "to", "moves"),
        [
            (name, _text(c["value"], c["unit"]), _text(c["from"], c["unit"]), _text(c["to"], c["unit"]), c["target"])
            for name, c in facts["controls"].items()
        ],
    )
    print_table(
        "Parts",
        ("name", "kind", "value", "terminals"),
        [
            (name, part["kind"], _part_value(part), ", ".join(f"{r}={net}" for r, net in part["terminals"].items()))
            for name, part in facts["parts"].items()
        ],
    )
    print_table(
        "At rest",
        ("net", "level"),
        [(name, _text(round(entry["value"], REST_DIGITS), entry["unit"])) for name, entry in facts["rest"].items()],
    )
    print_table(
        "Currents at rest, into the parts' terminals",
        ("part", "", ""),
        [
            (name, terminal, _text(entry["value"], entry["unit"]))
            for name, terminals in facts["currents"].items()
            for terminal, entry in terminals.items()
            if facts["parts"][name].get("model") and abs(entry["value"]) > LEAST_CURRENT_A
        ],
    )
    for title, poles in (
        ("Poles, linearised at rest", facts["poles"]),
        (f"Poles with the drop held open, {facts['drop_open_s'] * 1e3:g} ms in", facts["poles_with_drop_open"]),
    ):
        print_table(
            title,
            ("frequency", "Q", "decay to -60 dB"),
            [(_text(p["frequency_hz"], "Hz"), _plain(p["q"]), _text(p["decay_s"], "s")) for p in poles],
        )
    if "response" in facts:
        print_table(
            f"Small-signal gain from {facts['response']['input']} to {facts['response']['net']}",
            ("frequency", "dB", "degrees"),
            [
                (_text(row["frequency_hz"], "Hz"), f"{row['gain_db']:.2f}", f"{row['phase_deg']:.1f}")
                for row in facts["response"]["table"]
            ],
        )


def _part_value(part: dict[str, Any]) -> str:
    values = [_text(value["value"], value["unit"]) for value in part.get("values", {}).values()]
    return " + ".join(values) or part.get("model", "")


def _text(value: float | None, unit: str) -> str:
    from kickrender.circuit.values import format_value

    if value is None:
        return "infinite"
    return format_value(value, unit, digits=4)


def _plain(value: float | None) -> str:
    return "infinite" if value is None else f"{value:.4g}"
