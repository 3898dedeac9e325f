"""Elementary functions that give the same bits on every machine.

Part values end up in samples, so none of them may come from a C library's exp, log or pow, which differ in the
last bit between versions. Python's `decimal` computes these from integer arithmetic alone; 50 digits, rounded once to
the nearest float, are correctly rounded short of a tie no known argument comes near. Slow (tens of microseconds),
hence cached, and only for what happens once per hit: tapers, laws, temperatures, gains.
"""

from __future__ import annotations

import decimal
from functools import lru_cache

# More exponent than the default, so that a steep temperature law underflows to zero instead of raising.
_CONTEXT = decimal.Context(
    prec=50, Emax=decimal.MAX_EMAX, Emin=decimal.MIN_EMIN, traps=[decimal.InvalidOperation, decimal.Overflow]
)


@lru_cache(maxsize=4096)
def exp(x: float) -> float:
    """e to the power x, correctly rounded; infinity above the largest float."""
    return float(_CONTEXT.exp(decimal.Decimal(x)))


@lru_cache(maxsize=4096)
def log(x: float) -> float:
    """Natural logarithm of x > 0, correctly rounded."""
    return float(_CONTEXT.ln(decimal.Decimal(x)))


@lru_cache(maxsize=4096)
def power(base: float, exponent: float) -> float:
    """base > 0 to the power exponent, correctly rounded."""
    return float(_CONTEXT.power(decimal.Decimal(base), decimal.Decimal(exponent)))
