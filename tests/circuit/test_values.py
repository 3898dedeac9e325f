"""Values as people write them."""

import math
from decimal import Decimal

import pytest
from hypothesis import given
from hypothesis import strategies as st

from kickrender.circuit.values import (
    PREFIXES,
    UNITS,
    format_value,
    letter_code,
    parse_angle,
    parse_temperature,
    parse_value,
    shown,
)
from kickrender.errors import InputError

READ = [
    (47_000, "ohm", 47_000.0),
    ("47k", "ohm", 47e3),
    ("4.7 kohm", "ohm", 4.7e3),
    (" 4.7kohm ", "ohm", 4.7e3),
    ("4k7", "ohm", 4.7e3),
    ("1M0", "ohm", 1e6),
    ("1 Mohm", "ohm", 1e6),
    ("1\u00a0Mohm", "ohm", 1e6),
    ("R47", "ohm", 0.47),
    ("330R", "ohm", 330.0),
    ("1 m\u03a9", "ohm", 1e-3),
    ("1e3 ohm", "ohm", 1e3),
    ("18nF", "F", 18e-9),
    ("18n", "F", 18e-9),
    ("3n3", "F", 3.3e-9),
    ("2F", "F", 2.0),
    ("1 fF", "F", 1e-15),
    ("4u7", "F", 4.7e-6),
    ("4.7 \u00b5F", "F", 4.7e-6),
    ("4.7 \u03bcF", "F", 4.7e-6),
    ("10m", "H", 10e-3),
    ("4m7", "H", 4.7e-3),
    ("-12V", "V", -12.0),
    ("+.5V", "V", 0.5),
    ("5.V", "V", 5.0),
    ("-0V", "V", 0.0),
    ("100 mV", "V", 0.1),
    ("2us", "s", 2e-6),
    ("4 ms", "s", 4e-3),
    ("3MHz", "Hz", 3e6),
    ("13 V/us", "V/s", 13e6),
    ("0.5V/\u00b5s", "V/s", 0.5e6),
    ("500k", "V/s", 500e3),
    ("2.5n", "A", 2.5e-9),
    ("200k", "", 200e3),
    (0.5, "", 0.5),
    ("90deg", "deg", 90.0),
    ("25C", "K", 298.15),
]


@pytest.mark.parametrize(("raw", "unit", "value"), READ)
def test_reads(raw: object, unit: str, value: float) -> None:
    read = parse_value(raw, unit)
    assert read == value
    assert math.copysign(1.0, read) == math.copysign(1.0, value)


REFUSED = [
    ("", "ohm", "'' is not a value"),
    (" ", "ohm", "' ' is not a value"),
    ("K", "ohm", "'K' is not a value"),
    ("R", "ohm", "'R' is not a value"),
    (".", "ohm", "'.' is not a value"),
    ("4K7K7", "ohm", "unknown prefix or unit 'K7K7'"),
    ("4K7.5", "ohm", "unknown prefix or unit 'K7.5'"),
    ("-4K7", "ohm", "unknown prefix or unit 'K7'"),
    ("4 K7", "ohm", "unknown prefix or unit 'K7'"),
    ("4.7R", "ohm", "unknown prefix or unit 'R'"),
    ("1e3K", "ohm", "both an exponent and a prefix"),
    ("1_000", "ohm", "unknown prefix or unit '_000'"),
    ("\u0664K7", "ohm", "is not a value"),
    ("4\u0667", "ohm", "unknown prefix or unit"),
    ("nan", "ohm", "'nan' is not a value"),
    ("inf", "ohm", "'inf' is not a value"),
    ("1e999", "ohm", "'1e999' is not finite"),
    ("1e99999", "ohm", "unknown prefix or unit"),
    (math.nan, "ohm", "nan is not finite"),
    (math.inf, "V", "inf is not finite"),
    (10**400, "V", "is not finite"),
    (True, "ohm", "true is not a number"),
    (None, "ohm", "None is not a number"),
    ([1], "ohm", "a list is not a number"),
    ("4F", "ohm", "'4F' has the unit F, not ohm"),
    ("18 nF", "H", "'18 nF' has the unit F, not H"),
    ("47K", "F", "'47K' has the unit K, not F"),
    ("4n7", "ohm", "'4n7' is a letter code that does not go with ohm"),
    ("p33", "ohm", "'p33' is a letter code that does not go with ohm"),
    ("R47", "F", "'R47' is a letter code that does not go with F"),
    ("33p", "ohm", "'33p' has the prefix p, which does not go with ohm"),
    ("100 nohm", "ohm", "'100 nohm' has the prefix n, which does not go with ohm"),
    ("47k", "F", "'47k' has the prefix k, which does not go with F"),
    ("4M", "s", "'4M' has the prefix M, which does not go with s"),
    ("4k7", "F", "is a letter code that does not go with F"),
    ("3V3", "V", "unknown prefix or unit 'V3'"),
    ("4k7", "V", "is a letter code that does not go with V"),
    ("5V", "s", "has the unit V, not s"),
    ("5V", "", "'5V' has the unit V; this is a plain number"),
    ("5 m V", "V", "unknown prefix or unit 'm V'"),
    ("5 kdeg", "deg", "has the prefix k, which does not go with deg"),
    ("1rad", "deg", "unknown prefix or unit 'rad'"),
]


