"""Elementary functions for part values against mpmath, an independent implementation."""

import math

import mpmath
import pytest
from hypothesis import given
from hypothesis import strategies as st

from kickrender.circuit import exact

mpmath.mp.prec = 200


@given(st.floats(-700, 700))
def test_exp(x: float) -> None:
    assert exact.exp(x) == float(mpmath.exp(x))


@given(st.floats(1e-300, 1e300))
def test_log(x: float) -> None:
    assert exact.log(x) == float(mpmath.log(x))


@given(st.floats(1e-3, 1e3), st.floats(-50, 50))
def test_power(base: float, exponent: float) -> None:
    assert exact.power(base, exponent) == float(mpmath.power(base, exponent))


def test_ends() -> None:
    assert exact.exp(-1e6) == 0.0
    assert exact.exp(1e6) == math.inf
    assert exact.power(81.0, 0.0) == 1.0
    assert exact.power(81.0, 0.5) == 9.0
    with pytest.raises(ArithmeticError):
        exact.log(-1.0)
