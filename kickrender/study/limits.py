"""Limits that a sound has to keep, as they are given on a command line: "pitch=48..52Hz", "decay=400..600ms"."""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from dataclasses import dataclass

from kickrender.errors import Fault, InputError, nearest_name
from kickrender.study.aspects import ASPECTS

_END = re.compile(r"([+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]{1,3})?)?\s*([A-Za-z%]*)")


KEPT, BELOW, ABOVE, NONE = "kept", "below", "above", "no value"


@dataclass(frozen=True)
class Limit:
    """Bounds of one aspect, both included; infinite where there is none.

    relative : whether they count from the value of exact parts, in the unit of a change.
    text : as it was given.
    """

    aspect: str
    low: float
    high: float
    relative: bool = False
    text: str = ""

    def verdict(self, value: float | None, exact: float | None) -> str:
        """KEPT, or how a value misses: BELOW, ABOVE, or NONE, where there is none. `exact` is that of exact parts."""
        if self.relative and value is not None:
            value = None if exact is None else ASPECTS[self.aspect].change(exact, value)
        if value is None:
            return NONE
        return BELOW if value < self.low else ABOVE if value > self.high else KEPT


def read_limits(texts: Sequence[str], place: str) -> tuple[Limit, ...]:
    """Limits from texts `NAME=LOW..HIGH UNIT`, of which one end may be left out.

    A unit behind one end counts for both; without any it is the aspect's own. Cents of a pitch and dB of a loudness
    count from what exact parts give: "pitch=-20..20cents".

    Raises
    ------
    InputError
        With every fault: an aspect nobody measures, no range, another unit, nothing between the ends, one given twice.
    """
    faults: list[Fault] = []
    limits: dict[str, Limit] = {}
    for text in texts:
        name, equals, span = (piece.strip() for piece in text.partition("="))
        if not equals or not name:
            faults.append(Fault(place, f"'{text}'", "NAME=LOW..HIGH, for instance pitch=48..52Hz"))
        elif name not in ASPECTS:
            found = f"nothing called '{name}' is measured"
            faults.append(Fault(f"{place} {text}", found, ", ".join(ASPECTS), nearest_name(name, ASPECTS)))
        elif name in limits:
            faults.append(Fault(f"{place} {text}", f"a second limit of {name}", "one limit each, LOW..HIGH"))
        else:
            try:
                limits[name] = _read(name, span, f"{place} {text}")
            except InputError as error:
                faults += error.faults
    if faults:
        raise InputError(faults)
    return tuple(limits.values())


def _read(name: str, span: str, place: str) -> Limit:
    aspect = ASPECTS[name]
    units = dict.fromkeys((*aspect.scales, aspect.change_unit))
    example = f"{name}=LOW..HIGH{aspect.unit}, where one end may be left out"
    ends = [_END.fullmatch(end.strip()) for end in span.split("..")]
    if len(ends) != 2 or None in ends:
        raise InputError(Fault(place, f"'{span}' is no range", example))
    (low, low_unit), (high, high_unit) = (end.groups() for end in ends if end)
    if low is None and high is None:
        raise InputError(Fault(place, f"'{span}' has neither end", example))
    unit_low, unit_high = low_unit or high_unit or aspect.unit, high_unit or low_unit or aspect.unit
    for unit in dict.fromkeys((unit_low, unit_high)):
        if unit not in units:
            raise InputError(
                Fault(place, f"{name} is not measured in {unit}", " or ".join(units), nearest_name(unit, units))
            )
    if (unit_low in aspect.scales) != (unit_high in aspect.scales):
        raise InputError(Fault(place, f"one end in {unit_low}, the other in {unit_high}", "both ends alike"))
    bounds = [
        sign * math.inf if number is None else float(number) * aspect.scales.get(unit, 1.0)
        for sign, number, unit in ((-1.0, low, unit_low), (1.0, high, unit_high))
    ]
    if bounds[0] >= bounds[1]:
        raise InputError(Fault(place, f"nothing lies between {low} and {high}", "LOW below HIGH"))
    return Limit(name, bounds[0], bounds[1], unit_low not in aspect.scales, f"{name}={span}")
