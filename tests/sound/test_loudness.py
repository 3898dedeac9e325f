"""Loudness: what short, quiet and silent sounds read. The standard's own signals are in tests/outside."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import signal

from kickrender.sound.compiled import running_energy
from kickrender.sound.loudness import Loudness, k_weighting, loudness

RATE_HZ = 48_000


def burst(seconds: float, gain: float = 1.0) -> np.ndarray:
    return gain * np.sin(2 * np.pi * 60 * np.arange(round(seconds * RATE_HZ)) / RATE_HZ)


def test_silence_has_no_loudness():
    assert loudness(np.zeros(1000), RATE_HZ) == Loudness(None, None)


def test_below_the_gate_only_momentary_remains():
    """The absolute gate lies at -70 LUFS."""
    full = loudness(burst(1), RATE_HZ).integrated_lufs
    for wanted in (-71, -69):
        found = loudness(burst(1, 10 ** ((wanted - full) / 20)), RATE_HZ)
        assert found.momentary_lufs == pytest.approx(wanted, abs=0.1)
        assert found.integrated_lufs == (None if wanted < -70 else pytest.approx(wanted, abs=1e-6))


@pytest.mark.parametrize("seconds", [0.001, 0.05, 0.3])
def test_a_sound_shorter_than_the_window_reads_its_energy_over_the_whole_window(seconds):
    """Both measures see one window that holds all of the sound and of the filter's ring-out."""
    found = loudness(burst(seconds), RATE_HZ)
    padded = np.concatenate([burst(seconds), np.zeros(RATE_HZ)])
    weighted = signal.sosfilt(np.insert(k_weighting(RATE_HZ), 3, 1.0, axis=1), padded)
    expected = -0.691 + 10 * np.log10((weighted**2).sum() / (0.4 * RATE_HZ))
    assert found.momentary_lufs == pytest.approx(expected, abs=1e-9)
    assert found.integrated_lufs == pytest.approx(expected, abs=1e-9)


def test_momentary_does_not_depend_on_what_stands_around_the_sound():
    hit = burst(0.6) * np.exp(-np.arange(round(0.6 * RATE_HZ)) / 9000)
    alone = loudness(hit, RATE_HZ).momentary_lufs
    for before, after in [(0, 50_000), (7777, 0), (12_345, 54_321)]:
        padded = np.concatenate([np.zeros(before), hit, np.zeros(after)])
        assert loudness(padded, RATE_HZ).momentary_lufs == pytest.approx(alone, abs=1e-9)


def test_only_complete_blocks_are_integrated():
    """A steady tone reads the same however far it reaches into the next block."""
    steady = [loudness(burst(seconds), RATE_HZ).integrated_lufs for seconds in (0.9, 0.9501, 0.99)]
    assert max(steady) - min(steady) < 1e-9


def test_integrated_leaves_out_what_is_ten_units_below():
    loud, quiet = burst(1.0), burst(1.0, 0.1)
    both = loudness(np.concatenate([loud, quiet]), RATE_HZ).integrated_lufs
    ungated = 10 * np.log10(0.5 * (1 + 0.01))
    alone = loudness(loud, RATE_HZ).integrated_lufs
    assert ungated + alone + 1 < both < alone


def test_the_weighting_of_every_rate_is_that_of_48_khz():
    """At 20 to 1000 Hz within 0.03 dB, from 22.05 to 192 kHz."""
    hz = np.geomspace(20, 1000, 50)

    def gain_db(rate_hz: int) -> np.ndarray:
        sections = np.insert(k_weighting(rate_hz), 3, 1.0, axis=1)
        return 20 * np.log10(np.abs(signal.freqz_sos(sections, hz, fs=rate_hz)[1]))

    for rate_hz in (22_050, 44_100, 96_000, 192_000):
        np.testing.assert_allclose(gain_db(rate_hz), gain_db(48_000), rtol=0, atol=0.03)


def test_kernel_equals_scipy():
    noise = np.random.default_rng(3).standard_normal(500)
    sections = k_weighting(RATE_HZ)
    energy = np.empty(701)
    running_energy(noise, sections, energy)
    weighted = signal.sosfilt(np.insert(sections, 3, 1.0, axis=1), np.concatenate([noise, np.zeros(200)]))
    np.testing.assert_allclose(energy, np.concatenate([[0], np.cumsum(weighted**2)]), rtol=1e-10, atol=0)
