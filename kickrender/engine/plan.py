"""In which order to eliminate the unknowns: chosen once per structure, for few operations and sound pivots.

W = C/(gamma h) + G + device slopes changes at every step, by up to twelve decades, but its pattern does not. The
order is therefore chosen on several typical matrices at once: a pivot must be sound in all of them (threshold
pivoting on rows of equal size, since a current law and an op-amp's rate differ by 1e12), and among the sound ones
the cheapest is taken (Markowitz's count). The stepper watches the growth this order causes; if a pivot collapses
all the same, a new order is chosen from the very matrix in which it happened.

Source: H. M. Markowitz, The elimination form of the inverse and its application to linear programming, Management
Science 3 (1957); threshold pivoting as in I. S. Duff, A. M. Erisman and J. K. Reid, Direct Methods for Sparse
Matrices (2nd ed. 2017), chapter 5.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from kickrender.engine.topology import Topology

SOUND_PIVOT = 0.01  # smallest accepted pivot, as a fraction of the largest entry left in its column
_TYPICAL_STEPS_S = (1e-7, 1e-5, 1e-3)


@dataclass(frozen=True)
class Plan:
    """Pivot k is the entry (rows[k], columns[k]); indices are the topology's."""

    rows: tuple[int, ...]
    columns: tuple[int, ...]


def plan_for(topology: Topology) -> Plan:
    """An order for this structure, from typical part values and states alone: no circuit's own values enter."""
    return choose(_typical_matrices(topology))


def choose(matrices: NDArray[np.float64]) -> Plan:
    """The cheapest order whose pivots are sound in every matrix; shape (count, n, n).

    Raises
    ------
    ValueError
        If no sound pivot is left: one of the matrices is singular.
    """
    matrices = np.array(matrices)
    size = matrices.shape[1]
    scale = np.abs(matrices).max(axis=2, keepdims=True)
    if not np.all(scale > 0.0):
        raise ValueError("a row of the matrix is empty")
    matrices /= scale
    pattern = np.any(matrices != 0.0, axis=0)
    rows_left, columns_left = np.ones(size, bool), np.ones(size, bool)
    rows: list[int] = []
    columns: list[int] = []
    for _ in range(size):
        live = pattern & rows_left[:, None] & columns_left[None, :]
        magnitude = np.abs(matrices) * (rows_left[:, None] & columns_left[None, :])
        largest = magnitude.max(axis=1, keepdims=True)
        soundness = np.where(largest > 0.0, magnitude / np.where(largest > 0.0, largest, 1.0), 0.0).min(axis=0)
        cost = (live.sum(axis=1)[:, None] - 1.0) * (live.sum(axis=0)[None, :] - 1.0)
        # ties go to the diagonal, then to the sounder pivot, then to the first
        cost = cost - 0.5 * np.eye(size) - 0.25 * np.minimum(soundness, 1.0)
        sound = live & (soundness >= SOUND_PIVOT)
        if not sound.any():
            sound = live & (soundness >= 1e-6)
        if not sound.any():
            raise ValueError("no sound pivot is left")
        row, column = divmod(int(np.argmin(np.where(sound, cost, np.inf))), size)
        rows.append(row)
        columns.append(column)
        rows_left[row], columns_left[column] = False, False
        lower = pattern[:, column] & rows_left
        upper = pattern[row] & columns_left
        factors = matrices[:, lower, column] / matrices[:, row, column][:, None]
        matrices[np.ix_(range(len(matrices)), lower, upper)] -= (
            factors[:, :, None] * matrices[:, row, upper][:, None, :]
        )
        pattern[np.ix_(lower, upper)] = True
    return Plan(tuple(rows), tuple(columns))


def _typical_matrices(topology: Topology) -> NDArray[np.float64]:
    """W of usual part values, for short and long steps and with the devices off, weak, strong and mixed."""
    size = topology.size
    g, c = np.zeros((size, size)), np.zeros((size, size))
    for entries, typical, matrix in (
        (topology.entries_g, topology.typical_g, g),
        (topology.entries_c, topology.typical_c, c),
    ):
        for (row, column), value in zip(entries, typical, strict=True):
            if column < size:
                matrix[row, column] += value
    matrices = []
    for state in range(3):
        for turn in range(2):  # all devices in one state, or each in the next one's
            slopes = np.zeros((size, size))
            for index, device in enumerate(topology.devices):
                values = device.typical_slopes[(state + turn * index) % 3]
                for row_name, column_name, slope, sign in device.derivatives:
                    row, column = topology.rows.get(row_name, -1), topology.columns[column_name]
                    if row >= 0 and column < size:
                        slopes[row, column] += sign * values[slope]
            matrices += [c / (0.2 * step_s) + g + slopes for step_s in _TYPICAL_STEPS_S]
    return np.array(matrices)
