"""How long the command line keeps somebody waiting before and beside the work itself."""

from __future__ import annotations

import os
import subprocess
import sys
import tempfile
import time
from pathlib import Path
from statistics import median

TOP = Path(__file__).resolve().parent.parent


def help_s(repeats: int) -> float:
    """`kickrender --help`. [s]"""
    return median(_command_s(["--help"]) for _ in range(repeats))


def render_s(circuit: str, repeats: int) -> float:
    """`kickrender render`, compiled code on disk. [s]"""
    with tempfile.TemporaryDirectory() as folder:
        arguments = ["render", circuit, "--out", str(Path(folder) / "hit.wav")]
        _command_s(arguments)
        return median(_command_s(arguments) for _ in range(repeats))


def first_render_s(circuit: str) -> float:
    """`kickrender render` with nothing compiled, as on a machine that never ran it. [s]"""
    with tempfile.TemporaryDirectory() as folder:
        arguments = ["render", circuit, "--out", str(Path(folder) / "hit.wav")]
        return _command_s(arguments, KICKRENDER_CACHE=str(Path(folder) / "cache"))


def _command_s(arguments: list[str], **environment: str) -> float:
    begin = time.perf_counter()
    subprocess.run(
        [sys.executable, "-m", "kickrender", *arguments],
        cwd=TOP,
        env={**os.environ, **environment},
        check=True,
        capture_output=True,
    )
    return time.perf_counter() - begin
