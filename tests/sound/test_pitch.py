"""Pitch on waves whose pitch is known."""

from __future__ import annotations

import numpy as np
import pytest

from kickrender.sound.compiled import correlate, half_cycles
from kickrender.sound.pitch import pitch

RATE_HZ = 48_000


def times(seconds: float = 1.0, rate_hz: int = RATE_HZ) -> np.ndarray:
    return np.arange(round(seconds * rate_hz)) / rate_hz


def cents(hz: float, true_hz: float) -> float:
    return 1200 * np.log2(hz / true_hz)


def dropping(settled_hz: float, ratio: float, drop_s: float, decay_s: float, seconds: float = 1.0) -> np.ndarray:
    """A decaying sine that starts `ratio` times as high; phase in closed form."""
    t = times(seconds)
    cycles = settled_hz * (t + (ratio - 1) * drop_s * (1 - np.exp(-t / drop_s)))
    return np.exp(-t / decay_s) * np.sin(2 * np.pi * cycles)


@pytest.mark.parametrize("hz", [27.5, 41.2, 50.0, 69.9, 180.0])
@pytest.mark.parametrize("decay_s", [0.05, 0.15, 0.5])
@pytest.mark.parametrize("rate_hz", [22_050, 44_100, 48_000, 192_000])
def test_settled_pitch_of_a_decaying_sine(hz, decay_s, rate_hz):
    t = times(1.0, rate_hz)
    found = pitch(np.exp(-t / decay_s) * np.sin(2 * np.pi * hz * t), rate_hz).settled_hz
    assert cents(found, hz) == pytest.approx(0, abs=0.05)


@pytest.mark.parametrize("hz", [41.2, 55.0, 69.9])
@pytest.mark.parametrize("decay_s", [0.05, 0.15, 0.5])
def test_settled_pitch_with_harmonics(hz, decay_s):
    """A second and third harmonic, half as strong, that die faster, so that crossings wander: within 1 cent."""
    t = times()
    wave = np.sin(2 * np.pi * hz * t)
    for harmonic, gain, faster, phase in [(2, 0.5, 0.6, 1.0), (3, 0.5, 0.5, 2.0)]:
        wave += gain * np.exp(t / decay_s * (1 - 1 / faster)) * np.sin(2 * np.pi * harmonic * hz * t + phase)
    assert cents(pitch(np.exp(-t / decay_s) * wave, RATE_HZ).settled_hz, hz) == pytest.approx(0, abs=1)


@pytest.mark.parametrize("lopsided", [0.0, 0.3])
@pytest.mark.parametrize("drive", [1, 10, 100])
def test_flattened_waves(drive, lopsided):
    """Clipped about a level that is not the middle, which moves the crossings as the sound decays: within 1 cent."""
    t = times()
    wave = np.exp(-t / 0.2) * np.sin(2 * np.pi * 50 * t)
    flat = np.tanh(drive * (wave + lopsided * wave**2))
    assert cents(pitch(flat, RATE_HZ).settled_hz, 50) == pytest.approx(0, abs=1)


@pytest.mark.parametrize("ratio", [2.0, 3.0, 5.0])
@pytest.mark.parametrize("drop_s", [0.01, 0.03])
def test_drop(ratio, drop_s):
    """The track follows the wave's own frequency, and the start is among the first readings.

    Within 2.5 %: a reading is the mean over a period, longer than the quickest drop here takes.
    """
    sound = dropping(50, ratio, drop_s, 0.3)
    found = pitch(sound, RATE_HZ)
    true_hz = 50 * (1 + (ratio - 1) * np.exp(-found.times_s / drop_s))
    np.testing.assert_allclose(found.hz[1:-1], true_hz[1:-1], rtol=0.025)
    np.testing.assert_allclose(found.hz[0], true_hz[0], rtol=0.05)
    assert found.start_hz == found.hz[:3].max()
    assert found.times_s[0] < 0.011
    assert cents(found.settled_hz, 50) == pytest.approx(0, abs=2)


def test_start_is_read_within_five_milliseconds_of_a_kick_at_180_hz():
    found = pitch(dropping(50, 3.6, 0.04, 0.3), RATE_HZ)
    assert found.times_s[0] < 0.005
    assert found.start_hz == pytest.approx(50 * (1 + 2.6 * np.exp(-found.times_s[0] / 0.04)), rel=0.01)


def test_a_lopsided_wave_without_a_drop_has_none():
    """Half cycles of unequal length are no change of pitch."""
    t = times()
    sound = np.exp(-t / 0.3) * (np.sin(2 * np.pi * 60 * t) + 0.3)
    steady = np.sin(2 * np.pi * 60 * t) + 0.3 * np.sin(2 * np.pi * 120 * t + 1)
    assert pitch(np.exp(-t / 0.3) * steady, RATE_HZ).start_hz == pytest.approx(60, rel=0.01)
    assert pitch(sound, RATE_HZ).settled_hz == pytest.approx(60, rel=0.001)


def test_a_click_and_hiss_at_minus_40_db_change_nothing():
    sound = dropping(50, 3, 0.03, 0.3)
    noisy = sound + 0.01 * np.random.default_rng(5).standard_normal(len(sound))
    noisy[:20] += 0.5
    clean, found = pitch(sound, RATE_HZ), pitch(noisy, RATE_HZ)
    assert cents(found.settled_hz, clean.settled_hz) == pytest.approx(0, abs=1)
    assert found.start_hz == pytest.approx(clean.start_hz, rel=0.03)


