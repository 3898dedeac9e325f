"""The shipped voices do what a kick drum's controls promise, over the whole table of them.

Measured as the package measures every sound, on renders through the public functions; the limits are the trade's
(common practice, no source) and hold for each voice under its own controls.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from functools import cache
from typing import Any

import numpy as np
import pytest

import kickrender
from kickrender.circuit import read_circuit
from kickrender.circuit.records import GROUND
from kickrender.circuit.shipped import shipped_circuits
from kickrender.engine import poles, rest_state, solve
from kickrender.sound.measure import pitch_track
from kickrender.sound.options import SoundOptions
from kickrender.sound.render import Sound

VOICES = sorted(shipped_circuits())
CONTROLS = ("pitch", "decay", "drop-depth", "drop-time", "accent", "brightness", "drive")
RATE_HZ = 48_000
QUARTERS = (0.0, 0.25, 0.5, 0.75, 1.0)
LEVELS_V = (0.0, 1.25, 2.5, 3.75, 5.0)


@cache
def _rendered(voice: str, settings: tuple[tuple[str, float | str], ...], length_s: float | None) -> Sound:
    options = SoundOptions() if length_s is None else SoundOptions(length_s=length_s, raw=True, format="float32")
    return kickrender.load(voice).render(dict(settings), options=options)


def hit(voice: str, settings: Mapping[str, float | str] | None = None) -> Sound:
    """One hit, cut where it has died away."""
    return _rendered(voice, tuple((settings or {}).items()), None)


def raw(voice: str, settings: Mapping[str, float | str] | None = None, length_s: float = 1.0) -> np.ndarray:
    """One hit from t = 0, neither cut nor faded."""
    return _rendered(voice, tuple((settings or {}).items()), length_s).samples


def measured(voice: str, settings: Mapping[str, float | str] | None = None) -> dict[str, Any]:
    return hit(voice, settings).facts["measurements"]


def drop_time_s(voice: str, settings: Mapping[str, float | str]) -> float:
    """When the pitch comes within 10 % of where it settles. [s]"""
    sound = hit(voice, settings)
    times, hz = pitch_track(sound.samples, sound.rate)
    settled = sound.facts["measurements"]["settled_hz"]
    return float(times[np.flatnonzero(hz > 1.1 * settled)[-1]])


def distortion(samples: np.ndarray, settled_hz: float) -> float:
    """Harmonics 2 to 8 over the fundamental, from 0.1 s on, 0.2 s under a four-term window. [1]"""
    part = samples[round(0.1 * RATE_HZ) : round(0.3 * RATE_HZ)]
    k = 2.0 * np.pi * np.arange(len(part)) / len(part)
    window = 0.35875 - 0.48829 * np.cos(k) + 0.14128 * np.cos(2 * k) - 0.01168 * np.cos(3 * k)
    spectrum = np.abs(np.fft.rfft(part * window, 1 << 17))
    hz = np.fft.rfftfreq(1 << 17, 1.0 / RATE_HZ)
    peaks = [spectrum[np.abs(hz - n * settled_hz) < 8.0].max() for n in range(1, 9)]
    return float(np.sqrt(np.sum(np.square(peaks[1:]))) / peaks[0])


def test_two_voices_of_about_twenty_nets_are_shipped() -> None:
    assert {"bridged-t", "twin-t"} <= set(VOICES)
    for voice in ("bridged-t", "twin-t"):
        circuit = read_circuit(voice).resolve()
        nets = {net for part in circuit.parts.values() for net in part.terminals.values()}
        assert 18 <= len(nets - {GROUND, *circuit.nets, *circuit.inputs}) <= 24


@pytest.mark.parametrize("voice", VOICES)
def test_has_every_control_and_answers_every_goal(voice: str) -> None:
    circuit = read_circuit(voice)
    assert tuple(circuit.controls) == CONTROLS
    assert circuit.goals == {
        "pitch": "pitch",
        "decay": "decay",
        "drop": "drop-depth",
        "drop_time": "drop-time",
        "centroid": "brightness",
    }


@pytest.mark.parametrize("voice", VOICES)
def test_pitch_settles_between_40_and_70_hz(voice: str) -> None:
    settled = [measured(voice, {"pitch": p})["settled_hz"] for p in QUARTERS]
    assert np.all(np.diff(settled) > 1.0)
    assert settled[0] == pytest.approx(41.0, abs=1.5)
    assert settled[-1] == pytest.approx(68.0, abs=2.5)


@pytest.mark.parametrize("voice", VOICES)
def test_no_other_control_moves_the_settled_pitch_by_more_than_a_semitone(voice: str) -> None:
    """Drive loads the twin-t's resonator a little; everything else stays within a third of that."""
    rest = measured(voice)["settled_hz"]
    for control in CONTROLS[1:]:
        for end in (0.0, 5.0) if control == "accent" else (0.0, 1.0):
            moved = 12.0 * np.log2(measured(voice, {control: end})["settled_hz"] / rest)
            assert abs(moved) < (0.7 if control == "drive" else 0.45), (control, end)


