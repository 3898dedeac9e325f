"""Small circuits for the engine's tests, written as their users write them: circuit text through the reader."""

from __future__ import annotations

import json

import numpy as np

from kickrender.circuit import ResolvedCircuit, read_circuit_text

TERMINALS = {
    "diode": ("anode", "cathode"),
    "npn": ("collector", "base", "emitter"),
    "pnp": ("collector", "base", "emitter"),
    "opamp": ("plus", "minus", "out"),
}


def ideal_opamp(gain_bandwidth_hz: float) -> str:
    """A model without limits but its gain-bandwidth product."""
    return (
        f'{{ kind = "opamp", gain_bandwidth = {gain_bandwidth_hz!r}, slew_rate = 1e12, headroom_high = 0, '
        "headroom_low = 0, dc_gain = 1e12 }"
    )


def circuit(
    parts: dict[str, str] | str,
    *,
    inputs: dict[str, str] | None = None,
    nets: dict[str, str] | None = None,
    models: dict[str, str] | None = None,
    output: str = "out",
    temperature: str = "25C",
    name: str = "test",
) -> ResolvedCircuit:
    """A resolved circuit from its lines.

    parts : name -> "kind value a b", or a text with a line "name kind value a b" for each. Nets stand in the order of
        the kind's terminals (diode anode cathode, transistor collector base emitter, op-amp plus minus out high low);
        value is a value, a model's name, or true or false.
    inputs, models : name -> the right-hand side of its line in a circuit file. nets : name -> voltage.
    """
    if isinstance(parts, str):
        parts = dict(line.split(maxsplit=1) for line in parts.splitlines() if line.strip())
    lines = ['title = "test"', f'temperature = "{temperature}"', "[nets]"]
    lines += [f'{net} = "{volts}"' for net, volts in (nets or {}).items()]
    for net, wave in (inputs or {}).items():
        lines += [f"[inputs.{net}]", wave]
    lines.append("[parts]")
    lines += [f"{part} = {_table(*text.split())}" for part, text in parts.items()]
    lines.append("[models]")
    lines += [f"{model} = {text}" for model, text in (models or {}).items()]
    lines += ["[output]", f'net = "{output}"', 'full_scale = "1V"']
    return read_circuit_text("\n".join(lines), name + ".toml").resolve()


def _table(kind: str, value: str, *nets: str) -> str:
    fields: dict[str, object] = {"kind": kind}
    if kind in TERMINALS:
        roles = TERMINALS[kind]
        fields |= {"model": value, **dict(zip(roles, nets, strict=False))}
        if kind == "opamp":
            fields["rails"] = nets[3:]
    else:
        fields |= {"closed": value == "true"} if kind == "switch" else {"value": value}
        fields["between"] = nets
    return "{ " + ", ".join(f"{key} = {json.dumps(field)}" for key, field in fields.items()) + " }"


RAILS = {"plus": "12V", "minus": "-12V"}
STRIKE = 'pulse = { rest = "0V", strike = "5V", length = "4ms", rise = "2us", fall = "2us" }'


def rc(wave: str, ohm: str = "10k", farad: str = "100n") -> ResolvedCircuit:
    """A low-pass from input `in` to `out`."""
    return circuit({"R": f"resistor {ohm} in out", "C": f"capacitor {farad} out ground"}, inputs={"in": wave})


def ladder(count: int, wave: str = STRIKE, ohm: str = "1k", farad: str = "10n") -> ResolvedCircuit:
    """`count` low-pass sections in a row; the output is the last net."""
    parts = {}
    for k in range(count):
        before = "in" if k == 0 else f"n{k - 1}"
        parts[f"R{k}"] = f"resistor {ohm} {before} n{k}"
        parts[f"C{k}"] = f"capacitor {farad} n{k} ground"
    return circuit(parts, inputs={"in": wave}, output=f"n{count - 1}")


def resonator(q_leg: str = "1k", wave: str = STRIKE) -> ResolvedCircuit:
    """An op-amp bridged-T struck into its leg through a resistor, with a diode clipper on its way out."""
    return circuit(
        f"""
        Rs resistor 100k gate leg
        Rl resistor {q_leg} leg ground
        C1 capacitor 15n ring leg
        C2 capacitor 15n leg sum
        Rb resistor 1M ring sum
        U opamp fet-input ground sum ring plus minus
        Ro resistor 4k7 ring out
        D1 diode silicon out ground
        D2 diode silicon ground out
        """,
        inputs={"gate": wave},
        nets=RAILS,
    )


def comparator(wave: str = STRIKE) -> ResolvedCircuit:
    """An op-amp without feedback: its tanh saturates exactly, and its row keeps only its own rate."""
    return circuit(
        """
        R1 resistor 10k gate a
        C1 capacitor 10n a ground
        U opamp fet-input a level switched plus minus
        R2 resistor 10k plus level
        R3 resistor 2k level ground
        R4 resistor 1k switched ground
        D diode silicon switched out
        R5 resistor 10k out ground
        C2 capacitor 10n out ground
        """,
        inputs={"gate": wave},
        nets=RAILS,
    )


def lopsided(wave: str = STRIKE) -> ResolvedCircuit:
    """Transistors of both polarities, a coil, a switch and every kind of input."""
    return circuit(
        """
        R1 resistor 22k gate base
        Q1 npn small-npn knot base ground
        R2 resistor 4k7 knot out
        L1 inductor 1 out far
        C1 capacitor 470n far ground
        C2 capacitor 220n out ground
        Q2 pnp small-pnp far low plus
        R3 resistor 220k low ground
        R4 resistor 47k low hum
        S1 switch true far drain
        R5 resistor 10k drain slope
        R6 resistor 10k bias out
        """,
        inputs={
            "gate": wave,
            "hum": 'sine = { amplitude = "1V", frequency = "333Hz", offset = "1V" }',
            "slope": 'points = [["1ms", "0V"], ["2ms", "1V"]]',
            "bias": 'constant = "0.5V"',
        },
        nets={"plus": "3V"},
    )


VOICES = {"resonator": resonator, "comparator": comparator, "lopsided": lopsided}


def residual_db(found: np.ndarray, truth: np.ndarray) -> float:
    """RMS of the difference over the peak of the truth. [dB]"""
    rms = np.sqrt(np.mean((found - truth) ** 2))
    return float(20.0 * np.log10(max(rms, 1e-300) / np.max(np.abs(truth))))
