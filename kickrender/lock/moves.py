"""How far a sound moved: differences of its measurements, the null residual, and the limits below which nobody hears.

    pitch        at the start and settled                              cents, 1200 log2(after / before)
    brightness   spectral centroid, in cents too
    level        peak, true peak, momentary and integrated loudness    dB
    time         decay, attack                                         ms
    length       where the sound falls below -90 dB of its peak        ms
    offset       rest level at the end                                 dB of full scale, of the difference
    null         what is left when one sound is taken from the other   dB, RMS over the RMS of the locked one

The limits are common practice, no source: a tenth of what a careful ear tells apart in a direct comparison (some 10
cents at low pitch, half a decibel, a fiftieth of a second of decay), and a residual of a thousandth. The length may
move by more: it ends half a cycle sooner or later with the last one above -90 dB, which nobody hears.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from kickrender.circuit.values import parse_value
from kickrender.errors import Fault, InputError, nearest_name

Floats = NDArray[np.float64]


def _cents(before: float, after: float) -> float:
    return 1200.0 * math.log2(after / before)


def _difference(before: float, after: float) -> float:
    return after - before


def _milliseconds(before: float, after: float) -> float:
    return 1000.0 * (after - before)


def _offset(before: float, after: float) -> float:
    return decibels(abs(after - before))


def decibels(ratio: float) -> float:
    """20 log10 of an amplitude ratio; minus infinity for none."""
    return 20.0 * math.log10(ratio) if ratio > 0.0 else -math.inf


@dataclass(frozen=True)
class Measure:
    """How the difference of one measurement is told.

    label : what people call it; limit : the name of its limit; digits : shown after the point.
    """

    label: str
    unit: str
    limit: str
    difference: Callable[[float, float], float]
    digits: int


MEASURES: Mapping[str, Measure] = MappingProxyType(
    {
        "settled_hz": Measure("settled pitch", "cents", "pitch", _cents, 2),
        "start_hz": Measure("start pitch", "cents", "pitch", _cents, 2),
        "decay_s": Measure("decay", "ms", "time", _milliseconds, 3),
        "attack_s": Measure("attack", "ms", "time", _milliseconds, 3),
        "length_s": Measure("length", "ms", "length", _milliseconds, 3),
        "momentary_lufs": Measure("loudness", "dB", "level", _difference, 3),
        "integrated_lufs": Measure("gated loudness", "dB", "level", _difference, 3),
        "peak_dbfs": Measure("peak", "dB", "level", _difference, 3),
        "true_peak_dbtp": Measure("true peak", "dB", "level", _difference, 3),
        "centroid_hz": Measure("brightness", "cents", "brightness", _cents, 2),
        "offset": Measure("offset", "dBFS", "offset", _offset, 1),
    }
)
NULL = Measure("null residual", "dB", "null", _difference, 1)


@dataclass(frozen=True)
class Limits:
    """Below all of these a change is called inaudible. [cent, cent, dB, ms, ms, dBFS, dB]"""

    pitch: float = 1.0
    brightness: float = 10.0
    level: float = 0.05
    time: float = 2.0
    length: float = 50.0
    offset: float = -80.0
    null: float = -60.0


LIMIT_UNITS = {
    "pitch": "cents",
    "brightness": "cents",
    "level": "dB",
    "time": "ms",
    "length": "ms",
    "offset": "dBFS",
    "null": "dB",
}


@dataclass(frozen=True)
class Move:
    """How one measurement moved.

    before, after : None where the sound has no such measurement.
    by : the difference in the measure's unit; None where one of them is missing.
    share : difference over limit, above 1 beyond it; infinite where one is missing.
    """

    name: str
    measure: Measure
    before: float | None
    after: float | None
    by: float | None
    share: float

    def __str__(self) -> str:
        if self.by is None:
            return f"{self.measure.label} {'appeared' if self.before is None else 'is gone'}"
        signed = f"{self.by:+.{self.measure.digits}f}" if self.measure.limit not in ("null", "offset") else ""
        return f"{self.measure.label} {signed or f'{self.by:.1f}'} {self.measure.unit}"


def moves(before: Mapping[str, float], after: Mapping[str, float], limits: Limits) -> list[Move]:
    """Every measurement that differs, those furthest beyond their limit first."""
    found = []
    for name, measure in MEASURES.items():
        old, new = before.get(name), after.get(name)
        if old == new:
            continue
        by = None if old is None or new is None else measure.difference(old, new)
        found.append(Move(name, measure, old, new, by, _share(by, measure, limits)))
    return sorted(found, key=lambda move: -move.share)


def null_move(residual_db: float, limits: Limits) -> Move:
    """The null residual told as the measurements are."""
    return Move("null", NULL, None, None, residual_db, _share(residual_db, NULL, limits))


def _share(by: float | None, measure: Measure, limits: Limits) -> float:
    if by is None:
        return math.inf
    limit = getattr(limits, measure.limit)
    if measure.limit in ("null", "offset"):  # decibels of a ratio: both are amplitudes
        return math.pow(10.0, (by - limit) / 20.0) if by > -math.inf else 0.0
    return abs(by) / limit if limit else math.inf


def null_residual_db(before: Floats, after: Floats) -> float:
    """RMS of the difference over RMS of the sound before, the shorter one followed by silence. [dB]

    Parameters
    ----------
    before, after : array of float, shape (n_samples,) each

    Returns minus infinity for equal sounds, infinity where the sound before is silent and the other is not.
    """
    count = max(len(before), len(after))
    old, new = (np.pad(sound, (0, count - len(sound))) for sound in (before, after))
    # Scaled first, so that no square of a very small difference is lost.
    difference = new - old
    largest = float(np.abs(difference).max(initial=0.0))
    reference = float(np.sqrt(np.mean(np.square(old)))) if count else 0.0
    if largest == 0.0:
        return -math.inf
    if reference == 0.0:
        return math.inf
    return decibels(largest * float(np.sqrt(np.mean(np.square(difference / largest)))) / reference)


def read_limits(texts: Mapping[str, str], place: str) -> Limits:
    """The limits with some of them as given, in their own units ("1", "1 cents", "-80 dB").

    Raises
    ------
    InputError
        With every fault: no such limit, no such number, a negative one where it is a distance.
    """
    faults, chosen = [], {}
    for name, text in texts.items():
        if name not in LIMIT_UNITS:
            allowed = ", ".join(f"{known} ({unit})" for known, unit in LIMIT_UNITS.items())
            faults.append(Fault(place, f"unknown limit '{name}'", allowed, nearest_name(name, LIMIT_UNITS)))
            continue
        unit = LIMIT_UNITS[name]
        try:
            value = parse_value(text.strip().removesuffix(unit).strip(), "", place)
        except InputError:
            faults.append(Fault(place, f"{name}: found '{text}'", f"a number of {unit}"))
            continue
        if value < 0.0 and name not in ("null", "offset"):
            faults.append(Fault(place, f"{name}: {text} is below 0", f"0 {unit} or more"))
        chosen[name] = value
    if faults:
        raise InputError(faults)
    return Limits(**chosen)
