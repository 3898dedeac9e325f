"""Attack and decay of sounds whose envelope is known."""

from __future__ import annotations

import numpy as np
import pytest

from kickrender.sound.envelope import attack_s, decay_s

RATE_HZ = 48_000
DECAYS_60_DB = 6.907755278982137  # ln 1000: time constants in 60 dB


def times(seconds: float) -> np.ndarray:
    return np.arange(round(seconds * RATE_HZ)) / RATE_HZ


@pytest.mark.parametrize("hz", [40, 61.7, 200, 3000])
@pytest.mark.parametrize("tau", [0.02, 0.05, 0.2])
def test_decay_of_a_decaying_sine(hz, tau):
    """60 dB from the first summit take ln 1000 time constants, within 0.5 %."""
    t = times(2)
    found = decay_s(np.exp(-t / tau) * np.sin(2 * np.pi * hz * t), RATE_HZ)
    assert found == pytest.approx(DECAYS_60_DB * tau, rel=0.005)


def test_decay_of_a_plain_exponential():
    assert decay_s(np.exp(-times(1) / 0.05), RATE_HZ) == pytest.approx(DECAYS_60_DB * 0.05, rel=1e-6)


def test_decay_moves_evenly_with_the_sound():
    """A goal search needs no jumps: longer sounds decay longer, each step by its share within a fifth of it."""
    taus = np.linspace(0.05, 0.055, 51)
    t = times(1)
    found = np.array([decay_s(np.exp(-t / tau) * np.sin(2 * np.pi * 50 * t), RATE_HZ) for tau in taus])
    np.testing.assert_allclose(np.diff(found), DECAYS_60_DB * 0.0001, rtol=0.2)


@pytest.mark.parametrize("tau", [0.1, 0.101, 0.102, 0.103])
def test_a_lopsided_wave_decays_like_any_other(tau):
    """Its half cycles of one polarity swing twice as far as the others; the envelope follows the farther."""
    t = times(2)
    wave = np.sin(2 * np.pi * 50 * t) + 0.4 * np.sin(2 * np.pi * 100 * t + 1.5)
    assert decay_s(np.exp(-t / tau) * wave, RATE_HZ) == pytest.approx(DECAYS_60_DB * tau, rel=0.005)


@pytest.mark.parametrize("seconds", [0.05, 0.2951, 0.3, 0.344])
def test_a_sound_cut_off_before_it_died_has_no_decay(seconds):
    """Also when it ends just where it crosses zero."""
    t = times(seconds)
    assert decay_s(np.exp(-t / 0.05) * np.cos(2 * np.pi * 50 * t), RATE_HZ) is None


def test_a_second_strike_puts_the_end_off():
    t = times(1)
    hit = np.exp(-t / 0.05) * np.sin(2 * np.pi * 50 * t)
    twice = hit + np.concatenate([np.zeros(RATE_HZ // 2), 0.9 * hit[: RATE_HZ // 2]])
    assert 0.8 < decay_s(twice, RATE_HZ) < 0.9


def test_a_tail_that_no_longer_crosses_zero_is_followed():
    """Six half cycles, then a slow exponential, as a coupling capacitor leaves: it alone says when the sound dies."""
    t = times(1)
    sound = np.exp(-t / 0.015) * np.sin(2 * np.pi * 50 * t) + 0.02 * (np.exp(-t / 0.1) - np.exp(-t / 0.001))
    peak, peak_s = np.abs(sound).max(), t[np.argmax(np.abs(sound))]
    assert decay_s(sound, RATE_HZ) == pytest.approx(0.1 * np.log(0.02 / (1e-3 * peak)) - peak_s, rel=1e-5)


def test_another_drop():
    t = times(1)
    found = decay_s(np.exp(-t / 0.05) * np.sin(2 * np.pi * 50 * t), RATE_HZ, drop_db=20)
    assert found == pytest.approx(np.log(10) * 0.05, rel=0.02)


@pytest.mark.parametrize(
    ("samples", "expected"),
    [
        ([0.0, 0.25, 0.5, 0.75, 1.0], 3.2),  # a ramp: from 0.4 to 3.6 samples
        ([-1.0, 0.5], 0.0),
        ([0.0, 0.0, 1.0], 0.8),  # a step: within one sample
        ([0.05, 0.1, -1.0, 0.3], 0.8888889),
    ],
)
def test_attack(samples, expected):
    assert attack_s(np.array(samples), 1.0) == pytest.approx(expected)
