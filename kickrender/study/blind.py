"""A blind listening test as one file: an ABX page that works from disk. What it saves, `study/pool.py` reads.

In each trial a listener hears A, B and X, where X is one of the two, drawn anew by an unbiased coin, and says which.
Who hears no difference is right half the time, so the number of right answers n out of N follows the binomial
distribution with p = 1/2; the probability of n or more by guessing is the exact one-sided p-value.

Sources: D. Clark, High-Resolution Subjective Testing Using a Double-Blind Comparator, J. Audio Eng. Soc. 30 (1982),
for the method; ITU-R BS.1116-3 for switching at will, looping, and settling everything before the test (both from
memory); the binomial test is any statistics handbook's.
"""

from __future__ import annotations

import base64
import hashlib
import json
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from kickrender.errors import Fault, InputError
from kickrender.sound.files import write_whole
from kickrender.sound.page.frame import page_bytes
from kickrender.study.pool import SCHEMA, SCHEMA_VERSION

FEWEST_TRIALS, MOST_TRIALS = 5, 200  # with 5, all right has p = 1/32, the first below 1/20
DEFAULT_TRIALS = 16
PAUSE_S = 0.35  # of silence between two strikes of the loop
LONGEST_S = 60.0  # both sounds stand in the page's text

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class BlindSound:
    """One of the two sounds.

    samples : (n,), full scale 1.
    rate_hz : [Hz]
    label : what it is called once the test is over.
    digest : tells it from every other sound, so that results of one pair can be pooled.
    """

    samples: Floats
    rate_hz: int
    label: str
    digest: str


def write_blind_page(
    path: str | Path,
    sounds: Sequence[BlindSound],
    trials: int = DEFAULT_TRIALS,
    *,
    title: str = "Can you hear it?",
    pause_s: float = PAUSE_S,
    place: str = "blind page",
) -> None:
    """Write the page.

    Parameters
    ----------
    path : path
    sounds : two of BlindSound
        A and B. Matched in level and in time by whoever made them; nothing is changed here. The shorter is
        continued with silence, so that both have the same length and the same encoding: 32-bit floats.
    trials : int, default 16
        Set here and not on the page: who stops when it looks good fools himself.
    pause_s : float
        Silence before the loop starts again. [s]
    place : str
        Named in faults.

    X is drawn in the browser when a trial begins and is nowhere in the page. Which of the two embedded sounds comes
    first in the file depends on their digests and not on who is A.

    Raises
    ------
    InputError
        For sounds that make no test, or a number of trials out of range.
    WriteError
        If the file cannot be written.
    """
    write_whole(Path(path), blind_page(sounds, trials, title, pause_s, place))


def blind_page(
    sounds: Sequence[BlindSound], trials: int, title: str, pause_s: float = PAUSE_S, place: str = "blind page"
) -> bytes:
    """The page's bytes; see `write_blind_page`."""
    _check(sounds, trials, place)
    length = max(len(sound.samples) for sound in sounds)
    embedded = [_embedded(sound, length) for sound in sounds]
    flip = _shuffle([sound.digest for sound in sounds], trials, title)
    order = [1, 0] if flip else [0, 1]
    data = {
        "schema": SCHEMA,
        "schema_version": SCHEMA_VERSION,
        "trials": trials,
        "rate_hz": sounds[0].rate_hz,
        "pause_s": pause_s,
        "sounds": [embedded[k] for k in order],
        "a": order.index(0),
    }
    seconds = length / sounds[0].rate_hz
    return page_bytes("kickrender.study", "blind", data, title=title, trials=trials, seconds=f"{seconds:.2f}")


def _check(sounds: Sequence[BlindSound], trials: int, place: str) -> None:
    faults = []
    if isinstance(trials, bool) or not isinstance(trials, int) or not FEWEST_TRIALS <= trials <= MOST_TRIALS:
        faults.append(
            Fault(f"{place}, trials", f"found {trials}", f"a whole number from {FEWEST_TRIALS} to {MOST_TRIALS}")
        )
    if len(sounds) != 2:
        raise InputError([*faults, Fault(place, f"found {len(sounds)} sounds", "two")])
    for sound in sounds:
        faults += [Fault(f"{place}, '{sound.label}'", *fault) for fault in _faults_of(sound)]
    first, second = sounds
    if first.rate_hz != second.rate_hz:
        faults.append(Fault(place, f"sounds at {first.rate_hz} Hz and {second.rate_hz} Hz", "one rate"))
    if first.digest == second.digest or np.array_equal(first.samples, second.samples):
        faults.append(Fault(place, f"'{first.label}' and '{second.label}' are the same sound", "two sounds"))
    if faults:
        raise InputError(faults)


def _faults_of(sound: BlindSound) -> list[tuple[str, str]]:
    samples = np.asarray(sound.samples)
    if samples.ndim != 1 or len(samples) == 0:
        return [(f"samples of shape {samples.shape}", "one channel with at least one sample")]
    if not np.isfinite(samples).all():
        return [("samples that are no finite numbers", "finite samples")]
    if not samples.any():
        return [("silence", "a sound")]
    if np.abs(samples).max() > 1.0:
        return [(f"a peak of {np.abs(samples).max():.4g} of full scale, which would be clipped", "a peak of at most 1")]
    if len(samples) > LONGEST_S * sound.rate_hz:
        return [(f"{len(samples) / sound.rate_hz:.0f} s of sound", f"at most {LONGEST_S:g} s")]
    return []


def _embedded(sound: BlindSound, length: int) -> dict[str, str]:
    padded = np.zeros(length, "<f4")
    padded[: len(sound.samples)] = sound.samples
    return {
        "label": sound.label,
        "digest": sound.digest,
        "samples": base64.b64encode(padded.tobytes()).decode(),
    }


def _shuffle(digests: Sequence[str], trials: int, title: str) -> bool:
    """A coin that belongs to the page: the same for the same page, unknown to who has not worked it out."""
    text = json.dumps([*digests, trials, title])
    return bool(hashlib.sha256(text.encode()).digest()[0] & 1)
