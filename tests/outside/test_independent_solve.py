"""Every shipped circuit at the ends and the middle of its controls, against SUNDIALS IDA on a second writing.

Source: SUNDIALS (A. C. Hindmarsh et al., ACM TOMS 31 (2005)), through scikit-sundae; the equations are those of
second_writing.py, which shares nothing with the engine but the records it reads.
"""

from __future__ import annotations

import numpy as np
import pytest

from kickrender.circuit import ResolvedCircuit, read_circuit, shipped_circuits
from kickrender.engine import DEFAULT_TOLERANCE, rest_state, solve
from tests.engine.circuits import residual_db
from tests.outside.second_writing import SecondWriting

LENGTH_S, RATE_HZ = 0.2, 48_000.0
WHOLE_S = 0.25  # holds the strike, the drop, the gate's fall and a dozen cycles of the settled tone
WORST_DB = -100.0
HARD = {"drive": 1.0, "accent": 5.0, "brightness": 1.0, "decay": 1.0}
Settings = dict[str, float]


def cases() -> list[tuple[str, str, Settings]]:
    """Every circuit as it starts and with all controls in the middle; but for variants, each control at either end."""
    found: list[tuple[str, str, Settings]] = []
    for name, path in shipped_circuits().items():
        controls = read_circuit(name).controls
        found.append((name, "as it starts", {}))
        found.append((name, "all in the middle", {key: 0.5 * (c.low + c.high) for key, c in controls.items()}))
        if "\nbased_on = " in path.read_text("utf-8"):
            continue
        for key, control in controls.items():
            found += [(name, f"{key} {end}", {key: getattr(control, end)}) for end in ("low", "high")]
    return found


def off_db(circuit: ResolvedCircuit, truth: np.ndarray, length_s: float, tolerance: float) -> float:
    """How far the engine is from the truth, RMS over peak. [dB]"""
    return residual_db(solve(circuit, length_s, tolerance=tolerance).sample(RATE_HZ, len(truth)), truth)


def assert_same_rest(circuit: ResolvedCircuit, independent: SecondWriting, within_v: float) -> None:
    rest = rest_state(circuit)
    known = dict(zip(independent.names, independent.rest().tolist(), strict=True))
    for net in set(rest) & set(known):
        assert rest[net] == pytest.approx(known[net], rel=1e-6, abs=within_v), net


@pytest.mark.slow
@pytest.mark.parametrize(("name", "settings"), [pytest.param(n, s, id=f"{n}: {what}") for n, what, s in cases()])
def test_residual_is_below_100_db(name: str, settings: Settings) -> None:
    """The state before the strike too."""
    circuit = read_circuit(name).resolve(settings)
    independent = SecondWriting(circuit)
    truth = independent.solve(np.arange(round(LENGTH_S * RATE_HZ)) / RATE_HZ).volts[circuit.output]
    assert off_db(circuit, truth, LENGTH_S, DEFAULT_TOLERANCE) < WORST_DB
    assert_same_rest(circuit, independent, 1e-7)


@pytest.mark.slow
@pytest.mark.parametrize("voice", ["bridged-t", "twin-t"])
@pytest.mark.parametrize("settings", [{}, HARD], ids=["start", "hard"])
def test_the_tighter_the_tolerance_the_nearer(voice: str, settings: Settings) -> None:
    """Both writings converge to one solution, not to a like one; IDA at a tolerance where it agrees with itself."""
    circuit = read_circuit(voice).resolve(settings)
    independent = SecondWriting(circuit)
    times = np.arange(round(WHOLE_S * RATE_HZ)) / RATE_HZ
    truth = independent.solve(times, rtol=1e-9, atol=1e-11).volts[circuit.output]
    assert off_db(circuit, truth, WHOLE_S, DEFAULT_TOLERANCE) < WORST_DB
    assert off_db(circuit, truth, WHOLE_S, 1e-8) < -118.0
    assert_same_rest(circuit, independent, 1e-8)
