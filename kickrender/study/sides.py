"""The sides of a comparison: each a circuit with settings of its own, rendered alike and matched in loudness."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from kickrender.circuit import Circuit, ResolvedCircuit, exact, read_circuit
from kickrender.errors import Fault, InputError, KickrenderError, MeasurementError
from kickrender.sound.finish import fade
from kickrender.sound.loudness import loudness
from kickrender.sound.measure import Measurements, measure
from kickrender.sound.options import SoundOptions
from kickrender.sound.render import hear_each

Floats = NDArray[np.float64]
Settings = Mapping[str, float | str | bool]

HEADROOM_DB = 1.0  # left above the loudest side's true peak
MATCH_ROUNDS = 3  # loudness moves exactly with the gain; a second round only mends rounding
MOST_SHIFT_S = 0.005  # how far a side may be moved to line up with the first: a filter's delay, not a cycle


@dataclass(frozen=True)
class Side:
    """What is compared: a circuit under settings, called `label`."""

    label: str
    circuit: Circuit
    settings: Settings


@dataclass(frozen=True, eq=False)
class Heard:
    """A side as it sounds.

    samples : (n,), matched in loudness and aligned with the first side; every side has the same n.
    gain_db, shift_samples, inverted : what was done to match it; `inverted` says that it swings the other way than
        the first side (it is not turned over).
    before, measurements : of the sound in volts over full scale, and after matching.
    """

    side: Side
    resolved: ResolvedCircuit
    samples: Floats
    rate_hz: int
    gain_db: float
    shift_samples: int
    inverted: bool
    before: Measurements
    measurements: Measurements


def read_side(text: str, common: Settings, place: str) -> Side:
    """A side from the words "CIRCUIT NAME=VALUE NAME=VALUE ..."; settings of its own stand above the common ones.

    Raises
    ------
    InputError
        An unknown circuit, a word that is no setting, or a setting that does not suit the circuit.
    """
    words = text.split()
    if not words:
        raise InputError(Fault(place, "found nothing", '"CIRCUIT NAME=VALUE ..."'))
    own: dict[str, float | str | bool] = {}
    for word in words[1:]:
        name, equals, value = word.partition("=")
        if not equals or not name or not value:
            raise InputError(Fault(place, f"found '{word}'", "settings such as decay=0.7 after the circuit"))
        own[name] = value
    circuit = read_circuit(words[0])
    settings = {**common, **own}
    circuit.resolve(settings, place)
    return Side(" ".join([circuit.name, *words[1:]]), circuit, settings)


def hear_sides(sides: Sequence[Side], options: SoundOptions) -> list[Heard]:
    """Render every side over one common length, match loudness (momentary), align to the first.

    Raises
    ------
    SolveError
        If a side cannot be solved.
    MeasurementError
        If a side is silent.
    """
    hits = [(side.circuit, side.settings) for side in sides]
    if options.length_s is None:
        ends = [len(take.samples) for take in _takes(hits, options)]
        options = replace(options, length_s=max(ends) / options.rate_hz)
    takes = _takes(hits, replace(options, raw=True))
    rate_hz = options.rate_hz
    for side, take in zip(sides, takes, strict=True):
        if take.measurements.momentary_lufs is None:
            raise MeasurementError(f"'{side.label}' is silent: there is nothing to compare")
    first = takes[0].samples
    lags = [_lag(first, take.samples, rate_hz) for take in takes]
    aligned = [fade(_shifted(take.samples, shift), rate_hz) for take, (shift, _) in zip(takes, lags, strict=True)]
    target = min(_loudest_that_fits(samples, rate_hz) for samples in aligned)
    heard = []
    for side, take, samples, (shift, inverted) in zip(sides, takes, aligned, lags, strict=True):
        matched, gain_db = _matched(samples, rate_hz, target)
        before, after = take.measurements, measure(matched, rate_hz)
        heard.append(Heard(side, take.solution.circuit, matched, rate_hz, gain_db, shift, inverted, before, after))
    return heard


def _loudest_that_fits(samples: Floats, rate_hz: int) -> float:
    """Momentary loudness of the sound at the gain that leaves HEADROOM_DB above its true peak. [LUFS]"""
    measured = measure(samples, rate_hz)
    assert measured.momentary_lufs is not None and measured.true_peak_dbtp is not None
    return measured.momentary_lufs - measured.true_peak_dbtp - HEADROOM_DB


def _takes(hits: Sequence[tuple[Circuit, Settings]], options: SoundOptions) -> list[Any]:
    takes = []
    for take in hear_each(hits, options):
        if isinstance(take, KickrenderError):
            raise take
        takes.append(take)
    return takes


def _matched(samples: Floats, rate_hz: int, target_lufs: float) -> tuple[Floats, float]:
    """The samples at the target loudness, and the gain that takes them there. [dB]"""
    gain_db = 0.0
    for _ in range(MATCH_ROUNDS):
        reached = loudness(samples * exact.power(10.0, gain_db / 20.0), rate_hz).momentary_lufs
        assert reached is not None
        gain_db = round(gain_db + target_lufs - reached, 4)
    return samples * exact.power(10.0, gain_db / 20.0), gain_db


def _lag(reference: Floats, samples: Floats, rate_hz: int) -> tuple[int, bool]:
    """By how many samples to delay `samples` to line up with `reference`, and whether it swings the other way.

    The lag of the largest magnitude of their correlation, sought within MOST_SHIFT_S.
    """
    size = 1 << (2 * len(reference) - 1).bit_length()
    spectrum = np.fft.rfft(reference, size) * np.conj(np.fft.rfft(samples, size))
    correlation = np.fft.irfft(spectrum, size)
    reach = min(round(MOST_SHIFT_S * rate_hz), len(reference) - 1)
    lags = np.arange(-reach, reach + 1)
    values = correlation[lags]
    best = int(np.argmax(np.abs(values)))
    return int(lags[best]), bool(values[best] < 0.0)


def _shifted(samples: Floats, shift: int) -> Floats:
    """Delayed by `shift` samples (earlier if negative), as long as before, zeros where nothing is known."""
    moved = np.zeros_like(samples)
    if shift >= 0:
        moved[shift:] = samples[: len(samples) - shift]
    else:
        moved[:shift] = samples[-shift:]
    return moved
