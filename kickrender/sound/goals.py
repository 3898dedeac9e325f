"""What may be asked of a sound by ear, note names, and how near a measured sound comes.

    pitch      settled fundamental, a note or a frequency    within 2 cents
    decay      time from the peak to -60 dB                  within 3 %
    drop       pitch at the start over the settled one       within a quarter of a semitone
    drop_time  until 1/e of the drop is left                 within 10 %
    centroid   mean frequency of the power spectrum          within 3 %

A circuit's table [goals] names the control that answers to each; `kickrender.sound.tune` finds its position.
"""

from __future__ import annotations

import difflib
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

from kickrender.circuit import exact
from kickrender.circuit.kinds import Quantity
from kickrender.circuit.values import format_value, shown
from kickrender.errors import Fault, InputError
from kickrender.sound.measure import CONCERT_PITCH_HZ, NOTE_NAMES, Measurements, nearest_note

A4_NUMBER = 69  # of MIDI 1.0, where middle C (C4) is 60
_STEPS = {"C": 0, "D": 2, "E": 4, "F": 5, "G": 7, "A": 9, "B": 11}
_NOTE = re.compile(r"([A-G])([#b]?)(-1|[0-9])")


@dataclass(frozen=True)
class Goal:
    """One wish: which measurement, and its value in the measurement's own unit, with the text it was given by."""

    kind: str
    value: float
    text: str

    @property
    def shown(self) -> str:
        """The goal for people: "C3 (130.8 Hz)", "0.4 s"."""
        number = f"{self.value:.4g} {GOALS[self.kind].unit}"
        return f"{self.text} ({number})" if self.text[:1].isalpha() else number


@dataclass(frozen=True)
class GoalKind:
    """How one kind of goal is read, measured and compared.

    ways : key in a pack file ("hertz") -> how a value under it is read; `notes` is read by `note_hz`.
    measured : the goal's value of a sound; None when the sound has none.
    even : the scale on which controls act about evenly, and on which `tolerance` counts.
    tolerance : how far a sound may be off, on that scale.
    """

    about: str
    unit: str
    ways: Mapping[str, Quantity]
    measured: Callable[[Measurements], float | None]
    even: Callable[[float], float]
    tolerance: float

    def scaled(self, value: float) -> float:
        """A value on the even scale, counted in tolerances: two of them one apart are one tolerance apart."""
        return self.even(value) / self.tolerance

    def shown(self, value: float, concert_pitch_hz: float = CONCERT_PITCH_HZ) -> str:
        """A value for people: "43.65 Hz (F1 +0 cents)", "0.4 s", "12 semitones"."""
        text = f"{value:.4g} {self.unit}"
        if "notes" in self.ways:
            note, cents = nearest_note(value, concert_pitch_hz)
            text += f" ({note} {cents:+.0f} cents)"
        return text


def _drop(measurements: Measurements) -> float | None:
    if measurements.start_hz is None or measurements.settled_hz is None:
        return None
    # Rounded as the pitches are: what is read off here moves a control.
    return round(_semitones(measurements.start_hz) - _semitones(measurements.settled_hz), 5)


def _semitones(hz: float) -> float:
    return 12.0 * exact.log(hz) / exact.log(2.0)


def _itself(value: float) -> float:
    return value


