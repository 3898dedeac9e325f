"""How loud a sound is to be: the measure, the target, the ceiling, and the gain that follows.

A gain is a whole number of thousandths of a decibel, so that the last bits of a measurement cannot move a sample.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from kickrender.circuit import exact
from kickrender.circuit.values import parse_value, shown
from kickrender.errors import Fault, InputError, MeasurementError, nearest_name
from kickrender.sound.measure import Measurements

# Measure -> (field of Measurements, unit it is written in).
MEASURES: Mapping[str, tuple[str | None, str]] = {
    "momentary": ("momentary_lufs", "LUFS"),
    "integrated": ("integrated_lufs", "LUFS"),
    "true-peak": ("true_peak_dbtp", "dBTP"),
    "peak": ("peak_dbfs", "dBFS"),
    "none": (None, ""),
}
_MEASURE_OF_UNIT = {"LUFS": "momentary", "dBTP": "true-peak", "dBFS": "peak"}
LOWEST_DB, HIGHEST_DB = -70.0, 0.0
USUAL_CEILING_DBTP = 0.0  # a target alone must not push a sound beyond what a file can hold
GAIN_STEPS_PER_DB = 1000


@dataclass(frozen=True)
class Level:
    """The loudness asked for.

    measure : one of MEASURES; with "none" a sound keeps its volts over full scale.
    target : wanted value of that measure, in its own unit; None with "none".
    ceiling_dbtp : true peak that the gain must not exceed; it only ever lowers the gain. [dBTP]
    """

    measure: str = "momentary"
    target: float | None = None
    ceiling_dbtp: float | None = None


@dataclass(frozen=True)
class Gain:
    """A gain and how far the ceiling held it below what the target asked for. [dB, whole thousandths]"""

    db: float
    held_back_db: float = 0.0

    @property
    def factor(self) -> float:
        """The gain as a factor, the same bits on every machine."""
        return exact.power(10.0, self.db / 20)

    @property
    def note(self) -> str:
        """What the ceiling did, in words; empty when it did nothing."""
        if self.held_back_db == 0:
            return ""
        return f"the ceiling holds the gain {self.held_back_db:.3f} dB below the target"


def level_gain(measurements: Sequence[Measurements], level: Level) -> Gain:
    """The one gain of sounds that are to keep their distances: the loudest of them reaches the target.

    Parameters
    ----------
    measurements : sequence of Measurements
        Of each sound before any gain. Silent ones have no say.
    level : Level

    Raises
    ------
    MeasurementError
        If none of the sounds has the measure: all are silent, or, gated, too quiet.
    """
    gain = 0.0
    if level.target is not None:
        gain = level.target - _loudest(measurements, level.measure)
    wanted = _in_steps(gain)
    if level.ceiling_dbtp is None:
        return Gain(wanted)
    allowed = _in_steps(level.ceiling_dbtp - _loudest(measurements, "true-peak"))
    return Gain(min(wanted, allowed), _in_steps(max(0.0, wanted - allowed)))


def gain_db(measurements: Measurements, level: Level) -> float:
    """The gain of one sound on its own. [dB]"""
    return level_gain([measurements], level).db


def shared_gain_db(measurements: Sequence[Measurements], level: Level) -> float:
    """The one gain of a group, see `level_gain`. [dB]"""
    return level_gain(measurements, level).db


def _loudest(measurements: Sequence[Measurements], measure: str) -> float:
    field, unit = MEASURES[measure]
    values = [value for one in measurements if (value := getattr(one, str(field))) is not None]
    if not values:
        raise MeasurementError(
            f"no {measure} level: the sound is silent or below {LOWEST_DB:g} {unit}; level by 'peak' or 'none' instead"
            if measure == "integrated"
            else f"no {measure} level: the sound is silent"
        )
    return max(values)


def _in_steps(db: float) -> float:
    return round(db * GAIN_STEPS_PER_DB) / GAIN_STEPS_PER_DB


def read_level(given: Mapping[str, Any], place: Callable[[str], str]) -> Level:
    """The level written as `measure`, `target`, `ceiling`, checked together.

    Parameters
    ----------
    given : mapping
        A target is a number, or a text with the measure's unit ("-14 LUFS"); a ceiling likewise ("-1 dBTP"), or
        "none". None means not given; the ceiling is then full scale wherever there is a target.
    place : function
        From a key to the place a fault is reported at.

    Raises
    ------
    InputError
        With every fault: unknown keys, an unknown measure, a unit that is not the measure's, values out of range.
    """
    faults: list[Fault] = []
    known = ("measure", "target", "ceiling")
    for key in given:
        if key not in known:
            faults.append(Fault(place(key), f"unknown key '{key}'", ", ".join(known), nearest_name(key, known)))
    measure = given.get("measure") or "momentary"
    target = ceiling = None
    if not isinstance(measure, str) or measure not in MEASURES:
        nearest = nearest_name(measure, MEASURES) if isinstance(measure, str) else None
        faults.append(Fault(place("measure"), f"unknown measure {shown(measure)}", ", ".join(MEASURES), nearest))
    else:
        unit = MEASURES[measure][1]
        raw = given.get("target")
        if measure == "none" and raw is not None:
            faults.append(Fault(place("target"), f"found {shown(raw)}", "no target with measure 'none'"))
        elif measure != "none" and raw is None:
            faults.append(Fault(place("target"), "key 'target' is missing", f'a level such as "-14 {unit}"'))
        elif raw is not None:
            target = _read_db(raw, unit, place("target"), faults)
    raw = given.get("ceiling")
    if raw is None:
        ceiling = None if target is None else USUAL_CEILING_DBTP
    elif raw != "none":
        ceiling = _read_db(raw, "dBTP", place("ceiling"), faults)
    if faults:
        raise InputError(faults)
    return Level(measure, target, ceiling)


def read_level_text(text: str, place: str) -> Level:
    """The level a text asks for, its unit naming the measure: "-14 LUFS", "-14 LUFS integrated", "-1 dBTP", "none".

    LUFS is momentary unless the text names a measure.
    """
    words = text.split()
    measure = words.pop() if words and words[-1] in MEASURES else None
    rest = " ".join(words)
    unit = next((unit for unit in _MEASURE_OF_UNIT if rest.lower().endswith(unit.lower())), None)
    if measure is None and unit is None:
        raise InputError(
            Fault(place, f"found {shown(text)}", '"-14 LUFS", "-14 LUFS integrated", "-1 dBTP", "-3 dBFS", "none"')
        )
    return read_level({"measure": measure or _MEASURE_OF_UNIT[str(unit)], "target": rest or None}, lambda key: place)


def _read_db(raw: object, unit: str, place: str, faults: list[Fault]) -> float | None:
    """A level in decibels; a fault is added when it is none, of another unit, or out of range."""
    allowed = f'{LOWEST_DB:g} to {HIGHEST_DB:g} {unit}, such as "-14 {unit}"'
    number = raw
    if isinstance(raw, str):
        stripped = raw.strip()
        number = stripped[: -len(unit)] if stripped.lower().endswith(unit.lower()) else stripped
    try:
        value = parse_value(number, "", place)
    except InputError:
        faults.append(Fault(place, f"found {shown(raw)}", allowed))
        return None
    if not (LOWEST_DB <= value <= HIGHEST_DB) or math.isnan(value):
        faults.append(Fault(place, f"{shown(raw)} is out of range", allowed))
        return None
    return value
