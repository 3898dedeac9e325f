"""Inputs as segments between break points."""

from __future__ import annotations

import numpy as np
import pytest

from kickrender.circuit import Constant, Points, Pulse, Sine
from kickrender.engine import solve
from kickrender.engine.waves import segments_of
from tests.engine.circuits import circuit, rc

PULSE = Pulse(rest=0.0, strike=5.0, length=4e-3, rise=2e-6, fall=3e-6)
POINTS = Points((1e-3, 2e-3, 5e-3), (1.0, -2.0, 3.0))


def volts_at(segments, m: int, time: float) -> float:
    """Input m at a time, from the segments alone."""
    s = min(int(np.searchsorted(segments.end, time, side="right")), segments.end.size - 1)
    start = segments.end[s - 1] if s else 0.0
    amplitude, frequency, turns = segments.sines[m]
    line = segments.volts[s, m] + segments.slope[s, m] * (time - start)
    return float(line + amplitude * np.sin(2.0 * np.pi * (frequency * time + turns)))


def test_a_pulse_is_four_corners():
    segments = segments_of([PULSE], 0.01)
    np.testing.assert_allclose(segments.end, [2e-6, 4e-3, 4e-3 + 3e-6, 0.01])
    np.testing.assert_allclose(segments.volts[:, 0], [0.0, 5.0, 5.0, 0.0])
    np.testing.assert_allclose(segments.slope[:, 0], [5.0 / 2e-6, 0.0, -5.0 / 3e-6, 0.0], rtol=1e-9)


def test_a_pulse_as_short_as_its_rise_has_no_flat_top():
    segments = segments_of([Pulse(1.0, 2.0, 1e-3, rise=1e-3, fall=1e-3)], 0.01)
    np.testing.assert_allclose(segments.end, [1e-3, 2e-3, 0.01])
    np.testing.assert_allclose(segments.slope[:, 0], [1e3, -1e3, 0.0])


def test_points_hold_before_the_first_and_after_the_last():
    segments = segments_of([POINTS], 0.01)
    times = np.array([0.0, 0.5e-3, 1e-3, 1.5e-3, 2e-3, 3.5e-3, 5e-3, 9e-3])
    found = [volts_at(segments, 0, time) for time in times]
    np.testing.assert_allclose(found, np.interp(times, POINTS.times, POINTS.volts), atol=1e-12)


def test_constant_and_sine_have_no_corners():
    segments = segments_of([Constant(3.0), Sine(0.5, 100.0, offset=1.0, phase_deg=30.0)], 0.02)
    np.testing.assert_array_equal(segments.end, [0.02])
    for time in (0.0, 1e-3, 7.3e-3):
        assert volts_at(segments, 0, time) == 3.0
        true = 1.0 + 0.5 * np.sin(2.0 * np.pi * 100.0 * time + np.radians(30.0))
        assert volts_at(segments, 1, time) == pytest.approx(true, abs=1e-12)


def test_every_input_breaks_at_the_corners_of_all():
    segments = segments_of([PULSE, POINTS, Constant(1.0)], 3e-3)
    np.testing.assert_allclose(segments.end, [2e-6, 1e-3, 2e-3, 3e-3])
    for m, wave in enumerate((PULSE, POINTS)):
        times, volts = ((0.0, 2e-6, 4e-3), (0.0, 5.0, 5.0)) if wave is PULSE else (POINTS.times, POINTS.volts)
        for time in (1e-6, 0.5e-3, 1.7e-3, 2.9e-3):
            assert volts_at(segments, m, time) == pytest.approx(np.interp(time, times, volts), abs=1e-9)


def test_corners_beyond_the_length_are_left_out():
    np.testing.assert_array_equal(segments_of([PULSE], 1e-3).end, [2e-6, 1e-3])
    np.testing.assert_array_equal(segments_of([PULSE], 2e-6).end, [2e-6])


