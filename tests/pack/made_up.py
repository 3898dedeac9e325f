"""Packs made of sines and decays, in the manifest's own form, for the tests of sheets."""

from __future__ import annotations

import itertools
import json
import math
from collections.abc import Sequence
from dataclasses import asdict
from pathlib import Path
from typing import Any

import numpy as np

from kickrender.sound.finish import quantise
from kickrender.sound.measure import measure
from kickrender.sound.options import ending_of
from kickrender.sound.sound_file import write_sound

RATE_HZ = 44_100


def hit_samples(
    hz: float, decay_s: float, level: float, length_s: float = 1.0
) -> np.ndarray[Any, np.dtype[np.float64]]:
    """A sine whose pitch falls from twice its settled one, dying away."""
    time = np.arange(round(length_s * RATE_HZ)) / RATE_HZ
    phase = 2 * np.pi * hz * (time + 0.02 * (1 - np.exp(-time / 0.02)))
    return level * np.sin(phase) * np.exp(-time / decay_s * math.log(1000))


def manifest_of(hits: Sequence[dict[str, Any]], title: str = "Made up", **more: Any) -> dict[str, Any]:
    return {
        "schema": "kickrender pack",
        "schema_version": 1,
        "title": title,
        "about": "Sines that die.",
        "circuits": {},
        "sound": {"rate_hz": RATE_HZ, "format": "pcm16"},
        "level": None,
        "shares_gain_along": [],
        "hits": list(hits),
        "failed": [],
        "duplicates": {"below_db": -60.0, "left_out": False, "searched": "", "found": []},
        **more,
    }


def entry(name: str, axes: dict[str, Any], measurements: dict[str, Any], gain_db: float = 0.0) -> dict[str, Any]:
    return {
        "name": name,
        "file": f"{name}.wav",
        "sidecar": f"{name}.json",
        "axes": axes,
        "recipe_digest": "",
        "pcm_sha256": "",
        "gain_db": gain_db,
        "measurements": measurements,
    }


def make_measurements(hz: float, **more: Any) -> dict[str, Any]:
    """What might be measured of a hit, without one."""
    flat = {"peak_dbfs": -1.0, "true_peak_dbtp": -1.0, "momentary_lufs": -20.0, "integrated_lufs": -20.0, "offset": 0.0}
    pitch = {"start_hz": 2 * hz, "settled_hz": hz, "note": "C2", "cents": 0.0, "centroid_hz": 99.0}
    return {**flat, **pitch, "decay_s": 0.3, "attack_s": 0.001, "drop_s": 0.02, "length_s": 0.5, **more}


def make_pack(folder: Path, title: str = "Made up", **more: Any) -> dict[str, Any]:
    """27 hits on three axes, and two odd ones: a FLAC whose name is full of marks, and silence, of few measurements."""
    hits = []
    grid = itertools.product((50.0, 60.0, 75.0), (0.15, 0.25, 0.4), ("soft", "firm", "hard"))
    for number, (hz, decay, accent) in enumerate(grid):
        level = {"soft": 0.2, "firm": 0.4, "hard": 0.8}[accent]
        hits.append(_write(folder, f"{hz:g}/{decay:g}-{accent}", hit_samples(hz, decay, level),
                           {"pitch": hz, "decay": decay, "accent": accent}, number / 10))  # fmt: skip
    odd = "odd/it's 100% & #1 \u00e9; [a]_b"
    hits.append(_write(folder, odd, hit_samples(90.0, 0.2, 0.5), {"pitch": 90.0, "decay": 0.2}, 9.0, "flac16"))
    hits.append(_write(folder, "odd/silence", np.zeros(RATE_HZ // 10), {"pitch": 0.0}, 9.5))
    manifest = manifest_of(hits, title, **more)
    (folder / "pack.json").write_text(json.dumps(manifest))
    return manifest


def _write(
    folder: Path, name: str, samples: Any, axes: dict[str, Any], gain_db: float, sound_format: str = "pcm16"
) -> dict[str, Any]:
    path = folder / f"{name}{ending_of(sound_format)}"
    path.parent.mkdir(parents=True, exist_ok=True)
    write_sound(path, quantise(samples, "pcm16", 1), RATE_HZ, sound_format)
    return entry(name, axes, asdict(measure(samples, RATE_HZ)), gain_db) | {"file": path.relative_to(folder).as_posix()}
