"""A circuit's equations for general-purpose solvers, compiled for that one circuit.

They are those of the tests' second writing (tests/outside/second_writing.py), which shares nothing with the engine,
as sparse loops that numba compiles with the circuit's numbers as constants: the fastest form a solver driven from
Python can be given. Compiling is not counted in any time.

    F(t, y, y') = G v + C v' + S i(U v), an op-amp's row in place of its output's current law
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any

import numba
import numpy as np
from scipy import sparse

from kickrender.circuit.records import Constant, ResolvedCircuit, ResolvedPart, Sine
from tests.outside.second_writing import LARGEST_ARGUMENT, RAIL_SOFTNESS, SecondWriting, corners, level_and_slope

SMALL_MASS_F = 1e-12
KINDS = {"resistor", "switch", "pot", "capacitor", "inductor", "diode", "npn", "pnp", "opamp"}


class NotCovered(Exception):
    """A circuit holds a kind of part that has no compiled equations here."""


@dataclass(frozen=True, eq=False)
class Equations:
    """Compiled equations of one circuit of n unknowns; `line` (known nets, 6) says how the inputs move.

    residual(t, y, slope, out, line) : F into out, (n,).
    jacobian(t, y, weight, out, line) : dF/dy + weight dF/dy' into out, (n, n).
    right_side(t, y, line) -> y', (n,), and right_jacobian(t, y, line) -> (n, n): only where C can be inverted.
    """

    writing: SecondWriting
    size: int
    output: int
    residual: Callable[..., Any]
    jacobian: Callable[..., Any]
    right_side: Callable[..., Any] | None = None
    right_jacobian: Callable[..., Any] | None = None

    def line(self, start: float) -> np.ndarray:
        """How the known nets move in the segment that begins at `start`: rows of volts, slope, start, sine's
        amplitude, angular frequency and phase."""
        circuit = self.writing.circuit
        rows = [[0.0] * 6] + [[volts, 0.0, 0.0, 0.0, 0.0, 0.0] for volts in circuit.nets.values()]
        for wave in circuit.inputs.values():
            if isinstance(wave, Sine):
                omega = 2.0 * math.pi * wave.frequency
                rows.append([wave.offset, 0.0, 0.0, wave.amplitude, omega, math.radians(wave.phase_deg)])
            elif isinstance(wave, Constant):
                rows.append([wave.level, 0.0, 0.0, 0.0, 0.0, 0.0])
            else:
                volts, slope = level_and_slope(wave, start, start)
                rows.append([volts, slope, start, 0.0, 0.0, 0.0])
        return np.array(rows)

    def consistent_slope(self, start: float, y: np.ndarray) -> np.ndarray:
        """y' at the begin of the segment that begins at `start`, where its inputs already move."""
        self.writing.start = start
        return self.writing._consistent_slope(start, y)

    def segments(self, length_s: float) -> list[tuple[float, float]]:
        """Begin and end of every stretch between corners of the inputs. [s]"""
        ends = sorted({time for wave in self.writing.circuit.inputs.values() for time in corners(wave)} | {0.0})
        ends = [time for time in ends if time < length_s] + [length_s]
        return list(zip(ends[:-1], ends[1:], strict=True))


def compiled(circuit: ResolvedCircuit, *, explicit: bool = False) -> Equations:
    """The circuit's equations; with `explicit` as y' = f(t, y) too, for which every net needs a capacitor."""
    if missing := {part.kind for part in circuit.parts.values()} - KINDS:
        raise NotCovered(", ".join(sorted(missing)))
    writing = SecondWriting(circuit)
    size = writing.size
    currents = _currents(writing)
    known = _known(size)
    g, c, s = (_rows(matrix) for matrix in (writing.conductance, writing.capacitance, writing.scatter))
    inner_c = writing.capacitance[:, :size]
    jacobian_of_f = _jacobian_of_f(writing)
    rates = _opamp_rates(writing)

    @numba.njit
    def residual(time, y, slope, out, line):
        full, full_slope = known(time, y, slope, line)
        current = currents(full)
        for row in range(size):
            total = 0.0
            for k in range(g[0][row], g[0][row + 1]):
                total += g[2][k] * full[g[1][k]]
            for k in range(c[0][row], c[0][row + 1]):
                total += c[2][k] * full_slope[c[1][k]]
            for k in range(s[0][row], s[0][row + 1]):
                total += s[2][k] * current[s[1][k]]
            out[row] = total
        rates(full, out)

    @numba.njit
    def jacobian(time, y, weight, out, line):
        full, _ = known(time, y, y, line)
        jacobian_of_f(full, out)
        for row in range(size):
            for k in range(c[0][row], c[0][row + 1]):
                if c[1][k] < size:
                    out[row, c[1][k]] += weight * c[2][k]

    place = writing.place[circuit.output]
    if not explicit:
        return Equations(writing, size, place, residual, jacobian)
    inverse = np.linalg.inv(inner_c)
    inverse[np.abs(inverse) < 1e-12 * np.abs(inverse).max(axis=1, keepdims=True)] = 0.0
    m = _rows(inverse)

    @numba.njit
    def right_side(time, y, line):
        still = np.zeros(size)
        out, result = np.empty(size), np.empty(size)
        residual(time, y, still, out, line)
        for row in range(size):
            total = 0.0
            for k in range(m[0][row], m[0][row + 1]):
                total -= m[2][k] * out[m[1][k]]
            result[row] = total
        return result

    @numba.njit
    def right_jacobian(time, y, line):
        out, result = np.empty((size, size)), np.zeros((size, size))
        jacobian(time, y, 0.0, out, line)
        for row in range(size):
            for k in range(m[0][row], m[0][row + 1]):
                for column in range(size):
                    result[row, column] -= m[2][k] * out[m[1][k], column]
        return result

    return Equations(writing, size, place, residual, jacobian, right_side, right_jacobian)


