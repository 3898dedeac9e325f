"""Facts that people who build percussion circuits know by heart, each as a small circuit.

Common practice, no source; where a closed form stands beside one, its own source is named. The figures are round, so
the margins are a few per cent to a fifth, wide enough for the words and narrow enough to catch a wrong model.
"""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest

from kickrender.circuit import ResolvedCircuit, read_circuit_text
from kickrender.engine import Pole, poles, rest_state, solve

RAILS = '[nets]\nplus = "12V"\nminus = "-12V"\n'


def circuit(parts: str, *, inputs: str = "", output: str = "out") -> ResolvedCircuit:
    """A circuit of a few lines between +12 V and -12 V."""
    text = f'title = "Fact"\n{RAILS}{inputs}\n[parts]\n{parts}\n[output]\nnet = "{output}"\nfull_scale = "1V"\n'
    return read_circuit_text(text, "fact.toml").resolve()


def bridged_t(leg: str, *, across: str = "1M", capacitors: str = "15n", more: str = "") -> str:
    """An inverting op-amp with a bridged-T for feedback."""
    return f"""
U1 = {{ kind = "opamp", model = "fet-input", plus = "ground", minus = "sum", out = "out", rails = ["plus", "minus"] }}
R_across = {{ kind = "resistor", value = "{across}", between = ["out", "sum"] }}
C1 = {{ kind = "capacitor", value = "{capacitors}", between = ["out", "mid"] }}
C2 = {{ kind = "capacitor", value = "{capacitors}", between = ["mid", "sum"] }}
R_leg = {{ kind = "resistor", value = "{leg}", between = ["mid", "ground"] }}
{more}"""


def strike(length: str, *, through: str = "1M", volts: str = "1V") -> tuple[str, str]:
    """A gate, and the resistor that takes it straight into the node between the capacitors."""
    gate = f'[inputs.gate]\npulse = {{ rest = "0V", strike = "{volts}", length = "{length}" }}'
    return gate, f'R_in = {{ kind = "resistor", value = "{through}", between = ["gate", "mid"] }}'


def ringing(resolved: ResolvedCircuit) -> Pole:
    """The pole pair below 10 kHz with the highest quality."""
    return max((pole for pole in poles(resolved) if pole.frequency_hz < 10e3), key=lambda pole: pole.q)


def heard_hz(resolved: ResolvedCircuit, length_s: float = 0.2) -> float:
    """What a struck circuit is heard to ring at: zero crossings of the output from its third cycle on. [Hz]"""
    rate = 200_000
    samples = solve(resolved, length_s).sample(rate, round(length_s * rate))
    k = np.flatnonzero(np.diff(np.signbit(samples)))
    times = (k + samples[k] / (samples[k] - samples[k + 1])) / rate
    times = times[5 : min(len(times), 12)]
    return float((len(times) - 1) / (2.0 * (times[-1] - times[0])))


@pytest.mark.parametrize(("leg", "about_hz"), [("51k", 50.0), ("10k", 110.0), ("2k", 250.0)])
def test_a_bridged_t_of_1_mohm_and_two_15_nf_rings_by_its_leg(leg: str, about_hz: float) -> None:
    """51 kohm near 50 Hz, 10 kohm near 110 Hz, 2 kohm near 250 Hz (common practice, no source).

    Closed form: f0 = 1/(2 pi C sqrt(R_across R_leg)), derived by nodal analysis, from memory in the textbooks.
    """
    gate, into = strike("1ms")
    resolved = circuit(bridged_t(leg, more=into), inputs=gate)
    assert ringing(resolved).frequency_hz == pytest.approx(about_hz, rel=0.1)
    assert heard_hz(resolved) == pytest.approx(about_hz, rel=0.1)
    ohm = 1.0 / (1.0 / {"51k": 51e3, "10k": 10e3, "2k": 2e3}[leg] + 1e-6)  # the gate's resistor lies across the leg
    assert ringing(resolved).frequency_hz == pytest.approx(1.0 / (2e-9 * np.pi * 15.0 * np.sqrt(1e6 * ohm)), rel=0.005)


