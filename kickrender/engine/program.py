"""A topology in its elimination order, as plain index arrays for the kernel.

Everything a hit needs lies in two flat blocks of rows (a row is one float per lane). The `coefficients` block:

    g | +1 -1 0 | cu | ch | w              entries of -G, constants, input capacitances, C/h, and W with its fill

and the `vectors` block:

    v | outputs | zc | du | y              all voltages (unknowns, inputs, held), device outputs, sum_j c_ij k_j,
                                           slopes of the inputs, right-hand side after forward substitution

so that the right-hand side of a stage and its forward substitution are one sparse dot product per row, taken in
two sums over alternate terms (half the chain of dependent additions).
A hit's own numbers come as one array in the order of `sections`.
"""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from kickrender.engine.lanes import PADDING
from kickrender.engine.laws import LAWS, SEPARATE
from kickrender.engine.plan import Plan
from kickrender.engine.topology import Numbers, Topology

Indices = NDArray[np.uint32]

_NO_EXPONENTIAL = (0, 0)  # nets of a place that fills up a block
_TOO_LOW = -1000.0  # its argument


class Code(NamedTuple):
    """Index arrays the kernel walks; all uint32 unless said. Position k is the k-th pivot, row and column alike."""

    size: int  # unknowns
    stride: int  # size rounded up to lanes.PADDING: rows kept for them
    inputs: int
    known: int  # inputs, held nets and ground
    outputs: int  # device outputs
    slopes: int
    g: int  # first rows and counts of the sections
    cu: int
    first_cu: int  # row of section cu in `coefficients`; likewise below
    ch: int
    first_ch: int
    w: int
    first_w: int
    coefficients: int  # rows, w padded to a multiple of lanes.PADDING
    v_outputs: int
    v_zc: int
    v_du: int
    v_y: int
    vectors: int
    exponentials: int  # places for them, a multiple of lanes.PADDING
    tanhs: int
    n_c: int  # first rows of the sections of a hit's numbers; -G and cu come first
    n_b: int
    n_exponentials: int
    n_tanhs: int
    n_held: int
    numbers: int
    is_sine: NDArray[np.bool_]
    spans: NDArray[np.int64]  # (laws, 6): count, first exponential, tanh, output (in vectors), slope, number
    row_start: Indices  # right-hand side: row k has terms row_start[k] .. row_start[k + 1], an even number
    row_coefficient: Indices
    row_vector: Indices
    back_start: Indices  # back substitution
    back_w: Indices
    back_k: Indices
    assemble_c: Indices  # (count, 2): w entry, ch entry
    assemble_g: Indices  # (count, 2): w entry, g entry
    assemble_slope: Indices  # (count, 2): w entry, slope
    assemble_sign: NDArray[np.float64]
    diagonal: Indices
    scale_start: Indices  # elimination: multipliers of pivot k, then its updates
    scale_w: Indices
    update_start: Indices
    update: Indices  # (count, 3): target, multiplier, pivot row's entry
    w_start: Indices  # entries of W by row
    w_column: Indices
    growth: Indices  # (count, 3): multiplier, its row, its pivot's row
    input_g: Indices  # (count, 3): row, g entry, input: df/dt through the linear parts
    input_slope: Indices  # (count, 3): row, slope, input
    input_sign: NDArray[np.float64]
    input_cu: Indices  # (count, 3): row, cu entry, input
    exp_plus: Indices
    exp_minus: Indices
    tanh_plus: Indices
    tanh_minus: Indices
    tanh_own: Indices  # the last three padded with zeros to a multiple of lanes.PADDING