def test_ripple_about_the_crossings_is_not_read():
    """A partial steep enough to cross zero several times where the fundamental does."""
    t = times()
    sound = np.exp(-t / 0.3) * (np.sin(2 * np.pi * 50 * t) + 0.2 * np.sin(2 * np.pi * 550 * t + np.pi))
    found = pitch(sound, RATE_HZ)
    np.testing.assert_allclose(found.hz, 50, rtol=0.05)
    assert cents(found.settled_hz, 50) == pytest.approx(0, abs=0.1)


def test_settled_pitch_moves_evenly_with_the_sound():
    """A goal search needs no jumps: 41 steps of 0.2 cent each read within 0.05 cent of that."""
    hz = 50 * 2 ** (np.arange(41) * 0.2 / 1200)
    found = [pitch(dropping(f, 3, 0.03, 0.2), RATE_HZ).settled_hz for f in hz]
    steps = np.diff(1200 * np.log2(found))
    np.testing.assert_allclose(steps, 0.2, rtol=0, atol=0.05)


@pytest.mark.parametrize(
    "samples",
    [
        np.zeros(1000),
        np.ones(1000),
        np.eye(1, 1000)[0],
        np.linspace(0, 1, 1000),
        np.sin(2 * np.pi * 50 * times(0.02)),
        np.array([0.5]),
    ],
    ids=["silence", "constant", "click", "ramp", "one cycle", "one sample"],
)
def test_what_has_no_pitch(samples):
    found = pitch(samples, RATE_HZ)
    assert (len(found.times_s), found.start_hz, found.settled_hz) == (0, None, None)


@pytest.mark.parametrize("seed", range(5))
def test_noise_and_gaps_end_in_numbers(seed):
    noise = np.random.default_rng(seed).standard_normal(RATE_HZ // 2)
    noise[5000:15_000] = 0.0
    found = pitch(noise, RATE_HZ)
    assert np.isfinite(found.hz).all()
    assert found.settled_hz > 0


def cut(samples: list[float], least: float = 0.1) -> list[tuple[float, float, float]]:
    signal = np.array(samples, dtype=float)
    crossings, peaks, places = (np.empty(len(signal)) for _ in range(3))
    count = half_cycles(signal, least, crossings, peaks, places)
    return list(zip(crossings[:count].tolist(), peaks[:count].tolist(), places[:count].tolist(), strict=True))


@pytest.mark.parametrize(
    ("samples", "expected"),
    [
        ([], []),
        ([0, 0], []),
        ([1, 3, 2], [(0, 3, 1)]),
        ([0, 1, -1, -2, 1], [(1, 1, 1), (1.5, 2, 3), (3 + 2 / 3, 1, 4)]),
        # Zeros between are crossed in a straight line from the last value to the next.
        ([2, 0, -2], [(0, 2, 0), (1, 2, 2)]),
        ([2, 0, 2], [(0, 2, 0)]),
        # Ripple between half cycles of one sign joins them; the larger peak stays.
        ([5, -0.1, 6, -6], [(0, 6, 2), (2.5, 6, 3)]),
        # Ripple at a crossing: the middle of its three crossings counts.
        ([5, -0.1, 0.1, -5], [(0, 5, 0), (1.5, 5, 3)]),
        # Small half cycles before the first large one are dropped.
        ([0.1, -0.1, 5, -5], [(1 + 0.1 / 5.1, 5, 2), (2.5, 5, 3)]),
        # A decay is no ripple, however fast.
        (
            [9, -0.5, 0.02, -0.001],
            [(0, 9, 0), (9 / 9.5, 0.5, 1), (1 + 0.5 / 0.52, 0.02, 2), (2 + 0.02 / 0.021, 0.001, 3)],
        ),
    ],
)
def test_half_cycles(samples, expected):
    found = cut(samples)
    assert len(found) == len(expected)
    for one, other in zip(found, expected, strict=True):
        assert one == pytest.approx(other)


def test_correlation_equals_numpy():
    random = np.random.default_rng(6)
    samples, shape = random.standard_normal(100), random.standard_normal(20)
    sums = np.empty(17)
    correlate(samples, shape, 5, sums)
    np.testing.assert_allclose(sums, [samples[5 * w : 5 * w + 20] @ shape for w in range(17)], rtol=0, atol=1e-12)


@pytest.mark.parametrize("hz", [41.2, 55.0, 69.9])
@pytest.mark.parametrize("drop_s", [0.015, 0.03, 0.06])
@pytest.mark.parametrize("semitones", [7.0, 24.0])
def test_how_long_a_drop_takes(hz, drop_s, semitones):
    """A drop exponential in semitones has left 1/e of itself after its time constant, wherever one starts to look.

    Within a third of a half cycle, which is how far readings lie apart.
    """
    t = times()
    cycles = np.cumsum(hz * 2 ** (semitones / 12 * np.exp(-t / drop_s))) / RATE_HZ
    found = pitch(np.exp(-t / 0.2) * np.sin(2 * np.pi * cycles), RATE_HZ).drop_s
    assert found == pytest.approx(drop_s, abs=0.34 / (2 * hz))


def test_a_pitch_that_stays_has_no_drop():
    t = times()
    assert pitch(np.exp(-t / 0.2) * np.sin(2 * np.pi * 50 * t), RATE_HZ).drop_s is None
