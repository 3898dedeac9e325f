"""Decimation: its taps, its response, its timing, and that nothing but the samples decides its bits."""

from __future__ import annotations

import hashlib
import os
import subprocess
import sys

import numpy as np
import pytest
from scipy.signal.windows import kaiser

from kickrender.sound.decimation import OVERSAMPLES, decimate, margin_s, reach
from kickrender.sound.half_band import double, halve, symmetric_sums
from kickrender.sound.taps import EARLY_TAPS, LAST_TAPS, MIDDLE_TAPS

RATE_HZ = 48_000
FILTERING = OVERSAMPLES[1:]


def sine(hz: float, oversample: int, phase: float = 0.3):
    """A sampler of sin(2 pi f t + phase) at the oversampled rate."""
    return lambda first, n: np.sin(2 * np.pi * hz * (first + np.arange(n)) / (RATE_HZ * oversample) + phase)


def stored(values: np.ndarray, oversample: int):
    """A sampler of given values, the first of which lies `reach` before t = 0."""
    return lambda first, n: values[first + reach(oversample) : first + reach(oversample) + n]


@pytest.mark.parametrize(("taps", "beta"), [(EARLY_TAPS, 15.5), (MIDDLE_TAPS, 15.5), (LAST_TAPS, 13.5)])
def test_taps_are_the_windowed_half_band_filters_they_say(taps, beta):
    """Derived again with scipy's Kaiser window, an implementation not made here."""
    m = len(taps)
    k = np.arange(1, 2 * m, 2)
    derived = np.sin(np.pi * k / 2) / (np.pi * k) * kaiser(4 * m - 1, beta)[2 * m - 1 + k]
    np.testing.assert_allclose(taps, 0.25 * derived / derived.sum(), rtol=0, atol=1e-15)
    assert m % 4 == 0


@pytest.mark.parametrize("oversample", FILTERING)
@pytest.mark.parametrize("share", [0.0, 0.001, 0.1, 0.25, 0.4, 0.44, 0.45])
def test_pass_band_keeps_level_and_time(oversample, share):
    """To 0.45 of the rate within 0.01 dB, and every sample at its own time: both within 2e-6."""
    hz = share * RATE_HZ
    k = np.arange(500)
    found = decimate(sine(hz, oversample), len(k), oversample)
    np.testing.assert_allclose(found, np.sin(2 * np.pi * hz * k / RATE_HZ + 0.3), rtol=0, atol=2e-6)


@pytest.mark.parametrize("oversample", FILTERING)
def test_stop_band_is_below_minus_120_db_with_all_its_aliases(oversample):
    """From 0.55 of the rate to half the oversampled rate."""
    for share in [0.55, 0.56, *np.linspace(0.6, oversample / 2, 97)]:
        left = np.abs(decimate(sine(share * RATE_HZ, oversample), 300, oversample)).max()
        assert left < 1e-6, share


def test_a_constant_passes_exactly_enough():
    assert np.abs(decimate(lambda first, n: np.full(n, 3.7), 100, 8) / 3.7 - 1).max() < 1e-14


def test_oversample_one_takes_the_samples_as_they_are():
    values = np.random.default_rng(1).standard_normal(50)
    taken = decimate(lambda first, n: values[first : first + n], 50, 1)
    np.testing.assert_array_equal(taken, values)
    assert reach(1) == 0


@pytest.mark.parametrize("oversample", FILTERING)
@pytest.mark.parametrize("count", [1, 2, 99, 500])
def test_blocks_do_not_show(oversample, count):
    values = np.random.default_rng(2).standard_normal(count * oversample + 2 * reach(oversample))
    whole = decimate(stored(values, oversample), count, oversample, block=count)
    for block in (1, 7, 64, 1000):
        cut = decimate(stored(values, oversample), count, oversample, block=block)
        assert cut.tobytes() == whole.tobytes()