@pytest.mark.parametrize(("raw", "unit", "found"), REFUSED)
def test_refuses(raw: object, unit: str, found: str) -> None:
    with pytest.raises(InputError) as caught:
        parse_value(raw, unit, "parts.R1.value")
    (fault,) = caught.value.faults
    assert found in fault.found
    assert fault.place == "parts.R1.value"
    assert fault.allowed.startswith(f"a value in {unit}" if unit else "a plain number")


@pytest.mark.parametrize(("raw", "kelvin"), [("25C", 298.15), ("-40 \u00b0C", 233.15), ("0C", 273.15), (300, 300.0)])
def test_reads_temperatures(raw: object, kelvin: float) -> None:
    assert parse_temperature(raw) == kelvin


@pytest.mark.parametrize("raw", [25, "25", "300C", "-101C", "25F", "77 deg"])
def test_refuses_temperatures(raw: object) -> None:
    with pytest.raises(InputError, match="-100C to 200C|a value in K"):
        parse_temperature(raw)


def test_angles_are_degrees() -> None:
    assert parse_angle("45deg") == parse_angle(45) == parse_angle("45\u00b0") == 45.0


WRITTEN = [
    (47e3, "ohm", "47k"),
    (4.7e3, "ohm", "4.7k"),
    (18e-9, "F", "18n"),
    (10e-3, "H", "10m"),
    (5.0, "V", "5V"),
    (-0.1, "V", "-100mV"),
    (4e-3, "s", "4ms"),
    (13e6, "V/s", "13MV/s"),
    (0.0, "V", "0V"),
    (0.5, "", "0.5"),
    (200e3, "", "200000"),
    (1e-21, "F", "0.000001f"),
    (1e-60, "F", "1E-60"),
    (1e60, "V", "1E+60V"),
    (5000.0, "s", "5000s"),
    (1e-6, "ohm", "0.001m"),
    (298.15, "K", "298.15K"),
    (90.0, "deg", "90deg"),
]


@pytest.mark.parametrize(("value", "unit", "text"), WRITTEN)
def test_writes(value: float, unit: str, text: str) -> None:
    assert format_value(value, unit) == text


def test_writes_rounded() -> None:
    assert format_value(1e3 / 3.0, "ohm", digits=4) == "333.3"
    assert format_value(999.96, "ohm", digits=4) == "1k"
    assert format_value(0.1 + 0.2, "V", digits=3) == "300mV"


@given(st.floats(allow_nan=False, allow_infinity=False), st.sampled_from([unit for unit in UNITS if unit != "K"]))
def test_what_is_written_reads_back_exactly(value: float, unit: str) -> None:
    assert parse_value(format_value(value, unit), unit) == value


@given(st.floats(1e-15, 1e15), st.sampled_from(["ohm", "F", "H"]))
def test_a_letter_code_reads_back_exactly(value: float, unit: str) -> None:
    assert parse_value(letter_code(value, unit), unit) == value


@given(
    st.decimals(min_value="0.001", max_value="9999", places=3),
    st.sampled_from([(prefix, unit) for unit, rule in UNITS.items() for prefix in rule.prefixes]),
)
def test_a_prefix_moves_the_decimal_point(number: Decimal, prefix_and_unit: tuple[str, str]) -> None:
    """The float nearest to the exact decimal value, never the product of two rounded floats."""
    prefix, unit = prefix_and_unit
    exact = float(number.scaleb(PREFIXES[prefix]))
    assert parse_value(f"{number}{prefix}", unit) == exact
    assert parse_value(f"{number} {prefix}{unit}", unit) == exact


@given(st.integers(0, 9999), st.integers(0, 999), st.sampled_from("pnum"))
def test_a_code_letter_is_a_decimal_point(whole: int, part: int, letter: str) -> None:
    exact = float(Decimal(f"{whole}.{part}").scaleb(PREFIXES[letter]))
    assert parse_value(f"{whole}{letter}{part}", "F") == exact


def test_the_product_of_floats_would_not_do() -> None:
    assert parse_value("4n7", "F") == 4.7e-9 != 4.7 * 1e-9


def test_faults_quote_as_the_file_writes() -> None:
    assert [shown(raw) for raw in (True, {}, [], [1], "x")] == ["true", "a table", "an empty list", "a list", "'x'"]
    assert len(shown("x" * 500)) == 60