def with_mass(circuit: ResolvedCircuit) -> ResolvedCircuit:
    """The circuit with 1 pF where C would be singular: at one net of every group that capacitors join to no net of
    known or driven voltage, and across the junction of every diode whose inner net has none."""
    parts = dict(circuit.parts)
    for name, part in parts.items():
        if part.kind == "diode" and part.model is not None and part.model.values.get("series_resistance", 0.0) > 0.0:
            if not part.model.values.get("capacitance", 0.0):
                values = {**part.model.values, "capacitance": SMALL_MASS_F}
                parts[name] = replace(part, model=replace(part.model, values=values))
    given = {"ground", *circuit.nets, *circuit.inputs}
    nets = list(dict.fromkeys(net for part in parts.values() for net in part.terminals.values() if net not in given))
    group = {net: net for net in (*nets, *given)}

    def root(net: str) -> str:
        while group[net] != net:
            net = group[net]
        return net

    for part in parts.values():
        for a, b in _capacitive_pairs(part):
            group[root(a)] = root(b)
    driven = {part.terminals["out"] for part in parts.values() if part.kind == "opamp"}
    known = {root(net) for net in (*given, *driven)}
    for net in nets:
        if root(net) not in known:
            known.add(root(net))
            name = f"mass of {net}"
            terminals = {"a": net, "b": "ground"}
            parts[name] = ResolvedPart(name, "capacitor", terminals, {"capacitance": SMALL_MASS_F})
    return replace(circuit, parts=parts)


def _capacitive_pairs(part: ResolvedPart) -> list[tuple[str, str]]:
    t = part.terminals
    values = {} if part.model is None else part.model.values
    if part.kind == "capacitor":
        return [(t["a"], t["b"])]
    if part.kind == "diode" and values.get("capacitance", 0.0) and not values.get("series_resistance", 0.0):
        return [(t["anode"], t["cathode"])]
    if part.kind in ("npn", "pnp"):
        pairs = (("emitter", "base_emitter_capacitance"), ("collector", "base_collector_capacitance"))
        return [(t["base"], t[role]) for role, key in pairs if values.get(key, 0.0)]
    return []


