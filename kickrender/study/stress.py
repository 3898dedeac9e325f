"""What a hit asks of each part: voltages, currents and power, from the solved voltages of every net.

The solver's own polynomials are read at five points of every step, where each part's equations give its currents.
Power is what a part turns into heat: its conductive currents times the voltages of their nets. What charges
capacitances comes back and is left out of it.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from kickrender.circuit.records import GROUND, ResolvedCircuit, Sine, Wave
from kickrender.engine import Solution, rest_state, solve_each
from kickrender.engine.equations import outputs_at
from kickrender.engine.lanes import FLAT, PADDING
from kickrender.engine.plan import Plan
from kickrender.engine.program import build_program
from kickrender.engine.solve import SIDE_BY_SIDE
from kickrender.engine.stamps import Stamps
from kickrender.engine.topology import numbers_of, stamp_all, topology_of
from kickrender.engine.waves import corners
from kickrender.errors import SolveError
from kickrender.sound.finish import TAIL_FLOOR

Floats = NDArray[np.float64]

# Points of a step, in shares of it. A step's polynomial is of degree 4, so that five points hold all of it: its
# derivative there (row i: at point i) and its integral (Boole's rule) are exact.
_POINTS = np.array([0.0, 0.25, 0.5, 0.75, 1.0])
_SLOPES = (
    np.array(
        [[-25, 48, -36, 16, -3], [-3, -10, 18, -6, 1], [1, -8, 0, 8, -1], [-1, 6, -18, 10, 3], [3, -16, 36, -48, 25]]
    )
    / 3.0
)
_WEIGHTS = np.array([7.0, 32.0, 12.0, 32.0, 7.0]) / 90.0


@dataclass(frozen=True, eq=False)
class Motion:
    """Every net over a hit.

    step_s : (steps,) lengths of the solver's steps.
    values : net -> its voltage at the points of every step, inner quantity (a coil's current) -> likewise; (steps, 5).
        [V], [A]
    """

    step_s: Floats
    values: Mapping[str, Floats]

    @property
    def length_s(self) -> float:
        """How long the hit was followed. [s]"""
        return float(self.step_s.sum())

    def rate(self, name: str) -> Floats:
        """Time derivative of a net's voltage; (steps, 5). [V/s]"""
        return self.values[name] @ _SLOPES.T / self.step_s[:, None]

    def mean(self, values: Floats) -> float:
        """Average over the hit of values at the points of every step."""
        return float((values @ _WEIGHTS) @ self.step_s / self.step_s.sum())


@dataclass(frozen=True, eq=False)
class Flow:
    """One part over a hit; arrays of shape (steps, 5).

    volts : role -> voltage of the terminal. [V]
    amperes : role -> current into the terminal, with what charges the part's capacitances. [A]
    watts : heat; of a part that stores or is driven, no heat but whatever its conductive currents carry. [W]
    """

    motion: Motion
    volts: Mapping[str, Floats]
    amperes: Mapping[str, Floats]
    watts: Floats

    def across(self, a: str, b: str) -> Floats:
        """Voltage of one terminal over another. [V]"""
        return self.volts[a] - self.volts[b]


def strike_each(circuits: Sequence[ResolvedCircuit], longest_s: float) -> list[Motion | SolveError]:
    """Strike circuits of one structure and follow every net until the output has died away, at most `longest_s`.

    A sound dies as a file does: 90 dB below its peak for good.
    """
    known = {*circuits[0].nets, *circuits[0].inputs}
    solved = [name for name in rest_state(circuits[0]) if name not in known]
    solutions = solve_each(circuits, [longest_s] * len(circuits), probes=solved)
    return [solution if isinstance(solution, SolveError) else _motion(solution) for solution in solutions]


def _motion(solution: Solution) -> Motion:
    circuit = solution.circuit
    magnitude = np.abs(_read(solution, 0)).max(axis=1)
    alive = np.flatnonzero(magnitude >= TAIL_FLOOR * magnitude.max())
    steps = slice(0, int(alive[-1]) + 1)
    times = solution.piece_t[steps, None] + _POINTS * solution.piece_h[steps, None]
    values = {name: _read(solution, k)[steps] for k, name in enumerate(solution.nets)}
    for name, wave in circuit.inputs.items():
        values[name] = _driven(wave, times)
    values |= {name: np.full(times.shape, level) for name, level in (*circuit.nets.items(), (GROUND, 0.0))}
    return Motion(solution.piece_h[steps], values)


def _driven(wave: Wave, times: Floats) -> Floats:
    """A wave's voltage at any times, as `waves.voltage_at`. [V]"""
    volts = np.interp(times, *corners(wave))
    if isinstance(wave, Sine):
        volts += wave.amplitude * np.sin(2.0 * np.pi * (wave.frequency * times + wave.phase_deg / 360.0))
    return volts


def _read(solution: Solution, net: int) -> Floats:
    """One net at the points of every step, by the polynomial of `method.Method.dense`."""
    x0, x1, k0, k1, k2 = (solution.piece_c[:, net, k, None] for k in range(5))
    left = 1.0 - _POINTS
    return left * x0 + _POINTS * (x1 + left * (k0 + _POINTS * (k1 + _POINTS * k2)))


def flows(circuit: ResolvedCircuit, motion: Motion) -> dict[str, Flow]:
    """Part -> what flows through it. A driven output gives what all others take from its net."""
    stamps = stamp_all(circuit)
    computed = iter(_device_outputs(circuit, stamps, motion))
    taken: dict[str, Floats] = {}  # net -> current from it into all parts
    found = {}
    for part, own in zip(circuit.parts.values(), stamps, strict=True):
        conducted, charging = _into_rows(own, motion, computed)
        for rows in (conducted, charging):
            for row, current in rows.items():
                taken[row] = taken.get(row, 0.0) + current
        nothing = np.zeros_like(motion.values[GROUND])
        found[part.name] = Flow(
            motion,
            {role: motion.values[net] for role, net in part.terminals.items()},
            {role: conducted.get(net, nothing) + charging.get(net, nothing) for role, net in part.terminals.items()},
            sum((motion.values[row] * current for row, current in conducted.items() if row in motion.values), nothing),
        )
    for part, own in zip(circuit.parts.values(), stamps, strict=True):
        flow = found[part.name]
        driven = {role: -taken[net] for role, net in part.terminals.items() if net in own.own_equations}
        found[part.name] = Flow(motion, flow.volts, {**flow.amperes, **driven}, flow.watts)
    return found


def _into_rows(own: Stamps, motion: Motion, computed: Iterator[Floats]) -> tuple[dict[str, Floats], dict[str, Floats]]:
    """Currents into one part by the row they are stamped on: conducted, and charging capacitances. [A]"""
    conducted: dict[str, Floats] = {}
    charging: dict[str, Floats] = {}
    for (row, column), siemens in zip(own.g_places, own.g_numbers, strict=True):
        conducted[row] = conducted.get(row, 0.0) + siemens * motion.values[column]
    for (row, column), farad in zip(own.c_places, own.c_numbers, strict=True):
        charging[row] = charging.get(row, 0.0) + farad * motion.rate(column)
    for device in own.devices:
        outputs = next(computed)
        for row, output, sign in device.flows:
            conducted[row] = conducted.get(row, 0.0) - sign * outputs[output]
    return conducted, charging


def _device_outputs(circuit: ResolvedCircuit, stamps: Sequence[Stamps], motion: Motion) -> list[Floats]:
    """What each device's law computes, in the order of the parts; each of shape (outputs, steps, 5)."""
    topology = topology_of(circuit, stamps)
    order = tuple(range(topology.size))
    program = build_program(topology, Plan(order, order))
    code, lanes = program.code, len(SIDE_BY_SIDE)
    # The kernel takes as many states at once as there are lanes: its vectors hold a row of lanes for each net.
    shape = motion.values[GROUND].shape
    count = motion.values[GROUND].size
    vectors = np.zeros((-(-count // lanes), code.vectors + len(FLAT), lanes))
    for names, first in ((topology.unknowns, 0), ((*topology.inputs, *topology.held), code.stride)):
        for row, name in enumerate(names, first):
            padded = np.resize(motion.values[name], len(vectors) * lanes)
            vectors[:, row, :] = padded.reshape(-1, lanes)
    layout = program.layout(numbers_of(circuit, topology, stamps))
    numbers = np.repeat(np.append(layout, np.zeros(PADDING)), lanes)
    outputs_at(code, numbers, vectors.reshape(len(vectors), -1), SIDE_BY_SIDE)
    by_device: dict[int, Floats] = {}
    first = code.v_outputs
    for index, device in zip(topology.device_order, topology.devices, strict=True):
        rows = vectors[:, first : first + device.outputs, :].transpose(1, 0, 2).reshape(device.outputs, -1)
        by_device[index] = rows[:, :count].reshape(-1, *shape)
        first += device.outputs
    return [by_device[index] for index in range(len(by_device))]


@dataclass(frozen=True)
class Load:
    """One number of what a part bears.

    of : how it follows from the flow. least : whether the worst of several is the lowest.
    """

    about: str
    unit: str
    of: Callable[[Flow], float]
    least: bool = False


def _peak(values: Floats) -> float:
    return float(np.abs(values).max())


def _above(values: Floats) -> float:
    """How far above 0 values get; 0 when they stay below."""
    return max(0.0, float(values.max()))


def _most(*currents: Floats) -> float:
    return max(_peak(current) for current in currents)


_POWER = {
    "peak_power": Load("peak power", "W", lambda f: _above(f.watts)),
    "average_power": Load("average power", "W", lambda f: f.motion.mean(f.watts)),
}
_CURRENT = {"peak_current": Load("peak current", "A", lambda f: _most(*f.amperes.values()))}
_RESISTOR = {**_POWER, "peak_voltage": Load("peak voltage", "V", lambda f: _peak(f.across("a", "b")))}
_COIL = {**_CURRENT, "peak_voltage": Load("peak voltage", "V", lambda f: _peak(f.across("a", "b")))}
_DIODE = {
    **_POWER,
    "peak_current": Load("peak forward current", "A", lambda f: _above(f.amperes["anode"])),
    "peak_reverse_voltage": Load("peak reverse voltage", "V", lambda f: _above(f.across("cathode", "anode"))),
}


def _transistor(sign: float) -> dict[str, Load]:
    """`sign` is -1 where every voltage is reversed."""
    return {
        **_POWER,
        "peak_current": Load("peak collector current", "A", lambda f: _peak(f.amperes["collector"])),
        "peak_voltage": Load("peak collector-emitter voltage", "V", lambda f: _peak(f.across("collector", "emitter"))),
        "peak_reverse_voltage": Load(
            "peak reverse emitter-base voltage", "V", lambda f: _above(sign * f.across("emitter", "base"))
        ),
    }


def _jfet(sign: float) -> dict[str, Load]:
    return {
        **_POWER,
        "peak_current": Load("peak drain current", "A", lambda f: _peak(f.amperes["drain"])),
        "peak_voltage": Load("peak drain-source voltage", "V", lambda f: _peak(f.across("drain", "source"))),
        "peak_reverse_voltage": Load(
            "peak reverse gate voltage",
            "V",
            lambda f: max(_above(sign * f.across("source", "gate")), _above(sign * f.across("drain", "gate"))),
        ),
    }


_DRIVER = {
    "peak_current": Load("peak output current", "A", lambda f: _peak(f.amperes["out"])),
    "peak_voltage": Load("peak output voltage", "V", lambda f: _peak(f.volts["out"])),
}

# What each kind is asked, in the order it is told. A kind whose model says nothing of what it takes from its supplies
# (op-amps, transconductance amplifiers, sources) has no power here.
LOADS: Mapping[str, Mapping[str, Load]] = MappingProxyType(
    {
        "resistor": _RESISTOR,
        "switch": {**_RESISTOR, **_CURRENT},
        "pot": {**_POWER, **_CURRENT},
        "capacitor": {
            "peak_voltage": Load("peak voltage", "V", lambda f: _peak(f.across("a", "b"))),
            "lowest_voltage": Load(
                "lowest voltage of a over b", "V", lambda f: float(f.across("a", "b").min()), least=True
            ),
            "highest_voltage": Load("highest voltage of a over b", "V", lambda f: float(f.across("a", "b").max())),
        },
        "inductor": _COIL,
        "diode": _DIODE,
        "zener": {
            **_DIODE,
            "peak_reverse_current": Load("peak reverse current", "A", lambda f: _above(-f.amperes["anode"])),
        },
        "npn": _transistor(1.0),
        "pnp": _transistor(-1.0),
        "n-jfet": _jfet(1.0),
        "p-jfet": _jfet(-1.0),
        "opamp": _DRIVER,
        "ota": {**_DRIVER, "peak_bias_current": Load("peak bias current", "A", lambda f: _peak(f.amperes["bias"]))},
        "transformer": {
            "peak_current": Load("peak primary current", "A", lambda f: _peak(f.amperes["primary_a"])),
            "peak_voltage": Load("peak primary voltage", "V", lambda f: _peak(f.across("primary_a", "primary_b"))),
            "peak_secondary_current": Load("peak secondary current", "A", lambda f: _peak(f.amperes["secondary_a"])),
            "peak_secondary_voltage": Load(
                "peak secondary voltage", "V", lambda f: _peak(f.across("secondary_a", "secondary_b"))
            ),
        },
        "controlled-voltage": _DRIVER,
        "controlled-current": {
            "peak_current": Load("peak current", "A", lambda f: _peak(f.amperes["a"])),
            "peak_voltage": Load("peak voltage", "V", lambda f: _peak(f.across("a", "b"))),
        },
    }
)


def loads(circuit: ResolvedCircuit, motion: Motion) -> dict[str, dict[str, float]]:
    """Part -> what it bears over a hit, by the names of `LOADS`, in their units."""
    found = flows(circuit, motion)
    return {
        name: {key: load.of(found[name]) for key, load in LOADS[part.kind].items()}
        for name, part in circuit.parts.items()
    }
