"""The engine's inner kernels, which only kernels can call, made callable from a test."""

from __future__ import annotations

from kickrender.engine import equations
from kickrender.engine.compile import kernel
from kickrender.engine.lanes import LONE, store


@kernel
def evaluate_devices(code, numbers, vectors, arguments, exp_slopes, exp_values, tanhs, slopes, with_slopes, width):
    equations.evaluate_devices(
        code, numbers, vectors, arguments, exp_slopes, exp_values, tanhs, slopes, with_slopes, width
    )


@kernel
def residual(code, numbers, coefficients, vectors, rate, rate_weight, width):
    equations.residual(code, numbers, coefficients, vectors, rate, rate_weight, width)


@kernel
def back_substitute(code, coefficients, per_pivot, vectors, solution, start, width):
    equations.back_substitute(code, coefficients, per_pivot, vectors, solution, start, width)


@kernel
def growth_of(code, coefficients, per_pivot, row_size, per_row_size, box):
    """Factorise; the growth it reports, through `box` of shape (1,)."""
    store(box, 0, equations.factorise(code, coefficients, per_pivot, row_size, per_row_size, LONE))
    return box[0]
