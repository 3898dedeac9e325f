"""The table of laws: every part kind's equation file.

`STAMPS` has one row per part kind. `LAWS` lists the nonlinear laws in the order in which their devices lie in
memory; `evaluate` calls them in that order.
"""

from __future__ import annotations

from kickrender.engine.compile import inner_kernel
from kickrender.engine.laws import controlled, diode, jfet, linear, opamp, ota, transistor, windings, zener

STAMPS = {
    "resistor": linear.stamp_resistance,
    "switch": linear.stamp_resistance,
    "pot": linear.stamp_pot,
    "capacitor": linear.stamp_capacitor,
    "inductor": linear.stamp_inductor,
    "diode": diode.stamp,
    "npn": transistor.stamp,
    "pnp": transistor.stamp,
    "opamp": opamp.stamp,
    "n-jfet": jfet.stamp,
    "p-jfet": jfet.stamp,
    "zener": zener.stamp,
    "ota": ota.stamp,
    "transformer": windings.stamp,
    "controlled-voltage": controlled.stamp_voltage,
    "controlled-current": controlled.stamp_current,
}

LAWS = ("diode", "transistor", "jfet", "zener", "ota", "opamp")
SEPARATE = ("opamp",)  # its exponentials, limits that are seldom reached, start a block of their own


@inner_kernel
def evaluate(spans, numbers, arguments, exp_slopes, exp_values, tanhs, vectors, slopes, with_slopes, width):
    """Outputs and slopes of every device; spans of shape (len(LAWS), 6), the rest as in diode.evaluate."""
    diode.evaluate(spans[0], numbers, arguments, exp_slopes, exp_values, tanhs, vectors, slopes, with_slopes, width)
    transistor.evaluate(
        spans[1], numbers, arguments, exp_slopes, exp_values, tanhs, vectors, slopes, with_slopes, width
    )
    jfet.evaluate(spans[2], numbers, arguments, exp_slopes, exp_values, tanhs, vectors, slopes, with_slopes, width)
    zener.evaluate(spans[3], numbers, arguments, exp_slopes, exp_values, tanhs, vectors, slopes, with_slopes, width)
    ota.evaluate(spans[4], numbers, arguments, exp_slopes, exp_values, tanhs, vectors, slopes, with_slopes, width)
    opamp.evaluate(spans[5], numbers, arguments, exp_slopes, exp_values, tanhs, vectors, slopes, with_slopes, width)
