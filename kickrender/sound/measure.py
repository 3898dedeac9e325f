"""Everything that is measured of a sound, as one record."""

from __future__ import annotations

import math
from collections.abc import Collection
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from kickrender.errors import MeasurementError
from kickrender.sound.envelope import attack_s, decay_s
from kickrender.sound.loudness import loudness
from kickrender.sound.pitch import pitch, track
from kickrender.sound.true_peak import true_peak

Floats = NDArray[np.float64]

CONCERT_PITCH_HZ = 440.0  # A4 of ISO 16
NOTE_NAMES = ("C", "C#", "D", "D#", "E", "F", "F#", "G", "G#", "A", "A#", "B")
SILENCE = 1e-9  # of full scale, -180 dB: a sound that never passes this is silent
OFFSET_S = 0.1  # the end of a sound over which its offset is taken

# Library results may differ in their last bits from one machine to another; what is read off here may set a gain
# or a control, so each measurement is rounded to a step far below hearing and far above such differences.
DECIBEL_DIGITS = 3
SECOND_DIGITS = 6
HERTZ_DIGITS = 7  # significant
CENT_DIGITS = 2
OFFSET_DIGITS = 9


@dataclass(frozen=True, kw_only=True)
class Measurements:
    """What was measured of one sound; None where the sound has no such measurement (silence has few).

    peak_dbfs, true_peak_dbtp : largest sample, largest value between samples, full scale 1. [dB, 0.001]
    momentary_lufs, integrated_lufs : see `loudness`. [LUFS, 0.001]
    start_hz, settled_hz : pitch where a drop starts and where it settles. [Hz, 7 digits]
    note, cents : nearest note of equal temperament to the settled pitch ("G1", middle C is C4), and how far above it
        the sound lies. [cent, 0.01]
    decay_s : from the peak to 60 dB below it. [s, 1 us]
    attack_s : from 10 % to 90 % of the peak. [s, 1 us]
    drop_s : from the start of the drop until 1/e of it is left, in semitones; None below a semitone. [s, 1 us]
    centroid_hz : mean frequency of the power spectrum. [Hz, 7 digits]
    length_s : [s]
    offset : mean of the last 100 ms, weighted by a raised cosine; full scale 1. [1e-9]
    """

    peak_dbfs: float | None = None
    true_peak_dbtp: float | None = None
    momentary_lufs: float | None = None
    integrated_lufs: float | None = None
    start_hz: float | None = None
    settled_hz: float | None = None
    note: str | None = None
    cents: float | None = None
    decay_s: float | None = None
    attack_s: float | None = None
    drop_s: float | None = None
    centroid_hz: float | None = None
    length_s: float
    offset: float


def measure(
    samples: Floats,
    rate_hz: float,
    concert_pitch_hz: float = CONCERT_PITCH_HZ,
    only: Collection[str] | None = None,
) -> Measurements:
    """Measure one sound.

    Parameters
    ----------
    samples : array of float, shape (n_samples,)
        Full scale is 1.
    rate_hz : float
        [Hz]
    concert_pitch_hz : float, default 440
        A4, for the nearest note. [Hz]
    only : collection of str, optional
        Names of the measurements asked for. What would cost time and is not among them stays None.

    Raises
    ------
    MeasurementError
        If there are no samples, more than one channel, or samples that are no numbers.

    Sources: with each measurement, in its own module.
    """
    samples = checked_samples(samples)
    length = _rounded(len(samples) / rate_hz, SECOND_DIGITS)
    peak = max(float(samples.max()), -float(samples.min()))
    if peak < SILENCE:
        return Measurements(length_s=length, offset=0.0)

    def asked(*names: str) -> bool:
        return only is None or not set(names).isdisjoint(only)

    heard = loudness(samples, rate_hz) if asked("momentary_lufs", "integrated_lufs") else None
    tone = pitch(samples, rate_hz) if asked("start_hz", "settled_hz", "note", "cents", "drop_s") else None
    settled = None if tone is None or tone.settled_hz is None else significant(tone.settled_hz)
    note, cents = (None, None) if settled is None else nearest_note(settled, concert_pitch_hz)
    return Measurements(
        peak_dbfs=_rounded(decibels(peak), DECIBEL_DIGITS),
        true_peak_dbtp=_rounded(decibels(true_peak(samples)), DECIBEL_DIGITS) if asked("true_peak_dbtp") else None,
        momentary_lufs=None if heard is None else _maybe(heard.momentary_lufs, DECIBEL_DIGITS),
        integrated_lufs=None if heard is None else _maybe(heard.integrated_lufs, DECIBEL_DIGITS),
        start_hz=None if tone is None or tone.start_hz is None else significant(tone.start_hz),
        settled_hz=settled,
        note=note,
        cents=cents,
        decay_s=_maybe(decay_s(samples, rate_hz), SECOND_DIGITS) if asked("decay_s") else None,
        attack_s=_rounded(attack_s(samples, rate_hz), SECOND_DIGITS) if asked("attack_s") else None,
        drop_s=None if tone is None else _maybe(tone.drop_s, SECOND_DIGITS),
        centroid_hz=significant(centroid_hz(samples, rate_hz)) if asked("centroid_hz") else None,
        length_s=length,
        offset=_rounded(offset(samples, rate_hz), OFFSET_DIGITS),
    )


