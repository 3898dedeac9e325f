"""How a sound is to be written: rate, format, length, oversampling, raw or finished."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import asdict, dataclass
from typing import Any

from kickrender.circuit.kinds import Choice, Flag, Quantity
from kickrender.circuit.values import parse_value, shown
from kickrender.errors import Fault, InputError, nearest_name
from kickrender.sound.measure import CONCERT_PITCH_HZ

# Format of a file -> format of its samples. FLAC packs whole numbers, without loss.
SAMPLES = {"pcm16": "pcm16", "pcm24": "pcm24", "float32": "float32", "flac16": "pcm16", "flac24": "pcm24"}
FORMATS = tuple(SAMPLES)
ENDINGS = (".wav", ".flac")
HIGHEST_ODD_FLAC_HZ = 65_535  # above it, a FLAC file's frames tell a rate in tens of hertz only
LOWEST_RATE_HZ, HIGHEST_RATE_HZ = 22_050, 192_000
OVERSAMPLES = (1, 2, 4, 8, 16, 32, 64)
SHORTEST_S, LONGEST_S = 0.001, 60.0
LONGEST_UNASKED_S = 4.0  # where a sound that never dies is cut when no length is asked for


@dataclass(frozen=True)
class SoundOptions:
    """What is asked of a file.

    rate_hz : samples per second of the file.
    format : one of FORMATS.
    length_s : None means until the sound has died away (-90 dB of its peak), at most LONGEST_UNASKED_S.
    oversample : how many times the file's rate the solution is sampled at before decimation; 1 means unfiltered.
    raw : volts over full scale from t = 0, with no level, trim, fade or dither.
    concert_pitch_hz : A4, by which notes are named; 440 Hz of ISO 16 unless asked otherwise. [Hz]
    """

    rate_hz: int = 48_000
    format: str = "pcm24"
    length_s: float | None = None
    oversample: int = 8
    raw: bool = False
    concert_pitch_hz: float = CONCERT_PITCH_HZ

    @property
    def sample_format(self) -> str:
        """The format of the samples, whatever file they are packed in: "pcm16", "pcm24" or "float32"."""
        return SAMPLES[self.format]

    def of_samples(self) -> dict[str, Any]:
        """The options by name, with the format of the samples: all that samples depend on."""
        return {**asdict(self), "format": self.sample_format}

    @property
    def ending(self) -> str:
        """What the file's name ends in."""
        return ending_of(self.format)

    @property
    def longest_s(self) -> float:
        """For how long to solve: the length asked for, or the longest that is given unasked. [s]"""
        return LONGEST_UNASKED_S if self.length_s is None else self.length_s


def read_options(given: Mapping[str, Any], place: Callable[[str], str]) -> SoundOptions:
    """The options written as `rate`, `format`, `length`, `oversample`, `raw`, `concert_pitch`, checked together.

    Parameters
    ----------
    given : mapping
        Names to texts, numbers or booleans; None means not given.
    place : function
        From a name to the place a fault is reported at ("--rate", "file.toml:4, sound.rate").

    Raises
    ------
    InputError
        With every fault: unknown names, values out of range.
    """
    faults: list[Fault] = []
    chosen: dict[str, Any] = {}
    for name, value in given.items():
        if name not in _READERS:
            faults.append(
                Fault(place(name), f"unknown key '{name}'", ", ".join(_READERS), nearest_name(name, _READERS))
            )
        elif value is not None:
            field, read = _READERS[name]
            try:
                chosen[field] = read(value, place(name))
            except InputError as error:
                faults.extend(error.faults)
    options = SoundOptions(**chosen)
    if not faults and options.ending == ".flac" and options.rate_hz > HIGHEST_ODD_FLAC_HZ and options.rate_hz % 10:
        allowed = f"a multiple of 10 above {HIGHEST_ODD_FLAC_HZ}, or a WAV format"
        faults.append(Fault(place("rate"), f"a rate of {options.rate_hz} Hz in a FLAC file", allowed))
    if faults:
        raise InputError(faults)
    return options


def ending_of(file_format: str) -> str:
    """What the names of files of a format end in."""
    return ".flac" if file_format.startswith("flac") else ".wav"


def _whole(quantity: Quantity) -> Callable[[object, str], int]:
    def read(raw: object, place: str) -> int:
        value = quantity.read(raw, place)
        if value != int(value):
            raise InputError(Fault(place, f"{shown(raw)} is not a whole number", quantity.range))
        return int(value)

    return read


def _oversample(raw: object, place: str) -> int:
    value = parse_value(raw, "", place)
    if value not in OVERSAMPLES:
        raise InputError(Fault(place, f"found {shown(raw)}", ", ".join(map(str, OVERSAMPLES))))
    return int(value)


_RATE = Quantity("Hz", "samples per second", at_least=LOWEST_RATE_HZ, at_most=HIGHEST_RATE_HZ)
_LENGTH = Quantity("s", "length of the file", at_least=SHORTEST_S, at_most=LONGEST_S)
_FORMAT = Choice("sample format", FORMATS)
_RAW = Flag("whether to leave the samples as they come")
_CONCERT_PITCH = Quantity("Hz", "A4, by which notes are named", at_least=400.0, at_most=480.0)
_READERS: Mapping[str, tuple[str, Callable[[object, str], Any]]] = {
    "rate": ("rate_hz", _whole(_RATE)),
    "format": ("format", _FORMAT.read),
    "length": ("length_s", _LENGTH.read),
    "oversample": ("oversample", _oversample),
    "raw": ("raw", lambda raw, place: bool(_RAW.read(raw, place))),
    "concert_pitch": ("concert_pitch_hz", _CONCERT_PITCH.read),
}
