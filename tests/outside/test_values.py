"""Values against IEC 60062 (letter-and-digit codes) and IEC 60063 (preferred numbers).

Data: data/preferred_values.json, a hand-made table of codes with the values the standards give them. Rows marked
"common" are common practice, with no source.
"""

import json
from decimal import Decimal
from pathlib import Path

import pytest

from kickrender.circuit.series import SERIES
from kickrender.circuit.values import format_value, letter_code, parse_value
from kickrender.errors import InputError

DATA = json.loads(Path(__file__).with_name("data").joinpath("preferred_values.json").read_text("utf-8"))
UNIT = {"resistance": "ohm", "capacitance": "F"}
CODES = [(UNIT[kind], code, value) for kind, rows in DATA["decode"].items() for code, value, _ in rows]
POWERS = {"R": 0, "K": 3, "M": 6, "G": 9, "T": 12, "p": -12, "n": -9, "\u00b5": -6, "m": -3}


@pytest.mark.parametrize(("unit", "code", "value"), CODES)
def test_decodes_letter_codes(unit: str, code: str, value: float) -> None:
    """IEC 60062, table of codes for resistance and capacitance: the float nearest to the decimal value."""
    assert parse_value(code, unit) == value


@pytest.mark.parametrize("series", DATA["series"])
@pytest.mark.parametrize(("unit", "letter"), [("ohm", "RKMGT"[i]) for i in range(5)] + [("F", c) for c in "pn\u00b5m"])
def test_decodes_every_preferred_value(series: str, unit: str, letter: str) -> None:
    """IEC 60063 series in the code of IEC 60062, the letter in each place: the float nearest to the decimal value."""
    for preferred in DATA["series"][series]:
        digits = Decimal(str(preferred))
        for shift in (0, 1, 2):
            number = f"{digits.scaleb(shift):f}"
            whole, _, part = number.partition(".")
            expected = float(Decimal(number).scaleb(POWERS[letter]))
            assert parse_value(f"{whole}{letter}{part.rstrip('0')}", unit) == expected
            assert parse_value(format_value(expected, unit), unit) == expected


@pytest.mark.parametrize(("unit", "other"), [("ohm", "F"), ("F", "ohm")])
def test_refuses_codes_of_the_other_kind(unit: str, other: str) -> None:
    """IEC 60062 gives resistance and capacitance letters of their own; only m (milliohm by SI) reads as either."""
    codes = [code for of, code, _ in CODES if of == other and not set(code) & {"m", "M", "G"}]
    assert len(codes) >= 10
    for code in codes:
        with pytest.raises(InputError, match=f"does not go with {unit}|has the unit K, not F"):
            parse_value(code, unit)


@pytest.mark.parametrize(("code", "value", "tolerance"), DATA["with_tolerance"])
def test_refuses_tolerance_letters(code: str, value: float, tolerance: float) -> None:
    """IEC 60062 lets a tolerance letter follow; a circuit file has no place for a tolerance, so it is not dropped."""
    with pytest.raises(InputError, match="value: "):
        parse_value(code, "ohm")
    assert parse_value(code[:-1], "ohm") == value


# The standard's own way of writing; its older forms (n33 for 330p, L47 for R00047) are read and not written.
STANDARD = [
    (UNIT[kind], code, value)
    for kind, rows in DATA["decode"].items()
    for code, value, source in rows
    if source == "std" and value > 0.0
]
OTHER_FORMS = {"L47": "R00047", "n33": "330p", "1G": "1G0"}


@pytest.mark.parametrize(("unit", "code", "value"), STANDARD)
def test_writes_letter_codes(unit: str, code: str, value: float) -> None:
    """IEC 60062, table of codes for resistance and capacitance."""
    assert letter_code(value, unit) == OTHER_FORMS.get(code, code)


@pytest.mark.parametrize("series", DATA["series"])
@pytest.mark.parametrize("unit", ["ohm", "F", "H"])
def test_written_codes_read_back(series: str, unit: str) -> None:
    """IEC 60063 series over twelve decades: the code gives back exactly the float it was written for."""
    for preferred in DATA["series"][series]:
        for power in range(-14, 9):
            value = float(Decimal(str(preferred)).scaleb(power))
            code = letter_code(value, unit)
            assert parse_value(code, unit) == value
            assert sum(not letter.isdigit() for letter in code) == 1


@pytest.mark.parametrize("name", DATA["series"])
def test_series_are_the_standards(name: str) -> None:
    """IEC 60063, every value of every series; E192's 9.20 stands where the rounded root would be 9.19."""
    assert list(SERIES[name]) == DATA["series"][name]
