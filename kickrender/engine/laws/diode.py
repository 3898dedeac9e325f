"""Junction diode: i = I_s (exp(v/(n V_T)) - 1), with series resistance, constant capacitance and g_min.

Source: W. Shockley, The theory of p-n junctions in semiconductors, Bell System Technical Journal 28 (1949), the
ideal-diode law with ideality n. Breakdown, charge storage and the junction capacitance's change with voltage are
left out. g_min is a term of the law: as a conductance of its own it would cost four more entries everywhere.
"""

from __future__ import annotations

from kickrender.circuit.records import ResolvedPart
from kickrender.engine.compile import inner_kernel
from kickrender.engine.lanes import load, store
from kickrender.engine.physics import MINIMUM_CONDUCTANCE_S, saturation_current, thermal_voltage
from kickrender.engine.stamps import Device, Stamps


def stamp(part: ResolvedPart, stamps: Stamps) -> None:
    """Junction from `anode` (or an inner net behind the series resistance) to `cathode`."""
    assert part.model is not None
    model = part.model.values
    anode, cathode = part.terminals["anode"], part.terminals["cathode"]
    if model.get("series_resistance", 0.0) > 0.0:
        inner = stamps.inner(part, "junction")
        stamps.conductance(anode, inner, 1.0 / model["series_resistance"], typical=1.0)
        anode = inner
    if model.get("capacitance", 0.0) > 0.0:
        stamps.capacitance(anode, cathode, model["capacitance"], typical=1e-11)
    i_s = saturation_current(model, stamps.temperature_k)
    inverse_scale = 1.0 / (model["ideality"] * thermal_voltage(stamps.temperature_k))
    stamps.device(
        Device(
            law="diode",
            exponentials=((anode, cathode),),
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
            typical_slopes=((MINIMUM_CONDUCTANCE_S,), (1e-6,), (1e-1,)),
        ),
        exponentials=(inverse_scale, 0.0),
        parameters=(i_s, i_s * inverse_scale, MINIMUM_CONDUCTANCE_S / inverse_scale, MINIMUM_CONDUCTANCE_S),
    )


@inner_kernel
def evaluate(span, numbers, arguments, exp_slopes, exp_values, tanhs, vectors, slopes, with_slopes, width):
    """Current and conductance of every diode. [A], [S]

    span : (6,) this law's devices: count, then first row in `arguments` (and `exp_slopes`, `exp_values`), `tanhs`,
        `vectors` (where outputs go), `slopes` and `numbers` (parameters). Every row is len(width) floats of a flat
        array. `vectors` and, where `with_slopes`, `slopes` are changed in place.
    """
    lanes = len(width)
    for k in range(span[0]):
        e = (span[1] + k) * lanes
        p = (span[5] + 4 * k) * lanes
        leak = load(numbers, p + 2 * lanes, width) * load(arguments, e, width)
        i = load(numbers, p, width) * (load(exp_values, e, width) - 1.0)
        store(vectors, (span[3] + k) * lanes, i + leak)
        if with_slopes:
            g = load(numbers, p + lanes, width) * load(exp_slopes, e, width)
            store(slopes, (span[4] + k) * lanes, g + load(numbers, p + 3 * lanes, width))
