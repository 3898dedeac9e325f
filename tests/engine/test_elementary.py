"""The kernels' own elementary functions against mpmath, over the whole of their ranges."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest

from kickrender.engine import elementary
from kickrender.engine.lanes import FLAT, LONE

RANDOM = np.random.default_rng(20)
ULP_LIMIT = 1.5


def spread_over(low: float, high: float, count: int = 4000) -> np.ndarray:
    return np.concatenate([np.linspace(low, high, count), RANDOM.uniform(low, high, count)])


def both_signs(magnitudes: np.ndarray) -> np.ndarray:
    return np.concatenate([magnitudes, -magnitudes])


def decades(low: float, high: float, count: int = 2000) -> np.ndarray:
    return 10.0 ** RANDOM.uniform(low, high, count)


CASES = {
    "exponential": (
        elementary.exponential,
        mpmath.exp,
        np.concatenate([spread_over(-708.0, 709.0), spread_over(-1.0, 1.0), both_signs(decades(-20, 0)), [0.0, 80.0]]),
    ),
    "logarithm": (
        elementary.logarithm,
        mpmath.log,
        np.concatenate(
            [
                decades(-307, 308, 6000),
                spread_over(0.5, 2.0),
                1.0 + both_signs(decades(-15, -1)),
                2.0 ** np.arange(-1020.0, 1020.0, 17.0),
                np.nextafter(np.sqrt(2.0) * 2.0 ** np.arange(-3.0, 4.0), 0.0),
            ]
        ),
    ),
    "hyperbolic_tangent": (
        elementary.hyperbolic_tangent,
        mpmath.tanh,
        np.concatenate(
            [spread_over(-25.0, 25.0), spread_over(-1.1, 1.1), both_signs(decades(-300, 1)), [0.0, 1.0, -1.0, 1e300]]
        ),
    ),
    "sine_of_turns": (
        elementary.sine_of_turns,
        lambda x: mpmath.sinpi(2 * mpmath.mpf(x)),
        np.concatenate(
            [spread_over(-3.0, 3.0), both_signs(decades(-300, -1)), spread_over(1e3, 1e5), np.arange(17) / 8.0]
        ),
    ),
}


def ulps(found: np.ndarray, truth: list[mpmath.mpf]) -> np.ndarray:
    """Distance in units of the last place of the truth."""
    units = np.spacing(np.abs(np.array([float(value) for value in truth])))
    units = np.maximum(units, np.finfo(float).tiny * np.finfo(float).eps)
    with mpmath.workdps(40):
        error = [abs(mpmath.mpf(value) - true) for value, true in zip(found.tolist(), truth, strict=True)]
    return np.array([float(e / mpmath.mpf(unit)) for e, unit in zip(error, units.tolist(), strict=True)])


def evaluated(function, x: np.ndarray, width: tuple[int, ...]) -> np.ndarray:
    padded = np.concatenate([x, np.full(-len(x) % len(width), 0.5)])
    result = np.empty_like(padded)
    elementary.apply(function, padded, result, width)
    return result[: len(x)]


@pytest.mark.parametrize("name", CASES)
def test_function_is_within_an_ulp_and_a_half(name):
    """Truth: mpmath at 40 digits."""
    function, true_function, x = CASES[name]
    with mpmath.workdps(40):
        truth = [true_function(mpmath.mpf(value)) for value in x.tolist()]
    off = ulps(evaluated(function, x, FLAT), truth)
    worst = int(np.argmax(off))
    assert off[worst] <= ULP_LIMIT, f"{name}({x[worst]!r}) is {off[worst]:.2f} ulp off"


@pytest.mark.parametrize("name", CASES)
def test_a_lane_alone_gives_the_bits_of_a_lane_among_eight(name):
    function, _, x = CASES[name]
    assert evaluated(function, x, LONE).tobytes() == evaluated(function, x, FLAT).tobytes()


def test_every_function_of_the_module_is_tested():
    kernels = {name for name, value in vars(elementary).items() if getattr(value, "py_func", None)}
    assert kernels - {"apply"} == set(CASES)


def test_exponential_below_its_range_stays_tiny():
    assert 0.0 <= evaluated(elementary.exponential, np.array([-709.0, -1e4, -1e300, -np.inf]), FLAT).max() < 1e-300


def test_quarter_turns_are_exact():
    x = np.array([0.0, 0.25, 0.5, 0.75, 1.0, -0.25, 1e6 + 0.25, 2.0**40 + 0.75])
    np.testing.assert_array_equal(
        np.abs(evaluated(elementary.sine_of_turns, x, FLAT)), [0.0, 1.0, 0.0, 1.0, 0.0, 1.0, 1.0, 1.0]
    )


def test_numbers_that_are_none_stay_none():
    """A step whose state is not finite must be seen to be so."""
    x = np.array([np.nan])
    for function in (elementary.exponential, elementary.hyperbolic_tangent, elementary.sine_of_turns):
        assert not np.isfinite(evaluated(function, x, LONE)[0])
