"""Junction field-effect transistor: square law, alike in both directions, with both gate junctions, both polarities.

    i_d = B (p(v_gs + V_P)^2 - p(v_gd + V_P)^2)(1 + |v_ds|/V_A),  p(v) = max(v, 0),  B = I_DSS/V_P^2
    gate to source and gate to drain:  i = I_s (exp(v/(n V_T)) - 1)

With both ends open the first factor is B v_ds (2 (v_gs + V_P) - v_ds), the voltage-controlled resistance; with the
drain's end pinched off it is the saturated B (v_gs + V_P)^2. Drain and source may change places. Current and
conductance are continuous, the conductance's own slope is not: it jumps where an end pinches off (and, with an Early
voltage, where v_ds changes sign). A step across such a point has a local error of third order at best, which step
control answers with a few short steps.

Source: W. Shockley, A unipolar "field-effect" transistor, Proceedings of the IRE 40 (1952), approximated by the square
law as in H. Shichman and D. A. Hodges, IEEE Journal of Solid-State Circuits 3 (1968), whose channel-length term holds
in both regions, so that they meet smoothly (both from memory). Pinch-off voltage and I_DSS do not follow
temperature; ohmic ends, charge storage beyond two constant capacitances and breakdown are left out. For a p-channel
every voltage and current is reversed.
"""

from __future__ import annotations

from kickrender.circuit.records import ResolvedPart
from kickrender.engine.compile import inner_kernel
from kickrender.engine.lanes import load, pick_less, store
from kickrender.engine.physics import MINIMUM_CONDUCTANCE_S, saturation_current, thermal_voltage
from kickrender.engine.stamps import Device, Stamps


def stamp(part: ResolvedPart, stamps: Stamps) -> None:
    """Channel current from drain to source and the currents of both gate junctions."""
    assert part.model is not None
    model = part.model.values
    d, g, s = (part.terminals[role] for role in ("drain", "gate", "source"))
    for net, key in ((s, "gate_source_capacitance"), (d, "gate_drain_capacitance")):
        stamps.conductance(g, net, MINIMUM_CONDUCTANCE_S, typical=MINIMUM_CONDUCTANCE_S)
        if model.get(key, 0.0) > 0.0:
            stamps.capacitance(g, net, model[key], typical=1e-11)
    scale = model["ideality"] * thermal_voltage(stamps.temperature_k)
    i_s = saturation_current(model, stamps.temperature_k)
    v_early = model.get("early_voltage")
    into = -1.0 if part.kind == "n-jfet" else 1.0  # sign of a current in the current law of the net it leaves
    stamps.device(
        Device(
            law="jfet",
            exponentials=((g, s), (g, d)) if part.kind == "n-jfet" else ((s, g), (d, g)),
            outputs=3,  # drain to source, gate to source, gate to drain
            flows=((d, 0, into), (s, 0, -into), (g, 1, into), (s, 1, -into), (g, 2, into), (d, 2, -into)),
            slopes=4,  # of the channel by v_gs and by v_gd, of each junction
            derivatives=tuple(
                (row, column, slope, sign * direction)
                for slope, ends, far in ((0, (d, s), s), (1, (d, s), d), (2, (g, s), s), (3, (g, d), d))
                for row, sign in zip(ends, (1.0, -1.0), strict=True)
                for column, direction in ((g, 1.0), (far, -1.0))
            ),
            parameters=6,
            typical_slopes=((0.0,) * 4, (1e-3, -0.9e-3, 0.0, 0.0), (3e-3, -1e-5, 1e-2, 1e-9)),
        ),
        exponentials=(1.0 / scale, 0.0, 1.0 / scale, 0.0),
        parameters=(
            i_s,
            1.0 / scale,
            scale,
            model["drain_current"] / (model["pinch_off"] * model["pinch_off"]),
            model["pinch_off"],
            1.0 / v_early if v_early else 0.0,
        ),
    )


@inner_kernel
def evaluate(span, numbers, arguments, exp_slopes, exp_values, tanhs, vectors, slopes, with_slopes, width):
    """Channel and gate currents and their four slopes. [A], [S]; arguments as in diode.evaluate."""
    lanes = len(width)
    for k in range(span[0]):
        at_source = (span[1] + 2 * k) * lanes
        at_drain = at_source + lanes
        p = (span[5] + 6 * k) * lanes
        o = (span[3] + 3 * k) * lanes
        i_s = load(numbers, p, width)
        scale = load(numbers, p + 2 * lanes, width)
        factor = load(numbers, p + 3 * lanes, width)
        v_p = load(numbers, p + 4 * lanes, width)
        per_early = load(numbers, p + 5 * lanes, width)
        v_gs = load(arguments, at_source, width) * scale
        v_gd = load(arguments, at_drain, width) * scale
        v_ds = v_gs - v_gd
        x = v_gs + v_p
        y = v_gd + v_p
        x = pick_less(x, 0.0, 0.0, x)
        y = pick_less(y, 0.0, 0.0, y)
        square = factor * ((x - y) * (x + y))
        per_early = pick_less(v_ds, 0.0, 0.0 - per_early, per_early)
        growth = 1.0 + v_ds * per_early
        store(vectors, o, square * growth)
        store(vectors, o + lanes, i_s * (load(exp_values, at_source, width) - 1.0))
        store(vectors, o + 2 * lanes, i_s * (load(exp_values, at_drain, width) - 1.0))
        if with_slopes:
            s = (span[4] + 4 * k) * lanes
            bend = square * per_early
            twice = (factor + factor) * growth
            g_junction = i_s * load(numbers, p + lanes, width)
            store(slopes, s, twice * x + bend)
            store(slopes, s + lanes, 0.0 - (twice * y + bend))
            store(slopes, s + 2 * lanes, g_junction * load(exp_slopes, at_source, width))
            store(slopes, s + 3 * lanes, g_junction * load(exp_slopes, at_drain, width))
