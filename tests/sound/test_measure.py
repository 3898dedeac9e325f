"""One record of everything measured: what each field says, what silence and bad samples do, and rounding."""

from __future__ import annotations

import math
from dataclasses import asdict

import numpy as np
import pytest

from kickrender.errors import MeasurementError
from kickrender.sound import compiled
from kickrender.sound.measure import Measurements, centroid_hz, measure, nearest_note, offset, pitch_track, significant

RATE_HZ = 48_000


def kick(gain: float = 1.0, rate_hz: int = RATE_HZ) -> np.ndarray:
    t = np.arange(rate_hz) / rate_hz
    return gain * np.exp(-t / 0.1) * np.sin(2 * np.pi * (55 * t + 3 * (1 - np.exp(-t / 0.03))))


def test_a_kick():
    found = measure(kick(0.5), RATE_HZ)
    assert found.peak_dbfs == pytest.approx(20 * math.log10(np.abs(kick(0.5)).max()), abs=0.0006)
    assert found.peak_dbfs <= found.true_peak_dbtp < found.peak_dbfs + 0.01
    assert found.integrated_lufs < found.momentary_lufs < -10
    assert (found.note, found.cents) == ("A1", pytest.approx(0, abs=2))
    assert found.settled_hz == pytest.approx(55, rel=0.001)
    assert 120 < found.start_hz < 160
    assert found.decay_s == pytest.approx(0.1 * math.log(1000), rel=0.01)
    assert 0 < found.attack_s < 0.003
    assert 40 < found.centroid_hz < 200
    assert found.length_s == 1.0
    assert abs(found.offset) < 1e-4


def test_gain_moves_levels_and_nothing_else():
    """Half the amplitude: 6.021 dB down in all four levels, every other field the same."""
    loud, soft = asdict(measure(kick(), RATE_HZ)), asdict(measure(kick(0.5), RATE_HZ))
    for name, value in loud.items():
        if name.endswith(("dbfs", "dbtp", "lufs")):
            assert soft[name] == pytest.approx(value - 6.021, abs=0.0016), name
        elif name == "offset":
            assert soft[name] == pytest.approx(value / 2, abs=1e-9)
        else:
            assert soft[name] == value, name


@pytest.mark.parametrize("rate_hz", [22_050, 44_100, 96_000, 192_000])
def test_the_rate_hardly_matters(rate_hz):
    here, there = asdict(measure(kick(), RATE_HZ)), asdict(measure(kick(rate_hz=rate_hz), rate_hz))
    assert here.pop("note") == there.pop("note")
    for name, value in here.items():
        assert there[name] == pytest.approx(value, rel=0.005, abs=0.03), name


@pytest.mark.parametrize("samples", [np.zeros(100), np.full(100, 1e-10)])
def test_silence(samples):
    assert measure(samples, RATE_HZ) == Measurements(length_s=0.002083, offset=0.0)


@pytest.mark.parametrize("kind", ["noise", "click", "constant", "ramp", "square", "exponential", "one", "cycle", "gap"])
def test_any_sound_gives_finite_numbers(kind):
    t = np.arange(RATE_HZ) / RATE_HZ
    sounds = {
        "noise": np.random.default_rng(7).standard_normal(RATE_HZ),
        "click": np.eye(1, 5000, 2500)[0],
        "constant": np.full(5000, 0.5),
        "ramp": np.linspace(0, 1, 5000),
        "square": np.sign(np.sin(2 * np.pi * 50 * t)),
        "exponential": np.exp(-t / 0.05),
        "one": np.array([0.5]),
        "cycle": np.sin(2 * np.pi * 50 * t[:960]),
        "gap": np.concatenate([kick(), np.zeros(RATE_HZ), kick()]),
    }
    for name, value in asdict(measure(sounds[kind], RATE_HZ)).items():
        assert value is None or isinstance(value, str) or math.isfinite(value), name


@pytest.mark.parametrize(
    ("samples", "message"),
    [
        (np.array([]), "a sound to measure has at least one sample, found none"),
        (np.zeros((10, 2)), r"one channel, found an array of shape \(10, 2\)"),
        (np.array([0.0, np.nan]), "sample 1 of 2 is nan; only finite samples can be measured"),
        (np.array([0.0, 1.0, -np.inf]), "sample 2 of 3 is -inf"),
    ],
)
@pytest.mark.parametrize("function", [measure, pitch_track])
def test_what_cannot_be_measured(function, samples, message):
    with pytest.raises(MeasurementError, match=message):
        function(samples, RATE_HZ)


def test_integers_and_strided_samples_are_taken():
    whole = np.round(1000 * kick()).astype(int)
    assert measure(whole, RATE_HZ) == measure(whole.astype(float), RATE_HZ)
    assert measure(np.repeat(kick(), 2)[::2], RATE_HZ) == measure(kick(), RATE_HZ)


