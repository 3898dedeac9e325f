"""Two coupled windings, up to and including perfect coupling.

    v_1 = L_1 di_1/dt + M di_2/dt,  v_2 = M di_1/dt + L_2 di_2/dt,  M = k sqrt(L_1 L_2)

v_1 and v_2 are the voltages from first to second end, i_1 and i_2 flow into the first ends.

With k = 1 these two equations say v_2 = N v_1, N = sqrt(L_2/L_1), and one of them is lost. The pair is then an ideal
transformer with the magnetising current m = i_1 + N i_2 in L_1:

    L_1 dm/dt = v_1,    tau d(v_2 - N v_1)/dt + (v_2 - N v_1) = 0

The second row is the ratio and its own rate in one. With the ratio alone, capacitors across both windings would leave
i_2 to be found from the derivative of an equation (index 2), for which the method has no order to promise; the rate
alone would lose the ratio at rest. A hit starts at rest, where v_2 = N v_1 holds, and every stage of a step solves this
linear row exactly, so that v_2 - N v_1 stays zero and tau drops out of the arithmetic.

Source: the coupled-circuit equations of any textbook; the index reduction follows J. Baumgarte, Stabilization of
constraints and integrals of motion in dynamical systems, Computer Methods in Applied Mechanics and Engineering 1
(1972), from memory. Winding resistance is left to resistors; iron losses, saturation and capacitance between the
windings are left out.
"""

from __future__ import annotations

from math import sqrt

from kickrender.circuit.records import ResolvedPart
from kickrender.engine.stamps import Stamps

RATIO_TIME_S = 1e-12  # tau; far from any other time constant, so that its pole is never taken for one of the circuit


def stamp(part: ResolvedPart, stamps: Stamps) -> None:
    """Both windings' currents, or with k = 1 the magnetising and the secondary current, are unknowns of their own."""
    l_1, l_2, k = (part.values[key] for key in ("primary_inductance", "secondary_inductance", "coupling"))
    a, b, c, d = (part.terminals[role] for role in ("primary_a", "primary_b", "secondary_a", "secondary_b"))
    second = stamps.inner(part, "secondary_current")
    for row, sign in ((c, 1.0), (d, -1.0)):
        stamps.coefficient(row, second, sign, sign)
    if k == 1.0:
        ratio = sqrt(l_2 / l_1)
        first = stamps.inner(part, "magnetising_current")
        for row, sign in ((a, 1.0), (b, -1.0)):
            stamps.coefficient(row, first, sign, sign)
            stamps.coefficient(row, second, -sign * ratio, -sign)
        for column, weight, typical in ((a, -ratio, -1.0), (b, ratio, 1.0), (c, 1.0, 1.0), (d, -1.0, -1.0)):
            stamps.coefficient(second, column, weight, typical)
            stamps.rate(second, column, weight * RATIO_TIME_S, typical * RATIO_TIME_S)
    else:
        mutual = k * sqrt(l_1 * l_2)
        first = stamps.inner(part, "primary_current")
        for row, sign in ((a, 1.0), (b, -1.0)):
            stamps.coefficient(row, first, sign, sign)
        for column, sign in ((c, -1.0), (d, 1.0)):
            stamps.coefficient(second, column, sign, sign)
        stamps.rate(first, second, mutual, typical=0.05)
        stamps.rate(second, first, mutual, typical=0.05)
        stamps.rate(second, second, l_2, typical=0.1)
    for column, sign in ((a, -1.0), (b, 1.0)):
        stamps.coefficient(first, column, sign, sign)
    stamps.rate(first, first, l_1, typical=0.1)
