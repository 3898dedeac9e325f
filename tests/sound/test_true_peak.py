"""True peak: the bound that spares work, abrupt ends, silence. The EBU's signals are in tests/outside."""

from __future__ import annotations

import numpy as np
import pytest

from kickrender.sound.half_band import double
from kickrender.sound.true_peak import GREATEST_BULGE, REACH, STAGES, padded_part, true_peak


def interpolated(samples: np.ndarray) -> np.ndarray:
    """Eight times the rate, all of it."""
    wave = np.pad(samples, 2 * REACH)
    for taps in STAGES:
        m = len(taps)
        padded = padded_part(wave, 1 - m, len(wave) + m)
        wave = np.empty(2 * len(wave))
        double(padded, taps, wave)
    return wave


def test_no_value_leaves_the_line_between_its_neighbours_by_more_than_the_bound():
    """At every place between samples: weights less the line's, summed up twice, are the second differences' weights."""
    impulse = np.zeros(401)
    impulse[200] = 1.0
    wave = interpolated(impulse)[16 * REACH :]
    bulges = []
    for place in range(8):
        weights = wave[place::8].copy()
        assert weights.sum() == pytest.approx(1, abs=1e-12)
        weights[200] -= 1 - place / 8
        weights[199] -= place / 8
        bulges.append(np.abs(np.cumsum(np.cumsum(weights))).sum())
    assert GREATEST_BULGE - 0.001 < max(bulges) < GREATEST_BULGE
    assert np.flatnonzero(wave)[[0, -1]] == pytest.approx(1600, abs=8 * REACH)


@pytest.mark.parametrize("seed", range(20))
def test_looking_at_part_of_a_sound_misses_nothing(seed):
    """Random sounds from smooth to rough, some with their peak at an end."""
    random = np.random.default_rng(seed)
    count = int(random.integers(1, 3000))
    sound = np.convolve(random.standard_normal(count), np.ones(1 + 4 * (seed % 5)), "same")
    sound *= np.exp(-np.arange(count) / random.uniform(20, 3000))
    highest = np.abs(interpolated(sound)).max()
    # The parabola adds at most what eight values per sample can miss.
    assert highest <= true_peak(sound) <= highest * 1.03


def test_an_abrupt_end_rings_outside_the_samples():
    """A constant that starts and stops: no sample exceeds 1, the wave does, by the half-band filter's step response."""
    assert 1.05 < true_peak(np.ones(1000)) < 1.2


def test_silence_has_no_peak():
    assert true_peak(np.zeros(10)) == 0.0


def test_a_lone_sample_is_its_own_peak():
    assert true_peak(np.array([-0.5])) == 0.5


def test_scaling_scales_the_peak():
    sound = np.random.default_rng(4).standard_normal(500)
    assert true_peak(0.25 * sound) == 0.25 * true_peak(sound)
