"""The device equations a second time, in plain numpy, solved by SUNDIALS IDA: an independent answer for any circuit.

Reads the same `ResolvedCircuit` as the engine and shares nothing else with it: the equations are F(t, y, y') = 0 on
whole vectors and dense matrices, the method is a multistep one (BDF), the rest state has its own Newton iteration.

    F = G v + C v' + S i(U v),  with an op-amp's row in place of its output's current law,

v the unknowns y (node voltages, inner diode nets, inductor currents) followed by the known nets (ground, held,
inputs), i the currents of the junctions, U and S the matrices that gather voltages and scatter currents.

SUNDIALS: Hindmarsh et al., ACM TOMS 31 (2005), DOI 10.1145/1089014.1089020; driven through scikit-sundae.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from sksundae import ida

from kickrender.circuit.records import GROUND, Constant, Points, Pulse, ResolvedCircuit, ResolvedPart, Sine, Wave
from tests.outside import further_writing
from tests.outside.further_writing import Further

BOLTZMANN = 1.380649e-23  # [J/K] exact since 2019
CHARGE = 1.602176634e-19  # [C] exact since 2019
REFERENCE_K = 298.15
SMALLEST_CONDUCTANCE = 1e-12  # [S] across every junction
RAIL_SOFTNESS = 50e-3  # [V]
LARGEST_ARGUMENT = 80.0
LONGEST_NEWTON_STEP = 0.3  # [V]


def bounded_exp(argument: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """exp, continued by its tangent above 80, and its derivative."""
    slope = np.exp(np.minimum(argument, LARGEST_ARGUMENT))
    return slope * (1.0 + np.maximum(argument - LARGEST_ARGUMENT, 0.0)), slope


def corners(wave: Wave) -> list[float]:
    """Times at which an input's slope jumps. [s]"""
    if isinstance(wave, Pulse):
        return [0.0, wave.rise, wave.length, wave.length + wave.fall]
    return list(wave.times) if isinstance(wave, Points) else [0.0]


def level_and_slope(wave: Wave, time: float, start: float) -> tuple[float, float]:
    """Voltage and its time derivative, as the segment that begins at `start` goes on. [V], [V/s]

    IDA steps past the end of an interval and interpolates back, so a segment must not know that it ends.
    """
    if isinstance(wave, Constant):
        return wave.level, 0.0
    if isinstance(wave, Sine):
        omega = 2.0 * np.pi * wave.frequency
        angle = omega * time + np.radians(wave.phase_deg)
        return wave.offset + wave.amplitude * np.sin(angle), wave.amplitude * omega * np.cos(angle)
    if isinstance(wave, Pulse):
        times = [0.0, wave.rise, wave.length, wave.length + wave.fall]
        volts = [wave.rest, wave.strike, wave.strike, wave.rest]
    else:
        times, volts = list(wave.times), list(wave.volts)
    segment = int(np.searchsorted(times, start * (1.0 + 1e-12), side="right")) - 1
    if segment < 0:
        return volts[0], 0.0
    if segment == len(times) - 1 or times[segment + 1] == times[segment]:
        return volts[segment], 0.0
    slope = (volts[segment + 1] - volts[segment]) / (times[segment + 1] - times[segment])
    return volts[segment] + slope * (time - times[segment]), slope


def saturation_current_at(values: dict[str, float], key: str, temperature: float) -> float:
    """I_s (T/T0)^(3/n) exp((T/T0 - 1) E_g / (n V_T)). [A]"""
    ratio, ideality = temperature / REFERENCE_K, values.get("ideality", 1.0)
    thermal = BOLTZMANN * temperature / CHARGE
    band_gap = values.get("band_gap", 1.11)
    return float(values[key] * ratio ** (3.0 / ideality) * np.exp((ratio - 1.0) * band_gap / (ideality * thermal)))


@dataclass
class Trajectory:
    """times : (n,) [s]; volts : net -> (n,) [V]; evaluations : of F, over all intervals."""

    times: np.ndarray
    volts: dict[str, np.ndarray]
    evaluations: int


