"""Reading a solution at any time: before the strike, on its pieces' edges, up to its end and not beyond."""

from __future__ import annotations

import numpy as np
import pytest

from kickrender.engine import solve
from tests.engine.circuits import STRIKE, rc, resonator


def read_one_by_one(solution, rate_hz: float, count: int, first: int = 0, net: int = 0) -> np.ndarray:
    """The dense output in plain numpy, sample by sample."""
    found = []
    for k in range(count):
        t = (first + k) * (1.0 / rate_hz)
        if t < 0.0:
            found.append(solution.rest[solution.nets[net]])
            continue
        piece = int(np.searchsorted(solution.piece_t, t, side="right")) - 1
        theta = (t - solution.piece_t[piece]) / solution.piece_h[piece]
        x, x_new, k_0, k_1, k_2 = solution.piece_c[piece, net]
        found.append((1 - theta) * x + theta * (x_new + (1 - theta) * (k_0 + theta * (k_1 + theta * k_2))))
    return np.array(found)


@pytest.fixture(scope="module")
def hit():
    return solve(resonator(), 0.05, probes=("leg", "sum"))


@pytest.mark.parametrize("rate_hz", [50.0, 997.0, 48_000.0, 384_000.0, 3.3e6])
def test_samples_are_the_dense_output(hit, rate_hz):
    count = min(4000, int(0.05 * rate_hz))
    for first in (0, -7, count // 3):
        found = hit.sample(rate_hz, min(count, int(0.05 * rate_hz) - first), first)
        true = read_one_by_one(hit, rate_hz, len(found), first)
        np.testing.assert_allclose(found, true, rtol=0, atol=1e-12)


def test_a_span_in_two_reads_is_the_span_in_one(hit):
    whole = hit.sample(384e3, 1000, first=-10)
    parts = [hit.sample(384e3, 300, first=-10), hit.sample(384e3, 1, first=290), hit.sample(384e3, 699, first=291)]
    assert np.concatenate(parts).tobytes() == whole.tobytes()


def test_before_the_strike_is_the_rest_state():
    raised = solve(rc('pulse = { rest = "2V", strike = "5V", length = "1ms" }'), 2e-3)
    np.testing.assert_array_equal(raised.sample(48e3, 100, first=-100), raised.rest["out"])
    assert raised.rest["out"] == pytest.approx(2.0, abs=1e-9)
    np.testing.assert_array_equal(raised.sample(48e3, 5, first=-1000), raised.rest["out"])
    assert raised.sample(48e3, 1)[0] == raised.rest["out"]


def test_edges_of_pieces_read_the_states_themselves(hit):
    """A time on an edge gives the state the stepper had there, to a rounding of theta."""
    for piece in (0, 1, 2, len(hit.piece_t) // 2, len(hit.piece_t) - 1):
        t = hit.piece_t[piece]
        if t > 0.0:
            found = hit.sample(1.0 / t, 1, first=1)[0]
            assert found == pytest.approx(hit.piece_c[piece, 0, 0], abs=1e-12)
    assert hit.sample(1.0 / 0.05, 1, first=1)[0] == pytest.approx(hit.piece_c[-1, 0, 1], abs=1e-12)


def test_states_join_from_piece_to_piece(hit):
    np.testing.assert_array_equal(hit.piece_c[1:, :, 0], hit.piece_c[:-1, :, 1])


def test_nothing_is_read_beyond_the_end(hit):
    hit.sample(1000.0, 51)
    with pytest.raises(ValueError, match=r"sample 51 lies beyond the solved 0\.05 s"):
        hit.sample(1000.0, 52)
    with pytest.raises(ValueError, match="beyond"):
        hit.sample(48e3, 1, first=10**6)


def test_nothing_asked_for_is_nothing(hit):
    assert hit.sample(48e3, 0).shape == (0,)
    assert hit.sample(48e3, 0, first=10**9).shape == (0,)


def test_probed_nets_and_only_those(hit):
    assert hit.nets == ("out", "leg", "sum")
    for index, net in enumerate(hit.nets):
        found = hit.sample(48e3, 480, net=net)
        np.testing.assert_allclose(found, read_one_by_one(hit, 48e3, 480, net=index), rtol=0, atol=1e-12)
    with pytest.raises(ValueError, match=r"net 'ring' was not probed; probed: out, leg, sum"):
        hit.sample(48e3, 10, net="ring")


def test_a_probe_changes_no_byte_of_the_output(hit):
    plain = solve(resonator(), 0.05)
    assert plain.nets == ("out",)
    assert plain.counters == hit.counters
    assert plain.sample(384e3, 19_000).tobytes() == hit.sample(384e3, 19_000).tobytes()


def test_a_longer_solve_begins_alike():
    """Up to the last step before the shorter one's end the two are the same, whatever comes later."""
    short, long = solve(resonator(), 0.02), solve(resonator(), 0.2)
    shared = int(np.argmin(short.piece_h[:-1] == long.piece_h[: len(short.piece_h) - 1]))
    assert shared == 0 or shared >= len(short.piece_h) - 4
    count = int(short.piece_t[-4] * 48e3)
    assert short.sample(48e3, count).tobytes() == long.sample(48e3, count).tobytes()


@pytest.mark.parametrize("length_s", [1e-6, 2e-6, 1e-3, 4e-3, 4.000001e-3, 30.0])
def test_any_length(length_s):
    """Ends before, on and after the gate's corners, and half a minute."""
    solution = solve(rc(STRIKE), length_s)
    assert solution.length_s == length_s
    assert solution.piece_t[-1] + solution.piece_h[-1] == pytest.approx(length_s, rel=1e-15)
    assert np.isfinite(solution.sample(1.0 / length_s, 2)).all()


@pytest.mark.parametrize("length_s", [0.0, -1.0, float("nan"), float("inf")])
def test_a_length_that_is_none_is_refused(length_s):
    with pytest.raises(ValueError, match="length"):
        solve(rc(STRIKE), length_s)
