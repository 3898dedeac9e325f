"""`kickrender study parts`: the parts list, and what a hit asks of each part."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import TYPE_CHECKING

import click

from kickrender.cli.settings import json_option, note, print_json, read_settings, set_option
from kickrender.cli.solver import ready_solver
from kickrender.cli.tables import check_table_name, print_table

if TYPE_CHECKING:
    from kickrender.study.parts import PartsStudy

_COLUMNS = {
    "peak_power": "peak power",
    "average_power": "average",
    "peak_voltage": "voltage",
    "peak_reverse_voltage": "reverse",
    "peak_current": "current",
}
_ENDS = ("lowest_voltage", "highest_voltage")


@click.command()
@click.argument("circuit")
@set_option
@click.option("--worst", is_flag=True, help="Take every control that is not set to both ends, in all combinations.")
@click.option(
    "--csv", "table", type=click.Path(path_type=Path), metavar="FILE", help="Write a row for each part there."
)
@json_option
def parts(circuit: str, settings: tuple[str, ...], worst: bool, table: Path | None, as_json: bool) -> None:
    """List what to buy for CIRCUIT, equal parts together, and the power, voltage and current a hit asks of each.

    \b
    Examples:
      kickrender study parts bridged-t
      kickrender study parts bridged-t --set accent=5V --csv parts.csv
      kickrender study parts bridged-t --worst
    """
    if table is not None:
        check_table_name(table)
    from kickrender.circuit import read_circuit

    turned = read_settings(settings)
    loaded = read_circuit(circuit)
    loaded.resolve(turned, "--set")
    ready_solver()
    from kickrender.study.files import write_table
    from kickrender.study.parts import list_parts, walks

    walked = tuple(name for name in loaded.controls if name not in turned) if worst else ()
    hidden = not (worst and sys.stderr.isatty())
    with click.progressbar(
        length=len(walks(loaded, walked)), label=f"striking {loaded.title}", file=sys.stderr, hidden=hidden
    ) as bar:
        found = list_parts(loaded, turned, worst=worst, progress=bar.update)
    if table is not None:
        write_table(found.table, table)
    if as_json:
        print_json(found.facts)
        return
    _print(found)
    if table is not None:
        note(f"{table}: {len(found.table)} parts")


def _print(found: PartsStudy) -> None:
    from kickrender.circuit.values import format_value
    from kickrender.study.parts import CAUTION
    from kickrender.study.stress import LOADS

    def text(part: str, key: str) -> str:
        if key not in found.bears[part]:
            return ""
        return format_value(found.bears[part][key].value, LOADS[found.circuit.parts[part].kind][key].unit, digits=3)

    click.echo(f"{found.circuit.title} ({found.circuit.name}): {len(found.bears)} parts")
    print_table(
        "To buy",
        ("", "kind", "value", "model", "parts"),
        [(str(len(x.parts)), x.kind, x.value, x.model, " ".join(x.parts)) for x in found.lines],
    )
    how = f"worst of {found.hits} hits, every control at both ends" if found.walked else "one hit as set"
    rows = []
    for part in found.bears:
        rules = LOADS[found.circuit.parts[part].kind]
        further = [
            f"{rules[key].about} {text(part, key)}" for key in found.bears[part] if key not in (*_COLUMNS, *_ENDS)
        ]
        if _ENDS[0] in found.bears[part]:
            further.append(" to ".join(text(part, key) for key in _ENDS))
        rows.append((part, *(text(part, key) for key in _COLUMNS), ", ".join(further)))
    print_table(
        f"What each bears ({how}; averages over the sound, up to {found.longest_s:.3g} s)",
        ("part", *_COLUMNS.values(), ""),
        rows,
    )
    click.echo(f"\n{CAUTION}")