@pytest.mark.parametrize("voice", VOICES)
@pytest.mark.parametrize("pitch", [0.0, 0.5, 1.0])
@pytest.mark.parametrize("depth", [0.5, 0.75, 1.0])
def test_drop_starts_2_to_5_times_higher_within_5_ms(voice: str, pitch: float, depth: float) -> None:
    settings = {"pitch": pitch, "drop-depth": depth}
    sound = hit(voice, settings)
    settled = sound.facts["measurements"]["settled_hz"]
    assert 2.0 <= sound.facts["measurements"]["start_hz"] / settled <= 5.0
    # Reached in 5 ms: the first whole half cycle after the strike's own begins by then and is as short as that.
    crossings = np.flatnonzero(np.diff(np.signbit(raw(voice, settings)[1:]))) / RATE_HZ
    assert crossings[0] <= 5e-3
    assert 0.5 / (crossings[1] - crossings[0]) >= 1.9 * settled


@pytest.mark.parametrize("voice", VOICES)
def test_drop_depth_goes_from_none_upwards(voice: str) -> None:
    rise = [measured(voice, {"drop-depth": d}) for d in QUARTERS]
    ratio = [m["start_hz"] / m["settled_hz"] for m in rise]
    assert ratio[0] == pytest.approx(1.0, abs=0.05)
    assert np.all(np.diff(ratio) > 0.05)


@pytest.mark.parametrize("voice", VOICES)
def test_drop_lasts_20_to_120_ms(voice: str) -> None:
    """Read once per half cycle of some 10 ms, so the short end may read up to 15 ms long."""
    lasts = [drop_time_s(voice, {"drop-time": t, "drop-depth": 0.8, "decay": 0.8}) for t in QUARTERS]
    assert np.all(np.diff(lasts) > 0.0)
    assert 0.015 <= lasts[0] <= 0.035
    assert 0.095 <= lasts[-1] <= 0.135


@pytest.mark.parametrize("voice", VOICES)
def test_decay_goes_from_about_150_ms_to_over_1500_ms(voice: str) -> None:
    decay = [measured(voice, {"decay": d})["decay_s"] for d in QUARTERS]
    assert 0.14 <= decay[0] <= 0.19
    assert 1.5 <= decay[-1] <= 2.5
    steps = np.array(decay[1:]) / np.array(decay[:-1])
    assert steps.max() / steps.min() < 1.6, "equal steps of the control are to feel alike"


@pytest.mark.parametrize("voice", VOICES)
@pytest.mark.parametrize("pitch", [0.0, 1.0])
def test_decay_hardly_depends_on_pitch_and_the_resonator_never_rings_by_itself(voice: str, pitch: float) -> None:
    assert measured(voice, {"pitch": pitch})["decay_s"] == pytest.approx(measured(voice)["decay_s"], rel=0.25)
    ringing = [pole for pole in poles(read_circuit(voice).resolve({"pitch": pitch, "decay": 1.0})) if pole.rings]
    assert ringing
    assert all(0.0 < pole.decay_s < 4.0 for pole in ringing)


@pytest.mark.parametrize("voice", VOICES)
def test_accent_scales_the_hit_and_is_bounded_both_ways(voice: str) -> None:
    peaks = [measured(voice, {"accent": v, "drive": 0.0})["peak_dbfs"] for v in LEVELS_V]
    assert np.all(np.diff(peaks) > 0.5)
    assert 12.0 <= peaks[-1] - peaks[0] <= 24.0
    assert peaks[0] > -40.0, "the quietest hit is to be clearly audible"


@pytest.mark.parametrize("voice", VOICES)
def test_an_accent_voltage_as_high_as_the_supply_does_not_overload(voice: str) -> None:
    """A control voltage can be anything on a bench; the control's range is only what a player is offered."""
    circuit = read_circuit(voice)
    loudest = circuit.resolve({"accent": 5.0})
    struck = replace(loudest, inputs={**loudest.inputs, "accent": replace(loudest.inputs["accent"], level=12.0)})

    def peak(resolved: Any) -> float:
        return float(np.abs(solve(resolved, 0.3).sample(RATE_HZ, round(0.3 * RATE_HZ))).max())

    relative = 20.0 * np.log10(peak(struck) / peak(loudest))
    assert -0.5 <= relative <= 8.0