def pitch_track(samples: Floats, rate_hz: float) -> tuple[Floats, Floats]:
    """Pitch over time: (times_s, hz), one reading per half cycle; empty when there is none. See `pitch`."""
    return track(checked_samples(samples), rate_hz)


def checked_samples(samples: Floats) -> Floats:
    """The samples as one contiguous row of floats, all finite, at least one; else MeasurementError."""
    samples = np.ascontiguousarray(samples, dtype=np.float64)
    if samples.ndim != 1:
        raise MeasurementError(f"a sound to measure has one channel, found an array of shape {samples.shape}")
    if len(samples) == 0:
        raise MeasurementError("a sound to measure has at least one sample, found none")
    finite = np.isfinite(samples)
    if not finite.all():
        k = int(np.argmin(finite))
        raise MeasurementError(f"sample {k} of {len(samples)} is {samples[k]}; only finite samples can be measured")
    return samples


def nearest_note(hz: float, concert_pitch_hz: float = CONCERT_PITCH_HZ) -> tuple[str, float]:
    """Name of the nearest note of equal temperament and how many cents above it the pitch lies.

    MIDI note number n = 69 + 12 log2(f / A4), middle C (60) is C4. Source: MIDI 1.0 and ISO 16 (A4 = 440 Hz).
    """
    number = 69 + 12 * math.log2(hz / concert_pitch_hz)
    nearest = round(number)
    return f"{NOTE_NAMES[nearest % 12]}{nearest // 12 - 1}", _rounded(100 * (number - nearest), CENT_DIGITS)


def centroid_hz(samples: Floats, rate_hz: float) -> float:
    """Mean frequency of the power spectrum of the whole sound, weighted by power. [Hz]

    Source: the definition of ISO/IEC 15938-4's spectral centroid, from memory.
    """
    from kickrender.sound.compiled import mean_bin  # loads the compiler

    length = _easy_length(len(samples))
    return mean_bin(np.fft.rfft(samples, length).view(np.float64)) * rate_hz / length


def offset(samples: Floats, rate_hz: float) -> float:
    """Mean of the end of the sound under a raised cosine, which hides what still rings there."""
    tail = samples[-max(1, round(OFFSET_S * rate_hz)) :]
    weights = 1 - np.cos(2 * np.pi * (np.arange(len(tail)) + 0.5) / len(tail))
    return float((weights * tail).sum() / weights.sum())


def decibels(ratio: float) -> float:
    """20 log10 of an amplitude ratio above zero."""
    return 20 * math.log10(ratio)


def significant(value: float, digits: int = HERTZ_DIGITS) -> float:
    """The value to so many significant digits."""
    return float(f"{value:.{digits}g}")


def _rounded(value: float, digits: int) -> float:
    return round(value, digits) + 0.0  # no minus zero


def _maybe(value: float | None, digits: int) -> float | None:
    return None if value is None else _rounded(value, digits)


def _easy_length(count: int) -> int:
    """An even length, not much longer, whose transform is quick: a power of two, or 5/8 or 3/4 of one."""
    power = max(16, 1 << (count - 1).bit_length())
    return min(length for length in (power * 5 // 8, power * 3 // 4, power) if length >= count)
