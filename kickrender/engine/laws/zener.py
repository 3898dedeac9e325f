"""Zener diode: a forward junction and an exponential breakdown, with series resistance, capacitance and g_min.

    i = I_s (exp(v/(n V_T)) - 1) - I_B (exp(-(v + V_B)/(n_B V_T)) - exp(-V_B/(n_B V_T)))

V_B is the reverse voltage at which the current has grown by I_B, n_B sets how sharp the knee is: 2.3 n_B V_T more for
ten times the current. The last exponential makes the current vanish with the voltage. The form is common practice in
circuit analysis (no single source); V_B does not follow temperature.
"""

from __future__ import annotations

from kickrender.circuit import exact
from kickrender.circuit.records import ResolvedPart
from kickrender.engine.compile import inner_kernel
from kickrender.engine.lanes import load, store
from kickrender.engine.physics import MINIMUM_CONDUCTANCE_S, saturation_current, thermal_voltage
from kickrender.engine.stamps import Device, Stamps


def stamp(part: ResolvedPart, stamps: Stamps) -> None:
    """Junction from `anode` (or an inner net behind the series resistance) to `cathode`, conducting both ways."""
    assert part.model is not None
    model = part.model.values
    anode, cathode = part.terminals["anode"], part.terminals["cathode"]
    if model.get("series_resistance", 0.0) > 0.0:
        inner = stamps.inner(part, "junction")
        stamps.conductance(anode, inner, 1.0 / model["series_resistance"], typical=1.0)
        anode = inner
    stamps.conductance(anode, cathode, MINIMUM_CONDUCTANCE_S, typical=MINIMUM_CONDUCTANCE_S)
    if model.get("capacitance", 0.0) > 0.0:
        stamps.capacitance(anode, cathode, model["capacitance"], typical=1e-11)
    i_s = saturation_current(model, stamps.temperature_k)
    v_t = thermal_voltage(stamps.temperature_k)
    forward, backward = 1.0 / (model["ideality"] * v_t), 1.0 / (model["breakdown_ideality"] * v_t)
    # Breakdown is written with I_s in front as well, so that both arguments are alike to the search for a rest state.
    offset = exact.log(model["breakdown_current"] / i_s) - model["breakdown_voltage"] * backward
    stamps.device(
        Device(
            law="zener",
            exponentials=((anode, cathode), (cathode, anode)),
            outputs=1,
            flows=((anode, 0, -1.0), (cathode, 0, 1.0)),
            slopes=1,
            derivatives=(
                (anode, anode, 0, 1.0),
                (anode, cathode, 0, -1.0),
                (cathode, anode, 0, -1.0),
                (cathode, cathode, 0, 1.0),
            ),
            parameters=4,
            typical_slopes=((0.0,), (1e-6,), (1e-1,)),
        ),
        exponentials=(forward, 0.0, backward, offset),
        parameters=(i_s, i_s * forward, i_s * backward, 1.0 - exact.exp(offset)),
    )


@inner_kernel
def evaluate(span, numbers, arguments, exp_slopes, exp_values, tanhs, vectors, slopes, with_slopes, width):
    """Current and conductance of every zener diode. [A], [S]; arguments as in diode.evaluate."""
    lanes = len(width)
    for k in range(span[0]):
        forward = (span[1] + 2 * k) * lanes
        backward = forward + lanes
        p = (span[5] + 4 * k) * lanes
        # each junction's exponential less its value at 0 V
        rise = (load(exp_values, forward, width) - load(numbers, p + 3 * lanes, width)) - load(
            exp_values, backward, width
        )
        store(vectors, (span[3] + k) * lanes, load(numbers, p, width) * rise)
        if with_slopes:
            g_forward = load(numbers, p + lanes, width) * load(exp_slopes, forward, width)
            g_backward = load(numbers, p + 2 * lanes, width) * load(exp_slopes, backward, width)
            store(slopes, (span[4] + k) * lanes, g_forward + g_backward)