def test_a_fall_too_short_to_be_told_from_its_corner_still_falls():
    segments = segments_of([Pulse(0.0, 1.0, 1.0, rise=1e-3, fall=1e-20)], 2.0)
    assert np.all(np.isfinite(segments.slope))
    assert volts_at(segments, 0, 0.999) == 1.0
    assert volts_at(segments, 0, 1.5) == 0.0
    chosen = rc('pulse = { rest = "0V", strike = "1V", length = "4ms", fall = 1e-20 }', "1k", "1u")
    assert abs(solve(chosen, 0.01).sample(1e3, 1, 9)[0] - (1 - np.exp(-4)) * np.exp(-5)) < 1e-5


def test_a_pulse_strikes_at_each_of_its_starts():
    segments = segments_of([Pulse(0.0, 1.0, 2e-3, rise=1e-3, fall=1e-3, starts=(0.0, 5e-3))], 0.01)
    for start in (0.0, 5e-3):
        found = [volts_at(segments, 0, start + time) for time in (0.5e-3, 1.5e-3, 2.5e-3, 4e-3)]
        np.testing.assert_allclose(found, [0.5, 1.0, 0.5, 0.0], atol=1e-9)


def test_the_segments_slope_makes_the_input_continuous():
    segments = segments_of([PULSE, POINTS], 0.01)
    start = np.array([0.0, *segments.end[:-1]])
    reached = segments.volts[:-1] + segments.slope[:-1] * (segments.end[:-1] - start[:-1])[:, None]
    np.testing.assert_allclose(reached, segments.volts[1:], atol=1e-12)


@pytest.mark.parametrize(
    "wave",
    [
        'pulse = { rest = "0V", strike = "5V", length = "4ms", rise = "2us", fall = "0.3ms" }',
        'points = [["0s", "0V"], ["1.7ms", "1V"], ["1.9ms", "-1V"], ["6ms", "0V"]]',
    ],
)
def test_a_step_ends_exactly_on_every_corner(wave):
    chosen = rc(wave)
    solution = solve(chosen, 0.01)
    breaks = segments_of(list(chosen.inputs.values()), 0.01).end[:-1]
    assert len(breaks) >= 3
    assert set(breaks) <= set(solution.piece_t)
    # and the first step from a corner is short, since the slope has jumped there
    first = solution.piece_h[np.isin(solution.piece_t, breaks)]
    assert np.all(first <= 1e-6)


def test_pieces_join_without_gap_to_the_end():
    solution = solve(rc('pulse = { rest = "0V", strike = "5V", length = "4ms" }'), 0.0123)
    np.testing.assert_allclose(solution.piece_t[:-1] + solution.piece_h[:-1], solution.piece_t[1:], rtol=1e-14)
    assert solution.piece_t[0] == 0.0
    assert solution.piece_t[-1] + solution.piece_h[-1] == pytest.approx(0.0123, rel=1e-15)
    np.testing.assert_array_equal(solution.piece_c[1:, 0, 0], solution.piece_c[:-1, 0, 1])


def test_inputs_of_all_four_kinds_add_up_in_one_circuit():
    """A linear circuit driven by four inputs answers with the sum of its answers to each."""
    waves = {
        "a": 'pulse = { rest = "0V", strike = "1V", length = "3ms" }',
        "b": 'constant = "1V"',
        "c": 'sine = { amplitude = "1V", frequency = "300Hz", phase = "90deg" }',
        "d": 'points = [["1ms", "0V"], ["2ms", "1V"], ["4ms", "0V"]]',
    }
    off = 'constant = "0V"'
    parts = {f"R{net}": f"resistor {k}k {net} out" for k, net in enumerate(waves, 1)}
    parts |= {"C": "capacitor 1u out ground", "Ca": "capacitor 100n c out"}

    def out(driven: set[str]) -> np.ndarray:
        inputs = {net: wave if net in driven else off for net, wave in waves.items()}
        return solve(circuit(parts, inputs=inputs), 0.01, tolerance=1e-9).sample(48_000.0, 480)

    np.testing.assert_allclose(sum(out({net}) for net in waves), out(set(waves)), rtol=0, atol=1e-9)
