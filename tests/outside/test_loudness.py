"""Loudness against the standard's own signals and table, and against a library not made here."""

from __future__ import annotations

import json
import warnings
from pathlib import Path

import numpy as np
import pytest

from kickrender.sound.loudness import k_weighting, loudness

with warnings.catch_warnings():
    warnings.simplefilter("ignore")  # the library's own imports
    import pyloudnorm

EBU = json.loads((Path(__file__).parent / "data" / "ebu_3341.json").read_text())
CASES = {case["case"]: case for case in EBU["cases"]}
RATE_HZ = 48_000
# The standard's signals have the same sine in both channels of a stereo pair: twice the energy of the one channel
# that kickrender measures.
STEREO_LU = 10 * np.log10(2)


def tone(seconds: float, peak_dbfs: float, hz: float = 1000.0, rate_hz: int = RATE_HZ) -> np.ndarray:
    k = np.arange(round(seconds * rate_hz))
    return 10 ** (peak_dbfs / 20) * np.sin(2 * np.pi * hz * k / rate_hz)


def segments(case: int) -> np.ndarray:
    return np.concatenate([tone(one["seconds"], one["peak_dbfs"]) for one in CASES[case]["segments"]])


def test_k_weighting_is_the_table_at_48_khz():
    """ITU-R BS.1770-5 (11/2023) Annex 1, tables 1 and 2: coefficients b0, b1, b2, a1, a2 of both stages."""
    table = [
        [1.53512485958697, -2.69169618940638, 1.19839281085285, -1.69065929318241, 0.73248077421585],
        [1.0, -2.0, 1.0, -1.99004745483398, 0.99007225036621],
    ]
    np.testing.assert_allclose(k_weighting(RATE_HZ), table, rtol=0, atol=1e-13)


@pytest.mark.parametrize("rate_hz", [44_100, 48_000, 88_200, 96_000, 192_000])
def test_full_scale_sine_reads_minus_3_01(rate_hz):
    """ITU-R BS.1770-5 Annex 1: a 997 Hz sine of 0 dBFS peak in one channel reads -3.01 LKFS. Within 0.01 LU."""
    found = loudness(tone(2, 0, 997, rate_hz), rate_hz)
    assert found.integrated_lufs == pytest.approx(-3.01, abs=0.01)
    assert found.momentary_lufs == pytest.approx(-3.01, abs=0.01)


def test_full_scale_sine_at_the_lowest_rate():
    """As above at 22.05 kHz, where the bilinear transform has bent the shelf: within 0.03 LU."""
    assert loudness(tone(2, 0, 997, 22_050), 22_050).integrated_lufs == pytest.approx(-3.01, abs=0.03)


@pytest.mark.parametrize("case", [1, 2, 3, 4, 5])
def test_integrated_of_the_ebu_signals(case):
    """EBU Tech 3341 V4 (11/2023) Table 1, cases 1 to 5, tolerance 0.1 LU; one channel of the two."""
    found = loudness(segments(case), RATE_HZ).integrated_lufs
    assert found + STEREO_LU == pytest.approx(CASES[case]["expect"]["I"], abs=CASES[case]["tol"])


def test_steady_loudness_to_the_last_digit_known():
    """Case 1 from the 48 kHz coefficients' gain at 1000 Hz (0.69770 dB): -22.9933 LUFS."""
    found = loudness(segments(1), RATE_HZ)
    assert found.integrated_lufs + STEREO_LU == pytest.approx(EBU["exact_values"]["so_case_1_reads"], abs=1e-3)


def test_momentary_of_the_ebu_bursts():
    """Tech 3341 case 12: bursts of -20 and -30 dBFS that average to -23 over any 400 ms; the highest is not higher."""
    burst = np.tile(segments(12), CASES[12]["repeat"])
    found = loudness(burst, RATE_HZ).momentary_lufs
    assert found + STEREO_LU == pytest.approx(CASES[12]["expect"]["M"], abs=CASES[12]["tol"])


@pytest.mark.parametrize("delay", range(20))
def test_momentary_maximum_does_not_depend_on_where_the_burst_lies(delay):
    """Tech 3341 case 13: 400 ms at -23 dBFS after i x 20 ms of silence. A 100 ms hop reads up to 0.46 LU low."""
    burst = np.concatenate([np.zeros(round(delay * 0.02 * RATE_HZ)), tone(0.4, -23), np.zeros(RATE_HZ)])
    found = loudness(burst, RATE_HZ).momentary_lufs
    assert found + STEREO_LU == pytest.approx(CASES[13]["expect"]["max_M"], abs=CASES[13]["tol"])


def kick(seconds: float, rate_hz: int, decay_s: float = 0.3) -> np.ndarray:
    t = np.arange(round(seconds * rate_hz)) / rate_hz
    hz = 55 * (1 + 2 * np.exp(-t / 0.03))
    return np.exp(-t / decay_s) * np.sin(2 * np.pi * np.cumsum(hz) / rate_hz)


@pytest.mark.parametrize("seconds", [0.4, 0.5, 1.0, 2.0])
@pytest.mark.parametrize("decay_s", [0.05, 0.3])
def test_integrated_equals_pyloudnorm(seconds, decay_s):
    """pyloudnorm with the standard's filters ("DeMan"), on lengths of whole hops, where its last block is complete.

    At 48 kHz, where both use the same coefficients; within 1e-6 LU.
    """
    sound = kick(seconds, RATE_HZ, decay_s)
    theirs = pyloudnorm.Meter(RATE_HZ, filter_class="DeMan").integrated_loudness(sound)
    assert loudness(sound, RATE_HZ).integrated_lufs == pytest.approx(theirs, abs=1e-6)


@pytest.mark.parametrize("seconds", [0.05, 0.4, 1.0])
def test_momentary_equals_pyloudnorm(seconds):
    """The highest of pyloudnorm's blocks at a 1 ms hop on the sound in silence: never above ours, within 0.01 LU."""
    sound = kick(seconds, RATE_HZ)
    silence = np.zeros(round(0.4 * RATE_HZ))
    meter = pyloudnorm.Meter(RATE_HZ, filter_class="DeMan", block_size=0.4, overlap=0.9975)
    meter.integrated_loudness(np.concatenate([silence, sound, silence]))
    theirs = max(meter.blockwise_loudness)
    assert 0 <= loudness(sound, RATE_HZ).momentary_lufs - theirs + 1e-9 < 0.01


@pytest.mark.parametrize(
    ("decay_s", "seconds", "momentary"),
    [(0.3, 0.1, -15.52), (0.3, 0.4, -12.61), (0.3, 2.0, -12.61), (0.1, 0.1, -17.84), (0.1, 1.0, -17.16)],
)
def test_short_sounds_read_as_an_independent_meter_reads_them(decay_s, seconds, momentary):
    """55 Hz decaying sines, highest momentary loudness in silence, measured once with a separate meter at a 10 ms hop.

    No standard covers sounds under 400 ms. The meter's notes do not say how loud the sines were; 0.9 is what all five
    readings agree on. Tolerance 0.01 LU.
    """
    t = np.arange(round(seconds * RATE_HZ)) / RATE_HZ
    sound = 0.9 * np.exp(-t / decay_s) * np.sin(2 * np.pi * 55 * t)
    assert loudness(sound, RATE_HZ).momentary_lufs == pytest.approx(momentary, abs=0.01)
