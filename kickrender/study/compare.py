"""Two or more circuits or settings side by side: sounds, numbers, pictures, all against the first."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

import numpy as np

from kickrender.engine import ENGINE_VERSION
from kickrender.errors import Fault, InputError
from kickrender.sound.files import write_whole
from kickrender.sound.finish import quantise
from kickrender.sound.options import SoundOptions
from kickrender.sound.sidecar import json_bytes
from kickrender.sound.wav import pcm_sha256, write_wav
from kickrender.study import pictures
from kickrender.study.blind import DEFAULT_TRIALS, BlindSound, blind_page
from kickrender.study.differences import measurement_differences, netlist_difference, null_residual
from kickrender.study.files import open_folder
from kickrender.study.sides import Heard, Side, hear_sides

SCHEMA = "kickrender comparison"
SCHEMA_VERSION = 1
FILE_FORMAT = "pcm24"
JSON_NAME = "compare.json"


@dataclass(frozen=True, eq=False)
class Comparison:
    """Every side as heard, and what each but the first differs in.

    facts : plain JSON values, what compare.json says.
    """

    heard: tuple[Heard, ...]
    facts: dict[str, Any]


def compare(sides: Sequence[Side], options: SoundOptions | None = None) -> Comparison:
    """Render the sides alike, matched in momentary loudness and aligned to the sample, and take their differences.

    Raises
    ------
    InputError
        If there are fewer than two sides.
    SolveError, MeasurementError
        If a side cannot be solved or is silent.
    """
    if len(sides) < 2:
        raise InputError(Fault("compare", f"found {len(sides)} side", "two sides or more"))
    heard = hear_sides(sides, options or SoundOptions())
    reference = heard[0]
    against = [
        {
            "side": side.side.label,
            "null_residual": null_residual(reference.samples, side.samples, side.rate_hz),
            "measurements": measurement_differences(reference.measurements, side.measurements),
            "netlist": netlist_difference(reference.resolved, side.resolved),
        }
        for side in heard[1:]
    ]
    facts = {
        "schema": SCHEMA,
        "schema_version": SCHEMA_VERSION,
        "engine": ENGINE_VERSION,
        "rate_hz": reference.rate_hz,
        "length_s": len(reference.samples) / reference.rate_hz,
        "sides": [_side_facts(number, side) for number, side in enumerate(heard, 1)],
        "against_the_first": against,
    }
    return Comparison(tuple(heard), facts)


def write_comparison(comparison: Comparison, folder: Path, trials: int = DEFAULT_TRIALS) -> list[str]:
    """Write sounds, residuals, pictures, blind listening pages and compare.json into `folder`; returns their names.

    trials : of each blind listening page; one page for every side that differs from the first.

    Raises
    ------
    InputError
        If the number of trials is out of range.
    WriteError
        If the folder cannot be made or written, or its compare.json is somebody else's.
    """
    pages = _blind_pages(comparison, trials)
    open_folder(folder, JSON_NAME)
    heard, names = comparison.heard, []
    rate_hz = heard[0].rate_hz
    for number, side in enumerate(heard, 1):
        names.append(sound_name(number, side))
        write_wav(folder / names[-1], quantise(side.samples, FILE_FORMAT), rate_hz, FILE_FORMAT)
    residuals = [(side.side.label, side.samples - heard[0].samples) for side in heard[1:]]
    for number, (_, residual) in enumerate(residuals, 2):
        names.append(f"residual-{number}-1.wav")
        peak = float(np.abs(residual).max(initial=0.0))
        # a residual between unlike sounds may exceed full scale; it is then written lower, by whole 6 dB
        while peak > 1.0:
            residual, peak = residual * 0.5, peak * 0.5
        write_wav(folder / names[-1], quantise(residual, FILE_FORMAT), rate_hz, FILE_FORMAT)
    sounds = [(f"{number} {side.side.label}", side.samples) for number, side in enumerate(heard, 1)]
    for name, draw in (
        ("waveforms", pictures.waveforms),
        ("pitch", pictures.pitch_tracks),
        ("decay", pictures.decays),
        ("spectrum", pictures.spectra),
    ):
        names += pictures.save(name, folder, lambda axes, draw=draw: draw(axes, sounds, rate_hz))  # type: ignore[misc]

    def residual_figure(figure: Any) -> None:
        upper, lower = figure.subplots(2, 1)
        pictures.waveforms(upper, residuals, rate_hz)
        upper.set_title("Residual against the first side", loc="left")
        pictures.spectra(lower, residuals, rate_hz)

    names += pictures.save_figure("residual", folder, residual_figure, width=8.0, height=6.5)
    for number, page in pages:
        names.append(page_name(number))
        write_whole(folder / names[-1], page)
    write_whole(folder / JSON_NAME, json_bytes(comparison.facts))
    return [*names, JSON_NAME]


def _blind_pages(comparison: Comparison, trials: int) -> list[tuple[int, bytes]]:
    """A page for every side against the first, by its number; none where the sounds are the same."""
    sounds = [
        BlindSound(side.samples, side.rate_hz, side.side.label, facts["pcm_sha256"])
        for side, facts in zip(comparison.heard, comparison.facts["sides"], strict=True)
    ]
    return [
        (number, blind_page([sounds[0], sound], trials, f"1 or {number}?", place="--trials"))
        for number, sound in enumerate(sounds[1:], 2)
        if sound.digest != sounds[0].digest
    ]


def page_name(number: int) -> str:
    """File name of the blind listening page of a side against the first."""
    return f"listen-1-{number}.html"


def sound_name(number: int, side: Heard) -> str:
    """File name of a side's sound."""
    return f"{number}-{side.side.circuit.name}.wav"


def _side_facts(number: int, side: Heard) -> dict[str, Any]:
    return {
        "label": side.side.label,
        "file": sound_name(number, side),
        "circuit": {"name": side.side.circuit.name, "digest": side.side.circuit.digest},
        "settings": dict(side.resolved.settings),
        "gain_db": side.gain_db,
        "shift_samples": side.shift_samples,
        "swings_the_other_way": side.inverted,
        "measurements_before_matching": asdict(side.before),
        "measurements": asdict(side.measurements),
        "pcm_sha256": pcm_sha256(quantise(side.samples, FILE_FORMAT), FILE_FORMAT),
    }
