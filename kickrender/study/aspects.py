"""What a study asks of a sound: how each aspect is read off its measurements, and how a change of it is told."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

from kickrender.sound.goals import GOALS
from kickrender.sound.measure import Measurements


@dataclass(frozen=True)
class Aspect:
    """One aspect of a sound.

    about : what people call it; unit : of its value.
    fields : the measurements it is read off.
    measured : its value; None when the sound has none.
    change_unit, change : how far one value is from another, signed, from the first to the second.
    scales : how a limit's unit may be written -> what the number is multiplied by.
    """

    about: str
    unit: str
    fields: tuple[str, ...]
    measured: Callable[[Measurements], float | None]
    change_unit: str
    change: Callable[[float, float], float]
    scales: Mapping[str, float]


def cents(before: float, after: float) -> float:
    """1200 log2 of the ratio of two frequencies. [cent]"""
    return 1200.0 * math.log2(after / before)


def _milliseconds(before: float, after: float) -> float:
    return 1e3 * (after - before)


def _difference(before: float, after: float) -> float:
    return after - before


_HERTZ = {"Hz": 1.0, "kHz": 1e3}
_SECONDS = {"s": 1.0, "ms": 1e-3}

ASPECTS: Mapping[str, Aspect] = MappingProxyType(
    {
        "pitch": Aspect("settled pitch", "Hz", ("settled_hz",), lambda m: m.settled_hz, "cents", cents, _HERTZ),
        "start": Aspect("start pitch", "Hz", ("start_hz",), lambda m: m.start_hz, "cents", cents, _HERTZ),
        "drop": Aspect(
            "pitch drop",
            "semitones",
            ("start_hz", "settled_hz"),
            GOALS["drop"].measured,
            "semitones",
            _difference,
            {"semitones": 1.0, "cents": 0.01},
        ),
        "decay": Aspect("time to -60 dB", "s", ("decay_s",), lambda m: m.decay_s, "ms", _milliseconds, _SECONDS),
        "loudness": Aspect(
            "momentary loudness",
            "LUFS",
            ("momentary_lufs",),
            lambda m: m.momentary_lufs,
            "dB",
            _difference,
            {"LUFS": 1.0},
        ),
        "peak": Aspect(
            "true peak", "dBTP", ("true_peak_dbtp",), lambda m: m.true_peak_dbtp, "dB", _difference, {"dBTP": 1.0}
        ),
        "drop_time": Aspect(
            "until 1/e of the drop is left", "s", ("drop_s",), lambda m: m.drop_s, "ms", _milliseconds, _SECONDS
        ),
        "attack": Aspect("attack", "s", ("attack_s",), lambda m: m.attack_s, "ms", _milliseconds, _SECONDS),
        "centroid": Aspect("centroid", "Hz", ("centroid_hz",), lambda m: m.centroid_hz, "cents", cents, _HERTZ),
    }
)
USUAL = ("pitch", "start", "drop", "decay", "loudness")  # what a study answers unasked
