"""`kickrender render`: one hit."""

from __future__ import annotations

from pathlib import Path

import click

from kickrender.cli.settings import json_option, note, print_json, read_settings, set_option
from kickrender.cli.solver import ready_solver
from kickrender.cli.tables import check_table_name


@click.command()
@click.argument("circuit")
@click.option(
    "--out", type=click.Path(path_type=Path), required=True, help="The sound, .wav or .flac; its sidecar stands beside."
)
@set_option
@click.option("--rate", metavar="HZ", help="Sample rate, 22050 to 192000.  [default: 48000]")
@click.option(
    "--format",
    "file_format",
    metavar="FORMAT",
    help="pcm16, pcm24, float32, flac16 or flac24.  [default: pcm24; flac24 where --out ends in .flac]",
)
@click.option("--length", metavar="SECONDS", help="Length; by default until the sound has died away, at most 4 s.")
@click.option("--oversample", metavar="TIMES", help="A power of two up to 64; 1 means unfiltered.  [default: 8]")
@click.option("--raw", is_flag=True, help="Volts over full scale from t = 0: no level, trim, fade or dither.")
@click.option("--level", metavar="LEVEL", help='Wanted level: "-14 LUFS", "-1 dBTP", "-3 dBFS".  [default: none]')
@click.option("--probe", "probes", metavar="NET", multiple=True, help="One more channel: this net. May be given again.")
@click.option("--csv", "table", type=click.Path(path_type=Path), metavar="FILE", help="Probed nets go there, in volts.")
@json_option
def render(
    circuit: str,
    out: Path,
    settings: tuple[str, ...],
    rate: str | None,
    file_format: str | None,
    length: str | None,
    oversample: str | None,
    raw: bool,
    level: str | None,
    probes: tuple[str, ...],
    table: Path | None,
    as_json: bool,
) -> None:
    """Strike CIRCUIT once and write the sound, with a sidecar (.json) that holds its whole recipe.

    \b
    Examples:
      kickrender render bridged-t --out hit.wav
      kickrender render bridged-t --set decay=0.8 --set accent=5V --level "-16 LUFS" --out long.wav
      kickrender render bridged-t --level "-16 LUFS" --out hit.flac
      kickrender render my-circuit.toml --raw --length 0.5 --format float32 --probe core --out nets.wav
      kickrender render bridged-t --probe ring --probe sweep --csv nets.csv --out hit.wav
    """
    from kickrender.circuit import read_circuit
    from kickrender.sound.level import read_level_text
    from kickrender.sound.options import read_options
    from kickrender.sound.sound_file import check_channels, check_sound_name

    if table is not None:
        check_table_name(table)
        if not probes:
            raise click.UsageError("--csv goes with --probe NET")
    turned = read_settings(settings)
    if file_format is None and out.suffix.lower() == ".flac":
        file_format = "flac24"
    options = read_options(
        {"rate": rate, "format": file_format, "length": length, "oversample": oversample, "raw": raw or None},
        place=lambda name: f"--{name}",
    )
    check_sound_name(out, options.format)
    wanted = None if level is None else read_level_text(level, "--level")
    struck = read_circuit(circuit)
    resolved = struck.resolve(turned, "--set")
    ready_solver()
    from kickrender.sound.loaded import LoadedCircuit, check_probes

    check_probes(resolved, probes, "--probe")
    channels, nets = (probes, ()) if table is None else ((), probes)
    check_channels(1 + len(channels), options.format, "--probe")
    sound = LoadedCircuit(struck).render(turned, options=options, level=wanted, probes=channels, nets=nets)
    sound.write(out)
    if table is not None:
        sound.write_nets(table)
    for text in sound.facts["notes"]:
        note(f"note: {text}")
    if as_json:
        print_json(sound.facts)
    else:
        click.echo(f"{out}: {sound.summary()}")
