"""Values as people write them: numbers, SI prefixes, units and the letter code of IEC 60062.

    parse_value("4.7 kohm", "ohm")  -> 4700.0
    parse_value("3n3", "F")         -> 3.3e-09
    format_value(18e-9, "F")        -> "18n"
    letter_code(4700.0, "ohm")      -> "4K7"

Every text is rebuilt as one decimal literal and converted once, so that "4n7" is the float 4.7e-9 and not
4.7 * 1e-9, which is another number. `M` is mega and `m` is milli; `F` after a number is farad, never femto.
"""

from __future__ import annotations

import datetime
import decimal
import math
import numbers
import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType

from kickrender.errors import Fault, InputError

PREFIXES: Mapping[str, int] = MappingProxyType(
    # The micro sign exists twice in Unicode, as U+00B5 and as the Greek letter; `u` is what keyboards have.
    {"f": -15, "p": -12, "n": -9, "u": -6, "\u00b5": -6, "\u03bc": -6, "m": -3, "k": 3, "M": 6, "G": 9, "T": 12}
)
_PREFIX_OF = {power: prefix for prefix, power in PREFIXES.items() if prefix.isascii()} | {0: ""}

CELSIUS_ZERO_K = decimal.Decimal("273.15")
# The device equations are fits around room temperature. The limits also catch `temperature = 25` meant in
# Celsius: a bare number is kelvin.
LOWEST_TEMPERATURE_K, HIGHEST_TEMPERATURE_K = 173.15, 473.15


@dataclass(frozen=True)
class Unit:
    """How one unit is written.

    spellings : text after the number -> power of ten it stands for.
    code : letters of IEC 60062 that may take the place of the decimal point -> power of ten.
    examples : shown when a value cannot be read.
    prefixes : the SI prefixes that may stand before a spelling, or alone. Those of another kind of part are left
        out, so that a resistor of "100n" is a fault and not a short circuit.
    silent : whether `format_value` leaves the unit off, as schematics do for parts.
    """

    spellings: Mapping[str, int]
    examples: str
    prefixes: str = ""
    code: Mapping[str, int] = field(default_factory=dict)
    silent: bool = False


_MICRO = {"u": -6, "\u00b5": -6, "\u03bc": -6}

UNITS: Mapping[str, Unit] = MappingProxyType(
    {
        "ohm": Unit(
            {"ohm": 0, "ohms": 0, "\u03a9": 0, "\u2126": 0},
            "'47k', '4.7 kohm', '4k7'",
            "mkMGT",
            {"L": -3, "R": 0, "K": 3, "k": 3, "M": 6, "G": 9, "T": 12},
            silent=True,
        ),
        "F": Unit(
            {"F": 0}, "'18n', '18 nF', '3n3'", "fpnum", {"p": -12, "n": -9, **_MICRO, "m": -3, "F": 0}, silent=True
        ),
        # The code's standard covers resistors and capacitors; inductors are marked the same way in practice.
        "H": Unit({"H": 0}, "'10m', '10 mH', '4m7'", "pnum", {"n": -9, **_MICRO, "m": -3, "H": 0}, silent=True),
        "V": Unit({"V": 0}, "'5V', '100 mV'", "pnumk"),
        "A": Unit({"A": 0}, "'2.5n', '10 fA'", "fpnum"),
        "W": Unit({"W": 0}, "'250mW'", "pnumk"),
        "S": Unit({"S": 0}, "'1mS', '100 uS'", "pnum"),
        "s": Unit({"s": 0}, "'4ms', '2 us'", "pnum"),
        "Hz": Unit({"Hz": 0}, "'100Hz', '3 MHz'", "mkMG"),
        "V/s": Unit({"V/s": 0, "V/us": 6, "V/\u00b5s": 6, "V/\u03bcs": 6}, "'13 V/us', '500k'", "mkMG"),
        "deg": Unit({"deg": 0, "\u00b0": 0}, "'90deg'"),
        "K": Unit({"K": 0, "C": 0, "\u00b0C": 0}, "'25C', '298.15K'"),
        "": Unit({"": 0}, "0.5, '200k'", "pnumkMGT"),
    }
)

CODED_UNITS = tuple(unit for unit, rule in UNITS.items() if rule.code)  # those with a letter code

