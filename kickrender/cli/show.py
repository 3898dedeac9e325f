"""`kickrender show`: what a circuit is, and what it does at rest."""

from __future__ import annotations

from typing import Any

import click

from kickrender.cli.settings import json_option, print_json, read_settings, set_option
from kickrender.cli.solver import ready_solver
from kickrender.cli.tables import print_table

REST_DIGITS = 9  # below a nanovolt a rest level is the rounding of the solver


@click.command()
@click.argument("circuit")
@set_option
@json_option
def show(circuit: str, settings: tuple[str, ...], as_json: bool) -> None:
    """Show CIRCUIT: its controls, parts, rest voltages, and poles (frequency, Q, decay).

    \b
    Examples:
      kickrender show bridged-t
      kickrender show bridged-t --set pitch=0.9
      kickrender show my-circuit.toml --json
    """
    from kickrender.circuit import read_circuit

    turned = read_settings(settings)
    loaded = read_circuit(circuit)
    loaded.resolve(turned, "--set")
    ready_solver()
    from kickrender.study.describe import describe

    facts = describe(loaded, turned)
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
        "Poles, linearised at rest",
        ("frequency", "Q", "decay to -60 dB"),
        [(_text(p["frequency_hz"], "Hz"), _plain(p["q"]), _text(p["decay_s"], "s")) for p in facts["poles"]],
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