class SecondWriting:
    """The equations of one resolved circuit.

    names : the unknowns, in order; known : the nets whose voltage is given.
    """

    def __init__(self, circuit: ResolvedCircuit) -> None:
        self.circuit = circuit
        self.thermal = BOLTZMANN * circuit.temperature_k / CHARGE
        parts = list(circuit.parts.values())
        self.known = [GROUND, *circuit.nets, *circuit.inputs]
        nets = dict.fromkeys(net for part in parts for net in part.terminals.values() if net not in self.known)
        coils = [part for part in parts if part.kind == "inductor"]
        diodes = [part for part in parts if part.kind == "diode"]
        inner = [part.name for part in diodes if self._values(part).get("series_resistance", 0.0) > 0.0]
        self.names = [*nets, *(f"{name}:inner" for name in inner), *(f"{part.name}:current" for part in coils)]
        self.names += further_writing.names(parts)
        self.size = len(self.names)
        self.place = {name: index for index, name in enumerate([*self.names, *self.known])}
        width = len(self.place)
        self.conductance = np.zeros((self.size, width))
        self.capacitance = np.zeros((self.size, width))
        for part in parts:
            if part.kind == "resistor" or part.kind == "switch":
                self._conduct(*part.terminals.values(), 1.0 / part.values["resistance"])
            elif part.kind == "capacitor":
                self._store(*part.terminals.values(), part.values["capacitance"])
            elif part.kind == "pot":
                self._pot(part)
            elif part.kind == "inductor":
                self._coil(part)
            else:
                known = ("diode", "npn", "pnp", "opamp", *further_writing.KINDS)
                assert part.kind in known, f"kind '{part.kind}' is not written here"
        self._junctions(diodes, [part for part in parts if part.kind in ("npn", "pnp")], width)
        self.further = self._further(parts)
        self._opamps([part for part in parts if part.kind == "opamp"], width)
        self.further.own_rows(parts, list(self.outputs), (self.conductance, self.capacitance, self.scatter))
        self.start = 0.0  # of the input segment in force
        self._full = np.zeros(width)
        self._full[self.size + 1 : self.size + 1 + len(circuit.nets)] = list(circuit.nets.values())
        self._full_slope = np.zeros(width)

    def _further(self, parts: list[ResolvedPart]) -> Further:
        """Every other kind of part, its linear entries stamped."""

        def saturation(part: ResolvedPart) -> float:
            return saturation_current_at(self._values(part), "saturation_current", self.circuit.temperature_k)

        further = Further(parts, self.place, self.size, self.thermal, saturation)
        for part in parts:
            further.stamp(part, self.conductance, self.capacitance)
        return further

    @staticmethod
    def _values(part: ResolvedPart) -> dict[str, float]:
        assert part.model is not None
        return dict(part.model.values)

    def _stamp(self, matrix: np.ndarray, a: int, b: int, value: float) -> None:
        for row, other in ((a, b), (b, a)):
            if row < self.size:
                matrix[row, row] += value
                matrix[row, other] -= value

    def _conduct(self, a: str, b: str, value: float) -> None:
        self._stamp(self.conductance, self.place[a], self.place[b], value)

    def _store(self, a: str, b: str, value: float) -> None:
        self._stamp(self.capacitance, self.place[a], self.place[b], value)

    def _pot(self, part: ResolvedPart) -> None:
        nets = part.terminals
        if "wiper" in nets:
            self._conduct(nets["end_a"], nets["wiper"], 1.0 / part.values["first_leg"])
            self._conduct(nets["wiper"], nets["end_b"], 1.0 / part.values["second_leg"])
        else:
            self._conduct(nets["a"], nets["b"], 1.0 / part.values["first_leg"])

    def _coil(self, part: ResolvedPart) -> None:
        current = self.place[f"{part.name}:current"]
        for net, sign in zip(part.terminals.values(), (1.0, -1.0), strict=True):
            index = self.place[net]
            self.conductance[current, index] -= sign
            if index < self.size:
                self.conductance[index, current] += sign
        self.capacitance[current, current] = part.values["inductance"]

    def _junctions(self, diodes: list[ResolvedPart], transistors: list[ResolvedPart], width: int) -> None:
        """Rows of U and columns of S: the diodes, then base-emitter of all transistors, then base-collector."""
        count_d, count_q = len(diodes), len(transistors)
        gather = np.zeros((count_d + 2 * count_q, width))
        scatter = np.zeros((width, count_d + 2 * count_q))
        saturation, scale = np.zeros(len(gather)), np.zeros(len(gather))
        self.forward_gain, self.reverse_gain = np.ones(count_q), np.ones(count_q)
        self.early = np.zeros(count_q)  # 1/V_A
        for index, part in enumerate(diodes):
            values = self._values(part)
            anode, cathode = part.terminals["anode"], part.terminals["cathode"]
            if values.get("series_resistance", 0.0) > 0.0:
                self._conduct(anode, f"{part.name}:inner", 1.0 / values["series_resistance"])
                anode = f"{part.name}:inner"
            self._conduct(anode, cathode, SMALLEST_CONDUCTANCE)
            self._store(anode, cathode, values.get("capacitance", 0.0))
            for net, sign in ((anode, 1.0), (cathode, -1.0)):
                gather[index, self.place[net]] += sign
                scatter[self.place[net], index] += sign
            saturation[index] = saturation_current_at(values, "saturation_current", self.circuit.temperature_k)
            scale[index] = values.get("ideality", 1.0) * self.thermal
        for order, part in enumerate(transistors):
            values = self._values(part)
            polarity = 1.0 if part.kind == "npn" else -1.0
            collector, base, emitter = (part.terminals[role] for role in ("collector", "base", "emitter"))
            self._conduct(base, emitter, SMALLEST_CONDUCTANCE)
            self._conduct(base, collector, SMALLEST_CONDUCTANCE)
            self._store(base, emitter, values.get("base_emitter_capacitance", 0.0))
            self._store(base, collector, values.get("base_collector_capacitance", 0.0))
            values.setdefault("reverse_saturation_current", values["saturation_current"])
            for index, far, key in (
                (count_d + order, emitter, "saturation_current"),
                (count_d + count_q + order, collector, "reverse_saturation_current"),
            ):
                gather[index, self.place[base]] += polarity
                gather[index, self.place[far]] -= polarity
                saturation[index] = saturation_current_at(values, key, self.circuit.temperature_k)
                scale[index] = values.get("ideality", 1.0) * self.thermal
            # The first column of a transistor scatters its collector current, the second its base current.
            scatter[self.place[collector], count_d + order] += polarity
            scatter[self.place[emitter], count_d + order] -= polarity
            scatter[self.place[base], count_d + count_q + order] += polarity
            scatter[self.place[emitter], count_d + count_q + order] -= polarity
            self.forward_gain[order], self.reverse_gain[order] = values["forward_gain"], values["reverse_gain"]
            self.early[order] = 1.0 / values["early_voltage"] if "early_voltage" in values else 0.0
        self.gather, self.scatter = gather, scatter[: self.size]
        self.saturation, self.scale, self.diodes = saturation, scale, count_d
        self.spans = slice(count_d, count_d + count_q), slice(count_d + count_q, count_d + 2 * count_q)

    def _opamps(self, parts: list[ResolvedPart], width: int) -> None:
        """Rows of the outputs: (v_o' - its law)/S, in place of the current law that the ideal output makes void."""
        keys = ("gain_bandwidth", "slew_rate", "dc_gain", "headroom_high", "headroom_low")
        self.outputs = np.array([self.place[part.terminals["out"]] for part in parts], dtype=int)
        self.rail_high = np.array([self.place[part.terminals["rail_high"]] for part in parts], dtype=int)
        self.rail_low = np.array([self.place[part.terminals["rail_low"]] for part in parts], dtype=int)
        bandwidth, self.slew, dc_gain, self.headroom_high, self.headroom_low = (
            np.array([self._values(part)[key] for part in parts]) for key in keys
        )
        self.difference = np.zeros((len(parts), width))  # w_t (v_p - v_m - v_o/A_0)/S as a row over v
        for index, part in enumerate(parts):
            for role, weight in (("plus", 1.0), ("minus", -1.0), ("out", -1.0 / dc_gain[index])):
                self.difference[index, self.place[part.terminals[role]]] += (
                    2.0 * np.pi * bandwidth[index] * weight / self.slew[index]
                )
        self.conductance[self.outputs] = 0.0
        self.capacitance[self.outputs] = 0.0
        self.scatter[self.outputs] = 0.0
        self.capacitance[self.outputs, self.outputs] = 1.0 / self.slew

    def _known_at(self, time: float) -> None:
        for index, wave in enumerate(self.circuit.inputs.values(), self.size + 1 + len(self.circuit.nets)):
            self._full[index], self._full_slope[index] = level_and_slope(wave, time, self.start)

    def _currents(self, full: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
        """Junction currents i, and what their slopes are made of: voltages, plain currents and their slopes."""
        voltage = self.gather @ full
        growth, slope = bounded_exp(voltage / self.scale)
        plain, plain_slope = self.saturation * (growth - 1.0), self.saturation * slope / self.scale
        current, (e, c) = plain.copy(), self.spans
        current[e] = (plain[e] - plain[c]) * (1.0 - voltage[c] * self.early) - plain[c] / self.reverse_gain
        current[c] = plain[e] / self.forward_gain + plain[c] / self.reverse_gain
        return current, voltage, plain, plain_slope

    def _current_slopes(self, voltage: np.ndarray, plain: np.ndarray, plain_slope: np.ndarray) -> np.ndarray:
        """Slopes of the junction currents over the gathered voltages, (n, n)."""
        slopes, (e, c) = np.diag(plain_slope), self.spans
        rows = np.arange(len(self.forward_gain))
        rows_e, rows_c = rows + e.start, rows + c.start
        across = 1.0 - voltage[c] * self.early
        slopes[rows_e, rows_e] = plain_slope[e] * across
        slopes[rows_e, rows_c] = (
            -plain_slope[c] * (across + 1.0 / self.reverse_gain) - (plain[e] - plain[c]) * self.early
        )
        slopes[rows_c, rows_e] = plain_slope[e] / self.forward_gain
        slopes[rows_c, rows_c] = plain_slope[c] / self.reverse_gain
        return slopes

    def _rails(self, full: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        volts = full[self.outputs]
        above = volts - (full[self.rail_high] - self.headroom_high)
        below = full[self.rail_low] + self.headroom_low - volts
        return bounded_exp(above / RAIL_SOFTNESS), bounded_exp(below / RAIL_SOFTNESS)

    def residual(self, time: float, y: np.ndarray, slope: np.ndarray, out: np.ndarray) -> None:
        """F(t, y, y'), in place. [A], op-amp rows without unit"""
        self._known_at(time)
        self._full[: self.size], self._full_slope[: self.size] = y, slope
        current, *_ = self._currents(self._full)
        out[:] = self.conductance @ self._full + self.capacitance @ self._full_slope + self.scatter @ current
        out += self.further.currents(self._full)
        if len(self.outputs):
            (high, _), (low, _) = self._rails(self._full)
            out[self.outputs] -= np.tanh(self.difference @ self._full) - high + low

    def slopes(self, time: float, y: np.ndarray) -> np.ndarray:
        """dF/dv over unknown and known nets, (size, width)."""
        self._known_at(time)
        self._full[: self.size] = y
        _, *parts = self._currents(self._full)
        matrix = self.conductance + self.scatter @ self._current_slopes(*parts) @ self.gather
        matrix += self.further.slopes(self._full)
        if len(self.outputs):
            (_, high), (_, low) = self._rails(self._full)
            steep = 1.0 - np.tanh(self.difference @ self._full) ** 2
            matrix[self.outputs] -= steep[:, None] * self.difference
            matrix[self.outputs, self.outputs] += (high + low) / RAIL_SOFTNESS
            matrix[self.outputs, self.rail_high] -= high / RAIL_SOFTNESS
            matrix[self.outputs, self.rail_low] -= low / RAIL_SOFTNESS
        return matrix

    def _jacobian(self, time, y, slope, residual, weight, out) -> None:  # type: ignore[no-untyped-def]
        out[:, :] = self.slopes(time, y)[:, : self.size] + weight * self.capacitance[:, : self.size]

    def rest(self) -> np.ndarray:
        """The operating point at the inputs' t = 0 levels, by Newton's method with bounded steps from 0 V. [V]"""
        self.start = 0.0
        self._known_at(0.0)
        self._full[: self.size] = 0.0
        y, out, still = self.further.guess(self._full), np.zeros(self.size), np.zeros(self.size)
        for _ in range(1000):
            self.residual(0.0, y, still, out)
            out -= self.capacitance[:, self.size :] @ self._full_slope[self.size :]  # the inputs do not move yet
            step = np.linalg.solve(self.slopes(0.0, y)[:, : self.size], -out)
            longest = float(np.max(np.abs(step)))
            y = y + step * min(1.0, LONGEST_NEWTON_STEP / longest) if longest > 0.0 else y
            if longest < 1e-11:
                return y
        raise AssertionError(f"no rest state: Newton still moves by {longest} V")

    def _consistent_slope(self, time: float, y: np.ndarray) -> np.ndarray:
        """y' that solves F and, for the unknowns F leaves open, the derivative of F's algebraic rows.

        Rows of F that hold no derivative are found as the left null space of C, by singular values.
        """
        self.residual(time, y, np.zeros(self.size), out := np.zeros(self.size))
        matrix = self.slopes(time, y)
        inner = self.capacitance[:, : self.size]
        rows = 1.0 / np.maximum(np.abs(inner).max(axis=1), np.finfo(float).tiny)
        # Rows without a derivative weigh alike as well, or the small ones would drown in their mixtures below.
        without = np.abs(inner).max(axis=1) == 0.0
        rows[without] = 1.0 / np.abs(matrix[without, : self.size]).max(axis=1)
        left, values, _ = np.linalg.svd(inner * rows[:, None])
        moving = values > 1e-10 * values[0]
        static = left.T[~moving] * rows
        static /= np.abs(static @ matrix[:, : self.size]).max(axis=1, keepdims=True) + np.finfo(float).tiny
        driven = static @ (matrix[:, self.size :] @ self._full_slope[self.size :])
        system = np.vstack([left.T[moving] @ (inner * rows[:, None]), static @ matrix[:, : self.size]])
        return np.linalg.solve(system, -np.concatenate([left.T[moving] @ (rows * out), driven]))

    def solve(
        self, times: np.ndarray, nets: Sequence[str] | None = None, rtol: float = 1e-8, atol: float = 1e-10
    ) -> Trajectory:
        """Voltages at the asked times (increasing, from 0), from the rest state, restarting at every corner.

        nets : which to return; the output alone when None. rtol, atol : IDA's tolerances, atol in volts.
        """
        nets = [self.circuit.output] if nets is None else nets
        times = np.asarray(times, dtype=float)
        ends = sorted({time for wave in self.circuit.inputs.values() for time in corners(wave)} | {0.0})
        ends = [time for time in ends if time < times[-1]] + [float(times[-1])]
        y, evaluations = self.rest(), 0
        states = np.empty((len(times), self.size))
        states[times <= 0.0] = y
        for begin, end in zip(ends[:-1], ends[1:], strict=True):
            self.start = begin
            inside = (times > begin) & (times <= end)
            asked = np.unique(np.concatenate([[begin], times[inside], [0.5 * (begin + end), end]]))
            solver = ida.IDA(
                self.residual,
                jacfn=self._jacobian,
                rtol=rtol,
                atol=atol,
                max_num_steps=1_000_000,
                first_step=min(1e-9, 1e-3 * (end - begin)),
            )
            solution = solver.solve(asked, y, self._consistent_slope(begin, y))
            assert solution.success, solution.message
            states[inside] = solution.y[np.isin(solution.t, times[inside])]
            y = solution.y[-1].copy()
            evaluations += int(solution.nfev)
        return Trajectory(times, {net: self._trace(net, times, states) for net in nets}, evaluations)

    def _trace(self, net: str, times: np.ndarray, states: np.ndarray) -> np.ndarray:
        index = self.place[net]
        if index < self.size:
            return states[:, index]
        if net in self.circuit.inputs:
            wave = self.circuit.inputs[net]
            begins = [max((c for c in corners(wave) if c <= time), default=0.0) for time in times]
            return np.array([level_and_slope(wave, t, b)[0] for t, b in zip(times, begins, strict=True)])
        return np.full(len(times), self.circuit.nets.get(net, 0.0))
