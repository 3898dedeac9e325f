"""The table of kinds: every row is whole, and pots and switches follow the contract's equations."""

import mpmath
import pytest

from kickrender.circuit.kinds import (
    KINDS,
    TERMINAL_KEYS,
    Choice,
    Flag,
    Kind,
    Quantity,
    taper_fraction,
)
from kickrender.circuit.reader import read_circuit_text
from kickrender.circuit.records import Part, ResolvedPart
from kickrender.circuit.values import UNITS
from kickrender.errors import InputError


@pytest.mark.parametrize("kind", KINDS.values(), ids=KINDS)
def test_row_is_whole(kind: Kind) -> None:
    roles = {role for wiring in kind.wirings for some in wiring.values() for role in some}
    for pairs in (kind.conducts, kind.coils, kind.ordered):
        assert {role for pair in pairs for role in pair} <= roles
    assert set(kind.drives) | set(kind.senses) <= roles
    assert not set(kind.drives) & set(kind.senses)
    assert set(kind.coils) <= set(kind.conducts)
    assert kind.setting is None or isinstance(kind.fields[kind.setting], Quantity | Flag)
    assert not set(kind.fields) & TERMINAL_KEYS, "a field and a terminal of one name could not be told apart"
    assert not {"kind", "model"} & set(kind.fields)
    for rule in (*kind.fields.values(), *kind.model.values()):
        assert rule.about
        if isinstance(rule, Quantity):
            assert rule.unit in UNITS
            assert not isinstance(rule.default, str) or rule.default in kind.model


def circuit_with(part: str) -> str:
    return f"""
    [inputs.a]
    constant = "1V"
    [parts]
    X = {part}
    R1 = {{ kind = "resistor", value = 1, between = ["a", "w"] }}
    R2 = {{ kind = "resistor", value = 1, between = ["b", "w"] }}
    R3 = {{ kind = "resistor", value = 1, between = ["b", "ground"] }}
    [output]
    net = "w"
    """


def resolved(part: str) -> ResolvedPart:
    return read_circuit_text(circuit_with(part)).resolve().parts["X"]


@pytest.mark.parametrize(
    ("part", "values", "terminals"),
    [
        ('kind = "resistor", value = "4k7", between = ["a", "b"]', {"resistance": 4700.0}, {"a": "a", "b": "b"}),
        ('kind = "capacitor", value = "1n", between = ["b", "a"]', {"capacitance": 1e-9}, {"a": "b", "b": "a"}),
        ('kind = "inductor", value = "1m", between = ["a", "b"]', {"inductance": 1e-3}, {"a": "a", "b": "b"}),
        ('kind = "switch", closed = true, between = ["a", "b"]', {"resistance": 0.01}, {"a": "a", "b": "b"}),
        ('kind = "switch", closed = false, between = ["a", "b"]', {"resistance": 1e12}, {"a": "a", "b": "b"}),
        (
            'kind = "pot", value = "1k", at = 0.25, between = ["a", "b"]',
            {"first_leg": 251.0},
            {"a": "a", "b": "b"},
        ),
        (
            'kind = "pot", value = "1k", at = 0.25, ends = ["a", "b"], wiper = "w"',
            {"first_leg": 251.0, "second_leg": 751.0},
            {"end_a": "a", "end_b": "b", "wiper": "w"},
        ),
        (
            'kind = "opamp", model = "fet-input", plus = "a", minus = "b", out = "w", rails = ["a", "ground"]',
            {},
            {"plus": "a", "minus": "b", "out": "w", "rail_high": "a", "rail_low": "ground"},
        ),
        (
            'kind = "n-jfet", model = "small-n-jfet", drain = "a", gate = "b", source = "w"',
            {},
            {"drain": "a", "gate": "b", "source": "w"},
        ),
        (
            'kind = "p-jfet", model = "small-p-jfet", drain = "a", gate = "b", source = "w"',
            {},
            {"drain": "a", "gate": "b", "source": "w"},
        ),
        ('kind = "zener", model = "small-zener", anode = "w", cathode = "a"', {}, {"anode": "w", "cathode": "a"}),
        (
            'kind = "ota", model = "transconductor", plus = "a", minus = "b", bias = "w", out = "b", '
            'rails = ["a", "ground"]',
            {},
            {"plus": "a", "minus": "b", "bias": "w", "out": "b", "rail_high": "a", "rail_low": "ground"},
        ),
        (
            'kind = "transformer", primary_inductance = 1, secondary_inductance = "10m", '
            'primary = ["w", "b"], secondary = ["b", "ground"]',
            {"primary_inductance": 1.0, "secondary_inductance": 0.01, "coupling": 1.0},
            {"primary_a": "w", "primary_b": "b", "secondary_a": "b", "secondary_b": "ground"},
        ),
        (
            'kind = "controlled-current", value = "1mS", plus = "a", minus = "b", between = ["ground", "w"]',
            {"transconductance": 1e-3},
            {"plus": "a", "minus": "b", "a": "ground", "b": "w"},
        ),
        (
            'kind = "controlled-voltage", value = -3, plus = "a", minus = "ground", out = "w"',
            {"gain": -3.0},
            {"plus": "a", "minus": "ground", "out": "w"},
        ),
    ],
)
def test_electrical_values(part: str, values: dict[str, float], terminals: dict[str, str]) -> None:
    found = resolved(f"{{ {part} }}")
    assert found.values == values
    assert found.terminals == terminals
    assert set(values) <= set(KINDS[found.kind].units)