def test_across_and_leg_alike_do_not_ring_and_far_apart_ring_long() -> None:
    """Common practice, no source. Closed form for equal capacitors: Q = 0.5 sqrt(R_across/R_leg)."""
    alike = ringing(circuit(bridged_t("100k", across="100k")))
    apart = ringing(circuit(bridged_t("1k", across="1M")))
    assert alike.q == pytest.approx(0.5, rel=0.02)
    assert apart.q == pytest.approx(15.8, rel=0.02)
    gate, into = strike("1ms")
    swings = []
    for leg, across in (("100k", "100k"), ("1k", "1M")):
        samples = solve(circuit(bridged_t(leg, across=across, more=into), inputs=gate), 0.1).sample(96_000, 9_600)
        peak = np.abs(samples).max()
        after = samples[np.abs(samples).argmax() :]
        swings.append(int(np.count_nonzero(np.diff(np.signbit(after[np.abs(after) > 0.02 * peak])))))
    assert swings[0] <= 1
    assert swings[1] > 20


@pytest.mark.parametrize(("collector_v", "about_a", "margin"), [(1.0, 400e-6, 0.05), (-1.0, -15e-6, 0.15)])
def test_an_npn_passes_much_forward_and_little_in_reverse(collector_v: float, about_a: float, margin: float) -> None:
    """1 V into the base through 100 kohm: about 400 uA at 1 V on the collector, about 15 uA at -1 V.

    Common practice, no source. To 1e-6: the solution of the model's own equations in data/devices.json, by a root
    finder outside this project.
    """
    resolved = circuit(
        """
R_base = { kind = "resistor", value = "100k", between = ["drive", "base"] }
R_sense = { kind = "resistor", value = "1", between = ["supply", "out"] }
Q1 = { kind = "npn", model = "small-npn", collector = "out", base = "base", emitter = "ground" }
""",
        inputs=f'[inputs.drive]\nconstant = "1V"\n[inputs.supply]\nconstant = "{collector_v}V"',
    )
    rest = rest_state(resolved)
    current = (collector_v - rest["out"]) / 1.0
    assert current == pytest.approx(about_a, rel=margin)
    facts = json.loads(Path(__file__).with_name("data").joinpath("devices.json").read_text("utf-8"))
    (model,) = (row for row in facts["one_volt_through_100k_fact"]["solutions_25C"] if row["betaF"] == 107.0)
    # The sense resistor moves the collector by 0.4 mV, which a transistor in its active region hardly notices.
    assert current == pytest.approx(model[f"VC={collector_v:+.0f}"]["IC"], rel=5e-5)


