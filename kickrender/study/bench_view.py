"""What a designer looks at besides the sound: every net over time, poles while the pitch falls, small-signal gains."""

from __future__ import annotations

import math
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from kickrender.circuit import Circuit, ResolvedCircuit
from kickrender.engine import Pole, poles, response, rest_state, solve
from kickrender.engine.waves import voltage_at
from kickrender.errors import Fault, InputError, KickrenderError, nearest_name
from kickrender.sound.options import SoundOptions
from kickrender.sound.render import hear_each
from kickrender.study import pictures
from kickrender.study.files import open_folder
from kickrender.study.sides import Settings

Floats = NDArray[np.float64]

DROP_OPEN_S = 0.005  # after the strike: the pitch stands at its start, the strike itself is over
LOWEST_HZ, HIGHEST_HZ, POINTS_PER_DECADE = 10.0, 100_000.0, 10
_PLOT_POINTS = 4000


def state_at(circuit: ResolvedCircuit, time_s: float) -> dict[str, float]:
    """Voltage of every net and current of every inductor, `time_s` after the strike. [V], [A]

    Raises
    ------
    SolveError
        If the circuit cannot be solved that far.
    """
    solved = [name for name in rest_state(circuit) if name not in {*circuit.nets, *circuit.inputs}]
    solution = solve(circuit, time_s, probes=solved)
    state = {name: float(solution.sample(1.0 / time_s, 1, first=1, net=name)[0]) for name in solution.nets}
    driven = {name: voltage_at(wave, time_s) for name, wave in circuit.inputs.items()}
    return state | driven | dict(circuit.nets)


def poles_with_drop_open(circuit: ResolvedCircuit, time_s: float = DROP_OPEN_S) -> list[Pole]:
    """Poles of the circuit linearised about its state early in the drop, as if the drop stood still there."""
    return poles(circuit, state_at(circuit, time_s))


def frequencies() -> Floats:
    """10 Hz to 100 kHz, ten to the decade. [Hz]"""
    decades = math.log10(HIGHEST_HZ / LOWEST_HZ)
    return np.geomspace(LOWEST_HZ, HIGHEST_HZ, round(decades * POINTS_PER_DECADE) + 1)


def read_path(text: str, circuit: ResolvedCircuit, place: str) -> tuple[str, str]:
    """Input and net of a path such as "gate:out".

    Raises
    ------
    InputError
        If the text is none, or either does not exist.
    """
    source, colon, net = text.partition(":")
    nets = sorted({name for part in circuit.parts.values() for name in part.terminals.values()} - {"ground"})
    if not colon:
        raise InputError(Fault(place, f"found '{text}'", "INPUT:NET, for instance gate:out"))
    faults = [
        Fault(place, f"no {kind} '{name}'", ", ".join(known) or "none here", nearest_name(name, known))
        for kind, name, known in (("input", source, sorted(circuit.inputs)), ("net", net, nets))
        if name not in known
    ]
    if faults:
        raise InputError(faults)
    return source, net


def response_table(circuit: ResolvedCircuit, source: str, net: str) -> list[dict[str, float]]:
    """Small-signal gain from an input to a net about the rest state: frequency, magnitude in dB, phase in degrees.

    A net the signal does not reach has -inf dB there, which is given as -400.
    """
    hz = frequencies()
    answer = response(circuit, source, hz)
    gain = answer.get(net, np.zeros(len(hz), np.complex128))
    level = 20.0 * np.log10(np.maximum(np.abs(gain), 1e-20))
    phase = np.degrees(np.unwrap(np.angle(gain)))
    return [
        {"frequency_hz": float(f), "gain_db": round(float(g), 4), "phase_deg": round(float(p), 3)}
        for f, g, p in zip(hz, level, phase, strict=True)
    ]


def write_pictures(
    circuit: Circuit, settings: Settings, folder: Path, path: tuple[str, str] | None = None
) -> list[str]:
    """Pictures of one hit into `folder`: waveform, pitch, decay, spectrum, every net, and the response if asked.

    Returns the files' names.

    Raises
    ------
    SolveError, MeasurementError
        If the circuit cannot be solved or is silent.
    WriteError
        If the folder cannot be written.
    """
    open_folder(folder)
    options = SoundOptions()
    (take,) = hear_each([(circuit, settings)], options)
    if isinstance(take, KickrenderError):
        raise take
    sounds = [(circuit.name, take.samples)]
    names = []
    for name, draw in (
        ("waveform", pictures.waveforms),
        ("pitch", pictures.pitch_tracks),
        ("decay", pictures.decays),
        ("spectrum", pictures.spectra),
    ):
        names += pictures.save(name, folder, lambda axes, draw=draw: draw(axes, sounds, options.rate_hz))  # type: ignore[misc]
    names += _nets(take.solution.circuit, len(take.samples) / options.rate_hz, folder)
    if path is not None:
        rows = response_table(take.solution.circuit, *path)
        names += pictures.save_figure(
            "response", folder, lambda figure: _draw_response(figure, rows, path), width=8.0, height=6.0
        )
    return names


def _nets(circuit: ResolvedCircuit, length_s: float, folder: Path) -> list[str]:
    """Every net's voltage over the hit, in small panels of one picture."""
    inner = [name for name in rest_state(circuit) if name not in {*circuit.nets, *circuit.inputs} and "." not in name]
    solution = solve(circuit, length_s, probes=inner)
    # the attack takes as much of the picture as the rest
    rate_hz = (_PLOT_POINTS - 1) / length_s
    times = np.arange(_PLOT_POINTS) / rate_hz
    shown = sorted(solution.nets)

    def draw(figure: Any) -> None:
        columns = 4
        grid = figure.subplots(-(-len(shown) // columns), columns, squeeze=False, sharex=True)
        for axes in grid.flat[len(shown) :]:
            axes.set_visible(False)
        for axes, net in zip(grid.flat, shown, strict=False):
            axes.plot(times, solution.sample(rate_hz, _PLOT_POINTS, net=net), color=pictures.COLOURS[0], linewidth=0.7)
            axes.set_title(net, loc="left", fontsize=8)
            axes.tick_params(labelsize=7)
        figure.supxlabel("time, s", fontsize=8)
        figure.supylabel("V", fontsize=8)

    return pictures.save_figure("nets", folder, draw, width=12.0, height=1.6 * -(-len(shown) // 4) + 0.5)


def _draw_response(figure: Any, rows: Sequence[dict[str, float]], path: tuple[str, str]) -> None:
    upper, lower = figure.subplots(2, 1, sharex=True)
    hz = [row["frequency_hz"] for row in rows]
    upper.semilogx(hz, [row["gain_db"] for row in rows], color=pictures.COLOURS[0])
    upper.set_title(f"Small-signal gain from {path[0]} to {path[1]}, at rest", loc="left")
    upper.set_ylabel("dB")
    lower.semilogx(hz, [row["phase_deg"] for row in rows], color=pictures.COLOURS[1])
    lower.set_ylabel("degrees")
    lower.set_xlabel("Hz")
    for axes in (upper, lower):
        axes.grid(alpha=0.25)