def _rows(matrix: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """A matrix as compressed rows: where each row starts, columns, values."""
    rows = sparse.csr_array(matrix)
    return rows.indptr.astype(np.int64), rows.indices.astype(np.int64), rows.data.astype(np.float64)


def _known(size: int) -> Callable[..., Any]:
    @numba.njit
    def known(time, y, slope, line):
        """All voltages and their slopes: the unknowns, then the known nets from `line`."""
        full, full_slope = np.empty(size + line.shape[0]), np.empty(size + line.shape[0])
        full[:size], full_slope[:size] = y, slope
        for k in range(line.shape[0]):
            volts, per_second = line[k, 0] + line[k, 1] * (time - line[k, 2]), line[k, 1]
            if line[k, 3] != 0.0:
                angle = line[k, 4] * time + line[k, 5]
                volts += line[k, 3] * math.sin(angle)
                per_second += line[k, 3] * line[k, 4] * math.cos(angle)
            full[size + k], full_slope[size + k] = volts, per_second
        return full, full_slope

    return known


def _currents(writing: SecondWriting) -> Callable[..., Any]:
    u = _rows(writing.gather)
    saturation, per_scale = writing.saturation, 1.0 / writing.scale
    per_forward, per_reverse, early = 1.0 / writing.forward_gain, 1.0 / writing.reverse_gain, writing.early
    count_d, count_q, junctions = writing.diodes, len(writing.forward_gain), len(writing.saturation)

    @numba.njit
    def currents(full):
        """Diode currents, then collector currents, then base currents."""
        current, voltage = np.empty(junctions), np.empty(junctions)
        for j in range(junctions):
            v = 0.0
            for k in range(u[0][j], u[0][j + 1]):
                v += u[2][k] * full[u[1][k]]
            x = v * per_scale[j]
            bounded = min(x, LARGEST_ARGUMENT)
            voltage[j] = v
            current[j] = saturation[j] * (math.exp(bounded) * (1.0 + x - bounded) - 1.0)
        for q in range(count_q):
            e, c = count_d + q, count_d + count_q + q
            forward, backward = current[e], current[c]
            current[e] = (forward - backward) * (1.0 - voltage[c] * early[q]) - backward * per_reverse[q]
            current[c] = forward * per_forward[q] + backward * per_reverse[q]
        return current

    return currents


def _opamp_rates(writing: SecondWriting) -> Callable[..., Any]:
    d = _rows(writing.difference)
    outputs, rail_high, rail_low = (
        np.asarray(index, dtype=np.int64) for index in (writing.outputs, writing.rail_high, writing.rail_low)
    )
    headroom_high, headroom_low = writing.headroom_high, writing.headroom_low

    @numba.njit
    def rates(full, out):
        for k in range(outputs.size):
            drive = 0.0
            for n in range(d[0][k], d[0][k + 1]):
                drive += d[2][n] * full[d[1][n]]
            volts = full[outputs[k]]
            above = (volts - (full[rail_high[k]] - headroom_high[k])) / RAIL_SOFTNESS
            below = (full[rail_low[k]] + headroom_low[k] - volts) / RAIL_SOFTNESS
            top, bottom = min(above, LARGEST_ARGUMENT), min(below, LARGEST_ARGUMENT)
            limits = math.exp(bottom) * (1.0 + below - bottom) - math.exp(top) * (1.0 + above - top)
            out[outputs[k]] -= math.tanh(drive) + limits

    return rates


def _jacobian_of_f(writing: SecondWriting) -> Callable[..., Any]:
    """dF/dv over the unknowns, (n, n), in place."""
    size = writing.size
    g, s, u, d = (
        _rows(matrix) for matrix in (writing.conductance, writing.scatter, writing.gather, writing.difference)
    )
    by_junction = _rows(writing.scatter.T)
    saturation, per_scale = writing.saturation, 1.0 / writing.scale
    per_forward, per_reverse, early = 1.0 / writing.forward_gain, 1.0 / writing.reverse_gain, writing.early
    count_d, count_q, junctions = writing.diodes, len(writing.forward_gain), len(writing.saturation)
    outputs, rail_high, rail_low = (
        np.asarray(index, dtype=np.int64) for index in (writing.outputs, writing.rail_high, writing.rail_low)
    )
    headroom_high, headroom_low = writing.headroom_high, writing.headroom_low

    @numba.njit
    def add(out, current, junction, slope):
        """The slope of one scattered current by one gathered voltage."""
        for a in range(by_junction[0][current], by_junction[0][current + 1]):
            for b in range(u[0][junction], u[0][junction + 1]):
                if u[1][b] < size:
                    out[by_junction[1][a], u[1][b]] += by_junction[2][a] * slope * u[2][b]

    @numba.njit
    def jacobian_of_f(full, out):
        out[:] = 0.0
        for row in range(size):
            for k in range(g[0][row], g[0][row + 1]):
                if g[1][k] < size:
                    out[row, g[1][k]] += g[2][k]
        plain, slope, voltage = np.empty(junctions), np.empty(junctions), np.empty(junctions)
        for j in range(junctions):
            v = 0.0
            for k in range(u[0][j], u[0][j + 1]):
                v += u[2][k] * full[u[1][k]]
            x = v * per_scale[j]
            bounded = min(x, LARGEST_ARGUMENT)
            grown = math.exp(bounded)
            voltage[j] = v
            plain[j] = saturation[j] * (grown * (1.0 + x - bounded) - 1.0)
            slope[j] = saturation[j] * grown * per_scale[j]
        for j in range(count_d):
            add(out, j, j, slope[j])
        for q in range(count_q):
            e, c = count_d + q, count_d + count_q + q
            across = 1.0 - voltage[c] * early[q]
            add(out, e, e, slope[e] * across)
            add(out, e, c, -slope[c] * (across + per_reverse[q]) - (plain[e] - plain[c]) * early[q])
            add(out, c, e, slope[e] * per_forward[q])
            add(out, c, c, slope[c] * per_reverse[q])
        for k in range(outputs.size):
            row = outputs[k]
            drive = 0.0
            for n in range(d[0][k], d[0][k + 1]):
                drive += d[2][n] * full[d[1][n]]
            steep = 1.0 - math.tanh(drive) ** 2
            for n in range(d[0][k], d[0][k + 1]):
                if d[1][n] < size:
                    out[row, d[1][n]] -= steep * d[2][n]
            above = (full[row] - (full[rail_high[k]] - headroom_high[k])) / RAIL_SOFTNESS
            below = (full[rail_low[k]] + headroom_low[k] - full[row]) / RAIL_SOFTNESS
            high = math.exp(min(above, LARGEST_ARGUMENT)) / RAIL_SOFTNESS
            low = math.exp(min(below, LARGEST_ARGUMENT)) / RAIL_SOFTNESS
            out[row, row] += high + low
            if rail_high[k] < size:
                out[row, rail_high[k]] -= high
            if rail_low[k] < size:
                out[row, rail_low[k]] -= low

    return jacobian_of_f
