"""The matched null of two sounds against closed forms: noise of a known share, delays, gains, silence."""

from __future__ import annotations

import math

import numpy as np
import pytest

from kickrender.sound.null import matched_residual_db

RATE_HZ = 48_000


def sound(hz: float = 60.0, seconds: float = 0.3) -> np.ndarray:
    t = np.arange(round(seconds * RATE_HZ)) / RATE_HZ
    return np.sin(2 * np.pi * hz * t) * np.exp(-t / 0.05)


@pytest.mark.parametrize("share_db", [-90.0, -60.0, -40.0, -20.0])
def test_noise_of_a_known_share_is_what_is_left(share_db: float) -> None:
    """Noise orthogonal to the sound: r^2 = n^2 / (s^2 + n^2), whatever the gain does."""
    s = sound()
    noise = np.random.default_rng(1).standard_normal(len(s))
    for lag in range(-48, 49):  # orthogonal to every delay of the sound that is tried
        moved = np.roll(np.pad(s, 48), lag)[48:-48]
        noise -= moved * np.dot(noise, moved) / np.dot(moved, moved)
    noise *= 10 ** (share_db / 20) * math.sqrt(np.dot(s, s) / np.dot(noise, noise))
    expected = 10 * math.log10(np.dot(noise, noise) / np.dot(s + noise, s + noise))
    assert matched_residual_db(s, s + noise, RATE_HZ) == pytest.approx(expected, abs=0.2)
    assert matched_residual_db(s + noise, s, RATE_HZ) == pytest.approx(expected, abs=0.2)


@pytest.mark.parametrize("delay", [-48, -7, 0, 1, 48])
def test_a_delay_up_to_a_millisecond_is_matched(delay: int) -> None:
    first = np.pad(sound(), (100, 100))
    assert matched_residual_db(first, np.roll(first, delay), RATE_HZ) < -200
    assert matched_residual_db(sound(), np.pad(sound(), (max(delay, 0), 0)), RATE_HZ) < -200


def test_further_apart_is_another_sound() -> None:
    assert matched_residual_db(sound(), np.pad(sound(), (480, 0)), RATE_HZ) > -20


@pytest.mark.parametrize("gain_db", [-0.49, -0.1, 0.0, 0.1, 0.49])
def test_a_level_that_nobody_hears_differ_is_matched(gain_db: float) -> None:
    assert matched_residual_db(sound(), sound() * 10 ** (gain_db / 20), RATE_HZ) < -200


@pytest.mark.parametrize("gain_db", [-6.0, -0.51, 0.51])
def test_a_level_that_differs_more_is_a_difference(gain_db: float) -> None:
    assert matched_residual_db(sound(), sound() * 10 ** (gain_db / 20), RATE_HZ) == math.inf


def test_the_shorter_is_followed_by_silence() -> None:
    """What was cut off: energies of an exponential, beyond t, exp(-2 t / tau) of the whole."""
    long, cut = sound(), sound()[: round(0.15 * RATE_HZ)]
    expected = 10 * math.log10(math.exp(-2 * 0.15 / 0.05))
    assert matched_residual_db(cut, long, RATE_HZ) == pytest.approx(expected, abs=0.3)
    assert matched_residual_db(long, cut, RATE_HZ) == pytest.approx(expected, abs=0.3)


def test_equal_sounds_and_silence() -> None:
    silence = np.zeros(100)
    assert matched_residual_db(sound(), sound(), RATE_HZ) == -math.inf
    assert matched_residual_db(silence, silence[:50], RATE_HZ) == -math.inf
    assert matched_residual_db(silence, sound(), RATE_HZ) == math.inf
    assert matched_residual_db(sound(), silence, RATE_HZ) == math.inf


def test_upside_down_is_another_sound() -> None:
    click = np.zeros(1000)
    click[100] = 1.0
    assert matched_residual_db(click, -click, RATE_HZ) == pytest.approx(0.0, abs=0.1)
