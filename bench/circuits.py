"""What is struck: the shipped circuits, soft and hard, and ladders of any number of nets."""

from __future__ import annotations

from dataclasses import dataclass

from kickrender.circuit import Circuit, ResolvedCircuit, read_circuit, read_circuit_text
from kickrender.circuit.shipped import shipped_circuits

LADDER_NETS = (10, 20, 50, 100, 200)
HARD = ("drive", "accent", "drop-depth", "decay", "brightness")  # controls turned up for the hard setting


@dataclass(frozen=True)
class Case:
    """One circuit under one setting."""

    name: str
    circuit: ResolvedCircuit


def hard_settings(circuit: Circuit) -> dict[str, float]:
    """The controls that make a hit loud, long and bright, as far as the circuit has them, at their upper ends."""
    return {name: circuit.controls[name].high for name in HARD if name in circuit.controls}


def shipped_cases() -> list[Case]:
    """Every shipped circuit as it starts, and turned up."""
    cases = []
    for name in sorted(shipped_circuits()):
        circuit = read_circuit(name)
        cases.append(Case(name, circuit.resolve({})))
        cases.append(Case(f"{name}, hard", circuit.resolve(hard_settings(circuit))))
    return cases


def ladder_cases(nets: tuple[int, ...] = LADDER_NETS) -> list[Case]:
    """Ladders, shortest first."""
    return [Case(f"ladder of {n}", read_circuit_text(ladder_text(n), f"ladder-{n}.toml").resolve({})) for n in nets]


def ladder_text(nets: int) -> str:
    """A circuit file: a resistor-capacitor line under a sine, its swing bounded by a diode pair at every fifth net.

    Total resistance and capacitance are the same for any number of nets, so that the line's slow motion, and with it
    the number of steps, stays about the same and the cost shows how a step grows.
    """
    total_ohm, total_farad = 20e3, 200e-9
    lines = [
        'title = "Ladder"',
        "[inputs.drive]",
        'sine = { amplitude = "5V", frequency = "110Hz" }',
        "[parts]",
    ]
    before = "drive"
    for k in range(1, nets + 1):
        net = f"n{k}"
        lines.append(
            f'R{k:03d} = {{ kind = "resistor", value = {total_ohm / nets!r}, between = ["{before}", "{net}"] }}'
        )
        lines.append(
            f'C{k:03d} = {{ kind = "capacitor", value = {total_farad / nets!r}, between = ["{net}", "ground"] }}'
        )
        if k % 5 == 0:
            for name, anode, cathode in ((f"U{k}", net, "ground"), (f"D{k}", "ground", net)):
                lines.append(f'{name} = {{ kind = "diode", model = "clip", anode = "{anode}", cathode = "{cathode}" }}')
        before = net
    lines += [
        "[models.clip]",
        'kind = "diode"',
        'saturation_current = "2.5n"',
        "ideality = 1.75",
        "[output]",
        f'net = "n{nets}"',
        'full_scale = "1V"',
    ]
    return "\n".join(lines) + "\n"
