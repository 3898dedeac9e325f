"""Lane vectors against plain numpy, and the kernels with the compiler off, where an index out of range is seen."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from kickrender.engine import lanes
from kickrender.engine.compile import kernel

ROOT = Path(__file__).parents[2]
EIGHT = lanes.FLAT
RANDOM = np.random.default_rng(3)
X, Y = RANDOM.normal(size=(2, 64))


@kernel
def arithmetic(x, y, out, width):
    n = len(width)
    for at in range(0, x.size, n):
        a = lanes.load(x, at, width)
        b = lanes.load(y, at, width)
        lanes.store(out, at, (a + b * 3.0) / (2.0 - a) - b / (a * b + 7.5))


@kernel
def choices(x, y, out, width):
    n = len(width)
    for at in range(0, x.size, n):
        a = lanes.load(x, at, width)
        b = lanes.load(y, at, width)
        lanes.store(out, at, lanes.pick_less(a, b, lanes.spread(1.0, width), lanes.pick_less(a, 0.0, b, -5.0)))


@kernel
def any_below(x, level, width):
    return lanes.any_less(lanes.load(x, 0, width), level)


@kernel
def gathered(x, places, start, out, width):
    lanes.store(out, 0, lanes.gather(x, places, start, width))


@kernel
def bits(x, mantissas, exponents, width):
    n = len(width)
    for at in range(0, x.size, n):
        a = lanes.load(x, at, width)
        lanes.store(mantissas, at, lanes.mantissa(a))
        lanes.store(exponents, at, lanes.exponent(a))


@kernel
def powers(k, out, width):
    n = len(width)
    for at in range(0, k.size, n):
        lanes.store(out, at, lanes.power_of_two(lanes.load(k, at, width) + 6755399441055744.0))


@pytest.mark.parametrize("width", [lanes.LONE, EIGHT, EIGHT * 2])
def test_arithmetic_is_numpys_bit_for_bit(width):
    """No fused and no reordered operation: each is rounded as IEEE 754 says, in the order written."""
    out = np.empty_like(X)
    arithmetic(X, Y, out, width)
    np.testing.assert_array_equal(out, (X + Y * 3.0) / (2.0 - X) - Y / (X * Y + 7.5))


@pytest.mark.parametrize("width", [lanes.LONE, EIGHT])
def test_choices_are_made_lane_by_lane(width):
    x, y = X.copy(), Y.copy()
    x[3], y[5] = np.nan, np.nan
    out = np.empty_like(x)
    choices(x, y, out, width)
    with np.errstate(invalid="ignore"):
        np.testing.assert_array_equal(out, np.where(x < y, 1.0, np.where(x < 0.0, y, -5.0)))


def test_any_less_looks_at_every_lane_and_at_what_is_no_number():
    x = np.ones(8)
    assert not any_below(x, 1.0, EIGHT)
    for lane in range(8):
        for value in (0.0, np.nan):
            one = x.copy()
            one[lane] = value
            assert any_below(one, 1.0, EIGHT)


def test_gather_takes_from_anywhere():
    places = np.array([63, 0, 7, 7, 12, 40, 1, 2, 9, 33], dtype=np.uint32)
    out = np.empty(8)
    gathered(X, places, 2, out, EIGHT)
    np.testing.assert_array_equal(out, X[places[2:]])


def test_bits_of_normal_numbers():
    x = np.concatenate([np.abs(X), 2.0 ** np.array([-1022.0, 1023.0, 0.0, -1.0]), np.full(4, 1.9999999999999998)])
    mantissas, exponents = np.empty_like(x), np.empty_like(x)
    bits(x, mantissas, exponents, EIGHT)
    half, whole = np.frexp(x)
    np.testing.assert_array_equal(mantissas, 2.0 * half)
    np.testing.assert_array_equal(exponents, whole - 1.0)


def test_powers_of_two():
    k = np.arange(-1022.0, 1024.0)
    k = np.append(k, np.zeros(-len(k) % 8))
    out = np.empty_like(k)
    powers(k, out, EIGHT)
    np.testing.assert_array_equal(out, 2.0**k)


WITHOUT_COMPILER = """
import hashlib
import numpy as np
from kickrender.engine import poles, rest_state, solve_each
from tests.engine.circuits import resonator
hits = [resonator("1k"), resonator("10k")]
lengths = [6e-5, 4e-5]
alone = [solve_each([hit], [length])[0] for hit, length in zip(hits, lengths)]
beside = solve_each(hits, lengths)
rest_state(hits[0])
poles(hits[0])
digest = hashlib.sha256()
for one, other in zip(alone, beside):
    assert one.counters == other.counters
    samples = one.sample(1e6, 30, first=-2)
    assert samples.tobytes() == other.sample(1e6, 30, first=-2).tobytes()
    digest.update(samples.tobytes())
print(digest.hexdigest())
"""


@pytest.mark.slow
def test_kernels_give_the_same_bits_with_the_compiler_off():
    """As Python on numpy arrays every index is checked, which compiled code does not do."""
    found = [
        subprocess.check_output(
            [sys.executable, "-c", WITHOUT_COMPILER],
            env=dict(os.environ, NUMBA_DISABLE_JIT=off, PYTHONPATH=str(ROOT)),
            text=True,
        )
        for off in ("0", "1")
    ]
    assert found[0] == found[1]