# [0-9] and not \d: float() and \d also take other scripts' digits, and float() takes underscores.
_NUMBER = re.compile(r"([+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+))(?:[eE]([+-]?[0-9]{1,4}))?\s*(.*)", re.DOTALL)
_CODE = re.compile(r"([0-9]*)([^0-9\s.+-])([0-9]*)")


def parse_value(raw: object, unit: str, place: str = "value") -> float:
    """The value of a number or text, in SI units.

    Parameters
    ----------
    raw : number or str
        A number is taken as it stands; a text is a number with an optional SI prefix and unit ("4.7 kohm"), or
        a letter code of IEC 60062 ("4k7"). A tolerance letter after a code is not read.
    unit : str
        A key of `UNITS`. For "K" a text may be in degrees Celsius ("25C").
    place : str
        What the fault names when the value cannot be read.

    Raises
    ------
    InputError
        Not a number, not finite, or a unit that is not the field's own.
    """
    if unit == "K":
        return parse_temperature(raw, place)
    if isinstance(raw, str):
        return _finite(_literal(raw, unit, place), raw, unit, place)
    return _number(raw, unit, place)


def parse_temperature(raw: object, place: str = "temperature") -> float:
    """The temperature in kelvin of "25C", "298.15K" or a bare number of kelvin.

    Raises InputError for anything else, and outside -100 C to 200 C, where the device equations are not used.
    """
    if isinstance(raw, str):
        match = _NUMBER.fullmatch(raw.strip())
        spelling = match.group(3) if match else ""
        kelvin = _finite(_literal(raw, "K", place), raw, "K", place)
        if spelling in ("C", "\u00b0C") and match:
            digits = decimal.Decimal(f"{match.group(1)}e{match.group(2) or 0}")
            kelvin = float(digits + CELSIUS_ZERO_K)
    else:
        kelvin = _number(raw, "K", place)
    if not LOWEST_TEMPERATURE_K <= kelvin <= HIGHEST_TEMPERATURE_K:
        raise InputError(Fault(place, f"{shown(raw)} is {kelvin:g} K", "-100C to 200C; a bare number is kelvin"))
    return kelvin


def parse_angle(raw: object, place: str = "angle") -> float:
    """The angle in degrees of "90deg" or a bare number of degrees."""
    return parse_value(raw, "deg", place)