@pytest.mark.parametrize("voice", VOICES)
def test_brighter_means_a_higher_centroid(voice: str) -> None:
    for drive in (0.0, 0.5, 1.0):
        centroid = [measured(voice, {"brightness": b, "drive": drive})["centroid_hz"] for b in QUARTERS]
        assert np.all(np.diff(centroid) > 0.0)
        # What the control is for lies above the fundamental: at 1 kHz its ends are far apart.
        dark, bright = (np.abs(np.fft.rfft(raw(voice, {"brightness": b, "drive": drive}))) for b in (0.0, 1.0))
        octave = slice(700, 1400)  # one bin per hertz
        assert 20.0 * np.log10(bright[octave].sum() / dark[octave].sum()) > 9.0


@pytest.mark.parametrize("voice", VOICES)
def test_drive_goes_from_clean_to_hard(voice: str) -> None:
    def bent(drive: float, accent: float) -> float:
        settings = {"drive": drive, "accent": accent, "decay": 1.0, "drop-depth": 0.0, "brightness": 1.0}
        return distortion(raw(voice, settings, 0.5), measured(voice, settings)["settled_hz"])

    assert bent(0.0, 5.0) < 0.01
    rising = [bent(drive, 5.0) for drive in QUARTERS]
    assert np.all(np.diff(rising) > 0.0)
    assert rising[-1] > 0.2


@pytest.mark.parametrize("voice", VOICES)
@pytest.mark.parametrize("settings", [{}, {"accent": 5.0, "drive": 1.0, "brightness": 1.0, "decay": 0.0}])
@pytest.mark.parametrize("length", ["2ms", "10ms", "50ms", "200ms"])
def test_the_gates_fall_does_not_strike_again(
    voice: str, settings: dict[str, float], length: str, tmp_path_factory: pytest.TempPathFactory
) -> None:
    """The same hit as under a gate that falls long after, to what two solves differ by."""
    folder = tmp_path_factory.mktemp("gates")

    def under(gate: str) -> np.ndarray:
        path = folder / f"{gate}.toml"
        pulse = f'pulse = {{ rest = "0V", strike = "5V", length = "{gate}", rise = "2us", fall = "2us" }}'
        path.write_text(f'title = "Gate"\nbased_on = "{voice}"\n[inputs.gate]\n{pulse}\n')
        options = SoundOptions(length_s=0.6, raw=True, format="float32")
        return kickrender.load(path).render(settings, options=options).samples

    short, long = under(length), under("500ms")
    assert np.abs(short - long).max() < 10 ** (-70 / 20) * np.abs(long).max()


@pytest.mark.parametrize("voice", VOICES)
def test_rests_at_zero_and_settles_there(voice: str) -> None:
    circuit = read_circuit(voice)
    assert abs(rest_state(circuit.resolve())[circuit.output]) < 1e-4 * circuit.full_scale_v
    for settings in ({}, {"drive": 1.0, "accent": 5.0, "decay": 0.0}):
        samples = raw(voice, settings, 2.0)
        assert np.abs(samples[-RATE_HZ // 10 :]).max() < 1e-4 * np.abs(samples).max()


@pytest.mark.parametrize("voice", VOICES)
def test_the_loudest_hit_is_near_full_scale_and_below(voice: str) -> None:
    loud = {"accent": 5.0, "drive": 1.0, "brightness": 1.0}
    peaks = [
        measured(voice, {**loud, "pitch": pitch, "decay": decay, "drop-depth": depth})["peak_dbfs"]
        for pitch in (0.0, 1.0)
        for decay in (0.0, 1.0)
        for depth in (0.0, 1.0)
    ]
    assert -3.0 < max(peaks) < -0.1


def test_the_bridged_ts_envelope_ends_more_gently_than_an_exponential() -> None:
    """-d ln(v)/dt of the envelope falls all the way, where an exponential's would stay."""
    for time in QUARTERS:
        solution = solve(read_circuit("bridged-t").resolve({"drop-time": time}), 0.2, probes=["sweep"])
        volts = solution.sample(1000, 200, net="sweep")
        rate = -np.diff(np.log(volts[3:150:10]))
        assert np.all(np.diff(rate) < 0.0)
        assert rate[-1] < 0.7 * rate[0]


def test_the_bridged_ts_falling_pitch_leans_the_wave_to_one_side() -> None:
    """Positive half waves at the leg are shorter than both their neighbours while the base current fades."""
    settings = {"accent": 5.0, "drop-depth": 0.3, "drop-time": 0.6}
    leg = solve(read_circuit("bridged-t").resolve(settings), 0.2, probes=["leg"]).sample(200_000, 40_000, net="leg")
    crossings = np.flatnonzero(np.diff(np.signbit(leg[20:])))
    halves = np.diff(crossings)[:3]
    assert leg[20 + crossings[1] + halves[1] // 2] > 0.0
    assert halves[1] < 0.85 * min(halves[0], halves[2])
