"""Convergence as users meet it: what finer settings would have changed in a file, for the hardest settings.

No publication: the project's own promise that the default tolerance and oversampling are fine enough.
"""

from __future__ import annotations

import numpy as np
import pytest

from kickrender.circuit import Circuit, read_circuit, shipped_circuits
from kickrender.engine import DEFAULT_TOLERANCE, solve
from kickrender.sound.decimation import decimate, margin_s
from kickrender.sound.options import SoundOptions

RATE_HZ, LENGTH_S = 48_000, 0.5
OVERSAMPLE = SoundOptions().oversample
FINER = 8
WORST_DB = -90.0  # of the finer rendering's peak
HARD = ("drive", "accent")  # controls that make a strike harder


def hardest(circuit: Circuit) -> dict[str, float]:
    """Every control that makes the strike harder at its highest."""
    return {name: max(c.low, c.high) for name, c in circuit.controls.items() if name in HARD}


def rendered(circuit: Circuit, oversample: int, tolerance: float) -> np.ndarray:
    solution = solve(circuit.resolve(hardest(circuit)), LENGTH_S + margin_s(RATE_HZ, oversample), tolerance=tolerance)
    count = round(RATE_HZ * LENGTH_S)
    return decimate(lambda first, n: solution.sample(RATE_HZ * oversample, n, first), count, oversample)


def difference_db(coarse: np.ndarray, fine: np.ndarray) -> float:
    return float(20 * np.log10(np.sqrt(np.mean((coarse - fine) ** 2)) / np.max(np.abs(fine))))


@pytest.mark.parametrize("name", shipped_circuits())
def test_eight_times_finer_changes_less_than_90_db(name):
    """Tolerance divided by eight and oversampling times eight, together and each alone."""
    circuit = read_circuit(name)
    default = rendered(circuit, OVERSAMPLE, DEFAULT_TOLERANCE)
    for oversample, tolerance in (
        (FINER * OVERSAMPLE, DEFAULT_TOLERANCE / FINER),
        (FINER * OVERSAMPLE, DEFAULT_TOLERANCE),
        (OVERSAMPLE, DEFAULT_TOLERANCE / FINER),
    ):
        assert difference_db(default, rendered(circuit, oversample, tolerance)) < WORST_DB


@pytest.mark.parametrize("name", shipped_circuits())
def test_oversampling_is_what_keeps_it_there(name):
    """Without it the hardest settings alias more, so that the test above says something about it."""
    circuit = read_circuit(name)
    assert hardest(circuit)
    fine = rendered(circuit, FINER * OVERSAMPLE, DEFAULT_TOLERANCE)
    unfiltered, default = (rendered(circuit, oversample, DEFAULT_TOLERANCE) for oversample in (1, OVERSAMPLE))
    assert difference_db(unfiltered, fine) > difference_db(default, fine) + 6.0
