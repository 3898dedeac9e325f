"""The command line itself: help, light imports, and every failure as one message and an exit code."""

import os
import subprocess
import sys
from pathlib import Path

import click
import pytest

from kickrender import __version__
from kickrender.circuit import shipped_circuits
from kickrender.cli import main as cli
from kickrender.errors import SolveError
from tests.cli.conftest import Run

COMMANDS = ", ".join(sorted(cli.kickrender.commands))
HEAVY = ("numba", "numpy", "scipy", "pydantic", "matplotlib", "soundfile", "jinja2")


@pytest.mark.parametrize("command", ["", *cli.kickrender.commands])
def test_every_help_shows_examples_of_itself(command: str, run: Run) -> None:
    ran = run(*command.split(), "--help")
    assert ran.code == 0
    examples = ran.out.split("Examples:")[1].split("Options:")[0].split("\n")
    shown = [line.strip() for line in examples if line.strip()]
    assert shown
    assert all(line.startswith(f"kickrender {command}".strip()) for line in shown)


def test_no_command_shows_the_help(run: Run) -> None:
    assert run().out == run("--help").out


def test_version(run: Run) -> None:
    assert run("--version").out == f"kickrender {__version__}\n"


@pytest.mark.parametrize("arguments", [["--help"], ["pack", "--help"], ["render", "--help"], ["shw"]])
def test_help_loads_nothing_heavy(arguments: list[str]) -> None:
    program = (
        "import sys; from kickrender.cli.main import main; main(sys.argv[1:]); "
        f"sys.exit(sum(name in sys.modules for name in {HEAVY}))"
    )
    done = subprocess.run([sys.executable, "-c", program, *arguments], capture_output=True, text=True)
    assert done.returncode == 0, done.stderr


