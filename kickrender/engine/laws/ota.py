"""Transconductance amplifier: a current output whose size a bias current sets.

    i_o = i_b (tanh((v_p - v_m)/(2 V_T)) - exp((v_o - V_hi)/50 mV) + exp((V_lo - v_o)/50 mV))
    i_b = I_s (exp(v_b/(n V_T)) - 1),  v_b from the terminal `bias` to the lower rail

i_o flows out of `out`. The bias terminal is a junction above the lower rail; whatever current is fed into it is the
largest the output can give, both ways. V_hi and V_lo are the rails less headroom: there the output current of a fully
driven amplifier falls to nothing, as its output transistors saturate. Inputs and upper rail draw no current, the
lower rail takes the bias current; without bias the output is open.

Source: the tanh law of a bipolar differential pair (P. R. Gray and R. G. Meyer, Analysis and Design of Analog
Integrated Circuits, chapter 3; from memory) behind ideal current mirrors. The limits are the project's own and, like
the op-amp's, do not follow temperature. Mirror errors, input current, output resistance and poles are left out.
"""

from __future__ import annotations

from kickrender.circuit import exact
from kickrender.circuit.records import ResolvedPart
from kickrender.engine.compile import inner_kernel
from kickrender.engine.lanes import load, store
from kickrender.engine.laws.opamp import KNEE_V
from kickrender.engine.physics import MINIMUM_CONDUCTANCE_S, saturation_current, thermal_voltage
from kickrender.engine.stamps import Device, Stamps

# The bias junction is written as K exp(v_b/(n V_T) + ln(I_s/K)), so that the exponential goes over into its straight
# line at a current of this size. The search for a rest state begins with the whole supply across the junction, and
# from the straight line it is a few steps to a bias current; from 1e20 A it would be a hundred.
_STRAIGHT_ABOVE_A = 10.0
_HIGHEST_ARGUMENT = 80.0  # where that line begins


def stamp(part: ResolvedPart, stamps: Stamps) -> None:
    """Current out of `out`, and the bias current into the lower rail."""
    assert part.model is not None
    model = part.model.values
    plus, minus, bias, out, high, low = (
        part.terminals[role] for role in ("plus", "minus", "bias", "out", "rail_high", "rail_low")
    )
    stamps.conductance(bias, low, MINIMUM_CONDUCTANCE_S, typical=MINIMUM_CONDUCTANCE_S)
    v_t = thermal_voltage(stamps.temperature_k)
    per_scale = 1.0 / (model["ideality"] * v_t)
    i_s = saturation_current(model, stamps.temperature_k)
    k = _STRAIGHT_ABOVE_A * exact.exp(-_HIGHEST_ARGUMENT)
    stamps.device(
        Device(
            law="ota",
            exponentials=((bias, low), (out, high), (low, out)),
            tanhs=((plus, minus, out),),
            outputs=2,  # out of `out`, into `bias`
            flows=((out, 0, 1.0), (bias, 1, -1.0), (low, 1, 1.0)),
            slopes=5,  # of minus i_o: by v_p - v_m, by v_b, by each limit; of the bias current
            derivatives=(
                (out, plus, 0, 1.0),
                (out, minus, 0, -1.0),
                (out, bias, 1, 1.0),
                (out, low, 1, -1.0),
                (out, out, 2, 1.0),
                (out, high, 2, -1.0),
                (out, out, 3, 1.0),
                (out, low, 3, -1.0),
                (bias, bias, 4, 1.0),
                (bias, low, 4, -1.0),
                (low, bias, 4, -1.0),
                (low, low, 4, 1.0),
            ),
            parameters=5,
            typical_slopes=(
                (0.0, 0.0, 0.0, 1e-3, 1e-6),
                (-1e-4, -1e-4, 0.0, 0.0, 1e-4),
                (0.0, -1e-2, 1e-2, 0.0, 1e-2),
            ),
        ),
        exponentials=(
            per_scale,
            exact.log(i_s / k),
            1.0 / KNEE_V,
            model["headroom_high"] / KNEE_V,
            1.0 / KNEE_V,
            model["headroom_low"] / KNEE_V,
        ),
        tanhs=(1.0 / (2.0 * v_t), 0.0),
        parameters=(i_s, k, k * per_scale, 1.0 / (2.0 * v_t), 1.0 / KNEE_V),
    )


@inner_kernel
def evaluate(span, numbers, arguments, exp_slopes, exp_values, tanhs, vectors, slopes, with_slopes, width):
    """Output and bias current and their five slopes. [A], [S]; arguments as in diode.evaluate."""
    lanes = len(width)
    for k in range(span[0]):
        e = (span[1] + 3 * k) * lanes
        p = (span[5] + 5 * k) * lanes
        o = (span[3] + 2 * k) * lanes
        t = load(tanhs, (span[2] + k) * lanes, width)
        share = t + (load(exp_values, e + 2 * lanes, width) - load(exp_values, e + lanes, width))
        i_b = load(numbers, p + lanes, width) * load(exp_values, e, width) - load(numbers, p, width)
        store(vectors, o, i_b * share)
        store(vectors, o + lanes, i_b)
        if with_slopes:
            s = (span[4] + 5 * k) * lanes
            g_b = load(numbers, p + 2 * lanes, width) * load(exp_slopes, e, width)
            per_knee = i_b * load(numbers, p + 4 * lanes, width)
            store(slopes, s, 0.0 - i_b * load(numbers, p + 3 * lanes, width) * (1.0 - t * t))
            store(slopes, s + lanes, 0.0 - g_b * share)
            store(slopes, s + 2 * lanes, per_knee * load(exp_slopes, e + lanes, width))
            store(slopes, s + 3 * lanes, per_knee * load(exp_slopes, e + 2 * lanes, width))
            store(slopes, s + 4 * lanes, g_b)