@pytest.mark.parametrize("oversample", OVERSAMPLES)
def test_each_time_is_asked_for_once_in_order_and_no_later_than_the_margin(oversample):
    asked: list[int] = []

    def sampler(first: int, n: int) -> np.ndarray:
        asked.extend(range(first, first + n))
        return np.zeros(n)

    decimate(sampler, 300, oversample, block=64)
    last = 299 * oversample + reach(oversample)
    assert asked == list(range(-reach(oversample), last + 1))
    assert margin_s(RATE_HZ, oversample) == pytest.approx((last / oversample - 299) / RATE_HZ)


def test_nothing_asked_for_nothing_given():
    assert decimate(lambda first, n: np.zeros(n), 0, 8).shape == (0,)


@pytest.mark.parametrize("oversample", [0, 3, 6, 128, -2])
def test_other_factors_are_refused(oversample):
    with pytest.raises(ValueError, match=f"oversample is {oversample}; allowed: .1, 2, 4"):
        decimate(lambda first, n: np.zeros(n), 10, oversample)


@pytest.mark.parametrize("n", [1, 2, 511, 512, 513, 1500])
@pytest.mark.parametrize("m", [4, 44])
def test_kernels_equal_plain_numpy(n, m):
    random = np.random.default_rng(n + m)
    taps = random.standard_normal(m)
    filter_ = np.zeros(4 * m - 1)
    filter_[2 * m - 1] = 0.5
    filter_[2 * m :: 2] = taps
    filter_[2 * m - 2 :: -2] = taps
    for extra in (0, 1):
        signal = random.standard_normal(2 * n + 4 * m - 3 + extra)
        halved = np.empty(n)
        halve(signal, taps, halved)
        np.testing.assert_allclose(halved, np.convolve(signal, filter_, "valid")[::2][:n], rtol=0, atol=1e-12)
    signal = random.standard_normal(n + 2 * m - 1)
    sums = np.zeros(n)
    symmetric_sums(signal, taps, sums)
    np.testing.assert_allclose(sums, np.convolve(signal, [*taps[::-1], *taps], "valid"), rtol=0, atol=1e-12)
    doubled = np.empty(2 * n)
    double(signal, taps, doubled)
    np.testing.assert_array_equal(doubled[::2], signal[m - 1 : m - 1 + n])
    np.testing.assert_allclose(doubled[1::2], 2 * sums, rtol=0, atol=1e-12)


_DIGEST = """
import hashlib, numpy as np
from kickrender.sound.decimation import decimate, reach
values = np.random.PCG64(5).random_raw(3000 * 8 + 2 * reach(8)) / 2.0**64
samples = decimate(lambda first, n: values[first + reach(8) : first + reach(8) + n], 3000, 8)
print(hashlib.sha256(samples.tobytes()).hexdigest())
"""


def _digest(**environment: str) -> str:
    run = subprocess.run(
        [sys.executable, "-c", _DIGEST], env={**os.environ, **environment}, capture_output=True, text=True, check=True
    )
    return run.stdout


@pytest.mark.slow
def test_bits_do_not_depend_on_the_processor(tmp_path):
    """Compiled for any processor of the family, without its wide or fused instructions: the same samples."""
    plain = _digest(NUMBA_CPU_NAME="generic", NUMBA_CPU_FEATURES="", KICKRENDER_CACHE=str(tmp_path))
    assert plain == _digest()
    assert len(plain.strip()) == hashlib.sha256().digest_size * 2


def test_importing_sound_loads_neither_compiler_nor_scipy():
    modules = ["decimation", "measure", "level", "finish", "wav", "files"]
    code = "import sys\n" + "\n".join(f"import kickrender.sound.{name}" for name in modules)
    code += "\nprint(sorted({'numba', 'scipy', 'soundfile', 'pyloudnorm'} & set(sys.modules)))"
    run = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert run.stdout.strip() == "[]"