@dataclass(frozen=True, eq=False)
class Program:
    """Code for the kernel, and how a circuit's numbers and states are laid out for it."""

    topology: Topology
    plan: Plan
    code: Code
    g_of_entry: NDArray[np.int64]  # kept entries of G (unknown or input column), in section order
    held_entries: tuple[tuple[int, int, int], ...]  # (entry of G, row position, held net)
    exponential_at: NDArray[np.int64]  # place of each device's exponentials, in the devices' order
    c_of_entry: NDArray[np.int64]
    cu_of_entry: NDArray[np.int64]
    pattern: tuple[tuple[int, int], ...]  # (row, column) of every entry of W, by row

    @property
    def unknowns(self) -> tuple[str, ...]:
        """Names of the unknowns in pivot order."""
        return tuple(self.topology.unknowns[column] for column in self.plan.columns)

    def layout(self, numbers: Numbers) -> NDArray[np.float64]:
        """A hit's numbers in the kernel's order: -G, -cu, C, b, exponentials, tanhs, parameters, held voltages."""
        size = self.topology.size
        b = [0.0] * size
        for entry, row, held in self.held_entries:
            b[row] -= numbers.g[entry] * numbers.held_v[held]
        return np.concatenate(
            [
                -numbers.g[self.g_of_entry],
                -numbers.c[self.cu_of_entry],
                numbers.c[self.c_of_entry],
                b,
                *self._padded_exponentials(numbers),
                numbers.tanhs[:, 0],
                numbers.tanhs[:, 1],
                numbers.parameters,
                numbers.held_v,
            ]
        )

    def _padded_exponentials(self, numbers: Numbers) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Inverse scales and offsets at their places; the places between hold arguments too low to count."""
        scales, offsets = np.zeros(self.code.exponentials), np.full(self.code.exponentials, _TOO_LOW)
        scales[self.exponential_at], offsets[self.exponential_at] = numbers.exponentials.T
        return scales, offsets


def build_program(topology: Topology, plan: Plan) -> Program:
    """Index arrays of this structure in this order."""
    size, inputs, known = topology.size, len(topology.inputs), len(topology.inputs) + len(topology.held)
    stride = -(-size // PADDING) * PADDING
    row_at = {row: k for k, row in enumerate(plan.rows)}
    column_at = {column: k for k, column in enumerate(plan.columns)}

    def position(column: int) -> int:
        """Place of a topology column among the voltages: unknowns in pivot order, then the known ones."""
        return column_at[column] if column < size else stride + column - size

    # entries kept in each section
    g_kept = [i for i, (_, column) in enumerate(topology.entries_g) if column < size + inputs]
    c_kept = [i for i, (_, column) in enumerate(topology.entries_c) if column < size]
    cu_kept = [i for i, (_, column) in enumerate(topology.entries_c) if size <= column < size + inputs]
    g_at = [(row_at[topology.entries_g[i][0]], position(topology.entries_g[i][1])) for i in g_kept]
    c_at = [(row_at[topology.entries_c[i][0]], position(topology.entries_c[i][1])) for i in c_kept]
    cu_at = [(row_at[topology.entries_c[i][0]], topology.entries_c[i][1] - size) for i in cu_kept]
    held = tuple(
        (i, row_at[row], column - size - inputs)
        for i, (row, column) in enumerate(topology.entries_g)
        if column >= size + inputs
    )

    # devices
    spans = np.zeros((len(LAWS), 6), dtype=np.int64)
    exponentials: list[tuple[int, int]] = []
    exponential_at: list[int] = []
    tanhs: list[tuple[int, int, int]] = []
    flows: list[tuple[int, int, float]] = []
    derivatives: list[tuple[int, int, int, float]] = []
    outputs = slopes = parameters = 0
    for device in topology.devices:
        span = spans[LAWS.index(device.law)]
        if span[0] == 0:
            if device.law in SEPARATE:
                exponentials += [_NO_EXPONENTIAL] * (-len(exponentials) % PADDING)
            span[1:] = len(exponentials), len(tanhs), outputs, slopes, parameters
        span[0] += 1
        exponential_at += range(len(exponentials), len(exponentials) + len(device.exponentials))
        exponentials += [(position(topology.columns[p]), position(topology.columns[m])) for p, m in device.exponentials]
        tanhs += [tuple(position(topology.columns[net]) for net in nets) for nets in device.tanhs]  # type: ignore[misc]
        for row_name, output, sign in device.flows:
            if row_name in topology.rows:
                flows.append((row_at[topology.rows[row_name]], outputs + output, sign))
        for row_name, column_name, slope, sign in device.derivatives:
            column = topology.columns[column_name]
            if row_name in topology.rows and column < size + inputs:
                derivatives.append((row_at[topology.rows[row_name]], position(column), slopes + slope, sign))
        outputs += device.outputs
        slopes += device.slopes
        parameters += device.parameters

    exponentials += [_NO_EXPONENTIAL] * (-len(exponentials) % PADDING)

    # pattern of W with fill, elimination
    filled: set[tuple[int, int]] = {(k, k) for k in range(size)}
    filled |= {at for at in (*g_at, *c_at) if at[1] < size}
    filled |= {(row, column) for row, column, _, _ in derivatives if column < size}
    by_row: dict[int, set[int]] = defaultdict(set)
    by_column: dict[int, set[int]] = defaultdict(set)
    for row, column in filled:
        by_row[row].add(column)
        by_column[column].add(row)
    for k in range(size):
        for row in [r for r in by_column[k] if r > k]:
            for column in [j for j in by_row[k] if j > k]:
                by_row[row].add(column)
                by_column[column].add(row)
    pattern = tuple((row, column) for row in range(size) for column in sorted(by_row[row]))
    w_at = {at: index for index, at in enumerate(pattern)}
    scale, update, growth = [], [], []
    scale_start, update_start = [0], [0]
    for k in range(size):
        below = sorted(r for r in by_column[k] if r > k)
        right = sorted(j for j in by_row[k] if j > k)
        scale += [w_at[row, k] for row in below]
        growth += [(w_at[row, k], row, k) for row in below]
        update += [(w_at[row, j], w_at[row, k], w_at[k, j]) for row in below for j in right]
        scale_start.append(len(scale))
        update_start.append(len(update))

    # sections
    signs, cu = len(g_kept), len(g_kept) + 3
    ch = cu + len(cu_kept)
    w = ch + len(c_kept)
    v_outputs = stride + known
    v_zc = v_outputs + outputs
    v_du = v_zc + stride
    v_y = v_du + inputs

    # one dot product per row
    terms: dict[int, list[tuple[int, int]]] = defaultdict(list)
    for index, (row, column) in enumerate(g_at):
        terms[row].append((index, column))
    for row, output, sign in flows:
        terms[row].append((signs if sign > 0 else signs + 1, v_outputs + output))
    for index, (row, column) in enumerate(c_at):
        terms[row].append((ch + index, v_zc + column))
    for index, (row, source) in enumerate(cu_at):
        terms[row].append((cu + index, v_du + source))
    for row, column in pattern:
        if column < row:
            terms[row].append((w + w_at[row, column], v_y + column))
    row_start, flat = [0], []
    for row in range(size):
        flat += terms[row] + [(signs + 2, 0)] * (len(terms[row]) % 2)
        row_start.append(len(flat))
    back_start, back = [0], []
    for row in range(size):
        # the unknown found last is used last
        back += [(w_at[row, column], column) for column in sorted(by_row[row], reverse=True) if column > row]
        back_start.append(len(back))
    w_start = [0]
    for row in range(size):
        w_start.append(w_start[-1] + len(by_row[row]))

    n_c = len(g_kept) + len(cu_kept)
    n_b = n_c + len(c_kept)
    n_exponentials = n_b + size
    n_tanhs = n_exponentials + 2 * len(exponentials)
    n_parameters = n_tanhs + 2 * len(tanhs)
    n_held = n_parameters + parameters
    spans[:, 3] += v_outputs
    spans[:, 5] += n_parameters
    code = Code(
        size=size,
        stride=stride,
        inputs=inputs,
        known=known,
        outputs=outputs,
        slopes=slopes,
        g=len(g_kept),
        cu=len(cu_kept),
        first_cu=cu,
        ch=len(c_kept),
        first_ch=ch,
        w=len(pattern),
        first_w=w,
        coefficients=w + -(-len(pattern) // PADDING) * PADDING,
        v_outputs=v_outputs,
        v_zc=v_zc,
        v_du=v_du,
        v_y=v_y,
        vectors=v_y + size,
        exponentials=len(exponentials),
        tanhs=len(tanhs),
        n_c=n_c,
        n_b=n_b,
        n_exponentials=n_exponentials,
        n_tanhs=n_tanhs,
        n_held=n_held,
        numbers=n_held + len(topology.held),
        is_sine=np.array(topology.is_sine, dtype=np.bool_),
        spans=spans,
        row_start=_indices(row_start),
        row_coefficient=_indices([a for a, _ in flat]),
        row_vector=_indices([z for _, z in flat]),
        back_start=_indices(back_start),
        back_w=_indices([a for a, _ in back]),
        back_k=_indices([k for _, k in back]),
        assemble_c=_indices([(w_at[at], i) for i, at in enumerate(c_at)], 2),
        assemble_g=_indices([(w_at[at], i) for i, at in enumerate(g_at) if at[1] < size], 2),
        assemble_slope=_indices([(w_at[row, column], s) for row, column, s, _ in derivatives if column < size], 2),
        assemble_sign=np.array([sign for _, column, _, sign in derivatives if column < size]),
        diagonal=_indices([w_at[k, k] for k in range(size)]),
        scale_start=_indices(scale_start),
        scale_w=_indices(scale),
        update_start=_indices(update_start),
        update=_indices(update, 3),
        w_start=_indices(w_start),
        w_column=_indices([column for _, column in pattern]),
        growth=_indices(growth, 3),
        input_g=_indices([(row, i, column - stride) for i, (row, column) in enumerate(g_at) if column >= stride], 3),
        input_slope=_indices([(row, s, column - stride) for row, column, s, _ in derivatives if column >= stride], 3),
        input_sign=np.array([sign for _, column, _, sign in derivatives if column >= stride], dtype=np.float64),
        input_cu=_indices([(row, i, source) for i, (row, source) in enumerate(cu_at)], 3),
        exp_plus=_indices([p for p, _ in exponentials]),
        exp_minus=_indices([m for _, m in exponentials]),
        tanh_plus=_padded([nets[0] for nets in tanhs]),
        tanh_minus=_padded([nets[1] for nets in tanhs]),
        tanh_own=_padded([nets[2] for nets in tanhs]),
    )
    return Program(
        topology,
        plan,
        code,
        np.array(g_kept, dtype=np.int64),
        held,
        np.array(exponential_at, dtype=np.int64),
        np.array(c_kept, dtype=np.int64),
        np.array(cu_kept, dtype=np.int64),
        pattern,
    )


def _padded(values: list[int]) -> Indices:
    return _indices(values + [0] * (-len(values) % PADDING))


def _indices(values: object, columns: int = 0) -> Indices:
    array = np.array(values, dtype=np.uint32)
    return array.reshape(-1, columns) if columns else array
