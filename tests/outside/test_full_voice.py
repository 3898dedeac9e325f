"""A whole hit of each shipped voice against an independent solve: SUNDIALS IDA on the second writing of the equations.

Outside truth: the multistep solver IDA (Hindmarsh et al., ACM TOMS 31, 2005) at a tolerance where it agrees with
itself; see second_writing.py for what is independent and how.
"""

from __future__ import annotations

import numpy as np
import pytest

from kickrender.circuit import read_circuit
from kickrender.engine import rest_state, solve
from tests.outside.second_writing import SecondWriting

RATE_HZ = 48_000
LENGTH_S = 0.25  # holds the strike, the drop, the gate's fall and a dozen cycles of the settled tone
RTOL, ATOL = 1e-9, 1e-11
HARD = {"drive": 1.0, "accent": 5.0, "brightness": 1.0, "decay": 1.0}


def residual_db(samples: np.ndarray, truth: np.ndarray) -> float:
    """RMS of the difference over the peak. [dB]"""
    return float(20.0 * np.log10(np.sqrt(np.mean((samples - truth) ** 2)) / np.abs(truth).max()))


@pytest.mark.parametrize("voice", ["bridged-t", "twin-t"])
def test_rest_state_is_that_of_the_second_writing(voice: str) -> None:
    circuit = read_circuit(voice).resolve()
    writing = SecondWriting(circuit)
    truth, ours = writing.rest(), rest_state(circuit)
    for name, volts in zip(writing.names, truth, strict=True):
        if ":" not in name:
            assert ours[name] == pytest.approx(volts, rel=1e-6, abs=1e-8), name


@pytest.mark.slow
@pytest.mark.parametrize("voice", ["bridged-t", "twin-t"])
@pytest.mark.parametrize("settings", [{}, HARD], ids=["start", "hard"])
def test_a_hit_is_within_100_db_of_an_independent_solve(voice: str, settings: dict[str, float]) -> None:
    circuit = read_circuit(voice).resolve(settings)
    count = round(LENGTH_S * RATE_HZ)
    truth = SecondWriting(circuit).solve(np.arange(count) / RATE_HZ, rtol=RTOL, atol=ATOL).volts[circuit.output]
    assert residual_db(solve(circuit, LENGTH_S).sample(RATE_HZ, count), truth) < -100.0
    # The tighter the tolerance, the nearer: both writings converge to one solution, not only to a like one.
    assert residual_db(solve(circuit, LENGTH_S, tolerance=1e-8).sample(RATE_HZ, count), truth) < -118.0