def test_fields_are_rounded_as_stated():
    for name, value in asdict(measure(kick(0.3), RATE_HZ)).items():
        if name.endswith(("dbfs", "dbtp", "lufs")):
            assert value == round(value, 3)
        elif name.endswith("_hz"):
            assert value == significant(value)
        elif name.endswith("_s"):
            assert value == round(value, 6)


def test_measuring_does_not_touch_the_samples():
    samples = kick()
    samples.flags.writeable = False
    measure(samples, RATE_HZ)
    pitch_track(samples, RATE_HZ)


@pytest.mark.parametrize(
    "names", [["settled_hz"], ["decay_s", "momentary_lufs"], ["true_peak_dbtp"], ["attack_s", "centroid_hz"], []]
)
def test_what_is_not_asked_for_is_left_out(names):
    """What is asked for has the value of a full measurement; what costs time and is not asked for is None."""
    whole, some = asdict(measure(kick(), RATE_HZ)), asdict(measure(kick(), RATE_HZ, only=names))
    together = [
        {"start_hz", "settled_hz", "note", "cents", "drop_s"},
        {"momentary_lufs", "integrated_lufs"},
        {"true_peak_dbtp"},
        {"decay_s"},
        {"attack_s"},
        {"centroid_hz"},
    ]
    kept = set().union(*(group for group in together if group & set(names)))
    dear = set().union(*together)
    assert some == {name: None if name in dear - kept else value for name, value in whole.items()}


def test_pitch_track_starts_high_and_settles():
    times_s, hz = pitch_track(kick(), RATE_HZ)
    assert times_s.shape == hz.shape
    assert (np.diff(times_s) > 0).all()
    assert hz[0] > 100
    assert hz[-2] == pytest.approx(55, rel=0.01)


@pytest.mark.parametrize(
    ("hz", "note", "cents"),
    [
        (440.0, "A4", 0.0),
        (261.6255653005986, "C4", 0.0),
        (55.0, "A1", 0.0),
        (65.40639132514966, "C2", 0.0),
        (50.0, "G1", 35.0),
        (41.2, "E1", -0.14),
        (8.0, "C-1", -37.63),
    ],
)
def test_nearest_note(hz, note, cents):
    """MIDI note numbers, f = 440 x 2^((n - 69)/12), ISO 16 (A4 = 440 Hz); middle C, note 60, called C4."""
    assert nearest_note(hz) == (note, pytest.approx(cents, abs=0.005))


def test_another_concert_pitch():
    assert nearest_note(442.0, 442.0) == ("A4", 0.0)
    assert measure(kick(), RATE_HZ, 415.0).note == "A#1"


def test_centroid_of_two_tones():
    """Equal powers at 1 and 3 kHz: 2 kHz; three quarters of the power at 1 kHz: 1.5 kHz."""
    t = np.arange(RATE_HZ) / RATE_HZ
    low, high = np.sin(2 * np.pi * 1000 * t), np.sin(2 * np.pi * 3000 * t)
    assert centroid_hz(low + high, RATE_HZ) == pytest.approx(2000, rel=0.001)
    assert centroid_hz(math.sqrt(3) * low + high, RATE_HZ) == pytest.approx(1500, rel=0.001)


@pytest.mark.parametrize("count", [1, 2, 3, 5, 1000, 1025])
def test_centroid_of_a_click_is_half_of_the_band(count):
    click = np.zeros(count)
    click[0] = 1.0
    assert centroid_hz(click, RATE_HZ) == pytest.approx(RATE_HZ / 4)


def test_offset_does_not_hear_what_still_rings():
    t = np.arange(RATE_HZ) / RATE_HZ
    assert offset(0.25 + np.sin(2 * np.pi * 50 * t + 0.7), RATE_HZ) == pytest.approx(0.25, abs=1e-6)
    assert offset(np.array([0.5, 0.5]), RATE_HZ) == 0.5


def test_kernels_equal_numpy():
    random = np.random.default_rng(8)
    samples = random.standard_normal(500)
    magnitude = np.abs(samples)
    assert compiled.largest_magnitude(samples) == (int(magnitude.argmax()), magnitude.max())
    assert compiled.largest_magnitude(np.array([-1.0, 1.0])) == (0, 1.0)
    assert compiled.first_reaching(samples, 2.0) == int(np.argmax(magnitude >= 2.0))
    assert compiled.last_reaching(samples, 2.0) == int(np.flatnonzero(magnitude >= 2.0)[-1])
    assert (compiled.first_reaching(samples, 9.0), compiled.last_reaching(samples, 9.0)) == (500, -1)
    energy = np.cumsum(samples**2)
    for window in (1, 77, 499):
        assert compiled.largest_rise(energy, window) == (energy[window:] - energy[:-window]).max()
    power = samples[0::2] ** 2 + samples[1::2] ** 2
    assert compiled.mean_bin(samples) == pytest.approx((power * np.arange(250)).sum() / power.sum())
