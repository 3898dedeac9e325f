"""Preferred numbers of IEC 60063: the values in which parts are made."""

from __future__ import annotations

import math
from collections.abc import Mapping
from types import MappingProxyType

from kickrender.circuit.values import shown
from kickrender.errors import Fault, InputError, nearest_name

_E24 = (
    *(1.0, 1.1, 1.2, 1.3, 1.5, 1.6, 1.8, 2.0, 2.2, 2.4, 2.7, 3.0),
    *(3.3, 3.6, 3.9, 4.3, 4.7, 5.1, 5.6, 6.2, 6.8, 7.5, 8.2, 9.1),
)


def _rounded(count: int) -> tuple[float, ...]:
    """A series of three digits: 10^(k/count), rounded, but for one value that the standard sets by hand."""
    return tuple(9.2 if 192 * k // count == 185 else round(10.0 ** (k / count), 2) for k in range(count))


# Series -> its values from 1 to below 10. The coarser ones of two digits leave out every second value of the finer.
SERIES: Mapping[str, tuple[float, ...]] = MappingProxyType(
    {
        "E3": _E24[::8],
        "E6": _E24[::4],
        "E12": _E24[::2],
        "E24": _E24,
        "E48": _rounded(48),
        "E96": _rounded(96),
        "E192": _rounded(192),
    }
)


def read_series(raw: object, place: str) -> str:
    """The name of a series, in either case; raises InputError for any other word."""
    name = raw.strip().upper() if isinstance(raw, str) else ""
    if name not in SERIES:
        found = f"no series {shown(raw)}"
        raise InputError(Fault(place, found, ", ".join(SERIES), nearest_name(name, SERIES)))
    return name


def values_between(series: str, low: float, high: float) -> list[float]:
    """Every value of a series from `low` to `high`, both above 0, rising; each the float nearest to its decimal."""
    decades = range(math.floor(math.log10(low)) - 1, math.floor(math.log10(high)) + 2)
    every = (float(f"{number}e{decade}") for decade in decades for number in SERIES[series])
    return [value for value in every if low <= value <= high]
