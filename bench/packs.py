"""Whole packs: hits per second, where the time goes, and what a worker's memory comes to.

Each pack is rendered by a Python of its own, so that memory is that pack's alone:
`python -m bench.packs PACK FOLDER JOBS [--stages]` prints what it measured as JSON.
"""

from __future__ import annotations

import json
import multiprocessing
import os
import subprocess
import sys
import tempfile
import threading
import time
from collections.abc import Callable
from dataclasses import asdict, dataclass, field
from pathlib import Path
from typing import Any

TOP = Path(__file__).resolve().parent.parent
HIT_S = 0.5
LOOK_EVERY_S = 0.05
STAGES = ("solve", "decimate", "measure", "level and finish", "write", "duplicates", "manifest", "sheets")


@dataclass(frozen=True)
class PackRun:
    """seconds : from plan to manifest, without Python's start.

    worker_mb : the most memory that any worker ever held; None where the one process did it all. [MB]
    parent_mb : the most that the process which gives out the work had held when every hit was there. [MB]
    sheets_mb : the same when manifest and sheets were written too. [MB]
    """

    hits: int
    jobs: int
    seconds: float
    worker_mb: float | None
    parent_mb: float
    sheets_mb: float
    stages: dict[str, float] = field(default_factory=dict)


def render_shipped(name: str, jobs: int, *, stages: bool = False) -> PackRun:
    """A shipped pack."""
    return _render(name, jobs, stages)


def render_hits(circuit: str, hits: int, jobs: int) -> PackRun:
    """That many hits of half a second, no two alike."""
    with tempfile.TemporaryDirectory() as folder:
        pack = Path(folder) / "hits.toml"
        pack.write_text(hits_text(circuit, hits))
        return _render(str(pack), jobs, False)


def hits_text(circuit: str, hits: int) -> str:
    """A pack file: a grid over pitch and decay."""
    rows = max(count for count in range(1, int(hits**0.5) + 1) if hits % count == 0)
    return f"""title = "Hits"
circuit = "{circuit}"
[sound]
length = {HIT_S}
[level]
measure = "momentary"
target = "-20 LUFS"
ceiling = "-1 dBTP"
[axes]
decay = {{ from = 0.1, to = 0.9, steps = {max(rows, 2)} }}
pitch = {{ from = 0.1, to = 0.9, steps = {hits // max(rows, 2)} }}
[files]
name = "{{number:05d}}"
"""


def _render(pack: str, jobs: int, stages: bool) -> PackRun:
    with tempfile.TemporaryDirectory() as folder:
        command = [sys.executable, "-m", "bench.packs", pack, folder, str(jobs), *(["--stages"] if stages else [])]
        done = subprocess.run(command, cwd=TOP, capture_output=True, text=True)
    if done.returncode:
        raise RuntimeError(done.stderr)
    return PackRun(**json.loads(done.stdout))


def _main(pack: str, folder: str, jobs: int, stages: bool) -> None:
    from kickrender.pack.plan import plan_pack
    from kickrender.pack.read import read_pack
    from kickrender.pack.run import render_plan
    from kickrender.sound.warm_up import warm_up

    warm_up()
    spent = _clocks() if stages else {}
    rendered_mb = _memory_before_manifest()
    watched = _Workers()
    begin = time.perf_counter()
    plan = plan_pack(read_pack(pack))
    result = render_plan(plan, Path(folder), jobs)
    seconds = time.perf_counter() - begin
    if result.failed:
        raise SystemExit(f"{len(result.failed)} hits failed: {result.failed}")
    run = PackRun(len(plan.hits), jobs, seconds, watched.stop(), rendered_mb[0], _peak_mb(os.getpid()), spent)
    print(json.dumps(asdict(run)))


class _Workers(threading.Thread):
    """Looks at the workers' memory while they live.

    Not by getrusage: there a process starts with the memory of the one that began it.
    """

    def __init__(self) -> None:
        super().__init__(daemon=True)
        self.ended = threading.Event()
        self.peak_mb: float | None = None
        self.start()

    def run(self) -> None:
        while not self.ended.wait(LOOK_EVERY_S):
            for process in multiprocessing.active_children():
                self.peak_mb = max(self.peak_mb or 0.0, _peak_mb(process.pid))

    def stop(self) -> float | None:
        """The largest memory any worker ever held, if there was one. [MB]"""
        self.ended.set()
        self.join()
        return self.peak_mb


def _memory_before_manifest() -> list[float]:
    """A list that gets this process's peak when the manifest is begun. [MB]"""
    from kickrender.pack import run

    inner, found = run.write_manifest, []

    def looking(*args: Any, **kwargs: Any) -> None:
        found.append(_peak_mb(os.getpid()))
        inner(*args, **kwargs)

    run.write_manifest = looking
    return found


def _peak_mb(process: int | None) -> float:
    """The most memory a process has held so far; 0 where the system does not say or it has gone. [MB]"""
    try:
        status = Path(f"/proc/{process}/status").read_text()
    except OSError:
        return 0.0
    return next((float(line.split()[1]) / 1e3 for line in status.splitlines() if line.startswith("VmHWM")), 0.0)


def _clocks() -> dict[str, float]:
    """Put a stopwatch around each stage where a pack calls it; what they read grows as it renders. [s]"""
    from kickrender.pack import render as pack_render
    from kickrender.pack import run as pack_run
    from kickrender.sound import render as sound_render

    spent = dict.fromkeys(STAGES, 0.0)

    def watch(module: Any, name: str, stage: str) -> None:
        inner: Callable[..., Any] = getattr(module, name)

        def timed(*args: Any, **kwargs: Any) -> Any:
            begin = time.perf_counter()
            try:
                return inner(*args, **kwargs)
            finally:
                spent[stage] += time.perf_counter() - begin

        setattr(module, name, timed)

    watch(sound_render, "solve_each", "solve")
    watch(sound_render, "decimate", "decimate")
    watch(sound_render, "measure", "measure")
    watch(pack_render, "gain_of", "level and finish")
    watch(pack_render, "finish", "level and finish")
    watch(pack_render, "write_hit", "write")
    watch(pack_run, "near_duplicates", "duplicates")
    watch(pack_run, "write_manifest", "manifest")
    watch(pack_run, "write_sheets", "sheets")
    return spent


if __name__ == "__main__":
    _main(sys.argv[1], sys.argv[2], int(sys.argv[3]), "--stages" in sys.argv)
