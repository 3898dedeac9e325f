"""Exponential, logarithm, hyperbolic tangent and sine from + - * / and exponent bits alone.

A C library's own functions differ in the last bit from one version and processor to the next; these do not.
Every function works lane by lane on `Lanes` and is accurate to 1.5 units in the last place or better over the
range stated (tested against mpmath).
"""

from __future__ import annotations

from kickrender.engine.compile import inner_kernel, kernel
from kickrender.engine.lanes import any_less, exponent, load, mantissa, pick_less, power_of_two, store

_ROUND = 6755399441055744.0  # 1.5 * 2^52, see lanes.power_of_two
_LOG2_E = 1.4426950408889634
_LN2_HIGH = 0.6931471803691238  # 32 leading bits of ln 2, so that small multiples are exact
_LN2_LOW = 1.9082149292705877e-10
_LOWEST = -708.0  # below, the true value is under 4e-308 and of no account
_TWO_PI_HIGH = 6.283185307179586
_TWO_PI_LOW = 2.4492935982947064e-16


@inner_kernel
def exponential(x):
    """e^x for -708 <= x <= 709; smaller arguments give e^-708.

    x = k ln 2 + r with |r| <= ln 2 / 2; Taylor's polynomial of degree 13 for e^r (its remainder is below 5e-18),
    summed in pairs to shorten the chain of dependent operations.
    """
    x = pick_less(x, _LOWEST, _LOWEST, x)
    shifted = x * _LOG2_E + _ROUND
    k = shifted - _ROUND
    r = (x - k * _LN2_HIGH) - k * _LN2_LOW
    r2 = r * r
    r4 = r2 * r2
    a = 0.5 + r * (1.0 / 6.0)
    b = 1.0 / 24.0 + r * (1.0 / 120.0)
    c = 1.0 / 720.0 + r * (1.0 / 5040.0)
    d = 1.0 / 40320.0 + r * (1.0 / 362880.0)
    e = 1.0 / 3628800.0 + r * (1.0 / 39916800.0)
    f = 1.0 / 479001600.0 + r * (1.0 / 6227020800.0)
    tail = (a + r2 * b) + r4 * ((c + r2 * d) + r4 * (e + r2 * f))
    return (1.0 + (r + r2 * tail)) * power_of_two(shifted)


@inner_kernel
def hyperbolic_tangent(x):
    """tanh x for any finite x.

    Below |x| = 1: Lambert's continued fraction x/(1 + s/(3 + s/(5 + ...))), s = x^2, cut after 19 and written as
    x minus a small correction with one division. Above: 1 - 2/(e^2|x| + 1), computed only if a lane needs it.
    """
    magnitude = pick_less(x, 0.0, 0.0 - x, x)
    z = pick_less(1.0, magnitude, 1.0, magnitude)  # in this order, so that what is not a number stays so
    s = z * z
    # 3 + s/(5 + s/(7 + ...(17 + s/19))) = p/q
    p = 654729075.0 + s * (91891800.0 + s * (2837835.0 + s * (25740.0 + s * 55.0)))
    q = 218243025.0 + s * (16081065.0 + s * (289575.0 + s * (1430.0 + s)))
    small = z - z * (s * q / (p + s * q))
    result = small
    if any_less(1.0, magnitude):
        bounded = pick_less(20.0, magnitude, 20.0, magnitude)  # tanh 20 rounds to 1
        large = 1.0 - 2.0 / (exponential(bounded + bounded) + 1.0)
        result = pick_less(1.0, magnitude, large, small)
    return pick_less(x, 0.0, 0.0 - result, result)


@inner_kernel
def logarithm(x):
    """ln x for normal positive x.

    x = 2^k m with m in [sqrt(1/2), sqrt(2)); ln m = 2 artanh f, f = (m - 1)/(m + 1), |f| < 0.172, by its series
    up to f^21.
    """
    m = mantissa(x)
    k = exponent(x)
    k = pick_less(1.4142135623730951, m, k + 1.0, k)
    m = pick_less(1.4142135623730951, m, m * 0.5, m)
    d = m - 1.0
    f = d / (m + 1.0)
    s = f * f
    series = 1.0 / 13.0 + s * (1.0 / 15.0 + s * (1.0 / 17.0 + s * (1.0 / 19.0 + s * (1.0 / 21.0))))
    series = 1.0 / 3.0 + s * (1.0 / 5.0 + s * (1.0 / 7.0 + s * (1.0 / 9.0 + s * (1.0 / 11.0 + s * series))))
    # 2 artanh f = d - f d + 2 f s (1/3 + ...): d is exact, so that ln x keeps its digits near x = 1
    return k * _LN2_HIGH + (d - (f * (d - 2.0 * s * series) - k * _LN2_LOW))


@inner_kernel
def sine_of_turns(x):
    """sin(2 pi x) for |x| below 2^50, exact at quarter turns; Taylor's series of sine or cosine within 1/8 turn."""
    x = x - ((x + _ROUND) - _ROUND)  # to [-1/2, 1/2]
    x = pick_less(0.25, x, 0.5 - x, x)
    x = pick_less(x, -0.25, -0.5 - x, x)
    magnitude = pick_less(x, 0.0, 0.0 - x, x)
    y = x * _TWO_PI_HIGH
    s = y * y
    series = 1.0 / 362880.0 - s * (1.0 / 39916800.0 - s * (1.0 / 6227020800.0 - s * (1.0 / 1307674368000.0)))
    series = 1.0 / 6.0 - s * (1.0 / 120.0 - s * (1.0 / 5040.0 - s * series))
    sine = y - (y * s * series - x * _TWO_PI_LOW)
    y = (0.25 - magnitude) * _TWO_PI_HIGH
    s = y * y
    series = 1.0 / 3628800.0 - s * (1.0 / 479001600.0 - s * (1.0 / 87178291200.0 - s * (1.0 / 20922789888000.0)))
    series = 0.5 - s * (1.0 / 24.0 - s * (1.0 / 720.0 - s * (1.0 / 40320.0 - s * series)))
    cosine = 1.0 - s * series
    return pick_less(magnitude, 0.125, sine, pick_less(x, 0.0, 0.0 - cosine, cosine))


@kernel
def apply(function, source, target, width):
    """target[k] = function(source[k]); both of shape (a multiple of len(width),); `target` is changed in place."""
    for start in range(0, source.size, len(width)):
        store(target, start, function(load(source, start, width)))