@pytest.mark.parametrize("position", [0.0, 0.1, 1 / 3, 0.5, 0.75, 1.0])
def test_tapers_follow_their_equations(position: float) -> None:
    """log f = (81^p - 1)/80, reverse-log f = 1 - (81^(1-p) - 1)/80, computed by mpmath at 50 digits."""
    with mpmath.workdps(50):
        log = (mpmath.mpf(81) ** position - 1) / 80
        reverse = 1 - (mpmath.mpf(81) ** (1 - mpmath.mpf(position)) - 1) / 80
    assert taper_fraction("linear", position) == position
    assert taper_fraction("log", position) == pytest.approx(float(log), abs=2e-16)
    assert taper_fraction("reverse-log", position) == pytest.approx(float(reverse), abs=2e-16)


@pytest.mark.parametrize("taper", ["linear", "log", "reverse-log"])
def test_tapers_start_and_end_exactly(taper: str) -> None:
    assert taper_fraction(taper, 0.0) == 0.0
    assert taper_fraction(taper, 1.0) == 1.0


@pytest.mark.parametrize("taper", ["log", "reverse-log"])
def test_the_middle_of_a_log_taper_is_a_tenth_of_the_track(taper: str) -> None:
    """Common practice: a log pot has 10 % of its resistance on one side of the middle."""
    middle = taper_fraction(taper, 0.5)
    assert min(middle, 1 - middle) == pytest.approx(0.1, abs=1e-15)


def test_legs_of_a_pot_add_up_to_its_track_and_two_ends() -> None:
    row = KINDS["pot"]
    for at in (0.0, 0.3, 1.0):
        part = Part("P", "pot", {"end_a": "a", "end_b": "b", "wiper": "w"}, {"value": 100e3, "at": at}, "log")
        legs = row.electrical(part)
        assert legs["first_leg"] + legs["second_leg"] == pytest.approx(100e3 + 2.0, rel=1e-15)
        assert min(legs.values()) >= 1.0


@pytest.mark.parametrize(
    ("rule", "raw", "message"),
    [
        (Quantity("ohm", "", above=0.0), "0", "allowed: above 0$"),
        (Quantity("V", "", at_least=-1.0), "-2V", "allowed: -1V or more$"),
        (Quantity("V", "", at_most=1.0), "2V", "allowed: up to 1V$"),
        (Quantity("V", "", at_least=-1.0, at_most=1.0), "2V", "allowed: -1V to 1V$"),
        (Flag(""), "yes", "'yes'; allowed: true or false$"),
        (Flag(""), 1, "1; allowed: true or false$"),
        (Choice("", ("log", "linear")), "lgo", "allowed: log, linear; did you mean 'log'\\?$"),
        (Choice("", ("log", "linear")), ["log"], "unknown word a list"),
    ],
)
def test_rules_say_what_is_allowed(rule: Quantity | Flag | Choice, raw: object, message: str) -> None:
    with pytest.raises(InputError, match=message):
        rule.read(raw)


def test_flags_read_texts_too() -> None:
    assert [Flag("").read(raw) for raw in (True, False, "true", " false ")] == [1.0, 0.0, 1.0, 0.0]
