"""Op-amp macromodel: one pole, slew limit, output held between its rails' headrooms; its output is a state.

    dv_o/dt = S tanh(w_t (v_p - v_m - v_o/A_0)/S) - S exp((v_o - V_hi)/50 mV) + S exp((V_lo - v_o)/50 mV)

The equation stands in place of the current law of the net `out`. Inputs and rails draw no current; output
resistance, offset, noise and further poles are left out. The form is the project's own; the slewing single pole
follows J. E. Solomon, The monolithic op amp: a tutorial study, IEEE Journal of Solid-State Circuits 9 (1974).
"""

from __future__ import annotations

from math import pi

from kickrender.circuit.records import ResolvedPart
from kickrender.engine.compile import inner_kernel
from kickrender.engine.lanes import load, store
from kickrender.engine.stamps import Device, Stamps

KNEE_V = 0.05  # softness of the output's limits; does not follow temperature


def stamp(part: ResolvedPart, stamps: Stamps) -> None:
    """The rate of the output's own equation, in V/s."""
    assert part.model is not None
    model = part.model.values
    plus, minus, out, high, low = (part.terminals[role] for role in ("plus", "minus", "out", "rail_high", "rail_low"))
    slew, w_t = model["slew_rate"], 2.0 * pi * model["gain_bandwidth"]
    row = stamps.own_equation(out)
    stamps.rate(row, out, 1.0, typical=1.0)
    stamps.device(
        Device(
            law="opamp",
            exponentials=((out, high), (low, out)),
            tanhs=((plus, minus, out),),
            outputs=1,
            flows=((row, 0, 1.0),),
            slopes=4,  # of minus the rate: by v_p - v_m, by v_o through the gain, by each limit
            derivatives=(
                (row, plus, 0, -1.0),
                (row, minus, 0, 1.0),
                (row, out, 1, 1.0),
                (row, out, 2, 1.0),
                (row, high, 2, -1.0),
                (row, out, 3, 1.0),
                (row, low, 3, -1.0),
            ),
            parameters=4,
            typical_slopes=((0.0, 0.0, 0.0, 1e9), (1e7, 50.0, 0.0, 0.0), (0.0, 0.0, 1e9, 0.0)),
        ),
        exponentials=(
            1.0 / KNEE_V,
            model["headroom_high"] / KNEE_V,
            1.0 / KNEE_V,
            model["headroom_low"] / KNEE_V,
        ),
        tanhs=(w_t / slew, w_t / (slew * model["dc_gain"])),
        parameters=(slew, w_t, w_t / model["dc_gain"], slew / KNEE_V),
    )


@inner_kernel
def evaluate(span, numbers, arguments, exp_slopes, exp_values, tanhs, vectors, slopes, with_slopes, width):
    """Rate of the output and its slopes. [V/s], [1/s]; arguments as in diode.evaluate."""
    lanes = len(width)
    for k in range(span[0]):
        e = (span[1] + 2 * k) * lanes
        p = (span[5] + 4 * k) * lanes
        slew = load(numbers, p, width)
        t = load(tanhs, (span[2] + k) * lanes, width)
        limits = load(exp_values, e + lanes, width) - load(exp_values, e, width)
        store(vectors, (span[3] + k) * lanes, slew * (t + limits))
        if with_slopes:
            g = (span[4] + 4 * k) * lanes
            per_knee = load(numbers, p + 3 * lanes, width)
            open_loop = 1.0 - t * t
            store(slopes, g, load(numbers, p + lanes, width) * open_loop)
            store(slopes, g + lanes, load(numbers, p + 2 * lanes, width) * open_loop)
            store(slopes, g + 2 * lanes, per_knee * load(exp_slopes, e, width))
            store(slopes, g + 3 * lanes, per_knee * load(exp_slopes, e + lanes, width))
