"""Trim, fade, dither and whole numbers."""

from __future__ import annotations

import hashlib

import numpy as np
import pytest

from kickrender.errors import InputError, MeasurementError
from kickrender.sound.finish import TAIL_FLOOR, fade, quantise, triangular_noise, trim

RATE_HZ = 48_000
FADE = 240  # 5 ms


def test_trim_cuts_where_the_sound_is_dead_and_leaves_a_fade():
    sound = np.zeros(10_000)
    sound[100], sound[2000], sound[2001] = 1.0, -TAIL_FLOOR, 0.99 * TAIL_FLOOR
    assert len(trim(sound, RATE_HZ)) == 2001 + FADE
    assert np.shares_memory(trim(sound, RATE_HZ), sound)


def test_trim_never_cuts_inside_a_sound():
    """A quiet stretch between two strikes stays; so does a sound that never dies, and one that ends at once."""
    strikes = np.zeros(30_000)
    strikes[[0, 20_000]] = 1.0
    assert len(trim(strikes, RATE_HZ)) == 20_001 + FADE
    assert len(trim(np.ones(500), RATE_HZ)) == 500
    assert len(trim(np.eye(1, 300, 290)[0], RATE_HZ)) == 300


def test_floor_is_minus_90_db_of_the_peak():
    assert pytest.approx(-90, abs=1e-12) == 20 * np.log10(TAIL_FLOOR)


def test_silence_is_not_trimmed():
    assert len(trim(np.zeros(50), RATE_HZ)) == 50
    assert len(trim(np.zeros(0), RATE_HZ)) == 0


@pytest.mark.parametrize("count", [1, 2, 100, FADE, FADE + 1, 5000])
def test_fade_ends_in_exact_zero_and_leaves_the_rest(count):
    sound = np.full(count, 0.7)
    faded = fade(sound, RATE_HZ)
    assert faded[-1] == 0.0
    assert (np.diff(faded) <= 0).all()
    np.testing.assert_array_equal(faded[:-FADE], sound[:-FADE])
    assert (sound == 0.7).all()


def test_fade_starts_and_ends_level():
    """1 - 3 u^2 + 2 u^3: half way at the middle, without a corner at either end."""
    faded = fade(np.ones(1000), RATE_HZ)
    assert faded[1000 - FADE // 2 - 1] == 0.5
    steps = np.abs(np.diff(faded))
    assert steps[[0, 999 - FADE, -1]] == pytest.approx(0, abs=1e-4)
    assert steps.max() == pytest.approx(1.5 / FADE, rel=0.01)


def test_dither_is_triangular_two_steps_wide():
    """Mean 0, variance 1/6, and the share within half a step 3/4, over 200,000 numbers."""
    noise = triangular_noise(200_000, 1)
    assert np.abs(noise).max() < 1
    assert noise.mean() == pytest.approx(0, abs=0.003)
    assert noise.var() == pytest.approx(1 / 6, abs=0.001)
    assert (np.abs(noise) < 0.5).mean() == pytest.approx(0.75, abs=0.003)
    assert np.corrcoef(noise[1:], noise[:-1])[0, 1] == pytest.approx(0, abs=0.01)


def test_dither_is_the_same_for_ever():
    """Worked out from the published PCG64 stream of seed 0 by Python's own whole numbers."""
    raw = [int(number) for number in np.random.PCG64(0).random_raw(4)]
    assert triangular_noise(2, 0).tolist() == [
        (raw[0] >> 11) / 2**53 - (raw[1] >> 11) / 2**53,
        (raw[2] >> 11) / 2**53 - (raw[3] >> 11) / 2**53,
    ]
    digest = hashlib.sha256(triangular_noise(1000, 2**64 - 1).astype("<f8").tobytes()).hexdigest()
    assert digest == "44dfa07f834ad67b4dc3a28809ac3f120ce9d39e91e8e998da3d9d9e34a71465"


def test_dither_takes_the_error_of_16_bits_off_the_sound():
    """A sine of a third of a step vanishes undithered and is there, at its level, with dither."""
    k = np.arange(100_000)
    quiet = np.sin(2 * np.pi * k / 100) / 3 / 2**15
    assert not quantise(quiet, "pcm16").any()
    heard = quantise(quiet, "pcm16", seed=9).astype(float)
    assert 2 * (heard * np.sin(2 * np.pi * k / 100)).mean() == pytest.approx(1 / 3, abs=0.01)


@pytest.mark.parametrize(("file_format", "kind", "steps"), [("pcm16", np.int16, 2**15), ("pcm24", np.int32, 2**23)])
def test_whole_numbers_are_the_nearest_half_to_even(file_format, kind, steps):
    values = np.array([0.0, 0.49, 0.5, 0.51, 1.5, 2.5, -0.5, -1.5, -2.5, steps - 1, -steps])
    pcm = quantise(values / steps, file_format)
    assert pcm.dtype == kind
    assert pcm.tolist() == [0, 0, 0, 1, 2, 2, 0, -2, -2, steps - 1, -steps]


def test_only_16_bits_are_dithered():
    sound = np.random.default_rng(1).uniform(-1, 1, 1000)
    assert (quantise(sound, "pcm16", seed=1) != quantise(sound, "pcm16")).any()
    np.testing.assert_array_equal(quantise(sound, "pcm24", seed=1), quantise(sound, "pcm24"))
    np.testing.assert_array_equal(quantise(sound, "float32", seed=1), sound.astype(np.float32))


@pytest.mark.parametrize("file_format", ["pcm16", "pcm24"])
def test_full_scale_takes_the_largest_number(file_format):
    """Also with what rounding the gain may add, 0.001 dB, and with dither: it must never wrap around."""
    steps = 2**15 if file_format == "pcm16" else 2**23
    for level in (1.0, 1.0001):
        pcm = quantise(np.tile([level, -level], 500), file_format, seed=3)
        assert pcm[0::2].min() >= steps - 3
        assert pcm[1::2].max() <= -steps + 2


@pytest.mark.parametrize("file_format", ["pcm16", "pcm24"])
@pytest.mark.parametrize("over", [1.001, -1.5, 40.0])
def test_beyond_full_scale_is_refused_with_how_much(file_format, over):
    db = 20 * np.log10(abs(over))
    message = rf"{file_format}: the sound reaches {abs(over):g} times full scale \(\{db:+.2f} dB\); allowed: at most 1"
    with pytest.raises(InputError, match=message):
        quantise(np.array([0.0, over]), file_format)


def test_float_files_hold_what_lies_beyond():
    assert quantise(np.array([0.1, -40.0]), "float32").tolist() == [np.float32(0.1), -40.0]


@pytest.mark.parametrize("file_format", ["pcm16", "pcm24", "float32"])
def test_what_is_no_number_is_refused(file_format):
    for bad in (np.nan, np.inf):
        with pytest.raises(MeasurementError, match="not finite"):
            quantise(np.array([0.0, bad]), file_format)


def test_channels_keep_their_places():
    sound = np.array([[0.5, -0.5], [0.25, 0.0]])
    assert quantise(sound, "pcm16").tolist() == [[16_384, -16_384], [8192, 0]]
    assert quantise(sound, "pcm16", seed=1).shape == (2, 2)
