"""Bipolar transistor in the transport form of Ebers and Moll, with Early effect, both polarities.

    I_F = I_s (exp(v_be/(n V_T)) - 1),  I_R = I_sr (exp(v_bc/(n V_T)) - 1)
    i_c = (I_F - I_R)(1 - v_bc/V_A) - I_R/b_R,  i_b = I_F/b_F + I_R/b_R

and g_min from base to emitter and from base to collector, outside the Early factor.

Source: J. J. Ebers and J. L. Moll, Large-signal behavior of junction transistors, Proceedings of the IRE 42 (1954),
in transport form; J. M. Early, Proceedings of the IRE 40 (1952), to first order in v_bc. High-level injection,
leakage terms, ohmic resistances and charge storage are left out. For a PNP every voltage and current is reversed.
"""

from __future__ import annotations

from kickrender.circuit.records import ResolvedPart
from kickrender.engine.compile import inner_kernel
from kickrender.engine.lanes import load, store
from kickrender.engine.physics import MINIMUM_CONDUCTANCE_S, saturation_current, thermal_voltage
from kickrender.engine.stamps import Device, Stamps


def stamp(part: ResolvedPart, stamps: Stamps) -> None:
    """Currents into collector and base; the emitter's is minus their sum."""
    assert part.model is not None
    model = part.model.values
    c, b, e = (part.terminals[role] for role in ("collector", "base", "emitter"))
    for net, key in ((e, "base_emitter_capacitance"), (c, "base_collector_capacitance")):
        if model.get(key, 0.0) > 0.0:
            stamps.capacitance(b, net, model[key], typical=1e-11)
    scale = model["ideality"] * thermal_voltage(stamps.temperature_k)
    i_s = saturation_current(model, stamps.temperature_k)
    i_sr = saturation_current(model, stamps.temperature_k, "reverse_saturation_current")
    v_early = model.get("early_voltage")
    into = -1.0 if part.kind == "npn" else 1.0  # sign of a current in the current law of the net it leaves
    stamps.device(
        Device(
            law="transistor",
            exponentials=((b, e), (b, c)) if part.kind == "npn" else ((e, b), (c, b)),
            outputs=2,
            flows=((c, 0, into), (b, 1, into), (e, 0, -into), (e, 1, -into)),
            slopes=4,  # dic/dvbe, dic/dvbc, dib/dvbe, dib/dvbc
            derivatives=tuple(
                (row, column, slope, sign * direction)
                for row, sign, pair in ((c, 1.0, (0, 1)), (b, 1.0, (2, 3)), (e, -1.0, (0, 1)), (e, -1.0, (2, 3)))
                for slope, other in zip(pair, (e, c), strict=True)
                for column, direction in ((b, 1.0), (other, -1.0))
            ),
            parameters=8,
            typical_slopes=(
                (0.0, -MINIMUM_CONDUCTANCE_S, MINIMUM_CONDUCTANCE_S, MINIMUM_CONDUCTANCE_S),
                (1e-4, -1e-9, 1e-6, 0.0),
                (1e-1, -1e-3, 1e-3, 1e-3),
            ),
        ),
        exponentials=(1.0 / scale, 0.0, 1.0 / scale, 0.0),
        parameters=(
            i_s,
            i_sr,
            1.0 / model["forward_gain"],
            1.0 / model["reverse_gain"],
            1.0 / scale,
            scale / v_early if v_early else 0.0,
            scale * MINIMUM_CONDUCTANCE_S,
            MINIMUM_CONDUCTANCE_S,
        ),
    )


@inner_kernel
def evaluate(span, numbers, arguments, exp_slopes, exp_values, tanhs, vectors, slopes, with_slopes, width):
    """Collector and base current and their four slopes. [A], [S]; arguments as in diode.evaluate."""
    lanes = len(width)
    for k in range(span[0]):
        f = (span[1] + 2 * k) * lanes
        r = f + lanes
        p = (span[5] + 8 * k) * lanes
        o = (span[3] + 2 * k) * lanes
        i_s = load(numbers, p, width)
        i_sr = load(numbers, p + lanes, width)
        per_forward_gain = load(numbers, p + 2 * lanes, width)
        per_reverse_gain = load(numbers, p + 3 * lanes, width)
        scale_per_early = load(numbers, p + 5 * lanes, width)
        i_f = i_s * (load(exp_values, f, width) - 1.0)
        i_r = i_sr * (load(exp_values, r, width) - 1.0)
        x_r = load(arguments, r, width)
        early = 1.0 - x_r * scale_per_early
        leak = load(numbers, p + 6 * lanes, width)  # per unit of an argument
        leak_r = leak * x_r
        transport = i_f - i_r
        i_r_base = i_r * per_reverse_gain
        store(vectors, o, (transport * early - i_r_base) - leak_r)
        store(vectors, o + lanes, (i_f * per_forward_gain + i_r_base) + (leak * load(arguments, f, width) + leak_r))
        if with_slopes:
            g = (span[4] + 4 * k) * lanes
            per_scale = load(numbers, p + 4 * lanes, width)
            g_f = i_s * per_scale * load(exp_slopes, f, width)
            g_r = i_sr * per_scale * load(exp_slopes, r, width)
            g_r_base = g_r * per_reverse_gain + load(numbers, p + 7 * lanes, width)
            store(slopes, g, g_f * early)
            store(slopes, g + lanes, 0.0 - g_r * early - transport * (scale_per_early * per_scale) - g_r_base)
            store(slopes, g + 2 * lanes, g_f * per_forward_gain + load(numbers, p + 7 * lanes, width))
            store(slopes, g + 3 * lanes, g_r_base)
