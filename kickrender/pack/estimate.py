"""What a pack will cost before it is rendered: time and room on the disk, from a few of its hits rendered for a try."""

from __future__ import annotations

import shutil
import time
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from kickrender.errors import Fault, InputError
from kickrender.pack.records import Hit, Plan
from kickrender.sound.finish import quantise
from kickrender.sound.flac import flac_bytes
from kickrender.sound.level import Gain
from kickrender.sound.measure import SILENCE
from kickrender.sound.render import Take, finish, hear_each
from kickrender.sound.sidecar import json_bytes
from kickrender.sound.wav import FORMATS

STARTING_S = 3.0  # loading the solver, and both sheets at the end
SAMPLE = 16  # hits rendered for a try: as many as make solving side by side pay
BLOCK_BYTES = 4096  # what file systems give files out in
FURTHER_BYTES = 4096  # of a hit beside its samples and facts: its place in the pack, its share of manifest and sheets


@dataclass(frozen=True)
class Estimate:
    """seconds : with the given number of workers. bytes : of all files of the hits."""

    seconds: float
    bytes: int

    def __str__(self) -> str:
        return f"about {_time_text(self.seconds)}, {size_text(self.bytes)}"


def estimate(plan: Plan, hits: Sequence[Hit], jobs: int) -> Estimate:
    """Time and room for these hits of a plan, from a sample taken evenly from among them."""
    if not hits:
        return Estimate(0.0, 0)
    chosen = [hits[k * len(hits) // min(SAMPLE, len(hits))] for k in range(min(SAMPLE, len(hits)))]
    struck = [(plan.circuits[hit.circuit], hit.resolved(plan.circuits[hit.circuit])) for hit in chosen]
    list(hear_each(struck[:1], plan.options))  # loading the solver is no part of a hit
    began = time.perf_counter()
    rooms = [_room(take) for take in hear_each(struck, plan.options) if isinstance(take, Take)]
    elapsed_s = time.perf_counter() - began
    room = sum(rooms) // max(1, len(rooms))
    return Estimate(STARTING_S + elapsed_s / len(chosen) * len(hits) / jobs, room * len(hits))


def check_room(plan: Plan, folder: Path, hits: Sequence[Hit]) -> None:
    """Refuse hits that the folder's disk has no room for.

    Raises
    ------
    InputError
        With what is needed and what is free.
    """
    there = next((path for path in (folder, *folder.absolute().parents) if path.exists()), None)
    if there is None:
        return
    try:
        free = shutil.disk_usage(there).free
    except OSError:
        return  # a disk that does not say is found full when it is
    _, width, _ = FORMATS[plan.options.sample_format]
    longest = round(plan.options.longest_s * plan.options.rate_hz) * width + 4 * FURTHER_BYTES
    if longest * len(hits) < free:
        return
    needed = estimate(plan, hits, 1).bytes
    if needed > free:
        found = f"{len(hits)} hits need about {size_text(needed)}, and {size_text(free)} are free"
        raise InputError(Fault(f"--out {folder}", found, "a disk with more room, or fewer or shorter hits"))


def _room(take: Take) -> int:
    """What a hit's files take. It is finished for that, as floats that nothing can clip: that takes time as well."""
    options = take.options
    _, width, _ = FORMATS[options.sample_format]
    sound = finish(replace(take, options=replace(options, format="float32")), Gain(0.0), None)
    size = len(take.samples) * width
    if options.ending == ".flac":  # the better packed, the quieter: as loud as can be
        pcm = quantise(take.samples / max(np.abs(take.samples).max(), SILENCE), options.sample_format)
        size = len(flac_bytes(pcm, options.rate_hz, options.sample_format))
    sizes = (size, len(json_bytes(sound.facts)) + FURTHER_BYTES)
    return sum(-(-size // BLOCK_BYTES) * BLOCK_BYTES for size in sizes)


def size_text(size: float) -> str:
    """A size for people: "12 MB"."""
    for unit in ("bytes", "kB", "MB", "GB"):
        if size < 1000:
            return f"{size:.3g} {unit}"
        size /= 1000
    return f"{size:.3g} TB"


def _time_text(seconds: float) -> str:
    if seconds < 90:
        return f"{max(1, round(seconds))} s"
    return f"{round(seconds / 60)} min" if seconds < 5400 else f"{seconds / 3600:.1f} h"
