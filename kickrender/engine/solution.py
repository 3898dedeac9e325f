"""A solved hit: the stepper's own polynomials, to be read at any times afterwards."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from kickrender.circuit.records import ResolvedCircuit
from kickrender.engine.compile import kernel


@dataclass(frozen=True, eq=False)
class Solution:
    """What a circuit did when struck, on the nets that were asked for.

    nets : the probed nets, the output first.
    rest : voltage of every net (and current of every inductor) before the strike. [V], [A]
    counters : steps, rejected, factorisations, equations (evaluations of f), rest_iterations, plans.
    piece_t, piece_h : (pieces,) start and length of each step. [s]
    piece_c : (pieces, nets, 5): see method.Method.dense.
    """

    circuit: ResolvedCircuit
    length_s: float
    nets: tuple[str, ...]
    rest: Mapping[str, float]
    counters: Mapping[str, int]
    piece_t: NDArray[np.float64]
    piece_h: NDArray[np.float64]
    piece_c: NDArray[np.float64]

    def sample(self, rate_hz: float, count: int, first: int = 0, net: str | None = None) -> NDArray[np.float64]:
        """Voltages of `net` (the output by default) at (first + k)/rate_hz for k below `count`; shape (count,). [V]

        Before t = 0 the rest state. The order-4 dense output of the method is read, nothing is filtered.

        Raises
        ------
        ValueError
            If a time lies beyond the solved length, or the net was not probed.
        """
        name = self.nets[0] if net is None else net
        if name not in self.nets:
            raise ValueError(f"net '{name}' was not probed; probed: {', '.join(self.nets)}")
        if count and (first + count - 1) / rate_hz > self.length_s * (1.0 + 1e-12):
            raise ValueError(f"sample {first + count - 1} lies beyond the solved {self.length_s} s")
        values = np.empty(count)
        before = min(max(-first, 0), count)
        values[:before] = self.rest[name]
        position = self.nets.index(name)
        read_pieces(self.piece_t, self.piece_h, self.piece_c, position, float(rate_hz), first + before, values[before:])
        return values


@kernel
def read_pieces(piece_t, piece_h, piece_c, net, rate_hz, first, values):
    """values[k] = x((first + k)/rate_hz) from the pieces; shape (count,), changed in place. [V]"""
    count = values.size
    period = 1.0 / rate_hz
    low, high = 0, piece_t.size - 1
    while low < high:  # the last piece that starts at or before the first sample
        middle = (low + high + 1) // 2
        if piece_t[middle] <= first * period:
            low = middle
        else:
            high = middle - 1
    piece = low
    done = 0
    while done < count:
        last = piece == piece_t.size - 1
        t, h = piece_t[piece], piece_h[piece]
        until = count
        if not last:
            # samples before the next piece's start; the guess is put right by the same product that decides theta
            until = min(count, max(done, int(piece_t[piece + 1] * rate_hz) - first))
            while until < count and (first + until) * period < piece_t[piece + 1]:
                until += 1
            while until > done and (first + until - 1) * period >= piece_t[piece + 1]:
                until -= 1
        x0, x1 = piece_c[piece, net, 0], piece_c[piece, net, 1]
        k0, k1, k2 = piece_c[piece, net, 2], piece_c[piece, net, 3], piece_c[piece, net, 4]
        per_h = 1.0 / h
        start = float(first + done)
        for index in range(np.uint32(until - done)):  # 32 bits: the processor turns many of these into floats at once
            theta = ((start + np.int32(index)) * period - t) * per_h
            rest = 1.0 - theta
            values[done + index] = rest * x0 + theta * (x1 + rest * (k0 + theta * (k1 + theta * k2)))
        done = until
        piece += 1