def test_the_library_loads_nothing_heavy() -> None:
    program = f"import kickrender, sys; sys.exit(sum(name in sys.modules for name in {HEAVY}))"
    assert subprocess.run([sys.executable, "-c", program]).returncode == 0


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ("shw", f"kickrender: unknown command 'shw'; allowed: {COMMANDS}; did you mean 'show'?"),
        ("--jsn", "kickrender: unknown option '--jsn'; allowed: --version, -h, --help"),
        ("list --jsn", "kickrender list: unknown option '--jsn'; allowed: --json, -h, --help; did you mean '--json'?"),
        ("show", "kickrender show: CIRCUIT is missing; allowed: kickrender show [OPTIONS] CIRCUIT"),
        ("show a b", "kickrender show: Got unexpected extra argument (b)"),
        ("render x.toml", "kickrender render: --out is missing; allowed: kickrender render [OPTIONS] CIRCUIT"),
        ("render x.toml --out", "kickrender: Option '--out' requires an argument"),
        ("pack x.toml", "kickrender pack: --out is missing; allowed: --out FOLDER, or --dry-run"),
        ("pack x.toml --out o --jobs 0", "kickrender: --jobs: found '0'; allowed: a whole number, 1 or more"),
        ("pack x.toml --out o --jobs two", "kickrender: --jobs: found 'two'; allowed: a whole number, 1 or more"),
        ("pack x.toml --dry-run", "kickrender: x.toml: cannot read x.toml: No such file or directory; allowed: a pack "
                                  "file that can be read"),
        ("show brigded-t", "kickrender: circuit 'brigded-t': no circuit 'brigded-t'; allowed: a shipped circuit "
                           f"({', '.join(shipped_circuits())}) or a path that ends in .toml; did you mean "
                           "'bridged-t'?"),
        ("show voice.toml --set ton=1", "kickrender: --set ton: unknown setting 'ton'; allowed: a control (tone, "
                                        "accent), a part, an input or temperature; did you mean 'tone'?"),
        ("show voice.toml --set tone", "kickrender: --set: 'tone'; allowed: NAME=VALUE, for instance decay=0.7"),
        ("show voice.toml --set tone=2", "kickrender: --set tone: '2' is out of range; allowed: 0 to 1"),
        ("render voice.toml --out a.mp3", "kickrender: --out: found 'a.mp3' for pcm24; allowed: a file name that ends "
                                          "in .wav (pcm16, pcm24, float32) or .flac (flac16, flac24)"),
        ("render voice.toml --out a.wav --format flac16", "kickrender: --out: found 'a.wav' for flac16; allowed: a "
                                                          "file name that ends in .wav (pcm16, pcm24, float32) or "
                                                          ".flac (flac16, flac24)"),
        ("render voice.toml --out a.flac --rate 96001", "kickrender: --rate: a rate of 96001 Hz in a FLAC file; "
                                                        "allowed: a multiple of 10 above 65535, or a WAV format"),
        ("render voice.toml --out a.wav --rate 1", "kickrender: --rate: '1' is out of range; allowed: 22.05kHz to "
                                                   "192kHz"),
        ("render voice.toml --out a.wav --format pcm8", "kickrender: --format: unknown word 'pcm8'; allowed: pcm16, "
                                                        "pcm24, float32, flac16, flac24; did you mean 'pcm24'?"),
        ("render voice.toml --out a.wav --length 0", "kickrender: --length: '0' is out of range; allowed: 1ms to 60s"),
        ("render voice.toml --out a.wav --oversample 3", "kickrender: --oversample: found '3'; allowed: 1, 2, 4, 8, "
                                                         "16, 32, 64"),
        ("render voice.toml --out a.wav --level loud", "kickrender: --level: found 'loud'; allowed: \"-14 LUFS\", "
                                                       "\"-14 LUFS integrated\", \"-1 dBTP\", \"-3 dBFS\", \"none\""),
        ("render voice.toml --out a.wav --probe cor", "kickrender: --probe: no net 'cor'; allowed: core, out; did you "
                                                      "mean 'core'?"),
        ("render voice.toml --out a.wav --probe gate", "kickrender: --probe: net 'gate' is held or driven from "
                                                       "outside; allowed: core, out"),
        ("render voice.toml --out a.wav --csv n.csv", "kickrender render: --csv goes with --probe NET"),
        ("render voice.toml --out a.wav --probe core --csv a.json", "kickrender: --csv: found 'a.json'; allowed: a "
                                                                    "file name that ends in .csv"),
        ("render voice.toml --out a.wav --csv n.csv --probe cor", "kickrender: --probe: no net 'cor'; allowed: core, "
                                                                  "out; did you mean 'core'?"),
        ("render pack.toml --out a.wav", None),
    ],
)  # fmt: skip
def test_wrong_input_is_told_in_one_message(arguments: str, message: str | None, run: Run, folder: Path) -> None:
    before = sorted(folder.iterdir())
    ran = run(*arguments.split())
    assert ran.code == 2
    assert ran.out == ""
    assert "Traceback" not in ran.err
    if message is not None:
        assert ran.err == message + "\n"
    assert sorted(folder.iterdir()) == before


def _raising(error: BaseException) -> click.Command:
    @click.command("raising")
    def raising() -> None:
        raise error

    return raising


@pytest.mark.parametrize(
    ("error", "code", "message"),
    [
        (SolveError("not finite", "voice", "Try this."), 1, "kickrender: not finite (circuit 'voice'). Try this."),
        (KeyboardInterrupt(), 130, "kickrender: stopped; every file that was written is whole"),
        (OSError(28, "No space left on device", "a.wav"), 1, "kickrender: a.wav: No space left on device"),
        (MemoryError(), 1, "kickrender: out of memory; try a shorter length, a lower rate or fewer jobs"),
        (ValueError("odd"), 1, "kickrender: unexpected ValueError: odd. This is a fault of kickrender; "
                               "KICKRENDER_TRACEBACK=1 shows where"),
    ],
)  # fmt: skip
def test_failures_are_told_in_one_message(
    error: BaseException, code: int, message: str, run: Run, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setitem(cli.kickrender.commands, "raising", _raising(error))
    ran = run("raising")
    assert (ran.code, ran.out, ran.err.lstrip("\n")) == (code, "", message + "\n")  # click ends the line of ^C


def test_a_closed_pipe_is_no_news() -> None:
    reading, writing = os.pipe()
    os.close(reading)
    command = [sys.executable, "-m", "kickrender", "list"]
    done = subprocess.run(command, stdout=writing, stderr=subprocess.PIPE, text=True)
    os.close(writing)
    assert (done.returncode, done.stderr) == (1, "")