def format_value(value: float, unit: str, digits: int | None = None) -> str:
    """A value as text that `parse_value` reads back: "47k", "18n", "5V", "4ms", "0.5".

    Ohm, farad and henry are left off, as schematics do. With `digits` the value is rounded to that many
    significant digits; without, the text gives back exactly the same float.
    """
    number = decimal.Decimal(repr(float(value)))
    if digits is not None:
        number = decimal.Context(prec=digits).plus(number)
    name = "" if UNITS[unit].silent else unit
    if number == 0:
        return f"0{name}"
    powers = (0, *(PREFIXES[prefix] for prefix in UNITS[unit].prefixes if unit))
    exponent = min(max(3 * (number.adjusted() // 3), min(powers)), max(powers))
    mantissa = f"{number.scaleb(-exponent):f}"
    if len(mantissa) > 30:
        return f"{number.normalize()}{name}"
    if "." in mantissa:
        mantissa = mantissa.rstrip("0").rstrip(".")
    return f"{mantissa}{_PREFIX_OF[exponent]}{name}"


def letter_code(value: float, unit: str) -> str:
    """A value above zero in the letter code of IEC 60062, as a part is marked: "4K7", "R47", "3n3", "1M0".

    The letter stands where the decimal point would, behind one to three digits; below the smallest letter (R, p, n) in
    front of them. At least two characters beside the letter's place are written, as in "1K0" and "R10", but "10K".
    `parse_value` reads back exactly the same float.

    Parameters
    ----------
    unit : str
        "ohm", "F" or "H" (inductors are marked alike in practice).
    """
    letters = {power: letter for letter, power in UNITS[unit].code.items() if letter not in "Lku\u03bc"}
    if unit == "ohm":
        letters = {power: letter for power, letter in letters.items() if power >= 0}
    number = decimal.Decimal(repr(float(value)))
    power = min(max(3 * (number.adjusted() // 3), min(letters)), max(letters))
    whole, _, part = f"{number.scaleb(-power):f}".partition(".")
    whole, part = whole if int(whole) else "", part.rstrip("0")
    return f"{whole}{letters[power]}{part.ljust(2 - len(whole), '0')}"


def shown(raw: object) -> str:
    """How a fault quotes what was found: as TOML writes it, tables and lists by name."""
    if isinstance(raw, bool):
        return "true" if raw else "false"
    if isinstance(raw, dict):
        return "a table"
    if isinstance(raw, list):
        return "a list" if raw else "an empty list"
    if isinstance(raw, float):
        return repr(float(raw))  # subclasses of other libraries show their own names
    text = str(raw) if isinstance(raw, datetime.date | datetime.time) else repr(raw)
    return text if len(text) <= 60 else text[:57] + "..."


def _number(raw: object, unit: str, place: str) -> float:
    if isinstance(raw, bool) or not isinstance(raw, numbers.Real):
        raise _unreadable(f"{shown(raw)} is not a number", unit, place)
    try:
        value = float(raw)
    except OverflowError:
        value = math.inf
    return _finite(value, raw, unit, place)


def _finite(value: float, raw: object, unit: str, place: str) -> float:
    if not math.isfinite(value):
        raise _unreadable(f"{shown(raw)} is not finite", unit, place)
    return value + 0.0  # -0.0 becomes 0.0: one zero, one digest


def _literal(raw: str, unit: str, place: str) -> float:
    text = raw.strip()
    rule = UNITS[unit]
    code = _CODE.fullmatch(text)
    if code and (code.group(1) or code.group(3)):
        whole, letter, part = code.groups()
        if letter in rule.code:
            return float(f"{whole or 0}.{part or 0}e{rule.code[letter]}")
        # Without digits behind it only R or L must be a code's; other letters may be a prefix or a unit.
        if (part or letter in "RL") and any(letter in other.code for other in UNITS.values()):
            raise _unreadable(f"{shown(raw)} is a letter code that does not go with {unit or 'numbers'}", unit, place)
    match = _NUMBER.fullmatch(text)
    if match is None:
        raise _unreadable(f"{shown(raw)} is not a value", unit, place)
    mantissa, exponent, rest = match.groups()
    power = _power(rest, unit)
    if power is None:
        raise _unreadable(f"{shown(raw)} {_complaint(rest, unit)}", unit, place)
    if power and exponent and rest not in rule.spellings:
        raise _unreadable(f"{shown(raw)} has both an exponent and a prefix", unit, place)
    return float(f"{mantissa}e{int(exponent or 0) + power}")


def _power(rest: str, unit: str) -> int | None:
    """The power of ten that prefix and unit stand for; None when they are not this unit's."""
    rule = UNITS[unit]
    if rest == "":
        return 0
    if rest in rule.spellings:
        return rule.spellings[rest]
    spelling = rest[1:]
    if spelling and spelling not in rule.spellings:
        return None
    # Both micro signs are `u`; `K` is kilo where the letter code has it (resistors), elsewhere it would be kelvin.
    prefix = "k" if rest[0] == "K" and "K" in rule.code else _PREFIX_OF.get(PREFIXES.get(rest[0], 0), "")
    if not prefix or prefix not in rule.prefixes:
        return None
    return PREFIXES[prefix] + rule.spellings.get(spelling, 0)


def _complaint(rest: str, unit: str) -> str:
    """What is wrong with a text that is a number and something else."""
    for other, rule in UNITS.items():
        named = [spelling for spelling in rule.spellings if spelling and rest.endswith(spelling)]
        if other != unit and named and _power(rest, other) is not None:
            return f"has the unit {named[0]}" + (f", not {unit}" if unit else "; this is a plain number")
    if rest and rest[0] in PREFIXES and (rest[1:] == "" or rest[1:] in UNITS[unit].spellings):
        return f"has the prefix {rest[0]}, which does not go with {unit or 'a plain number'}"
    return f"has an unknown prefix or unit {rest!r}"


def _unreadable(found: str, unit: str, place: str) -> InputError:
    examples = UNITS[unit].examples
    return InputError(
        Fault(place, found, f"a value in {unit} ({examples})" if unit else f"a plain number ({examples})")
    )
