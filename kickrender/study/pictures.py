"""Pictures of sounds for people who look before they listen: waveform, pitch track, decay, spectrum, residual.

Drawn with matplotlib's own non-interactive backend; the same figure is saved as PNG and as SVG. No picture holds the
time or a path.
"""

from __future__ import annotations

import io
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from kickrender.sound.files import write_whole
from kickrender.sound.measure import pitch_track

Floats = NDArray[np.float64]

# Told apart without colour vision too: hues of the Okabe and Ito set (2008), and line styles.
COLOURS = ("#0072b2", "#d55e00", "#009e73", "#cc79a7", "#56b4e9", "#e69f00")
STYLES = ("-", "--", "-.", ":")
FLOOR_DB = -120.0
_LOOK: Mapping[str, Any] = {  # the salt makes an SVG's identifiers the same every time
    "svg.hashsalt": "kickrender",
    "font.size": 9.0,
    "axes.spines.top": False,
    "axes.spines.right": False,
}

Curves = Sequence[tuple[str, Floats]]


def waveforms(axes: Any, sounds: Curves, rate_hz: float) -> None:
    """Samples over time."""
    for label, samples, style in _styled(sounds):
        axes.plot(np.arange(len(samples)) / rate_hz, samples, label=label, **style)
    _labelled(axes, "Waveform", "time, s", "of full scale")


def pitch_tracks(axes: Any, sounds: Curves, rate_hz: float) -> None:
    """Pitch of every half cycle over time."""
    for label, samples, style in _styled(sounds):
        times, hz = pitch_track(samples, rate_hz)
        axes.plot(times, hz, label=label, **style)
    axes.set_yscale("log")
    ticks = [tick for tick in (30, 40, 50, 70, 100, 150, 200, 300, 400) if _within(axes, tick)]
    axes.set_yticks(ticks, [str(tick) for tick in ticks])
    axes.minorticks_off()
    _labelled(axes, "Pitch", "time, s", "Hz")


def decays(axes: Any, sounds: Curves, rate_hz: float) -> None:
    """Level of blocks of 5 ms below the loudest, over time."""
    for label, samples, style in _styled(sounds):
        block = max(1, round(0.005 * rate_hz))
        count = len(samples) // block
        peaks = np.abs(samples[: count * block]).reshape(count, block).max(axis=1)
        level = 20.0 * np.log10(np.maximum(peaks / max(peaks.max(initial=0.0), 1e-30), 10.0 ** (FLOOR_DB / 20.0)))
        axes.plot((np.arange(count) + 0.5) * block / rate_hz, level, label=label, **style)
    axes.set_ylim(-100.0, 3.0)
    _labelled(axes, "Decay", "time, s", "dB below the peak")


def spectra(axes: Any, sounds: Curves, rate_hz: float) -> None:
    """Power spectrum of the whole sound in 24 bands per octave, below its highest band."""
    for label, samples, style in _styled(sounds):
        hz, level = band_levels(samples, rate_hz)
        axes.semilogx(hz, level, label=label, **style)
    axes.set_ylim(FLOOR_DB, 3.0)
    ticks = (20, 50, 100, 200, 500, 1000, 2000, 5000, 10000, 20000)
    axes.set_xticks(ticks, [f"{tick / 1000:g}k" if tick >= 1000 else str(tick) for tick in ticks])
    axes.minorticks_off()
    _labelled(axes, "Spectrum", "Hz", "dB below the highest band")


def band_levels(samples: Floats, rate_hz: float, per_octave: int = 24) -> tuple[Floats, Floats]:
    """Mid frequencies from 20 Hz up and the level of each band. [Hz], [dB below the highest]"""
    size = max(len(samples), round(rate_hz))
    power = np.abs(np.fft.rfft(samples, size)) ** 2
    bins = np.fft.rfftfreq(size, 1.0 / rate_hz)
    edges = 20.0 * 2.0 ** (np.arange(0, int(per_octave * np.log2(0.5 * rate_hz / 20.0)) + 1) / per_octave)
    places = np.searchsorted(bins, edges)
    # a band narrower than the bins' distance takes the bin it lies in
    starts, ends = places[:-1], np.maximum(places[1:], places[:-1] + 1)
    sums = np.concatenate([[0.0], np.cumsum(power)])
    density = (sums[ends] - sums[starts]) / (ends - starts)
    level = 10.0 * np.log10(np.maximum(density / max(density.max(initial=0.0), 1e-300), 10.0 ** (FLOOR_DB / 10.0)))
    return np.sqrt(edges[:-1] * edges[1:]), level


def save(name: str, folder: Path, draw: Callable[[Any], None], *, width: float = 8.0, height: float = 4.5) -> list[str]:
    """Draw on one pair of axes and write NAME.png and NAME.svg into the folder; returns their names.

    Raises
    ------
    WriteError
        If the folder cannot be written.
    """

    def one(figure: Any) -> None:
        draw(figure.subplots())

    return save_figure(name, folder, one, width=width, height=height)


def save_figure(name: str, folder: Path, draw: Callable[[Any], None], *, width: float, height: float) -> list[str]:
    """Like `save`, for a whole figure."""
    from matplotlib import rc_context
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    names = []
    with rc_context(
        {"svg.hashsalt": "kickrender", "font.size": 9.0, "axes.spines.top": False, "axes.spines.right": False}
    ):
        figure = Figure(figsize=(width, height), layout="constrained")
        FigureCanvasAgg(figure)
        draw(figure)
        metadata: Mapping[str, Mapping[str, Any]] = {"png": {"Software": None}, "svg": {"Date": None, "Creator": None}}
        for ending in ("png", "svg"):
            content = io.BytesIO()
            figure.savefig(content, format=ending, dpi=120, metadata=metadata[ending])
            write_whole(folder / f"{name}.{ending}", content.getvalue())
            names.append(f"{name}.{ending}")
    return names


def _styled(sounds: Curves) -> list[tuple[str, Floats, dict[str, Any]]]:
    return [
        (label, samples, {"color": COLOURS[k % len(COLOURS)], "linestyle": STYLES[k % len(STYLES)], "linewidth": 1.0})
        for k, (label, samples) in enumerate(sounds)
    ]


def _within(axes: Any, value: float) -> bool:
    low, high = axes.get_ylim()
    return bool(low <= value <= high)


def _labelled(axes: Any, title: str, x: str, y: str) -> None:
    axes.set_title(title, loc="left")
    axes.set_xlabel(x)
    axes.set_ylabel(y)
    axes.grid(alpha=0.25)
    if len(axes.get_lines()) > 1:
        axes.legend(frameon=False, loc="best")
