"""The search for values, on functions whose answers are known."""

import numpy as np
import pytest

from kickrender.study.approach import AIM, Box, approach, least_step, slopes_at

WIDE = Box(np.full(3, -2.0), np.full(3, 2.0))


def test_slopes_and_bends_of_a_quadratic_are_exact():
    bend, slope = np.array([3.0, 0.0, -1.0]), np.array([[2.0, -1.0, 0.5]])

    def quadratic(points):
        return [slope @ point + 0.5 * np.array([bend @ point**2]) for point in points]

    point = np.array([0.3, -0.2, 0.1])
    slopes, bends = slopes_at(quadratic, point, quadratic([point])[0], WIDE, 0.05)
    assert slopes[0] == pytest.approx(slope[0] + bend * point, rel=1e-9)
    assert bends[0] == pytest.approx(bend, abs=1e-9)


def test_a_slope_is_taken_on_the_side_that_can_be_measured():
    def half(points):
        return [None if point[0] > 0.0 else np.array([2.0 * point[0] + point[1]]) for point in points]

    slopes, _ = slopes_at(half, np.zeros(2), np.zeros(1), Box(np.array([-1.0, 0.0]), np.array([1.0, 1.0])), 0.1)
    assert slopes[0] == pytest.approx([2.0, 1.0])


def test_the_least_step_is_the_least():
    step = least_step(np.array([[3.0, 4.0, 0.0]]), np.array([25.0 / 20.0]), np.zeros(3), WIDE)
    assert step == pytest.approx([0.15, 0.2, 0.0])


def test_a_value_at_its_end_leaves_the_rest_to_the_others():
    box = Box(np.array([-1.0, -1.0]), np.array([0.1, 1.0]))
    step = least_step(np.array([[1.0, 1.0]]), np.array([0.8]), np.zeros(2), box)
    assert step == pytest.approx([0.1, 0.7])


def test_far_goals_of_a_resonator_are_met_from_its_formulas():
    """Frequency and decay of a bridged-T in logarithms, an octave and a half away."""

    def resonator(points):
        found = []
        for bridge, leg, c in points:
            found.append(np.array([-0.5 * (bridge + leg) - c, bridge + c]) * 30.0)
        return found

    wanted = np.array([30.0, -20.0])
    place = approach(resonator, np.zeros(3), wanted, WIDE)
    assert place is not None
    assert place.off <= AIM
    least = np.linalg.lstsq(np.array([[-15.0, -15.0, -30.0], [30.0, 0.0, 30.0]]), wanted, rcond=None)[0]
    assert place.point == pytest.approx(least, abs=0.01)


def test_nothing_to_measure_is_no_place():
    assert approach(lambda points: [None for _ in points], np.zeros(3), np.zeros(1), WIDE) is None


def test_out_of_reach_ends_at_an_end():
    place = approach(lambda points: [point[:1] for point in points], np.zeros(3), np.array([5.0]), WIDE)
    assert place is not None
    assert place.point[0] == pytest.approx(2.0)
    assert place.off == pytest.approx(3.0)