GOALS: Mapping[str, GoalKind] = MappingProxyType(
    {
        "pitch": GoalKind(
            "settled fundamental",
            "Hz",
            {"notes": Quantity("Hz", "pitch"), "hertz": Quantity("Hz", "pitch", at_least=20.0, at_most=600.0)},
            lambda measurements: measurements.settled_hz,
            _semitones,
            0.02,
        ),
        "decay": GoalKind(
            "time to -60 dB",
            "s",
            {"seconds": Quantity("s", "decay", at_least=0.005, at_most=60.0)},
            lambda measurements: measurements.decay_s or None,
            exact.log,
            0.0295,  # exp of it is 1.03
        ),
        "drop": GoalKind(
            "start over settled pitch",
            "semitones",
            {"semitones": Quantity("", "drop", at_least=0.0, at_most=60.0)},
            _drop,
            _itself,
            0.25,
        ),
        "drop_time": GoalKind(
            "until 1/e of the drop is left",
            "s",
            {"seconds": Quantity("s", "drop time", at_least=0.001, at_most=10.0)},
            lambda measurements: measurements.drop_s,
            exact.log,
            0.0953,  # exp of it is 1.1; read from half cycles, a drop's time is no finer than that
        ),
        "centroid": GoalKind(
            "mean frequency",
            "Hz",
            {"hertz": Quantity("Hz", "centroid", at_least=20.0, at_most=20e3)},
            lambda measurements: measurements.centroid_hz,
            exact.log,
            0.0295,
        ),
    }
)


def note_hz(name: object, concert_pitch_hz: float = CONCERT_PITCH_HZ, place: str = "note") -> float:
    """The frequency of a note of equal temperament: "A4", "F#1", "Bb1". [Hz]

    f = A4 2^((n - 69)/12), n the note's number, middle C (60) being C4. Source: ISO 16 (A4 = 440 Hz), MIDI 1.0.

    Raises
    ------
    InputError
        If there is no note of that name, with the nearest that there is.
    """
    number = _number(name)
    if number is None:
        found = f"no note {shown(name)}" if isinstance(name, str) else f"{shown(name)} is not a note"
        raise InputError(Fault(place, found, "a note such as 'F1', 'F#1' or 'Bb1'", _nearest_note_name(name)))
    return concert_pitch_hz * exact.power(2.0, (number - A4_NUMBER) / 12.0)


def notes_between(low: str, high: str) -> list[str]:
    """Every note from one to another, both included, a semitone apart, with sharps; empty when `low` lies above."""
    first, last = _number(low), _number(high)
    if first is None or last is None:
        return []
    return [f"{NOTE_NAMES[number % 12]}{number // 12 - 1}" for number in range(first, last + 1)]


def _number(name: object) -> int | None:
    """The number of a note, C4 being 60; None when there is no such note."""
    match = _NOTE.fullmatch(name.strip()) if isinstance(name, str) else None
    if match is None:
        return None
    letter, accidental, octave = match.groups()
    return 12 * (int(octave) + 1) + _STEPS[letter] + {"": 0, "#": 1, "b": -1}[accidental]


def _nearest_note_name(name: object) -> str | None:
    if not isinstance(name, str):
        return None
    text = name.strip()[:1].upper() + name.strip()[1:].lower()
    if _NOTE.fullmatch(text):
        return text
    if _NOTE.fullmatch(f"{text}1"):
        return f"{text}1"
    flats = ("Db", "Eb", "Gb", "Ab", "Bb")
    known = [f"{note}{octave}" for octave in range(10) for note in (*NOTE_NAMES, *flats)]
    if swapped := [note for note in known if sorted(note) == sorted(text)]:
        return swapped[0]
    # Names are so short that one wrong letter of two must still count as near.
    matches = difflib.get_close_matches(text, known, n=1, cutoff=0.5)
    return matches[0] if matches else None


def read_goal(kind: str, way: str, raw: object, place: str, concert_pitch_hz: float = CONCERT_PITCH_HZ) -> Goal:
    """The goal written as `kind = { way = raw }`, such as pitch = { notes = "F1" }.

    Raises
    ------
    InputError
        If there is no such note, or the value cannot be read or is out of range.
    """
    if way == "notes":
        return Goal(kind, note_hz(raw, concert_pitch_hz, place), str(raw).strip())
    rule = GOALS[kind].ways[way]
    value = rule.read(raw, place)
    return Goal(kind, value, raw.strip() if isinstance(raw, str) else format_value(value, "", digits=12))