def test_an_npn_in_the_leg_turns_the_sine_into_a_rounded_saw() -> None:
    """Common practice, no source: the resonator's wave rises several times faster than it falls.

    A sine takes as long to rise as to fall; so it does with a resistor in the transistor's place.
    """
    npn = """
R_base = { kind = "resistor", value = "100k", between = ["drive", "base"] }
Q1 = { kind = "npn", model = "small-npn", collector = "mid", base = "base", emitter = "ground" }
"""
    resistor = 'R_alike = { kind = "resistor", value = "10k", between = ["mid", "ground"] }'
    gate, into = strike("1ms", through="100k", volts="12V")

    def rise_over_fall(more: str, inputs: str = "") -> float:
        resolved = circuit(bridged_t("51k", more=f"{into}\n{more}"), inputs=f"{gate}\n{inputs}")
        slope = np.diff(solve(resolved, 0.06).sample(96_000, 5_760)[200:])  # from after the gate's fall
        turns = np.flatnonzero(np.diff(np.signbit(slope)))[:3]
        lasts = np.diff(turns).astype(float)
        rising_first = slope[(turns[0] + turns[1]) // 2] > 0.0
        return float(lasts[0] / lasts[1] if rising_first else lasts[1] / lasts[0])

    assert rise_over_fall("") == pytest.approx(1.0, abs=0.1)
    assert rise_over_fall(resistor) == pytest.approx(1.0, abs=0.1)
    assert rise_over_fall(npn, '[inputs.drive]\nconstant = "1V"') < 0.4


def test_silicon_diodes_in_a_feedback_path_open_at_about_600_mv() -> None:
    """Common practice, no source: an inverting amplifier's gain collapses where its output passes 0.6 V."""
    parts = """
U1 = { kind = "opamp", model = "fet-input", plus = "ground", minus = "sum", out = "out", rails = ["plus", "minus"] }
R_in = { kind = "resistor", value = "1k", between = ["in", "sum"] }
R_back = { kind = "resistor", value = "100k", between = ["sum", "out"] }
D1 = { kind = "diode", model = "silicon", anode = "sum", cathode = "out" }
D2 = { kind = "diode", model = "silicon", anode = "out", cathode = "sum" }
"""

    def output(volts: float) -> float:
        return -rest_state(circuit(parts, inputs=f'[inputs.in]\nconstant = "{volts}V"'))["out"]

    assert output(1e-3) == pytest.approx(0.1, rel=0.03)  # 100 times: as good as shut
    assert output(1.0) == pytest.approx(0.6, abs=0.05)  # 1 mA: open
    assert (output(1.001) - output(1.0)) / 1e-3 < 0.1  # and steep
    assert output(-1.0) == pytest.approx(-output(1.0), rel=1e-9)


def test_50_kohm_with_15_nf_turns_over_near_220_hz() -> None:
    """Common practice, no source: a sine of that frequency comes out 3 dB down. Closed form: 1/(2 pi R C) = 212 Hz."""
    parts = """
R1 = { kind = "resistor", value = "50k", between = ["in", "out"] }
C1 = { kind = "capacitor", value = "15n", between = ["out", "ground"] }
"""

    def gain_db(hz: float) -> float:
        wave = f'[inputs.in]\nsine = {{ amplitude = "1V", frequency = "{hz}Hz" }}'
        late = solve(circuit(parts, inputs=wave), 0.03).sample(192_000, 5_760)[1_920:]
        return float(20.0 * np.log10(np.abs(late).max()))

    assert gain_db(220.0) == pytest.approx(-3.0, abs=0.3)
    assert gain_db(1.0 / (2.0 * np.pi * 50e3 * 15e-9)) == pytest.approx(-10.0 * np.log10(2.0), abs=0.01)
    assert gain_db(2200.0) == pytest.approx(-20.3, abs=0.5)


def test_a_long_gate_straight_into_the_resonator_strikes_it_twice() -> None:
    """Common practice, no source: at its rise and again, the other way up, at its fall."""
    gate, into = strike("100ms")
    samples = solve(circuit(bridged_t("10k", more=into), inputs=gate), 0.2).sample(96_000, 19_200)
    parts = ((0.0, 0.02), (0.08, 0.099), (0.1, 0.12))  # after the rise, before the fall, after the fall
    first, before, second = (np.abs(samples[round(a * 96e3) : round(b * 96e3)]).max() for a, b in parts)
    assert before < 0.01 * first
    assert second == pytest.approx(first, rel=0.01)
    # The other way up: what a linear circuit answers to the opposite step.
    assert np.allclose(samples[9_700:12_000], -samples[100:2_400], atol=0.01 * first)


def test_feedback_into_the_node_between_the_capacitors_lengthens_the_decay_and_hardly_moves_the_pitch() -> None:
    """Common practice, no source. The bridged-T turns its output over, so what is fed back is an inverted copy.

    Closed form for equal capacitors: tau = R_across C/(1 - R_across/(2 R_feedback)), f0 with the feedback resistor
    across the leg.
    """
    again = """
U2 = { kind = "opamp", model = "fet-input", plus = "ground", minus = "turn", out = "again", rails = ["plus", "minus"] }
R_turn = { kind = "resistor", value = "100k", between = ["out", "turn"] }
R_over = { kind = "resistor", value = "100k", between = ["turn", "again"] }
R_feedback = { kind = "resistor", value = "680k", between = ["again", "mid"] }
"""
    plain, fed = ringing(circuit(bridged_t("10k"))), ringing(circuit(bridged_t("10k", more=again)))
    assert plain.decay_s == pytest.approx(np.log(1000.0) * 15e-3, rel=0.01)
    assert fed.decay_s / plain.decay_s == pytest.approx(1.0 / (1.0 - 1.0 / 1.36), rel=0.03)
    assert abs(12.0 * np.log2(fed.frequency_hz / plain.frequency_hz)) < 0.2  # semitones
    gate, into = strike("1ms")
    assert heard_hz(circuit(bridged_t("10k", more=again + into), inputs=gate)) == pytest.approx(
        heard_hz(circuit(bridged_t("10k", more=into), inputs=gate)), rel=0.015
    )
