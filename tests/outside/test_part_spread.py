"""What parts that deviate do to pitch and decay, against textbook formulas and the law of propagation of uncertainty.

Sources: JCGM 100:2008 (GUM), the law of propagation, equation (10) of 5.1.2, in its relative form (12) of 5.1.6,
u_c^2/y^2 = sum (p_i u_i/x_i)^2 for y = c x_1^p_1 x_2^p_2 ..., and u = a/sqrt(3) of an even distribution of half-width a
(4.3.7); clause numbers from memory. Formulas: f = 1/(2 pi sqrt(R_bridge R_leg C_left C_right)), Q = sqrt(C_left C_right
R_bridge/R_leg)/(C_left + C_right), tau = 2 R_bridge C_left C_right/(C_left + C_right) of the bridged-T in
data/resonators.json; tau = R C of a capacitor let off. What rings is heard at f sqrt(1 - 1/(4 Q^2)).
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.stats import truncnorm

from kickrender.circuit import read_circuit, read_circuit_text
from kickrender.circuit.records import Part
from kickrender.study.sensitivity import sensitivity
from kickrender.study.tolerance import Tolerance, read_study_spread, tolerance
from tests.study.circuits import BRIDGED_T, DISCHARGE

R_BRIDGE, R_LEG, C_LEFT, C_RIGHT = 1e6, 1e3, 15e-9, 15e-9
RESONATOR = ("R_bridge", "R_leg", "C_left", "C_right")
CENTS_PER_PERCENT = 12.0 / math.log(2.0)  # of a pitch that goes with a part itself: 1200 d(log2 f)/d(ln x)/100
# A standard deviation from n values lies within this many of its own standard deviations, 1/sqrt(2 (n - 1)), but for
# one study in a thousand.
NORMAL_999 = 3.3
UNIT_DEVIATION = {"normal": float(truncnorm(-3.0, 3.0).std()) / 3.0, "uniform": 1.0 / math.sqrt(3.0)}


def heard_hz(parts: dict[str, float]) -> float:
    r_bridge, r_leg, c_left, c_right = (parts[name] for name in RESONATOR)
    q = math.sqrt(c_left * c_right * r_bridge / r_leg) / (c_left + c_right)
    undamped = 1.0 / (2.0 * math.pi * math.sqrt(r_bridge * r_leg * c_left * c_right))
    return undamped * math.sqrt(1.0 - 1.0 / (4.0 * q * q))


def test_the_circuit_is_the_formulas():
    circuit = read_circuit_text(BRIDGED_T, "bell.toml")
    assert [circuit.parts[name].values["value"] for name in RESONATOR] == [R_BRIDGE, R_LEG, C_LEFT, C_RIGHT]
    exact = sensitivity(circuit).exact
    # 0.05 cents: how far the op-amp's bandwidth and the reader's window pull.
    hz = heard_hz(dict(zip(RESONATOR, (R_BRIDGE, R_LEG, C_LEFT, C_RIGHT), strict=True)))
    assert abs(1200.0 * math.log2(exact["pitch"] / hz)) < 0.05


def test_slopes_of_a_bridged_t_are_the_derivatives():
    """d ln f/d ln x = -1/2 of every part, so -8.66 cents a percent; damping adds or takes u/2, u = 1/(4 Q^2)/(1 - 1/(4
    Q^2)) = 0.001, by the resistors. Decay: 1, 0, 1/2 and 1/2 of ln(1000) tau = 103.6 ms."""
    found = sensitivity(read_circuit_text(BRIDGED_T, "bell.toml"))
    slopes = {slope.part: slope.slopes for slope in found.slopes if slope.part in RESONATOR}
    assert set(slopes) == set(RESONATOR)
    for name, damping in (("R_bridge", 0.0005), ("R_leg", -0.0005), ("C_left", 0.0), ("C_right", 0.0)):
        expected = CENTS_PER_PERCENT * (-0.5 + damping)
        assert slopes[name]["pitch"] == pytest.approx(expected, rel=0.003)
    tau_ms = 1e3 * R_BRIDGE * C_LEFT
    for name, power in (("R_bridge", 1.0), ("R_leg", 0.0), ("C_left", 0.5), ("C_right", 0.5)):
        # 2 %: the sixty decibels count from the peak, which moves a little, too.
        assert slopes[name]["decay"] == pytest.approx(0.01 * power * math.log(1000.0) * tau_ms, abs=0.02)


def test_slopes_of_a_discharge_are_the_derivatives():
    """ln(1000) R C = 6.908 ms goes with both parts; read to a microsecond, so a slope to 1.4 us a percent."""
    found = sensitivity(read_circuit_text(DISCHARGE, "discharge.toml"))
    for slope in found.slopes:
        power = 1.0 if slope.part in ("R1", "C1") else 0.0
        assert slope.slopes["decay"] == pytest.approx(0.01 * power * math.log(1000.0) * 1.0, abs=0.0015)


@pytest.mark.parametrize("distribution", ["normal", "uniform"])
def test_pitch_of_many_bridged_ts_spreads_as_the_law_of_propagation_says(distribution):
    """Two resistors of 2 % and two capacitors of 5 %, each with p = -1/2."""
    circuit = read_circuit_text(BRIDGED_T, "bell.toml")
    spread = read_study_spread(circuit, {"resistor": "2%", "capacitor": "5%"}, "1", distribution)
    found = tolerance(circuit, spread, count=400)
    parts = [0.5 * UNIT_DEVIATION[distribution] * percent for percent in (2.0, 2.0, 5.0, 5.0)]
    expected_cents = CENTS_PER_PERCENT * math.hypot(*parts)
    deviation = float(np.std(found.changes("pitch"), ddof=1))
    assert deviation == pytest.approx(expected_cents, rel=NORMAL_999 / math.sqrt(2.0 * (400 - 1)))
    # Build by build, the formula of the very parts drawn; some hundredths of a cent are the pitch reader's.
    exact = {name: circuit.parts[name].values["value"] for name in RESONATOR}
    by_formula = [
        1200.0 * math.log2(heard_hz({n: v * build.drawn.factors[n]["value"] for n, v in exact.items()}))
        - 1200.0 * math.log2(heard_hz(exact))
        for build in found.builds
    ]
    np.testing.assert_allclose(found.changes("pitch"), by_formula, rtol=0.0, atol=0.1)


@pytest.mark.slow
@pytest.mark.parametrize("aspect", ["pitch", "start", "decay", "loudness"])
def test_the_full_voice_spreads_as_its_own_slopes_say(voice, aspect):
    """First order, so within what curvature leaves: tracks of 10 % and the decay's regeneration bend the most."""
    study, slopes = voice
    first_order = np.array(
        [
            sum(
                slopes[aspect][part, key] * 100.0 * (factor - 1.0)
                for part, row in build.drawn.factors.items()
                for key, factor in row.items()
            )
            for build in study.builds
        ]
    )
    measured = np.array(study.changes(aspect))
    count = len(measured)
    law = math.sqrt(
        sum(
            (slopes[aspect][part.name, key] * 100.0 * study.spread.tolerance(part, key)) ** 2
            for part, key in spread_numbers(study)
        )
    )
    law *= UNIT_DEVIATION["normal"]
    assert measured.std(ddof=1) == pytest.approx(law, rel=NORMAL_999 / math.sqrt(2.0 * (count - 1)) + 0.05)
    left = measured - first_order
    assert left.std() < 0.1 * measured.std()


def spread_numbers(study: Tolerance) -> list[tuple[Part, str]]:
    drawn = study.builds[0].drawn.factors
    return [(study.circuit.parts[name], key) for name, row in drawn.items() for key in row]


@pytest.fixture(scope="module")
def voice() -> tuple[Tolerance, dict[str, dict[tuple[str, str], float]]]:
    """A hundred full voices of real parts, and slopes measured on the voice of exact ones."""
    circuit = read_circuit("bridged-t")
    given = {"resistor": "1%", "capacitor": "5%", "pot": "10%", "npn.forward_gain": "30%"}
    study = tolerance(circuit, read_study_spread(circuit, given), count=100)
    found = sensitivity(circuit)
    slopes = {
        aspect: {(slope.part, slope.key): slope.slopes[aspect] for slope in found.slopes} for aspect in found.exact
    }
    return study, slopes
