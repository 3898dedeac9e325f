"""Pitches that a pack asks for, heard by two estimators not made here, both librosa's.

pYIN: M. Mauch, S. Dixon, "pYIN: a fundamental frequency estimator using probabilistic threshold distributions",
ICASSP 2014. It answers in bins, here a cent wide, and is built on YIN's difference function, which for a sine that
dies as e^(-a t) has its least value where sin(2 pi f d) = -(a/(2 pi f)) (1 - e^(-a T)), a little before the period T:
it reads a dying sine sharp, so it hears long decays only.
Reassigned spectrogram: F. Auger, P. Flandrin, IEEE Transactions on Signal Processing 43 (1995). It has no such trouble.
"""

import fcntl
import tempfile
from pathlib import Path

import librosa
import numpy as np
import pytest

from kickrender.circuit import read_circuit
from kickrender.sound.goals import note_hz, notes_between, read_goal
from kickrender.sound.options import SoundOptions
from kickrender.sound.render import Take, hear_each
from kickrender.sound.tune import Wish, tune_each

RATE_HZ = 48_000
FACTOR = 4  # both run on the sound averaged down to 12 kHz, which moves no pitch
LOW_RATE_HZ = RATE_HZ // FACTOR
HOP = LOW_RATE_HZ // 50
NOTES = notes_between("F1", "A#1")


def tuned(decay_s: float) -> list[np.ndarray]:
    """The shipped voice on every one of NOTES."""
    voice = read_circuit("bridged-t")
    decay = read_goal("decay", "seconds", decay_s, "p")
    wishes = [Wish(voice, {}, (read_goal("pitch", "notes", name, "p"), decay), ("p", "p")) for name in NOTES]
    answers = tune_each(wishes, SoundOptions())
    takes = list(hear_each([(voice, answer.settings) for answer in answers], SoundOptions()))
    assert all(isinstance(take, Take) for take in takes)
    return [take.samples for take in takes if isinstance(take, Take)]


def settled(hz: np.ndarray, frame: int, from_s: float, to_s: float) -> float:
    """Median of the readings of frames inside a stretch of time."""
    begins_s = np.arange(len(hz)) * HOP / LOW_RATE_HZ
    inside = (begins_s >= from_s) & (begins_s + frame / LOW_RATE_HZ <= to_s)
    assert inside.sum() >= 5
    return float(np.median(hz[inside]))


def averaged_down(samples: np.ndarray) -> np.ndarray:
    return samples[: len(samples) // FACTOR * FACTOR].reshape(-1, FACTOR).mean(axis=1)


def by_pyin(samples: np.ndarray, near_hz: float, from_s: float, to_s: float) -> float:
    """Within three semitones of where it should be."""
    # librosa compiles on first use into one cache for all processes; two test workers at once have crashed there
    with (Path(tempfile.gettempdir()) / "kickrender-tests-pyin.lock").open("w") as turn:
        fcntl.flock(turn, fcntl.LOCK_EX)
        hz, _, _ = librosa.pyin(
            averaged_down(samples),
            sr=LOW_RATE_HZ,
            fmin=near_hz * 2 ** (-3.005 / 12),
            fmax=near_hz * 2 ** (3 / 12),
            frame_length=4096,
            hop_length=HOP,
            resolution=0.01,
            max_transition_rate=5,
            fill_na=None,
            center=False,
        )
    return settled(hz, 4096, from_s, to_s)


def by_reassignment(samples: np.ndarray, from_s: float, to_s: float) -> float:
    """The loudest bin's frequency, wherever that is."""
    hz, _, magnitude = librosa.reassigned_spectrogram(
        averaged_down(samples), sr=LOW_RATE_HZ, n_fft=2048, hop_length=HOP, center=False, fill_nan=False
    )
    return settled(hz[magnitude.sum(axis=1).argmax()], 2048, from_s, to_s)


def cents(hz: float, of_hz: float) -> float:
    return float(1200 * np.log2(hz / of_hz))


@pytest.mark.slow
def test_long_notes_are_heard_by_pyin_where_they_were_asked_for() -> None:
    """Within 2 cents."""
    pairs = zip(NOTES, tuned(1.5), strict=True)
    off = [cents(by_pyin(samples, note_hz(name), 0.5, 1.1), note_hz(name)) for name, samples in pairs]
    assert np.abs(off).max() < 2.0, off


@pytest.mark.slow
@pytest.mark.filterwarnings("ignore:'where' used without 'out':UserWarning")  # inside librosa, with numpy 2.4
@pytest.mark.parametrize("decay_s", [0.5, 1.5])
def test_notes_are_heard_by_reassignment_where_they_were_asked_for(decay_s: float) -> None:
    """Within 2 cents."""
    pairs = zip(NOTES, tuned(decay_s), strict=True)
    off = [cents(by_reassignment(samples, 0.2, 0.25 + 0.6 * decay_s), note_hz(name)) for name, samples in pairs]
    assert np.abs(off).max() < 2.0, off


@pytest.mark.slow
@pytest.mark.filterwarnings("ignore:'where' used without 'out':UserWarning")
def test_both_would_hear_what_is_off() -> None:
    """A dying sine 8 cents off; pYIN reads sines of 50 Hz 1.5 cents sharp by itself."""
    t = np.arange(RATE_HZ * 3 // 2) / RATE_HZ
    for off in (-8.0, 0.0, 8.0):
        samples = np.exp(-4 * t) * np.sin(2 * np.pi * 50.0 * 2 ** (off / 1200) * t)
        assert cents(by_pyin(samples, 50.0, 0.2, 1.2), 50.0) == pytest.approx(off, abs=2.0)
        assert cents(by_reassignment(samples, 0.2, 1.2), 50.0) == pytest.approx(off, abs=0.5)
