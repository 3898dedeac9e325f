"""Every shipped circuit at the ends and the middle of its controls, against SUNDIALS IDA on a second writing.

Source: SUNDIALS (A. C. Hindmarsh et al., ACM TOMS 31 (2005)), through scikit-sundae; the equations are those of
second_writing.py, which shares nothing with the engine but the records it reads.
"""

from __future__ import annotations

import numpy as np
import pytest

from kickrender.circuit import read_circuit, shipped_circuits
from kickrender.engine import rest_state, solve
from tests.outside.second_writing import SecondWriting

LENGTH_S, RATE_HZ = 0.2, 48_000.0
WORST_DB = -100.0
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


@pytest.mark.slow
@pytest.mark.parametrize(("name", "settings"), [pytest.param(n, s, id=f"{n}: {what}") for n, what, s in cases()])
def test_residual_is_below_100_db(name, settings):
    """RMS of the difference over the peak, and the state before the strike."""
    circuit = read_circuit(name).resolve(settings)
    count = round(LENGTH_S * RATE_HZ)
    independent = SecondWriting(circuit)
    true = independent.solve(np.arange(count) / RATE_HZ).volts[circuit.output]
    found = solve(circuit, LENGTH_S).sample(RATE_HZ, count)
    residual = 20 * np.log10(np.sqrt(np.mean((found - true) ** 2)) / np.max(np.abs(true)))
    assert residual < WORST_DB
    rest = rest_state(circuit)
    known = dict(zip(independent.names, independent.rest().tolist(), strict=True))
    for net in set(rest) & set(known):
        assert rest[net] == pytest.approx(known[net], rel=1e-6, abs=1e-7), net
